"""What went in."""

from __future__ import annotations

from semitau.core.true_minus import formatted

from ...inputs.part import InputCut
from ...numbers import counted
from ...results import Results
from ..table import NOTHING, Cell, Column, ReportTable, count, table, words


def component_table(results: Results) -> ReportTable | None:
    """Components with their events."""
    columns = [
        Column("Component", text=True, names=("component", "label")),
        Column("role", text=True),
        Column("yield in the fit", text=True),
        Column("decay chains"),
        Column("generated"),
        Column("expected"),
        Column("generated / expected"),
    ]
    rows = [
        [
            words(part.label, part.name, part.label),
            words(part.role),
            words(part.moves),
            Cell(counted(part.chains) if part.chains else NOTHING, (part.chains,)),
            Cell(counted(part.generated) if part.generated else "imported", (part.generated,)),
            count(part.expected),
            count(part.generated / part.expected if part.expected else None),
        ]
        for part in (results.inputs.components if results.inputs is not None else ())
    ]
    return table("components", "Components", columns, rows)


def category_table(results: Results) -> ReportTable | None:
    """Categories with their axes and cuts."""
    columns = [
        Column("Category", text=True, names=("category", "label")),
        Column("axes", text=True),
        Column("bins"),
        Column("cuts", text=True),
    ]
    rows = []
    for category in results.inputs.categories if results.inputs is not None else ():
        axes = " × ".join(f"{axis.observable} ({len(axis.edges) - 1})" for axis in category.axes)
        bins = 1
        for axis in category.axes:
            bins *= len(axis.edges) - 1
        cuts = "; ".join(map(_cut, category.cuts))
        rows.append([words(category.label, category.name, category.label), words(axes), count(bins), words(cuts)])
    return table("categories", "Categories", columns, rows)


def axis_table(results: Results) -> ReportTable | None:
    """Bin edges of each category; categories that share them stand together."""
    shared: dict[tuple[str, str, str, tuple[float, ...]], list[str]] = {}
    for category in results.inputs.categories if results.inputs is not None else ():
        for axis in category.axes:
            shared.setdefault((axis.observable, axis.label, axis.unit, axis.edges), []).append(category.label)
    columns = [
        Column("Observable", text=True, names=("observable", "label", "unit")),
        Column("bin edges", text=True),
        Column("categories", text=True),
    ]
    rows = [
        [
            words(f"{label} / {unit}" if unit else label, name, label, unit),
            Cell(", ".join(formatted(edge, "g") for edge in edges), (" ".join(map(str, edges)),)),
            words(", ".join(labels)),
        ]
        for (name, label, unit, edges), labels in shared.items()
    ]
    return table("axes", "Bin edges", columns, rows)


def form_factor_table(results: Results) -> ReportTable | None:
    """Parameters of the form factors."""
    columns = [
        Column("Transition", text=True),
        Column("set", text=True, names=("set", "parametrisation")),
        Column("parameter", text=True),
        Column("value"),
        Column("error"),
    ]
    rows = [
        [
            words(part.label),
            words(f"{part.set} ({part.parametrisation})", part.set, part.parametrisation),
            words(parameter.name),
            _as_given(parameter.value),
            _as_given(parameter.error),
        ]
        for part in (results.inputs.form_factors if results.inputs is not None else ())
        for parameter in part.parameters
    ]
    return table("form_factors", "Form factors", columns, rows)


def variation_table(results: Results) -> ReportTable | None:
    """Variations of the templates."""
    columns = [
        Column("Variation", text=True, names=("variation", "label")),
        Column("kind", text=True),
        Column("row of the budget", text=True),
        Column("what changes", text=True),
        Column("acts on", text=True),
    ]
    rows = [
        [
            words(part.label, part.name, part.label),
            words(part.kind.replace("_", " "), part.kind),
            words(part.group),
            words(part.what),
            words(", ".join(part.acts_on) or "nothing"),
        ]
        for part in (results.inputs.variations if results.inputs is not None else ())
    ]
    return table("variations", "Variations of the templates", columns, rows)


def number_table(results: Results) -> ReportTable | None:
    """Machine and detector."""
    columns = [Column("Key", text=True), Column("value", text=True), Column("unit", text=True)]
    columns.append(Column("meaning", text=True))
    rows = [
        [words(part.key), words(part.value), words(part.unit), words(part.meaning)]
        for part in (results.inputs.numbers if results.inputs is not None else ())
    ]
    return table("machine_and_detector", "Machine and detector, defaults included", columns, rows)


def _cut(cut: InputCut) -> str:
    low = None if cut.low is None else formatted(cut.low, "g")
    high = None if cut.high is None else formatted(cut.high, "g")
    if low is not None and high is not None:
        return f"{low} ≤ {cut.observable} < {high} {cut.unit}".strip()
    limit = f"≥ {low}" if high is None else f"< {high}"
    return f"{cut.observable} {limit} {cut.unit}".strip()


def _as_given(value: float) -> Cell:
    return Cell(formatted(value, ".6g"), (value,))
