"""Sections of the report in their order: what each is called, when it is there, and the tables that it shows."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass

from ..results import Results
from .table import ReportTable
from .tables import (
    average_tables,
    bias_tables,
    design_tables,
    event_tables,
    fit_tables,
    input_tables,
    ratio_tables,
    reach_tables,
    sizing_tables,
    toy_tables,
)

MakeTable = Callable[[Results], ReportTable | None]


@dataclass(frozen=True)
class Section:
    """A section. name : its identifier, and that of its template sections/NAME.html.j2. there : whether to show it."""

    name: str
    title: str
    there: Callable[[Results], object] = lambda results: True
    tables: tuple[MakeTable, ...] = ()


SECTIONS = (
    Section("verdict", "Verdict"),
    Section("ratios", "Ratios", tables=(ratio_tables.ratio_table,)),
    Section("uncertainty", "Uncertainty by source", lambda r: r.budget, (ratio_tables.budget_table,)),
    Section(
        "bias",
        "Bias matrix",
        lambda r: r.bias,
        (bias_tables.change_table, bias_tables.nominal_table, bias_tables.pair_table),
    ),
    Section(
        "sizing",
        "How many events",
        lambda r: r.sizing,
        (
            sizing_tables.ratio_table,
            sizing_tables.sample_table,
            sizing_tables.cost_table,
            sizing_tables.curve_table,
            sizing_tables.toy_table,
            sizing_tables.check_table,
            sizing_tables.allocation_table,
            sizing_tables.gain_table,
        ),
    ),
    Section("toys", "Toys", lambda r: r.toys, (toy_tables.toy_table,)),
    Section("linearity", "Linearity", lambda r: r.linearity, (toy_tables.line_table, toy_tables.point_table)),
    Section("nuisances", "Nuisances", lambda r: r.nuisances, (fit_tables.nuisance_table,)),
    Section("signal", "Signal-enhanced projections", lambda r: any(p.region for p in r.projections)),
    Section("projections", "All projections", lambda r: any(not p.region for p in r.projections)),
    Section(
        "goodness",
        "Quality of the fit",
        lambda r: r.quality,
        (fit_tables.category_table, fit_tables.shape_table, fit_tables.worst_table),
    ),
    Section("fit", "Fit", tables=(fit_tables.parameter_table, fit_tables.correlation_table)),
    Section("selection", "Cut flow", lambda r: r.cut_flow, (event_tables.cut_flow_table,)),
    Section("weights", "Events behind weights", lambda r: r.reweightings, (event_tables.reweighting_table,)),
    Section(
        "design",
        "Design",
        lambda r: r.design,
        (
            design_tables.point_table,
            design_tables.cut_table,
            design_tables.curve_table,
            design_tables.binning_table,
            design_tables.choice_table,
            design_tables.merging_table,
            design_tables.information_table,
            design_tables.cost_table,
        ),
    ),
    Section(
        "reach",
        "Reach",
        lambda r: r.reach,
        (reach_tables.error_table, reach_tables.deviation_table, reach_tables.compared_table),
    ),
    Section(
        "average",
        "Average",
        lambda r: r.average,
        (average_tables.ratio_table, average_tables.input_table, average_tables.source_table),
    ),
    Section(
        "inputs",
        "What went in",
        lambda r: r.inputs,
        (
            input_tables.component_table,
            input_tables.category_table,
            input_tables.axis_table,
            input_tables.form_factor_table,
            input_tables.variation_table,
            input_tables.number_table,
        ),
    ),
    Section("study", "Study file", lambda r: r.study.text),
    Section("provenance", "Provenance"),
)


def shown_sections(results: Results) -> tuple[Section, ...]:
    """Sections that these results have something for."""
    return tuple(section for section in SECTIONS if section.there(results))


def report_tables(results: Results, sections: Iterable[Section]) -> dict[str, ReportTable]:
    """Every table of these sections by its name, with the bias matrices and the numbers behind the projections."""
    made = [make(results) for section in sections for make in section.tables]
    made += [*bias_tables.matrix_tables(results), *event_tables.projection_tables(results)]
    return {found.name: found for found in made if found is not None}
