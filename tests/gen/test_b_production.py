"""Which B: the production ratio of B+ and B0, and the flavour of the tag."""

from __future__ import annotations

from collections import defaultdict
from pathlib import Path

import pytest
from semitau.core.errors import InputError
from semitau.gen.study_file.reader import read_study
from semitau.gen.study_file.study import StudyConfig
from semitau.gen.templates.component_plan import plan_channels, predicted_ratio

from .small_study import TEXT

MIXED = 0.769**2 / (2 * (1 + 0.769**2))
"""chi_d = x²/(2(1 + x²)) of the B0 with x = Delta m / Gamma = 0.769(4), particle data tables, from memory."""


def study(tmp_path: Path, *, tag: str = "", variation: str = "") -> StudyConfig:
    path = tmp_path / "study.toml"
    path.write_text(TEXT.replace("[detector.tracks]", f"[detector.tag]\n{tag}\n[detector.tracks]", 1) + variation)
    return read_study(path)


def expected(chosen: StudyConfig) -> dict[tuple[str, str], float]:
    """Decays of each mode and parent."""
    sums: dict[tuple[str, str], float] = defaultdict(float)
    for plan in plan_channels(chosen):
        sums[plan.mode, plan.channel.parent] += plan.expected
    return sums


def test_flavour_of_the_tag(tmp_path: Path) -> None:
    """Mixing takes its share of the B0 away from the opposite flavour, and gives it to the same; B+ do not mix."""
    whole, opposite, same = (
        expected(study(tmp_path, tag=f'flavour = "{flavour}"')) for flavour in ("any", "opposite", "same")
    )
    for (mode, parent), number in whole.items():
        share = MIXED if parent == "B0" else 0.0
        assert opposite[mode, parent] / number == pytest.approx(1 - share, abs=0.002)
        assert same.get((mode, parent), 0.0) / number == pytest.approx(share, abs=0.002)


def test_ratio_takes_the_mix_of_parents(tmp_path: Path) -> None:
    """Same flavour: only B0 are left, and the ratio is that of the B0."""
    chosen = study(tmp_path, tag='flavour = "same"')
    assert predicted_ratio(chosen, "R_D", ["B+", "B0"]) == pytest.approx(predicted_ratio(chosen, "R_D", ["B0"]))


def test_nothing_but_charged_parents(tmp_path: Path) -> None:
    path = tmp_path / "study.toml"
    text = TEXT.replace('component = "D_light"', 'component = "D_light"\nparents = ["B+"]', 1)
    path.write_text(text.replace("[detector.tracks]", '[detector.tag]\nflavour = "same"\n[detector.tracks]', 1))
    with pytest.raises(InputError, match=r"no events.*no tag for B\+.*only B0 mix"):
        read_study(path)


def test_production_ratio(tmp_path: Path) -> None:
    """r = f/(1-f) moves by 5%; the number of pairs stays, so the factors average to one over B+ and B0."""
    chosen = study(tmp_path, variation='\n[[variation]]\nname = "r"\nkind = "production_ratio"\nrelative = 0.05\n')
    charged = chosen.experiment.charged_fraction
    for sign in (1, -1):
        factors = {plan.channel.parent: plan.variations.factors["r", sign] for plan in plan_channels(chosen)}
        up, down = factors["B+"][0], factors["B0"][0]
        assert (up / down - 1) / (sign * 0.05) == pytest.approx(1.0, rel=1e-9)
        assert charged * up + (1 - charged) * down == pytest.approx(1.0, rel=1e-12)
        assert (factors["B+"] == up).all()


@pytest.mark.parametrize(("share", "left"), [("0", "B0"), ("1", "B+")])
def test_production_ratio_of_one_species(tmp_path: Path, share: str, left: str) -> None:
    """Nothing to move between: told, not passed over."""
    path = tmp_path / "study.toml"
    variation = '[[variation]]\nname = "ratio"\nkind = "production_ratio"\nrelative = 0.05\n'
    path.write_text(TEXT.replace("b_pairs = 1e8", f"b_pairs = 1e8\ncharged_fraction = {share}") + variation)
    with pytest.raises(InputError) as error:
        read_study(path)
    assert (
        f"variation[ratio]: acts on nothing: there are {left} alone (got [experiment] charged_fraction = {share})"
        in (str(error.value))
    )
