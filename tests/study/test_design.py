"""The design of selection and binning, against templates built and fitted for each working point, and against toys.

The statistical test states its chance of failing; SEMITAU_TEST_SEED changes its seed.
"""

from __future__ import annotations

import itertools
import os
import tomllib
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from semitau.core.candidate_grid import EXPECTED, GENERATED, VARIANCE
from semitau.core.errors import InputError
from semitau.fit.fitting.newton import maximise
from semitau.fit.toys.toys import run_toys
from semitau.gen.candidates.grid_sums import grid_sums
from semitau.gen.study_file.design import DesignSection
from semitau.gen.study_file.reader import read_study
from semitau.gen.study_file.study import StudyConfig
from semitau.gen.templates.build import build_templates
from semitau.study.design.confirming import confirm, confirmation_space
from semitau.study.design.document import document
from semitau.study.design.evaluation import Evaluator
from semitau.study.design.goal import Goal
from semitau.study.design.merging import Wanted, choices, merge
from semitau.study.design.proposal import snippet, study_at
from semitau.study.design.run import Found, columns_of, evaluator_of, search
from semitau.study.design.search import Budget, best_cuts
from semitau.study.design.space import Space, WorkingPoint
from semitau.study.pictures.design import design_drawings
from semitau.study.run.study_model import study_model

from tests.study.conftest import mini_text

SEED = int(os.environ.get("SEMITAU_TEST_SEED", "20261201"))
TEMPLATES = "templates"

DESIGN = DesignSection.model_validate(
    tomllib.loads(
        """
        [cuts]
        e_res = { max = [0.4, 1.6], steps = 2 }
        p_lepton = { min = [0.3, 0.7], steps = 2 }
        [axes]
        e_res = [0.0, 0.1, 0.3, 0.8, 1.6]
        """
    )
)
"""Cuts that no category is binned in, and residual energy as another axis."""


@pytest.fixture(scope="module")
def study(tmp_path_factory: pytest.TempPathFactory) -> StudyConfig:
    path = tmp_path_factory.mktemp("design") / "mini.toml"
    path.write_text(mini_text({"e_res = { max = 0.8 }": "e_res = { max = 0.8 }"}))
    return read_study(path)


@pytest.fixture(scope="module")
def evaluator(study: StudyConfig) -> Evaluator:
    """On the events of the templates."""
    return evaluator_of(study, DESIGN, 2, purpose=TEMPLATES)


def fitted_errors(study: StudyConfig) -> np.ndarray:
    """Errors of the ratios from templates built for this very study, by the fit to the expected set."""
    model = study_model(study, build_templates(study, 2).templates)
    result = maximise(model, model.expected_data())
    assert result.valid
    return np.array([result.error(name) for name in model.ratios])


def errors_at(evaluator: Evaluator, point: WorkingPoint) -> np.ndarray:
    covariance = evaluator.covariance(point)
    assert covariance is not None
    return np.sqrt(np.diag(covariance))


# ── Expected errors ─────────────────────────────────────────────────────────────────────────────────────────────────


def test_points_agree_with_templates_built_for_them(study: StudyConfig, evaluator: Evaluator) -> None:
    """Cuts, merged edges, and other axes: the same events, so the same errors to rounding."""
    space = evaluator.space
    table = space.tables[0]
    point = space.start.with_cut(0, 2).with_cut(1, 1)
    coarse = tuple((name, table.axis(name).options[1::2]) for name in ("mm2", "el"))
    other = (("e_res", table.axis("e_res").options), ("mm2", table.axis("mm2").options[::3]))
    single = (("mm2", table.axis("mm2").options),)
    for tried in (space.start, point, point.with_binning(0, coarse), point.with_binning(0, other),
                  space.start.with_binning(0, single)):  # fmt: skip
        wanted = fitted_errors(study_at(study, space, tried))
        np.testing.assert_allclose(errors_at(evaluator, tried), wanted, rtol=1e-6)


def test_mirrored_sides(study: StudyConfig) -> None:
    """One side counts, of weights, constant factors and other reconstructions."""
    sides = {"tag_resolution": "plus", "Dst_rho2": "minus", "soft_charged": "plus", "muon_id": "minus"}
    one_sided = study.model_copy(update={"fit": study.fit.model_copy(update={"mirrored": sides})})
    own = evaluator_of(one_sided, DESIGN, 2, purpose=TEMPLATES)
    np.testing.assert_allclose(errors_at(own, own.space.start), fitted_errors(one_sided), rtol=1e-6)


def test_brute_force_over_all_cuts(study: StudyConfig, evaluator: Evaluator) -> None:
    """Every point of a small scan built and fitted: the same errors, and the search finds the best of them."""
    space = evaluator.space
    found = {}
    for cuts in itertools.product(*(range(len(v.values)) for v in space.variables)):
        point = replace(space.start, cuts=cuts)
        errors = fitted_errors(study_at(study, space, point))
        np.testing.assert_allclose(errors_at(evaluator, point), errors, rtol=1e-6)
        found[cuts] = float((errors / evaluator.sensitivity.values).mean())
    best = best_cuts(evaluator, space.start, 1, Budget(1000, 1000))
    assert best.cuts == min(found, key=lambda cuts: found[cuts])
    # A search from the worst corner ends at the same place.
    worst = replace(space.start, cuts=max(found, key=lambda cuts: found[cuts]))
    assert best_cuts(evaluator, worst, 1, Budget(1000, 1000)).cuts == best.cuts


def test_a_cut_on_an_axis_moves_its_end(study: StudyConfig) -> None:
    scanned = DesignSection.model_validate({"cuts": {"mm2": {"max": [5.0, 9.0], "steps": 3}}, "binning": False})
    changed = study.model_copy(
        update={"selection": {**study.selection, "mm2": next(iter(study.selection.values())).model_copy(
            update={"min": None, "max": 9.0})}}
    )  # fmt: skip
    own = evaluator_of(changed, scanned, 2, purpose=TEMPLATES)
    point = own.space.start.with_cut(0, 0)
    assert own.space.template_axes(point, 0)["mm2"][-1] == 5.0
    np.testing.assert_allclose(errors_at(own, point), fitted_errors(study_at(changed, own.space, point)), rtol=1e-6)


def test_errors_are_the_spread_of_toys(study: StudyConfig, evaluator: Evaluator) -> None:
    """At the start and at another point. The width of 1500 toys has an error of 1.8 %; 8 % leaves room for bins with
    few events, where the likelihood is no parabola. Chance of failing: below 1e-4."""
    space = evaluator.space
    axes = tuple((name, space.tables[0].axis(name).options[1::2]) for name in ("mm2", "el", "e_res"))
    for point in (space.start, space.start.with_cut(0, 2).with_cut(1, 1).with_binning(0, axes)):
        at = study_at(study, space, point)
        model = study_model(at, build_templates(at, 2).templates)
        toys = run_toys(model, 1500, SEED, 2)
        for name, error in zip(model.ratios, errors_at(evaluator, point), strict=True):
            values = toys.values[toys.valid, model.index(name)]
            middle = np.diff(np.quantile(values, [0.1587, 0.8413]))[0] / 2.0
            assert middle == pytest.approx(error, rel=0.08)


def test_same_bits_for_any_number_of_workers(study: StudyConfig, evaluator: Evaluator) -> None:
    alone = evaluator_of(study, DESIGN, 1, purpose=TEMPLATES)
    for one, other in zip(alone.grid.tables, evaluator.grid.tables, strict=True):
        assert np.array_equal(one, other)


def test_fewer_events_keep_the_variance_of_the_study(study: StudyConfig, evaluator: Evaluator) -> None:
    """Fewer events: contents and their variance stay. Sums over some 10⁴ candidates
    agree within 6 %, five standard errors and more."""
    fewer = DESIGN.model_copy(update={"events": 10_000})
    thin = evaluator_of(study, fewer, 2, purpose=TEMPLATES)
    whole, some = (np.sum([own.contents(own.space.start, 0)], axis=(0, 1, 2)) for own in (evaluator, thin))
    assert some[EXPECTED] == pytest.approx(whole[EXPECTED], rel=0.06)
    assert some[VARIANCE] == pytest.approx(whole[VARIANCE], rel=0.06)
    assert some[GENERATED] < 0.8 * whole[GENERATED]


def test_backgrounds_that_do_not_draw_a_cut_keep_their_events(study: StudyConfig, evaluator: Evaluator) -> None:
    """p_lepton is drawn by the misidentified background alone: no cut on it acts on the continuum."""
    place = evaluator.sensitivity.names.index("yield_continuum") + 3
    start = evaluator.space.start
    before, after = (
        np.concatenate(evaluator.contents(point, 0))[:, place].sum() for point in (start, start.with_cut(1, 1))
    )
    assert before > 0.0
    assert after == pytest.approx(before, rel=1e-9)


# ── Binning ─────────────────────────────────────────────────────────────────────────────────────────────────────────


def test_merging_keeps_events_and_stops_where_asked(evaluator: Evaluator) -> None:
    start = evaluator.space.start
    merged = merge(evaluator, start, 0, ("mm2", "el"), Wanted(least=2.0, poor=0.1, loss=0.01))
    there = start.with_binning(0, merged.binning)
    assert evaluator.merit(there) == pytest.approx(merged.merit, rel=1e-9)
    assert merged.bins[0] > merged.size >= merged.bins[-1]
    # information only falls on the way
    assert np.all(np.diff(merged.merits) > -1e-12)
    expected = np.concatenate([c[:, EXPECTED] for c in evaluator.contents(there, 0)])
    assert expected[expected < 2.0].sum() <= 0.1 * expected.sum()
    finest = merge(evaluator, start, 0, ("mm2", "el"), Wanted(least=1e-12, poor=1.0, loss=0.0))
    assert finest.bins[0] == merged.bins[0]
    assert finest.merit == pytest.approx(finest.merits[0], rel=1e-12)


def test_the_first_edge_to_go_is_the_cheapest(evaluator: Evaluator) -> None:
    """Brute force: every edge taken away in turn, whole information anew."""
    space = evaluator.space
    table = space.tables[0]
    names = ("mm2", "el")
    finest = space.start.with_binning(0, tuple((name, table.axis(name).options) for name in names))
    edges = space.edges(finest, 0)
    merits = []
    for name in names:
        for gone in edges[name][1:-1]:
            kept = tuple((own, tuple(e for e in edges[own][1:-1] if own != name or e != gone)) for own in names)
            merits.append(evaluator.merit(space.start.with_binning(0, kept)))
    merged = merge(evaluator, space.start, 0, names, Wanted(least=1e-12, poor=1.0, loss=0.0))
    assert merged.merits[1] == pytest.approx(min(merits), rel=1e-5)


def test_choices_of_axes(evaluator: Evaluator) -> None:
    """e_res can be an axis, p_lepton cannot: not every background draws it."""
    names = {name for own in choices(evaluator.space.tables[0], 3) for name in own}
    assert {"mm2", "el", "e_res"} == names


# ── Guard ───────────────────────────────────────────────────────────────────────────────────────────────────────────


def test_batches_are_the_whole(study: StudyConfig, evaluator: Evaluator) -> None:
    """The mean of the batches is the sample itself, on a grid with the edges of two points alone."""
    space = evaluator.space
    points = (
        space.start,
        space.start.with_cut(0, 0).with_binning(0, (("e_res", space.tables[0].axis("e_res").options),)),
    )
    coarse = confirmation_space(space, points)
    _, columns = columns_of(study)
    grids = grid_sums(study, coarse.grids(study.categories), columns, purpose=TEMPLATES, batches=8, workers=2)
    assert grids[0].tables[0].shape[0] < evaluator.grid.tables[0].shape[0]
    told = confirm(space, coarse, grids, points, evaluator.sensitivity, evaluator.goal)
    for errors, point in zip(told.errors, points, strict=True):
        np.testing.assert_allclose(errors, errors_at(evaluator, point), rtol=1e-6)
    assert told.uncertainty > 0.0


def test_tuning_on_fluctuations_shows(study: StudyConfig) -> None:
    """Bins far too fine for the events: the search claims a gain of which independent events leave half, and most of
    the information is fluctuations, so much that some products of batches are negative. Measured for 1, 1.3, 1.7 and
    2.2 times these events: claimed 0.43 to 0.50, left 0.22 to 0.28, noise 0.29 to 0.58; with these the limits leave
    more than five errors."""
    fine = DesignSection.model_validate(
        {
            "least": 0.3, "poor": 1.0, "loss": 0.0,
            "axes": {"mm2": {"min": -2.0, "max": 9.0, "bins": 44}, "el": {"min": 0.2, "max": 2.6, "bins": 24}},
        }
    )  # fmt: skip
    found = search(study, fine, 2)
    merits = [found.evaluator.merit(point) for point in (found.evaluator.space.start, found.proposed)]
    assert 1.0 - merits[1] / merits[0] > found.confirmed.gain + 0.1
    assert found.confirmed.noise is not None
    assert found.confirmed.noise[1] > 0.2 > found.confirmed.noise[0]
    assert any("generate more events" in note for note in document(study, fine, found).notes)


# ── What comes out ──────────────────────────────────────────────────────────────────────────────────────────────────


@pytest.fixture(scope="module")
def found(study: StudyConfig) -> Found:
    return search(study, DESIGN, 2)


def test_the_text_to_paste_is_the_proposal(study: StudyConfig, found: Found, tmp_path: Path) -> None:
    """Pasted in the place of [selection] and [[category]] it gives the proposed point."""
    space = found.evaluator.space
    point = space.start.with_cut(0, 0).with_cut(1, 1).with_binning(
        0, (("mm2", space.tables[0].axis("mm2").options[::2]), ("e_res", space.tables[0].axis("e_res").options))
    )  # fmt: skip
    text = snippet(study, space, point)
    head = study.text[: study.text.index("[selection]")]
    tail = study.text[study.text.index("# ── What is not known exactly") :]
    path = tmp_path / "pasted.toml"
    path.write_text(f"{head}{text}\n{tail}")
    read, wanted = read_study(path), study_at(study, space, point)
    assert read.categories == wanted.categories
    assert snippet(study, space, space.start) == ""


def test_document(study: StudyConfig, found: Found, tmp_path: Path) -> None:
    told = document(study, DESIGN, found)
    evaluator = found.evaluator
    assert told.start.merit == pytest.approx(evaluator.merit(evaluator.space.start))
    assert told.proposed.merit <= told.start.merit
    for curve in told.curves:
        at = curve.values.index(curve.start)
        assert curve.at_start[at] == pytest.approx(1.0)
        assert curve.at_proposed[curve.values.index(curve.proposed)] == pytest.approx(1.0)
        assert curve.flat[0] <= curve.proposed <= curve.flat[1]
    for axis in told.axes:
        for shares in axis.shares:
            assert sum(shares) == pytest.approx(1.0)
            assert len(shares) == len(axis.edges) - 1
        assert axis.loss is None or axis.loss > -1e-9
    assert all(category.loss is None or category.loss > 0.0 for category in told.categories)
    assert all(-1e-9 < own.after < 1.0 for own in told.variations)
    assert sum(choice.chosen for choice in told.choices) <= 1
    for name, title, caption, draw in design_drawings(told):
        picture = draw().save(tmp_path, name, title, caption)
        assert "<svg" in picture.svg


def test_goals() -> None:
    covariance = np.array([[4.0, 1.0], [1.0, 9.0]])
    values = np.array([2.0, 3.0])
    assert Goal.of("mean", ("R_D", "R_Dst"), values).merit(covariance) == pytest.approx(1.0)
    assert Goal.of("R_D", ("R_D", "R_Dst"), values).merit(covariance) == pytest.approx(1.0)
    assert Goal.of("area", ("R_D", "R_Dst"), values).merit(covariance) == pytest.approx((35.0 / 36.0) ** 0.25)
    assert Goal.of("R_D", ("R_D_Bp", "R_D_B0", "R_Dst_Bp"), np.ones(3)).chosen == (0, 1)
    with pytest.raises(InputError, match="is no fitted ratio"):
        Goal.of("R_Dst", ("R_D",), np.ones(1))


@pytest.mark.parametrize("kind", ["mean", "area", "R_Dst"])
def test_slope_of_the_goal(kind: str) -> None:
    """Against differences of the merit."""
    goal = Goal.of(kind, ("R_D", "R_Dst"), np.array([0.3, 0.25]))
    covariance = np.array([[4e-4, -1e-4], [-1e-4, 2e-4]])
    for change in (np.array([[1.0, 0.0], [0.0, 0.0]]), np.array([[0.0, 1.0], [1.0, 0.0]]), np.eye(2)):
        step = 1e-9 * change
        difference = (goal.merit(covariance + step) - goal.merit(covariance - step)) / 2e-9
        assert np.trace(goal.slope(covariance) @ change) == pytest.approx(difference, rel=1e-5, abs=1e-6)


# ── Bad input ───────────────────────────────────────────────────────────────────────────────────────────────────────


def test_nothing_survives(study: StudyConfig) -> None:
    cut = study.selection["q2"].model_copy(update={"min": 2.5999})
    empty = study.model_copy(update={"selection": {**study.selection, "el": cut}})
    with pytest.raises(InputError, match="no candidate survives the loosest cuts of the scan") as caught:
        evaluator_of(empty, DESIGN, 2)
    assert "[design]: category D" in str(caught.value)


def test_too_much_memory(study: StudyConfig) -> None:
    fine = DesignSection.model_validate(
        {
            "memory": 16,
            "cuts": {"e_res": {"max": [0.4, 1.6], "steps": 90}, "p_lepton": {"min": [0.3, 0.9], "steps": 60}},
        }
    )
    with pytest.raises(InputError, match="would take too much memory"):
        evaluator_of(study, fine, 2)


def test_space_of_the_start_is_the_study(study: StudyConfig, evaluator: Evaluator) -> None:
    space: Space = evaluator.space
    assert study_at(study, space, space.start).categories == study.categories
