"""Sizing of a study: predictions against fits and against generated templates, allocation, lines to paste, mistakes.

Each of the 20 p-values of scatters must be above 1e-6: a fresh seed fails with a chance below 1e-4.
"""

from __future__ import annotations

import io
import json
import os
import re
import tomllib
from pathlib import Path

import numpy as np
import pytest
from rich.console import Console
from semitau.core.errors import InputError
from semitau.core.templates import TemplateSet
from semitau.fit import Model, maximise
from semitau.fit.uncertainty.enlarged import enlarged
from semitau.gen.study_file.reader import read_study
from semitau.gen.study_file.sizing import SizingSection
from semitau.gen.study_file.study import StudyConfig
from semitau.study.command_line import main
from semitau.study.graph.materials import Materials
from semitau.study.numbers import bracketed
from semitau.study.pictures.sizing import sizing_drawings
from semitau.study.run.study_model import study_model
from semitau.study.sizing.allocating import rounded_down, rounded_up
from semitau.study.sizing.part import Sizing
from semitau.study.sizing.samples import samples_of_study, with_events
from semitau.study.sizing.sizing_part import ingredients, sizing_of_templates, sizing_part
from semitau.study.sizing.verification import mixed, plan_of_sets
from semitau.study.terminal.sizing_summary import sizing_summary

from .conftest import mini_text

SEED = int(os.environ.get("SEMITAU_TEST_SEED", "20261201"))
UNLIKELY = 1e-6
TABLE = """
[sizing]
toys = 60
factors = [0.1, 1.0]
multiples = [1.0, 1.2]
sets = 6
fraction = 0.5
least = 500
"""


def study_with(folder: Path, table: str = TABLE) -> StudyConfig:
    path = folder / "sized.toml"
    text = re.sub(r"^seed = \d+", f"seed = {SEED}", mini_text(), flags=re.M)
    path.write_text(text + table)
    return read_study(path)


@pytest.fixture(scope="module")
def materials(tmp_path_factory: pytest.TempPathFactory) -> Materials:
    return Materials(study_with(tmp_path_factory.mktemp("sizing")), None, 2)


@pytest.fixture(scope="module")
def sized(materials: Materials) -> Sizing:
    return sizing_part(materials.study, materials, 2, None)


# --- numbers --------------------------------------------------------------------------------------------------------


def test_every_sample_is_there_with_its_events(sized: Sizing, materials: Materials) -> None:
    assert [part.sample for part in sized.samples] == [item.name for item in materials.study.components]
    assert sum(part.generated or 0 for part in sized.samples) == materials.nominal.events
    assert {(cost.sample, cost.ratio) for cost in sized.costs} == {
        (part.sample, ratio.ratio) for part in sized.samples for ratio in sized.ratios
    }
    assert {curve.sample for curve in sized.curves} == {"", *(part.sample for part in sized.samples)}


def test_errors_are_those_of_fits(sized: Sizing, materials: Materials) -> None:
    """Exact and as it is: fits of the expected set without and with template statistics."""
    for counted, field in ((False, "exact"), (True, "now")):
        model = Model(materials.templates, template_statistics=counted)
        result = maximise(model, model.expected_data())
        for ratio in sized.ratios:
            assert getattr(ratio, field) == pytest.approx(result.error(ratio.ratio), rel=1e-6)
    for ratio in sized.ratios:
        parts = [cost.part for cost in sized.costs if cost.ratio == ratio.ratio]
        assert ratio.templates == pytest.approx(sum(part**2 for part in parts) ** 0.5, rel=1e-9)


def test_needed_is_the_most_of_three(sized: Sizing) -> None:
    for cost in sized.costs:
        assert cost.needed_bias is not None
        assert cost.needed_reported is not None
        assert cost.needed == max(cost.needed_precision, cost.needed_bias, cost.needed_reported)
        assert cost.needed_precision <= cost.needed_formula * (1 + 1e-6)
    for part in sized.samples:
        assert part.needed == max(cost.needed for cost in sized.costs if cost.sample == part.sample)
        assert part.generated is not None
        assert part.needed_events == max(500, int(np.ceil(part.needed * part.generated)))


@pytest.mark.parametrize("form", ["approximate", "exact"])
def test_bias_is_not_told_where_it_is_that_of_another_likelihood(form: str, templates: TemplateSet) -> None:
    model = Model(templates, likelihood=form)
    found = sizing_of_templates(templates, model, SizingSection(toys=0), SEED, 2, None)
    assert {(cost.bias, cost.understated, cost.needed_bias, cost.needed_reported) for cost in found.costs} == {
        (None, None, None, None)
    }
    assert {sample.because for sample in found.samples} == {"precision"}
    assert not any("pulls" in sentence for sentence in found.sentences)


def test_generated_templates_agree_with_the_prediction(sized: Sizing) -> None:
    fewer, needed = sized.verifications
    assert (fewer.what, fewer.sets, needed.what, needed.sets) == ("fewer", 6, "needed", 1)
    for check in fewer.checks:
        assert check.p_value is not None
        assert check.p_value > UNLIKELY, check
        # Both know their variances from few events, and derivatives move with them: in this study by several per cent.
        assert abs(check.measured / check.predicted - 1.0) < 0.35, check
    whole = {check.ratio: check for check in needed.checks if check.sample == ""}
    for ratio in sized.ratios:
        assert abs(whole[ratio.ratio].measured / whole[ratio.ratio].predicted - 1.0) < 0.35


def test_toys_show_every_trial(sized: Sizing) -> None:
    names = [part.sample for part in sized.samples]
    seen = [(toys.what, toys.factor, toys.multiple, toys.sample) for toys in sized.toys]
    together = [("all", factor, multiple, "") for multiple in (1.0, 1.2) for factor in (0.1, 1.0)]
    assert set(seen) == {
        *together,
        ("needed", None, 1.0, ""),
        ("needed", None, 1.2, ""),
        *(("alone", 0.1, 1.2, name) for name in names),
    }
    for toys in sized.toys:
        assert toys.number == 60
        for part, ratio in zip(toys.ratios, sized.ratios, strict=True):
            assert part.true == pytest.approx(toys.multiple * ratio.injected, rel=1e-12)
            assert part.coverage_low <= part.coverage <= part.coverage_high


# --- allocation -----------------------------------------------------------------------------------------------------


def test_allocation_keeps_to_its_time_and_gains(sized: Sizing) -> None:
    best = sized.allocation
    assert best is not None
    assert best.seconds == best.seconds_now
    spent = sum(1e-9 * sample.nanoseconds * sample.best for sample in best.samples)
    assert 0.999 * best.seconds < spent <= best.seconds * (1 + 1e-9)
    assert sum(1e-9 * s.nanoseconds * s.now for s in best.samples) == pytest.approx(best.seconds_now, rel=1e-9)
    assert sum(1e-9 * s.nanoseconds * s.cheapest for s in best.samples) == pytest.approx(best.seconds_aim, rel=1e-9)
    assert all(sample.best >= 500 for sample in best.samples)
    relative = [(gain.templates_best / gain.error_now, gain.templates_now / gain.error_now) for gain in best.gains]
    assert sum(after**2 for after, _ in relative) < sum(before**2 for _, before in relative)


def test_snippets_are_study_files(sized: Sizing, materials: Materials) -> None:
    """They hold the tables of the study with other events, and the study takes them."""
    assert sized.allocation is not None
    for text, events in (
        (sized.snippet, {part.sample: part.needed_events for part in sized.samples}),
        (sized.allocation.snippet, {part.sample: part.best for part in sized.allocation.samples}),
    ):
        tables = tomllib.loads(text)
        found = {item["component"]: item["events"] for items in tables.values() for item in items}
        assert found.keys() == events.keys()
        for name, n in found.items():
            assert abs(n / (events[name] or 0) - 1.0) < 0.011
        assert set(tables) <= {"mode", "double_charm", "background"}
        other = with_events(materials.study, found)
        assert {item.name: item.events for item in other.components} == found
        assert other.model_copy(
            update={"modes": materials.study.modes, "backgrounds": materials.study.backgrounds}
        ) == (materials.study)


def test_rounding_to_three_digits() -> None:
    assert [rounded_up(n) for n in (1, 999, 1000, 1001, 123_456)] == [1, 999, 1000, 1010, 124_000]
    assert [rounded_down(n) for n in (1, 999, 1009, 123_956)] == [1, 999, 1000, 123_000]


# --- the same again -------------------------------------------------------------------------------------------------


def test_the_same_bits_for_any_number_of_workers(sized: Sizing, materials: Materials) -> None:
    """All but what rests on measured times."""
    again = sizing_part(materials.study, Materials(materials.study, None, 1), 1, None)
    for part in ("ratios", "samples", "costs", "curves", "toys", "verifications", "snippet"):
        assert getattr(again, part) == getattr(sized, part), part


def test_ingredients_follow_the_table_and_the_seed(materials: Materials, tmp_path: Path) -> None:
    one = ingredients(materials.study)
    assert ingredients(study_with(tmp_path)) == one
    assert ingredients(study_with(tmp_path, TABLE + "share = 0.2\n")) != one
    assert ingredients(study_with(tmp_path, "")) is None


# --- pieces ---------------------------------------------------------------------------------------------------------


def test_samples_of_separate_ratios(materials: Materials) -> None:
    fit = materials.study.fit.model_copy(update={"ratios": "separate"})
    study = materials.study.model_copy(update={"fit": fit})
    samples = {sample.name: sample for sample in samples_of_study(study)}
    assert samples["D_tau"].components == ("D_tau_Bp", "D_tau_B0")
    assert samples["continuum"].components == ("continuum",)
    assert (samples["D_tau"].table, samples["continuum"].table) == ("mode", "background")


def test_sets_keep_to_the_most_events() -> None:
    plan = plan_of_sets(1_000_000, 12, 0.125, 100_000_000)
    assert plan is not None
    assert (plan.sets, plan.fraction) == (12, 0.125)
    plan = plan_of_sets(1_000_000, 12, 0.125, 1_000_000)
    assert plan is not None
    assert (plan.sets, plan.fraction) == (8, 0.125)
    plan = plan_of_sets(1_000_000, 12, 0.125, 100_000)
    assert plan is not None
    assert (plan.sets, plan.fraction) == (4, 0.025)
    assert plan_of_sets(1_000_000, 0, 0.125, 1_000_000) is None


def test_mixed_templates(templates: TemplateSet) -> None:
    other = enlarged(templates, 2.0)
    both = mixed(templates, other, {"D_tau"})
    for key, template in both.templates.items():
        source = other if key[1] == "D_tau" else templates
        assert template is source.templates[key]
    assert not both.data


def test_numbers_with_brackets() -> None:
    assert bracketed(0.08102, 0.0018) == "0.0810(18)"
    assert bracketed(-0.0147, 0.0026) == "−0.0147(26)"
    assert bracketed(0.123456, 1e-9) == "0.123"
    assert bracketed(0.0, 0.0) == "0"


def test_pictures_and_summary_show_everything(sized: Sizing) -> None:
    names = [name for name, *_ in sizing_drawings(sized)]
    assert names == ["sizing_events", "sizing_needed", "sizing_checks"]
    for _, _, _, draw in sizing_drawings(sized):
        assert len(draw().figure.axes) in (len(sized.ratios), 2 * len(sized.ratios))
    console = Console(file=io.StringIO(), width=118)
    for shown in sizing_summary(sized):
        console.print(shown)
    assert isinstance(console.file, io.StringIO)
    text = console.file.getvalue()
    assert "…" not in text
    for part in sized.samples:
        assert part.label in text
    assert "events = " in text


def test_sentences_name_who_has_too_few(materials: Materials) -> None:
    assert materials.study.sizing is not None
    strict = materials.study.sizing.model_copy(update={"share": 0.001, "toys": 0, "sets": 0})
    found = sizing_part(materials.study.model_copy(update={"sizing": strict}), materials, 2, None)
    text = " ".join(found.sentences)
    assert "Too few events: " in text
    worst = max(found.samples, key=lambda part: part.needed)
    assert text.index(worst.label) > 0
    assert not found.toys
    assert not found.verifications
    assert found.allocation is not None  # times of the templates themselves
    assert all(sample.nanoseconds_error is None for sample in found.allocation.samples)


# --- command and mistakes -------------------------------------------------------------------------------------------


def test_command_with_a_template_file(template_file: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Templates from anybody: nothing is generated, and needed events are multiples."""
    command = ["sizing", str(template_file), "--toys", "20", "--json", "--output", str(tmp_path / "out")]
    assert main(command) == 0
    document = json.loads(capsys.readouterr().out)
    found = Sizing.model_validate(document.get("result", document))
    assert not found.verifications
    assert found.allocation is None
    assert found.snippet == ""
    assert all(part.generated is None and part.needed_events is None for part in found.samples)
    assert sorted(path.name for path in (tmp_path / "out").iterdir()) == [
        "sizing_events.png", "sizing_events.svg", "sizing_needed.png", "sizing_needed.svg",
    ]  # fmt: skip


def test_command_with_a_study_file(mini, capsys: pytest.CaptureFixture[str]) -> None:  # type: ignore[no-untyped-def]
    path = mini()
    path.write_text(path.read_text() + "\n[sizing]\nsets = 4\nfraction = 0.05\ntoys = 0\n")
    assert main(["sizing", str(path), "--share", "0.2", "--workers", "2", "--output", "here"]) == 0
    told = capsys.readouterr().out
    assert "events = " in told
    assert {path.name for path in Path("here").iterdir()} >= {"events_needed.toml", "events_best.toml"}


@pytest.mark.parametrize(
    ("arguments", "what"),
    [
        (["nowhere.toml"], "there is no such file"),
        (["{study}", "--fix", "R_D=0.3"], "options for the fit go with template files"),
        (["{templates}", "--fix", "R_X=0.3"], "R_X"),
        (["{study}", "--share", "0"], "share"),
    ],
)
def test_wrong_arguments(
    arguments: list[str], what: str, template_file: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    path = tmp_path / "study.toml"
    path.write_text(mini_text())
    assert main(["sizing", *(text.format(study=path, templates=template_file) for text in arguments)]) == 2
    shown = capsys.readouterr().err
    assert what in re.sub(r"\s+", " ", shown)
    assert "Traceback" not in shown


@pytest.mark.parametrize(
    ("table", "what"),
    [
        ("[sizing]\nshares = { D_ta = 0.1 }\n", 'D_tau".*|names no component with events of its own'),
        ('[sizing]\ntarget = "R_X"\n', "names no ratio that is fitted"),
        ("[sizing]\nsets = 2\n", "sets are too few to scatter"),
        ("[sizing]\nshare = 0.0\n", "share"),
        ("[sizing]\nshar = 0.1\n", 'Did you mean "share"'),
        ("[sizing]\nfactors = [1.0, 0.1]\n", "must increase"),
    ],
)
def test_mistakes_in_the_table(table: str, what: str, tmp_path: Path) -> None:
    with pytest.raises(InputError, match=what):
        study_with(tmp_path, table)


def test_too_little_time(materials: Materials) -> None:
    assert materials.study.sizing is not None
    short = materials.study.sizing.model_copy(update={"seconds": 1e-6, "toys": 0, "sets": 0})
    with pytest.raises(InputError, match=r"\[sizing\] seconds: the least numbers of events take longer"):
        sizing_part(materials.study.model_copy(update={"sizing": short}), materials, 2, None)


def test_target_of_the_allocation(materials: Materials) -> None:
    """Serving one ratio makes its template statistics smaller than serving both does."""
    assert materials.study.sizing is not None
    found = {}
    for target in ("all", "R_D"):
        asked = materials.study.sizing.model_copy(update={"target": target, "toys": 0, "sets": 0, "seconds": 5.0})
        part = sizing_part(materials.study.model_copy(update={"sizing": asked}), materials, 2, None).allocation
        assert part is not None
        found[target] = {gain.ratio: gain.templates_best for gain in part.gains}
    assert found["R_D"]["R_D"] <= found["all"]["R_D"]
    assert found["R_D"]["R_Dst"] >= found["all"]["R_Dst"]


def test_study_model_is_that_of_the_study(sized: Sizing, materials: Materials) -> None:
    """[fit] acts on sizing, too: with a ratio held there is one ratio."""
    fit = materials.study.fit.model_copy(update={"fixed": {"R_Dst": 0.25}})
    held = materials.study.model_copy(update={"fit": fit})
    assert study_model(held, materials.templates).ratios == ("R_D", "R_Dst")
    assert held.sizing is not None
    quick = held.model_copy(update={"sizing": held.sizing.model_copy(update={"toys": 0, "sets": 0})})
    found = sizing_part(quick, Materials(quick, None, 2), 2, None)
    assert [ratio.ratio for ratio in found.ratios] == ["R_D"]
    assert found.ratios[0].exact < sized.ratios[0].exact
