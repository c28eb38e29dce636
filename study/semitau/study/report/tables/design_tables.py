"""Design: the proposed working point, and what each cut, axis, category and variation is worth."""

from __future__ import annotations

from collections.abc import Sequence

from ...design.part import Design, DesignCurve, DesignError, DesignPoint
from ...numbers import digits_for, percent, signed
from ...results import Results
from ..table import Cell, Column, ReportTable, Row, count, number, share, table, words


def point_table(results: Results) -> ReportTable | None:
    """Starting and proposed point, on the events of the search and on independent ones."""
    design = results.design
    if design is None:
        return None
    labels = {ratio.name: ratio.label for ratio in results.ratios}
    columns = [Column("Expected error", text=True), Column("now"), Column("proposed"), Column("change")]
    check = design.confirmation
    rows: list[Row | list[Cell]] = [
        *_errors("events of the search", labels, design.start.errors, design.proposed.errors),
        *_errors("independent events", labels, check.start, check.proposed),
        Row(
            (
                words("merit"),
                number(design.start.merit, 4),
                number(design.proposed.merit, 4),
                _change(-design.gain),
            ),
            total=True,
        ),
        [words("bins"), count(design.start.bins), count(design.proposed.bins), _no()],
        [words("expected events"), count(design.start.events), count(design.proposed.events), _no()],
    ]
    return table("design", "Working point, now and proposed", columns, rows)


def _errors(
    where: str, labels: dict[str, str], start: Sequence[DesignError], proposed: Sequence[DesignError]
) -> list[list[Cell]]:
    after = {part.ratio: part for part in proposed}
    rows = []
    for part in start:
        then = after[part.ratio]
        places = digits_for(part.error) + 1
        rows.append(
            [
                words(f"{labels.get(part.ratio, part.ratio)}, {where}"),
                number(part.error, places),
                number(then.error, places),
                _change(then.error / part.error - 1 if part.error else None),
            ]
        )
    return rows


def _change(relative: float | None) -> Cell:
    return _no() if relative is None else Cell(percent(relative), (relative,))


def _no() -> Cell:
    return Cell("", (None,))


def cut_table(results: Results) -> ReportTable | None:
    """Each scanned cut: where it stands, where it should, over which range it does not matter."""
    columns = [
        Column("Cut", text=True, names=("cut", "label")),
        Column("now"),
        Column("proposed"),
        Column("flat", names=("flat from", "flat to")),
        Column("unit", text=True),
        Column("matters", text=True),
    ]
    design = results.design
    rows = [
        [
            words(curve.label, curve.cut, curve.label),
            _value(curve.start),
            _value(curve.proposed),
            Cell(f"{_value(curve.flat[0]).shown} to {_value(curve.flat[1]).shown}", curve.flat),
            words(curve.unit),
            words("yes" if curve.matters else "no", curve.matters),
        ]
        for curve in (design.curves if design is not None else ())
    ]
    return table("design_cuts", "Cuts", columns, rows)


def curve_table(results: Results) -> ReportTable | None:
    """Error against each cut: to be downloaded, the pictures are for reading."""
    design = results.design
    if design is None:
        return None
    columns = [
        *map(Column, ("cut", "unit", "value", "merit over start", "merit over proposed")),
        *(Column(f"error of {name} over proposed") for name in design.ratios),
    ]
    rows = [_curve_cells(curve, place, design) for curve in design.curves for place in range(len(curve.values))]
    return table("design_curves", "Error against each cut", columns, rows)


def _curve_cells(curve: DesignCurve, place: int, design: Design) -> list[Cell]:
    return [
        words(curve.cut),
        words(curve.unit),
        _value(curve.values[place]),
        number(curve.at_start[place], 4),
        number(curve.at_proposed[place], 4),
        *(number(curve.errors[ratio][place], 4) for ratio in range(len(design.ratios))),
    ]


def binning_table(results: Results) -> ReportTable | None:
    """Axes and edges, now and proposed."""
    design = results.design
    if design is None:
        return None
    columns = [
        Column("Categories", text=True),
        Column("point", text=True),
        Column("observable", text=True),
        Column("edges", text=True),
        Column("bins"),
        Column("emptiest bin", names=("smallest expected content",)),
    ]
    rows = [*_binnings("now", design.start), *_binnings("proposed", design.proposed)]
    rows.sort(key=lambda cells: str(cells[0].raw[0]))
    return table("design_binning", "Binning", columns, rows)


def _binnings(point: str, found: DesignPoint) -> list[list[Cell]]:
    return [
        [
            words(binning.table),
            words(point),
            words(observable),
            Cell(", ".join(_value(edge).shown for edge in edges), (" ".join(map(str, edges)),)),
            count(binning.bins),
            number(binning.least, 1),
        ]
        for binning in found.binnings
        for observable, edges in zip(binning.observables, binning.edges, strict=True)
    ]


def choice_table(results: Results) -> ReportTable | None:
    """Axes that were compared, the best first."""
    columns = [
        Column("Categories", text=True),
        Column("axes", text=True),
        Column("bins"),
        Column("merit over proposed"),
        Column("", names=("now", "chosen"), text=True),
    ]
    choices = results.design.choices if results.design is not None else ()
    rows = [
        [
            words(choice.table),
            words(" × ".join(choice.observables)),
            count(choice.bins),
            number(choice.merit, 4, absent="no fit"),
            Cell(", ".join(("now",) * choice.now + ("proposed",) * choice.chosen), (choice.now, choice.chosen)),
        ]
        for choice in sorted(choices, key=lambda c: (c.table, c.merit is None, c.merit or 0.0))
    ]
    return table("design_axes", "Axes that were compared", columns, rows)


def merging_table(results: Results) -> ReportTable | None:
    """Error against the number of bins: to be downloaded."""
    columns = [Column("categories"), Column("bins"), Column("merit over the finest"), Column("chosen")]
    rows = [
        [
            words(merging.table),
            count(bins),
            number(merit, 4),
            words(str(bins == merging.chosen), bins == merging.chosen),
        ]
        for merging in (results.design.mergings if results.design is not None else ())
        for bins, merit in zip(merging.bins, merging.merit, strict=True)
    ]
    return table("design_merging", "Error against the number of bins", columns, rows)


def information_table(results: Results) -> ReportTable | None:
    """What each axis and each category is worth."""
    columns = [
        Column("Without", text=True, names=("without", "categories")),
        Column("error rises by", names=("relative rise of the merit",)),
    ]
    design = results.design
    if design is None:
        return None
    rows = [
        *([words(f"{a.label} of {a.table}", a.label, a.table), _loss(a.loss)] for a in design.axes),
        *([words(c.label, c.category, c.label), _loss(c.loss)] for c in design.categories),
    ]
    return table("design_worth", "What axes and categories are worth", columns, rows)


def _loss(loss: float | None) -> Cell:
    return Cell("no fit", (None,)) if loss is None else share(loss, 2)


def cost_table(results: Results) -> ReportTable | None:
    """What each variation costs."""
    columns = [Column("Variation", text=True, names=("variation", "label")), Column("now"), Column("proposed")]
    rows = [
        [words(part.label, part.nuisance, part.label), share(part.before, 2), share(part.after, 2)]
        for part in (results.design.variations if results.design is not None else ())
    ]
    return table("design_variations", "Fall of the error if a variation were known exactly", columns, rows)


def _value(value: float) -> Cell:
    shown = signed(value, 4).rstrip("0").rstrip(".")
    return Cell(shown or "0", (value,))
