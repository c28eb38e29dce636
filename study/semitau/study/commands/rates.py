"""`semitau rates FILE`: what the theory of a study says, without generating."""

from __future__ import annotations

from pathlib import Path

import click

from ..terminal.invocation import Invocation, shared_options


@click.command()
@click.argument("file", type=click.Path(path_type=Path))
@click.option("--output", type=click.Path(path_type=Path), help="Folder for the picture; without it none is drawn.")
@shared_options
def command(call: Invocation, file: Path, output: Path | None) -> None:
    """Rates, ratios, polarisations and asymmetries, without generating.

    For every decay of the modes of FILE, with the errors from the covariance of its form factors; |V_cb| and lifetimes
    are taken as exact. Beside the branching fractions of the form factors stand those that templates are made with:
    measured for D**, of [branching_fractions], or with an injected ratio. The relations that hold exactly between form
    factors are checked. Nothing is drawn at random: --seed and --workers change nothing.
    """
    from semitau.gen.decays.rates_table import rates_table
    from semitau.gen.templates.component_plan import template_fraction

    from ..run.opening import open_study
    from ..terminal.rates_summary import drawn_spectra, rates_document, rates_tables

    study = open_study(file, call.seed)
    sets = {name: study.form_factor_set(name) for name in ("D", "Dst", "Dss")}
    names = {name: str(getattr(study.form_factors, name)) for name in sets}
    charms = list(dict.fromkeys(charm for mode in study.modes for charm in mode.charm))
    parents = list(dict.fromkeys(parent for mode in study.modes for parent in mode.parents))
    given = study.wilson.by_lepton
    rates = rates_table(
        charms, parents=parents, form_factors=sets, wilson=given.tau, tensor=given.tensor,
        light={"e": given.e, "mu": given.mu},
    )  # fmt: skip
    made_with = [template_fraction(study, mode.decay) for mode in rates.modes]
    call.terminal.show(*rates_tables(rates, made_with, names, given))
    if output is not None:
        caption = "Differential rates in q², with the bands that the form factors leave open."
        drawn_spectra(rates).save(output, "spectra", "Differential rates", caption)
        call.terminal.show("", f"Picture: {output / 'spectra.svg'}, {output / 'spectra.png'}")
    call.terminal.result(rates_document(rates, made_with, names, given))
