"""Form factors of one's own, and directions of their covariance, from the study file to the budget."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from semitau import gen
from semitau.core.template_file import read_templates
from semitau.gen.decays.form_factor_directions import directions
from semitau.gen.decays.form_factor_set import read_form_factors
from semitau.gen.study_file.reader import read_study
from semitau.study.command_line import main
from semitau.study.run.study_folder import study_key

WriteStudy = Callable[..., Path]
Capture = pytest.CaptureFixture[str]

SET = """\
[D]
parametrisation = "BGL"
source = "ours"
values = { plus_0 = 0.0126, plus_1 = -0.096, plus_2 = 0.3, zero_0 = 0.0114, zero_1 = -0.059 }
errors = { plus_0 = 0.0001, plus_1 = 0.004, plus_2 = 0.2, zero_0 = 0.0001, zero_1 = 0.003 }
correlations = [["plus_0", "zero_0", 0.8]]
"""
CHANGES = {
    'D = "BCL-2021"': 'D = { file = "own.toml" }',
    'kind = "form_factor_direction"\nset = "D"\ndirection = 1': (
        'kind = "form_factor_directions"\nset = "D"\nkeep = 0.95'
    ),
    '[[variation]]\nname = "D_second"\nlabel = "D form factors, second direction"\n'
    'kind = "form_factor_direction"\nset = "D"\ndirection = 2\n': "",
}


def document(arguments: list[str], capsys: Capture) -> Any:
    assert main([*arguments, "--json", "--quiet"]) == 0
    return json.loads(capsys.readouterr().out)


def test_from_the_file_to_the_budget(mini: WriteStudy, capsys: Capture) -> None:
    """Directions of the user's set are nuisances that act on D with e, mu and tau, shape only, in one budget group."""
    Path("own.toml").write_text(SET)
    study = mini(CHANGES)
    own = read_form_factors("own.toml")
    kept = directions(own, "D", "effect").kept(0.95)
    names = [f"D_first_{k}" for k in range(1, kept + 1)]
    said = document(["study", str(study), "--workers", "2"], capsys)
    budget = said["budget"][0]["rows"]
    assert any(row["label"] == "form factors" and row["error"] > 0 for row in budget)
    templates = read_templates("out/templates.root")
    assert [n.name for n in templates.nuisances if n.name.startswith("D_first")] == names
    assert {n.group for n in templates.nuisances if n.name in names} == {"form factors"}
    for component in ("D_light", "D_tau"):
        whole = [t for (c, name), t in templates.templates.items() if name == component]
        for name in names:
            assert any(name in t.plus and name in t.minus for t in whole), f"{name} acts on {component}"
            # Shape only: the sums over all categories change by acceptance and the cut on q2 alone, here by 6%.
            up, nominal = sum(t.plus[name].sum() for t in whole), sum(t.nominal.sum() for t in whole)
            assert up == pytest.approx(nominal, rel=0.1)
    acted = {c for (_, c), t in templates.templates.items() if any(n in t.plus for n in names)}
    assert acted == {"D_light", "D_tau"}
    injected = next(p for p in templates.parameters if p.name == "R_D").injected
    low, high = sorted(gen.ratio(p, c, own) for p, c in (("B+", "D0"), ("B0", "D-")))
    assert low < injected < high
    # Another set under the same name is another study.
    key = study_key(read_study(study))
    assert key == said["study"]["key"]
    Path("own.toml").write_text(SET.replace("plus_2 = 0.3", "plus_2 = 0.25"))
    assert study_key(read_study(study)) != key


def test_rates_and_picture(mini: WriteStudy, capsys: Capture, tmp_path: Path) -> None:
    Path("own.toml").write_text(SET)
    said = document(["rates", str(mini(CHANGES)), "--output", "pictures"], capsys)
    assert said["form_factors"]["D"] == "own.toml"
    relations = {(r["form_factors"], r["relation"]): r for r in said["relations"]}
    assert relations["D", "f+(0) = f0(0)"]["status"] == "holds"
    assert relations["D", "unitarity sum 1-"]["value"] == pytest.approx(0.0126**2 + 0.096**2 + 0.3**2)
    own = read_form_factors("own.toml")
    spectrum = next(s for s in said["spectra"] if (s["charm"], s["lepton"]) == ("D0", "tau"))
    inside = np.array(spectrum["q2"][1:-1])
    expected = gen.differential_rate(gen.Decay("B+", "D0", "tau", own), inside)
    np.testing.assert_allclose(spectrum["rate"][1:-1], expected, rtol=1e-12)
    assert len(said["correlation"]) == len(said["ratios"])
    first = {name: (tmp_path / "pictures" / f"spectra.{name}").read_bytes() for name in ("svg", "png")}
    assert first["svg"].startswith(b"<?xml")
    assert first["png"].startswith(b"\x89PNG")
    document(["rates", str(mini(CHANGES)), "--output", "pictures"], capsys)
    assert all((tmp_path / "pictures" / f"spectra.{name}").read_bytes() == text for name, text in first.items())


def test_broken_relations_are_told(mini: WriteStudy, capsys: Capture) -> None:
    Path("own.toml").write_text(SET.replace("plus_2 = 0.3, zero", "plus_2 = 1.3, zero"))
    study = mini(CHANGES)
    assert main(["check", str(study)]) == 0
    out = " ".join(capsys.readouterr().out.split())
    assert "Look at this: Form factors own.toml: the unitarity sum 1- is 1.70 ± 0.52, above 1." in out
    assert main(["rates", str(study)]) == 0
    assert "broken" in capsys.readouterr().out
