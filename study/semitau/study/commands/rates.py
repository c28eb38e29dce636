"""`semitau rates FILE`: what the theory of a study says, without generating."""

from __future__ import annotations

from pathlib import Path

import click

from ..invocation import Invocation, shared_options


@click.command()
@click.argument("file", type=click.Path(path_type=Path))
@shared_options
def command(call: Invocation, file: Path) -> None:
    """Rates, ratios, polarisations and asymmetries, without generating.

    For every decay of the modes of FILE, with the errors from the covariance of its form factors; |V_cb| and lifetimes
    are taken as exact. Nothing is drawn: --seed and --workers change nothing.
    """
    from semitau.gen.decays.rates_table import rates_table

    from ..opening import open_study
    from ..rates_summary import rates_document, rates_tables

    study = open_study(file, call.seed)
    sets = {name: study.form_factor_set(name) for name in ("D", "Dst", "Dss")}
    names = {name: str(getattr(study.form_factors, name)) for name in sets}
    charms = list(dict.fromkeys(charm for mode in study.modes for charm in mode.charm))
    parents = list(dict.fromkeys(parent for mode in study.modes for parent in mode.parents))
    couplings, tensor = study.wilson.couplings, study.wilson.tensor
    rates = rates_table(charms, parents=parents, form_factors=sets, wilson=couplings, tensor=tensor)
    call.terminal.show(*rates_tables(rates, names, couplings, tensor))
    call.terminal.result(rates_document(rates, names, couplings, tensor))
