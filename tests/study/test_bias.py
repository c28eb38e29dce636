"""The bias matrix of a study: every pair is there, numbers are those of direct fits, errors of shifts are honest."""

from __future__ import annotations

import io
import json
import re
from collections.abc import Callable
from itertools import product
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from matplotlib.patches import Rectangle
from rich.console import Console
from semitau.core.errors import InputError
from semitau.core.templates import TemplateSet
from semitau.fit import Model, budget, maximise
from semitau.gen.study_file.alternative_studies import alternative_studies
from semitau.gen.study_file.reader import read_study
from semitau.gen.study_file.study import StudyConfig
from semitau.gen.templates.build import build_templates
from semitau.study.bias.part import Bias, BiasPair, BiasRatio
from semitau.study.bias.run import bias_part, ingredients
from semitau.study.bias.sentences import not_covered, other_sentences
from semitau.study.bias.worlds import worlds
from semitau.study.command_line import main
from semitau.study.graph.materials import Materials
from semitau.study.graph.store import Store
from semitau.study.pictures.bias_matrix import bias_matrix
from semitau.study.run.opening import open_study
from semitau.study.run.study_model import study_model
from semitau.study.run.study_run import run_study
from semitau.study.terminal.bias_summary import bias_summary
from semitau.study.terminal.summary import summary

from .conftest import SEED, mini_text

ROOT = Path(__file__).parents[2]
OTHERS = """
[[alternative]]
name = "resolution"
label = "worse tags"
covered_by = ["tag_resolution"]
change.detector.tag.momentum_resolution = "30 MeV"

[[alternative]]
name = "ratio"
change.fit.injected.R_D = 0.36

[[alternative]]
name = "other_Dst"
covered_by = ["Dst_R0", "detector"]
change.form_factors.Dst = "CLN-2012"

[bias]
toys = 40
replicas = 4
replica_events = 0.5
"""
NAMES = ("nominal", "resolution", "ratio", "other_Dst")
WriteStudy = Callable[..., Path]


@pytest.fixture(scope="module")
def path(tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("bias") / "mini.toml"
    path.write_text(mini_text() + OTHERS)
    return path


@pytest.fixture(scope="module")
def study(path: Path) -> StudyConfig:
    return open_study(path, SEED)


@pytest.fixture(scope="module")
def store(tmp_path_factory: pytest.TempPathFactory) -> Store:
    return Store(tmp_path_factory.mktemp("store"))


@pytest.fixture(scope="module")
def bias(study: StudyConfig, store: Store) -> Bias:
    return bias_part(study, Materials(study, store, 2), 2, None)


def pair_of(bias: Bias, made: str, fitted: str) -> BiasPair:
    return next(pair for pair in bias.pairs if (pair.made_with, pair.fitted_with) == (made, fitted))


def ratio_of(bias: Bias, made: str, fitted: str, name: str) -> BiasRatio:
    return next(ratio for ratio in pair_of(bias, made, fitted).ratios if ratio.ratio == name)


def test_every_pair_is_there(bias: Bias) -> None:
    assert [study.name for study in bias.studies] == list(NAMES)
    assert [(pair.made_with, pair.fitted_with) for pair in bias.pairs] == list(product(NAMES, NAMES))
    for pair in bias.pairs:
        assert pair.valid, pair.reason
        assert [ratio.ratio for ratio in pair.ratios] == ["R_D", "R_Dst"]
        assert (pair.toys, pair.failures) == (40, 0)
    assert bias.studies[1].changes[0].model_dump() == {
        "key": "detector.tag.momentum_resolution",
        "before": '"22 MeV"',
        "after": '"30 MeV"',
    }


def test_the_right_model_has_no_shift(bias: Bias) -> None:
    for name in NAMES:
        pair = pair_of(bias, name, name)
        assert pair.goodness is not None
        assert pair.goodness.deviance < 1e-9
        assert pair.goodness.p_value == pytest.approx(0.5, abs=1e-6)
        for ratio in pair.ratios:
            assert abs(ratio.significance) < 1e-5
            assert ratio.shift_error == 0.0
            assert ratio.status == "negligible"


def test_another_injected_ratio_is_found(bias: Bias) -> None:
    """The same events with other weights, and a model that is linear in the ratio."""
    for name in ("R_D", "R_Dst"):
        ratio = ratio_of(bias, "ratio", "nominal", name)
        assert abs(ratio.significance) < 1e-4
        assert ratio.shift_error < 2e-3 * ratio.error  # from bins that only a replica fills
    assert ratio_of(bias, "ratio", "nominal", "R_D").true == 0.36
    assert ratio_of(bias, "nominal", "ratio", "R_D").true == ratio_of(bias, "nominal", "nominal", "R_D").true


def test_elements_are_those_of_direct_fits(study: StudyConfig, bias: Bias) -> None:
    """Templates built and fitted here one by one; the covering error from the budget of the fitted study."""
    studies = {"nominal": study, **alternative_studies(study)}
    models: dict[str, Model] = {
        name: study_model(one, build_templates(one, 2).templates) for name, one in studies.items()
    }
    for made, fitted in (("resolution", "nominal"), ("nominal", "other_Dst"), ("other_Dst", "resolution")):
        theirs, ours = models[made], models[fitted]
        result = maximise(ours, theirs.expected_counts())
        assigned = budget(ours, maximise(ours, ours.expected_data()))
        for ratio in pair_of(bias, made, fitted).ratios:
            true = float(theirs.injected[theirs.index(ratio.ratio)])
            assert ratio.true == true
            assert ratio.shift == pytest.approx(result.value(ratio.ratio) - true, abs=1e-6 * ratio.error)
            assert ratio.error == pytest.approx(result.error(ratio.ratio), rel=1e-6)
            assert ratio.significance == pytest.approx(ratio.shift / ratio.error)
            split = assigned[ratio.ratio]
            parts = [split.sources["Dst_R0"], split.rows["detector"]]  # tag_resolution is part of the group
            if fitted == "nominal":
                parts = [split.sources["tag_resolution"]]
            assert ratio.covering == pytest.approx(np.sqrt(np.sum(np.square(parts))))


def test_whole_systematic_error_by_default(bias: Bias) -> None:
    ratio = ratio_of(bias, "ratio", "nominal", "R_D")
    assert ratio.covered_by == ()
    assert ratio.covering > ratio_of(bias, "resolution", "nominal", "R_D").covering
    assert ratio_of(bias, "ratio", "resolution", "R_D").covered_by == ()
    assert ratio_of(bias, "resolution", "other_Dst", "R_D").covered_by == ("tag_resolution", "Dst_R0", "detector")


def test_same_bits_for_any_workers_with_and_without_store(study: StudyConfig, bias: Bias, store: Store) -> None:
    seen: list[tuple[str, int, int | None]] = []
    assert bias_part(study, Materials(study, None, 1), 1, lambda *at: seen.append(at)) == bias
    assert bias_part(study, Materials(study, store, 2), 2, None) == bias
    labels = dict.fromkeys(label for label, _, _ in seen)
    assert list(labels) == ["alternatives", "bias matrix"]
    for label in labels:
        steps = [(done, total) for name, done, total in seen if name == label]
        assert steps == sorted(steps)
        assert steps[-1][0] == steps[-1][1]


def test_noise_is_that_of_the_templates(study: StudyConfig, store: Store) -> None:
    """Fluctuations from replicas against those of templates from eight independent sets of events.

    Of each study, the templates' own variances (sums of squared weights) are a second measure; of their difference,
    where common random numbers count, only the eight sets tell. Sums of squares over bins have about as many degrees
    of freedom as the bins that matter, times those of the sets; none of four ratios is further than 4.4 of its errors
    from 1 but once in 2e4 seeds. A fifth more is allowed: shares of events are not the same for all decay chains.
    """
    few = study.model_copy(update={"bias": study.bias.model_copy(update={"replicas": 8})})
    materials = Materials(few, store, 2)
    nominal, other = worlds(few, materials, None)[:2]
    sets = [
        [_contents(nominal.model.templates, materials.build(world.study, f"check {k}").templates) for k in range(8)]
        for world in (nominal, other)
    ]
    mine, theirs = (np.array(found) for found in sets)
    for noise, found in (
        (nominal.noise, mine),
        (other.noise, theirs),
        (other.noise - nominal.noise, theirs - mine),
    ):
        _agree(noise.sum(axis=1).var(axis=0, ddof=1), found.sum(axis=1).var(axis=0, ddof=1), 7, 7)
    known = _contents(nominal.model.templates, nominal.model.templates, "variance").sum(axis=0)
    _agree(nominal.noise.sum(axis=1).var(axis=0, ddof=1), known, 7, np.inf)


def _contents(like: TemplateSet, templates: TemplateSet, what: str = "nominal") -> np.ndarray:
    """(components, bins)"""
    empty = {(at.name, part.name): np.zeros(at.shape) for at in like.categories for part in like.components}
    found = empty | {place: getattr(template, what) for place, template in templates.templates.items()}
    return np.array(
        [np.concatenate([found[at.name, part.name].ravel() for at in like.categories]) for part in like.components]
    )


def _agree(variances: np.ndarray, wanted: np.ndarray, freedom: float, freedom_wanted: float) -> None:
    bins = wanted.sum() ** 2 / (wanted**2).sum()
    error = np.sqrt(2 / bins / freedom + 2 / bins / freedom_wanted)
    assert variances.sum() / wanted.sum() == pytest.approx(1.0, abs=4.4 * error + 0.2)


def test_toys_may_be_left_out(path: Path, store: Store) -> None:
    study = read_study(path)
    study = study.model_copy(update={"bias": study.bias.model_copy(update={"toys": 0})})
    bias = bias_part(study, Materials(study, store, 2), 2, None)
    ratio = ratio_of(bias, "resolution", "nominal", "R_D")
    assert (ratio.pull_mean, ratio.pull_width, ratio.coverage) == (None, None, ())
    assert bias.pairs[1].goodness is not None
    assert bias.pairs[1].goodness.toy_p_value is None
    assert list(bias_summary(bias))


def test_ingredients_change_with_what_is_asked(study: StudyConfig) -> None:
    before = ingredients(study)
    assert json.loads(json.dumps(before)) == before
    more = study.model_copy(update={"bias": study.bias.model_copy(update={"toys": 41})})
    fewer = study.model_copy(update={"alternatives": study.alternatives[:1]})
    assert ingredients(more) != before
    assert ingredients(fewer) != before


def test_alternative_that_cannot_be_built(tmp_path: Path) -> None:
    path = tmp_path / "mini.toml"
    path.write_text(f'{mini_text()}\n[[alternative]]\nname = "perfect"\nchange.detector.soft_pion.charged = 0.99\n')
    study = read_study(path)
    with pytest.raises(InputError, match=r"alternative\[perfect\]: .*soft_charged"):
        bias_part(study, Materials(study, None, 2), 2, None)


def test_study_without_alternatives(mini: WriteStudy, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["bias", str(mini()), "--quiet"]) == 2
    assert "mini.toml: the study has no alternatives. Add [[alternative]] tables" in capsys.readouterr().err


def test_command(path: Path, bias: Bias, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["bias", str(path), "--seed", str(SEED), "--json", "--quiet", "--output", str(tmp_path)]) == 0
    said: Any = json.loads(capsys.readouterr().out)
    assert Bias.model_validate(said) == bias
    assert sorted(file.name for file in tmp_path.iterdir()) == ["bias_matrix.png", "bias_matrix.svg"]


def test_step_of_a_study(tmp_path: Path) -> None:
    """Made once, in results and pictures, told by the summary; taken as it is by the next run."""
    path = tmp_path / "mini.toml"
    ratio = OTHERS.split("[[alternative]]")[2]
    text = mini_text(questions=False)
    path.write_text(f"{text}\n[[alternative]]{ratio}\n[bias]\ntoys = 20\nreplicas = 4\n")
    run = run_study(path, output=tmp_path / "out", workers=2)
    assert run.results.bias is not None
    assert [study.name for study in run.results.bias.studies] == ["nominal", "ratio"]
    study = read_study(path)
    assert run.results.bias == bias_part(study, Materials(study, None, 2), 2, None)
    assert (run.folder.pictures / "bias_matrix.svg").exists()
    console = Console(width=120, record=True, file=io.StringIO())
    console.print(summary(run.results, "report.html"))
    assert "No shift of a ratio by the alternative is left uncovered." in console.export_text()
    again = run_study(path, output=tmp_path / "out", workers=2)
    assert again.reused
    assert again.results.bias == run.results.bias


def test_summary(bias: Bias) -> None:
    console = Console(width=120, record=True, file=io.StringIO())
    for part in bias_summary(bias):
        console.print(part)
    text = console.export_text()
    for word in ("Made with, fitted with the study", "R(D) made with ↓", "worse tags", "pull mean"):
        assert word in text
    assert "…" not in text


def example(
    status: str, made: str = "other", fitted: str = "nominal", size: float = 0.5, p_value: float = 0.4
) -> BiasPair:
    covered_by = ("tag_resolution", "Dst_R0", "detector") if status == "not covered" else ()
    ratio = {
        "ratio": "R_D", "label": "R(D)", "true": 0.3, "shift": size * 0.04, "shift_error": 0.001, "error": 0.04,
        "significance": size, "covering": 0.011, "covered_by": covered_by, "status": status, "pull_mean": None,
        "pull_mean_error": None, "pull_width": None, "pull_width_error": None, "coverage": (),
    }  # fmt: skip
    goodness = {"deviance": 3.0, "degrees_of_freedom": 100, "p_value": p_value, "toy_p_value": None}
    return BiasPair.model_validate(
        {
            "made_with": made, "fitted_with": fitted, "valid": True, "reason": "", "outside": 0.0, "toys": 10,
            "failures": 0, "goodness": goodness, "ratios": (ratio,),
        }
    )  # fmt: skip


def test_what_is_not_covered_comes_first_in_words(bias: Bias) -> None:
    named = {"nominal": "the study itself", "other": "another world", "third": "a third one"}
    first = bias.studies[0]
    studies = [first.model_copy(update={"name": name, "label": label}) for name, label in named.items()]
    pairs = [
        example("negligible", "nominal", "nominal"),
        example("not covered", "nominal", "other", -0.9),
        example("not covered", "other", "nominal", 0.5),
        example("not covered", "third", "nominal", -0.7, 1e-5),
        example("undecided", "nominal", "third", 0.3),
        example("not covered", "other", "third", 0.8),
        example("covered", "third", "other", 0.2),
    ]
    sources = {"tag_resolution": "tag resolution", "Dst_R0": "R₀(1) of D*"}
    said = list(not_covered(studies, pairs, sources))
    beyond = "beyond the 0.0110 of tag resolution, R₀(1) of D* and detector"
    hidden = f"{beyond}; the goodness of fit would not show it (p = 0.40 for a typical data set)."
    third, another, exchanged, others = said
    assert third.startswith("Made with a third one: R(D) shifts by −0.0280 ± 0.0010, −0.70 of its error, ")
    assert third.endswith(f"{beyond}; a typical data set would show it (p < 0.001).")
    assert another == f"Made with another world: R(D) shifts by +0.0200 ± 0.0010, +0.50 of its error, {hidden}"
    assert exchanged == (
        "Made with the study itself, fitted with another world: R(D) shifts by −0.0360 ± 0.0010, −0.90 of its error, "
        f"{hidden}"
    )
    assert others == (
        "Of the 2 pairs of two alternatives 1 are not covered, the worst of them R(D) made with another world, fitted "
        "with a third one: +0.80 of its error."
    )
    rest = list(other_sentences(studies, pairs, sources))
    assert rest[0].startswith("Made with the study itself, fitted with a third one: R(D) shifts by +0.0120 ± 0.0010")
    assert "against the 0.0110 of the whole systematic error: the generated events are too few" in rest[0]
    assert rest[1] == (
        "Fitted with the study itself, 0 of 2 alternatives shift every ratio negligibly, or by no more than what "
        "covers it."
    )


def test_what_went_wrong_in_words(bias: Bias) -> None:
    failed = example("covered", "resolution").model_copy(
        update={"valid": False, "reason": "no minimum", "ratios": (), "goodness": None}
    )
    odd = example("covered", "ratio").model_copy(update={"failures": 3, "outside": 7.2})
    said = "\n".join(other_sentences(bias.studies, [failed, odd], {}))
    assert "Made with worse tags: the fit to the expected set failed (no minimum)." in said
    assert "Made with ratio: 3 of 10 toys failed." in said
    assert "Made with ratio: 7.2 expected events lie in bins where the fitted study expects none" in said
    assert list(not_covered(bias.studies, [failed, odd], {})) == []


def test_picture_frames_what_is_not_covered(bias: Bias) -> None:
    pairs = [
        example("not covered" if made == "resolution" and fitted != made else "covered", made, fitted, 0.3)
        for made, fitted in product(NAMES, NAMES)
    ]
    sheet = bias_matrix(bias.model_copy(update={"pairs": tuple(pairs)}))
    matrix = sheet.figure.axes[0]
    frames = [patch for patch in matrix.patches if isinstance(patch, Rectangle) and not patch.get_fill()]
    assert len(frames) == len(NAMES) - 1
    texts = [text.get_text() for text in matrix.texts]
    assert texts.count("+0.30") == len(NAMES) ** 2 - len(NAMES)


def test_examples_of_the_document(tmp_path: Path) -> None:
    """docs/bias.md holds tables that configs/marlow.toml takes."""
    (block,) = re.findall(r"```toml\n(.*?)```", (ROOT / "docs" / "bias.md").read_text(encoding="utf-8"), re.DOTALL)
    text = (ROOT / "configs" / "marlow.toml").read_text(encoding="utf-8").split("[[alternative]]")[0]
    path = tmp_path / "marlow.toml"
    path.write_text(f"{text}\n{block}", encoding="utf-8")
    assert len(alternative_studies(read_study(path))) == 5
