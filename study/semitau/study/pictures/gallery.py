"""All pictures of a study, in the order of the report."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from functools import partial
from pathlib import Path

from matplotlib import rc_context

from ..averages.picture import average_picture
from ..averages.picture import caption as average_caption
from ..numbers import counted
from ..results import Results
from .bias_matrix import bias_matrix
from .budget_bars import budget_bars
from .correlations import correlation_matrix
from .design import design_drawings
from .kept import kept_picture, picture_key
from .linearity import linearity
from .nuisance_strips import nuisance_strips
from .projections import stacked_projections
from .reach import CAPTION as REACH_CAPTION
from .reach import reach_curves
from .sheet import Picture, Sheet
from .sizing import sizing_drawings
from .style import RC, component_colours
from .toy_pulls import toy_pulls

DATA_LABELS = {"expected": "expected events", "pseudo": "pseudo-data", "file": "data"}
COUNTED = {"expected": "expected events", "pseudo": "events of pseudo-data", "file": "events of data"}

Drawing = tuple[str, str, str, Callable[[], Sheet]]


def draw_pictures(
    results: Results,
    folder: Path,
    report: Callable[[str, int, int | None], None] | None = None,
    again: bool = False,
) -> tuple[Picture, ...]:
    """Every picture in `folder` as SVG and PNG; same results, same bytes. What is there already is not drawn again.

    report : called as report(label, done, total) after each. again : draw in any case.

    Raises
    ------
    RunError : a file cannot be written.
    """
    drawings = list(_drawings(results))
    pictures = []
    for done, (name, title, caption, draw) in enumerate(drawings, start=1):
        key = picture_key(name, title, caption, draw)
        kept = None if again else kept_picture(folder, name, title, caption, key)
        with rc_context(RC):
            pictures.append(kept or draw().save(folder, name, title, caption, key))
        if report is not None:
            report("pictures", done, len(drawings))
    return tuple(pictures)


def _drawings(results: Results) -> Iterator[Drawing]:
    # Hidden ratios are no scale for errors.
    values = {ratio.name: ratio.value if results.blinding is None else ratio.injected for ratio in results.ratios}
    scale = "fitted" if results.blinding is None else "injected"
    labels = {ratio.name: ratio.label for ratio in results.ratios}
    if results.budget:
        yield (
            "budget",
            "Uncertainty by source",
            f"Error of each ratio from each source, in per cent of the {scale} ratio, with the total on top.",
            partial(budget_bars, results.budget, values, labels, scale),
        )
    if results.nuisances:
        yield (
            "nuisances",
            "Nuisances",
            "Fitted value and error of each nuisance on its auxiliary measurement, and how far it moves each ratio.",
            partial(nuisance_strips, results.nuisances, results.ratios),
        )
    if results.bias is not None and results.bias.pairs:
        yield (
            "bias_matrix",
            "Bias matrix",
            (
                "Shift of each ratio in units of its error, made with one study and fitted with another; "
                "framed where no assigned systematic covers it."
            ),
            partial(bias_matrix, results.bias),
        )
    toys = results.toys
    if toys is not None and toys.number > toys.failures:
        yield (
            "toy_pulls",
            "Pulls of the toys",
            "Difference of fitted and injected ratio over the error of the fit, with the unit Gaussian.",
            partial(toy_pulls, toys),
        )
    if results.linearity:
        yield (
            "linearity",
            "Linearity",
            "Mean fitted against injected ratio, and the bias in units of the error of one fit; the band is ±0.1.",
            partial(linearity, results.linearity),
        )
    if results.sizing is not None:
        yield from sizing_drawings(results.sizing)
    if results.design is not None:
        yield from design_drawings(results.design)
    if results.reach is not None:
        yield "reach", "Reach", REACH_CAPTION, partial(reach_curves, results.reach)
    if results.average is not None:
        yield "average", "Average", average_caption(results.average), partial(average_picture, results.average)
    yield from _projections(results)
    if results.fit.correlation:
        yield (
            "correlations",
            "Correlations",
            "Correlations of the fitted parameters in per cent.",
            partial(correlation_matrix, results.fit),
        )


def _projections(results: Results) -> Iterator[Drawing]:
    colours = component_colours(results.components, [ratio.name for ratio in results.ratios])
    data_label = DATA_LABELS[results.data.kind]
    for enhanced in (True, False):
        for category in results.categories:
            chosen = [p for p in results.projections if p.category == category.name and bool(p.region) == enhanced]
            if not chosen:
                continue
            events = counted(sum(chosen[0].data))
            note = f"{events} {COUNTED[results.data.kind]}" + (f" with {chosen[0].region}" if enhanced else "")
            title = f"{category.label}: signal-enhanced" if enhanced else category.label
            caption = (
                f"Fitted components and {data_label} of {category.label}"
                + (f" with {chosen[0].region}" if enhanced else "")
                + "; residuals in units of the Poisson error underneath."
            )
            yield (
                f"signal_{category.name}" if enhanced else f"projection_{category.name}",
                title,
                caption,
                partial(stacked_projections, chosen, results.components, colours, title, note, data_label),
            )
