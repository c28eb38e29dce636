"""Cuts, axes and the cut flow against boost-histogram and numpy. Nothing here is statistical."""

from __future__ import annotations

import boost_histogram as bh
import numpy as np
import pytest
from semitau.core.errors import InputError
from semitau.gen import block as row
from semitau.gen.block import LANES, new_block
from semitau.gen.study_file.categories import StudyCategory
from semitau.gen.templates.binning import ROW_OF, category_code, count, cut_names, make_axes, make_cuts, place
from semitau.gen.templates.cut_flow import CutFlow, step_names

from .blocks import put, values
from .marlow_study import study

AXES = [
    {"mm2": [-2.0, -0.3, 0.0, 1e-9, 0.3, 1.0, 9.0]},
    {"mm2": [0.0, 0.1, 0.30000000000000004, 0.7, 1.0], "el": {"min": 0.2, "max": 2.5, "bins": 23}},
    {"q2": [3.0, 10.0], "p_charm": {"min": 0.0, "max": 2.0, "bins": 7}, "e_res": [0.0, 0.1, 1e3]},
]


def categories(number: int) -> tuple[StudyCategory, ...]:
    table = {"charm": ["D0", "D*+"], "observables": AXES[number], "selection": {"p_lepton": {"min": 0.4, "max": 1.9}}}
    cuts = {"q2": {"min": 3.5}, "delta_m": {"max": 0.15}}
    return study(category=[table], selection=cuts, background=[], variation=[]).categories


def filled_block(seed: int, edges: dict[str, tuple[float, ...]]) -> np.ndarray:
    """Random observables, many of them exactly on edges, some beyond all axes, some not numbers."""
    generator, x = np.random.default_rng(seed), new_block()
    for name, place_of in ROW_OF.items():
        known = edges.get(name, (0.0, 0.4, 1.9, 3.5, 12.0))
        spread = known[-1] - known[0] if known[-1] < 100 else 2.0
        content = generator.uniform(known[0] - 0.1 * spread, known[0] + 1.1 * spread, LANES)
        on_edge = generator.random(LANES) < 0.2
        content[on_edge] = generator.choice(known, on_edge.sum())
        content[generator.random(LANES) < 0.02] = np.nan
        put(x, place_of, [content])
    put(x, row.DELTA_M, [generator.uniform(0.13, 0.16, LANES)])
    put(x, row.CATEGORY, [generator.integers(-1, 8, LANES).astype(float)])
    return x


@pytest.mark.parametrize("number", range(len(AXES)))
def test_bins_are_those_of_boost_histogram(number: int) -> None:
    """Edges belong to the bin above, the last one and what is not a number to none; bins in C order."""
    known = categories(number)
    axes, cuts = make_axes(known), make_cuts(known)
    size = int(np.prod(known[0].shape))
    contents = np.zeros((size * len(known), 3))
    expected = {c.name: bh.Histogram(*(bh.axis.Variable(list(e)) for e in c.axes.values())) for c in known}
    flow = np.zeros((len(cut_names(known)) + 2, len(known)), dtype=np.int64)
    by_hand = np.zeros_like(flow)
    for seed in range(60):
        x = filled_block(seed, known[0].axes)
        bins = np.zeros(LANES, dtype=np.int64)
        place(x, 250, cuts, axes, flow, bins)
        count(bins, 250, 1, contents)
        column = {name: values(x, place_of)[:250] for name, place_of in ROW_OF.items()}
        code = values(x, row.CATEGORY)[:250]
        for c, category in enumerate(known):
            chosen = code == category_code(category.charm, category.lepton)
            by_hand[0, c] += chosen.sum()
            for k, name in enumerate(cut_names(known)):
                if name in category.cuts:
                    cut = category.cuts[name]
                    low, high = (cut.min or -np.inf), (np.inf if cut.max is None else cut.max)
                    chosen &= (column[name] >= low) & (column[name] < high)
                by_hand[1 + k, c] += chosen.sum()
            numbers = [column[name][chosen] for name in category.axes]
            # boost-histogram puts NaN into the overflow bin
            expected[category.name].fill(*numbers)
            inside = np.ones(chosen.sum(), dtype=bool)
            for name, edges in category.axes.items():
                inside &= (column[name][chosen] >= edges[0]) & (column[name][chosen] < edges[-1])
            by_hand[-1, c] += inside.sum()
    for c, category in enumerate(known):
        mine = contents[c * size : (c + 1) * size, 1].reshape(category.shape)
        np.testing.assert_array_equal(mine, expected[category.name].values())
        assert mine.sum() > 50
    np.testing.assert_array_equal(flow, by_hand)
    assert not contents[:, [0, 2]].any()


def test_delta_m_cuts_stars_alone() -> None:
    known = categories(0)
    cuts = make_cuts(known)
    k = cut_names(known).index("delta_m")
    assert np.all(np.isinf(cuts.high[k, [category_code("D0", "e"), category_code("D0", "mu")]]))
    assert cuts.high[k, category_code("D*+", "mu")] == 0.15


def test_cuts_on_what_is_not_drawn_let_pass() -> None:
    cuts = make_cuts(categories(0), drawn=["mm2", "p_lepton"])
    names = cut_names(categories(0))
    assert np.all(np.isinf(cuts.low[names.index("q2")]))
    assert cuts.low[names.index("p_lepton"), category_code("D0", "e")] == 0.4


# --- cut flow -------------------------------------------------------------------------------------------------------


def flow(by_category: np.ndarray) -> CutFlow:
    """Two categories, two components, one cut on q2: events after candidate, cut and axes given."""
    steps = step_names(("q2",))
    whole = np.zeros((len(steps), 2, 2))
    whole[4:] = by_category
    events = whole.sum(axis=1)
    events[:4] = 100.0
    return CutFlow(steps, ("signal", "rest"), ("D0_e", "D0_mu"), events, events.astype(np.int64), whole)


def test_efficiency_and_purity() -> None:
    made = flow(np.array([[[20.0, 10], [20, 10]], [[10, 5], [10, 15]], [[9, 5], [10, 5]]]))
    np.testing.assert_allclose(made.efficiency[-1], [0.19, 0.10])
    np.testing.assert_allclose(made.purity[:, 0], [0.5, 0.5, 0.5, 0.5, 40 / 60, 20 / 40, 19 / 29])
    np.testing.assert_allclose(made.purity.sum(axis=1), 1.0)
    np.testing.assert_allclose(made.outside_axes, [1.0, 10.0])
    table = made.as_table()
    assert table["inside the axes"]["signal"] == {
        "events": 19.0,
        "efficiency": 0.19,
        "purity": pytest.approx(19 / 29),
        "generated": 19,
    }
    made.check()


def test_a_cut_that_removes_everything_is_named() -> None:
    made = flow(np.array([[[20.0, 10], [20, 10]], [[10, 5], [0, 0]], [[9, 5], [0, 0]]]))
    with pytest.raises(InputError, match=r"category D0_mu: the cut on q2 removes everything \(got 30 events before\)"):
        made.check()


def test_empty_axes_categories_and_components_are_named() -> None:
    made = flow(np.array([[[20.0, 10], [0, 0]], [[10, 0], [0, 0]], [[0, 0], [0, 0]]]))
    with pytest.raises(InputError) as caught:
        made.check()
    text = str(caught.value)
    assert "category D0_e: no event lies inside the axes" in text
    assert "category D0_mu: no event is reconstructed in this category" in text
    assert 'component signal: the component has no events left after "inside the axes"' in text
    assert 'component rest: the component has no events left after "cut on q2"' in text
