"""Rates of a study as tables for people and as a document."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import fields

from rich.console import RenderableType
from rich.table import Table
from rich.text import Text
from semitau.gen.decays.decay import Decay, WilsonCoefficients, family_of
from semitau.gen.decays.lepton_couplings import LeptonCouplings
from semitau.gen.decays.rates import Observables
from semitau.gen.decays.rates_table import RatesTable
from semitau.gen.study_file.names import LEPTON_LABEL

from ..numbers import digits_for, signed, with_error
from ..pictures.sheet import Sheet
from ..pictures.spectra import Curve, spectra
from .summary import plain_table


def rates_tables(
    rates: RatesTable, made_with: Sequence[float | None], sets: Mapping[str, str], couplings: LeptonCouplings
) -> list[RenderableType]:
    """Tables of the decays and of the ratios, and what they were computed with.

    made_with : for each decay the branching fraction of the templates; None for one that the study does not have.
    """
    widths = plain_table("Decay", "BF, form factors (%)", "BF, templates (%)", "⟨q²⟩ (GeV²)")
    for mode, fraction in zip(rates.modes, made_with, strict=True):
        value, error = mode.values, mode.errors
        widths.add_row(
            _name(mode.decay),
            _shown(100 * value.branching_fraction, 100 * error.branching_fraction),
            "" if fraction is None else signed(100 * fraction, DECIMALS),
            _shown(value.mean_q2, error.mean_q2),
        )
    spins = plain_table("Decay", "P", "F_L", "A_FB")
    for mode in rates.modes:
        value, error = mode.values, mode.errors
        spins.add_row(
            _name(mode.decay),
            _shown(value.tau_polarisation, error.tau_polarisation),
            _shown(value.longitudinal_fraction, error.longitudinal_fraction),
            _shown(value.forward_backward, error.forward_backward),
        )
    used = ", ".join(f"{name}: {chosen}" for name, chosen in sets.items())
    note = (
        "BF: branching fraction, of the form factors and of the templates; P: lepton polarisation in the W* frame; "
        "F_L: longitudinal fraction; A_FB > 0: lepton away from the charm hadron. Errors are those of the form factors "
        f"alone ({used})."
    )
    lines: list[RenderableType] = [widths, "", spins, "", _ratio_table(rates), ""]
    if (correlation := _between_ratios(rates)) is not None:
        lines += [Text(f"Correlation of the errors of R(D) and R(D*): {signed(correlation, 2)}"), ""]
    if rates.relations:
        lines += [_relation_table(rates), ""]
    lines.append(Text(note, style="dim"))
    for lepton in ("tau", "mu", "e"):
        beyond = {name: value for name, value in _couplings(couplings[lepton]).items() if any(value)}
        if beyond:
            given = ", ".join(f"C_{name} = {_complex(*value)}" for name, value in beyond.items())
            what = f"Couplings of the {LEPTON_LABEL[lepton]} beyond the Standard Model"
            lines.append(Text(f"{what}: {given}; tensor form factors: {couplings.tensor}."))
    return lines


def _name(decay: Decay) -> str:
    return f"{decay.parent} → {decay.charm} {decay.lepton} ν"


def rates_document(
    rates: RatesTable, made_with: Sequence[float | None], sets: Mapping[str, str], couplings: LeptonCouplings
) -> dict[str, object]:
    """The same as plain numbers; widths in GeV, spectra in GeV^-1, couplings as [real, imaginary], those of the light
    leptons below `e` and `mu`."""
    return {
        "form_factors": dict(sets),
        "wilson": {
            **_lists(couplings.tau),
            "tensor": couplings.tensor,
            "e": _lists(couplings.e),
            "mu": _lists(couplings.mu),
        },
        "modes": [
            {
                "parent": mode.decay.parent,
                "charm": mode.decay.charm,
                "lepton": mode.decay.lepton,
                "values": {field.name: getattr(mode.values, field.name) for field in fields(Observables)},
                "errors": {field.name: getattr(mode.errors, field.name) for field in fields(Observables)},
                "template_branching_fraction": fraction,
            }
            for mode, fraction in zip(rates.modes, made_with, strict=True)
        ],
        "ratios": [
            {"parent": ratio.parent, "charm": ratio.charm, "value": ratio.value, "error": ratio.error}
            for ratio in rates.ratios
        ],
        "correlation": rates.correlation.tolist(),
        "relations": [
            {
                "form_factors": relation.transition,
                "relation": relation.name,
                "kind": relation.kind,
                "value": relation.value,
                "error": relation.error,
                "status": relation.status,
            }
            for relation in rates.relations
        ],
        "spectra": [
            {
                "parent": spectrum.decay.parent,
                "charm": spectrum.decay.charm,
                "lepton": spectrum.decay.lepton,
                "q2": spectrum.q2.tolist(),
                "rate": spectrum.rate.tolist(),
                "error": spectrum.error.tolist(),
            }
            for spectrum in rates.spectra
        ],
    }


def drawn_spectra(rates: RatesTable) -> Sheet:
    """The picture of d Gamma/d q2 with its bands."""
    curves: dict[str, list[Curve]] = {}
    for spectrum in rates.spectra:
        decay = spectrum.decay
        curve = Curve(LEPTON_LABEL[decay.lepton], spectrum.q2, spectrum.rate, spectrum.error)
        curves.setdefault(f"{decay.parent} → {decay.charm} ℓ ν", []).append(curve)
    return spectra(curves)


def _ratio_table(rates: RatesTable) -> Table:
    """A row for each charmed meson, a column for each parent and the mean of both."""
    parents = list(dict.fromkeys(ratio.parent for ratio in rates.ratios))
    families: dict[str, list[str]] = {}
    for ratio in rates.ratios:
        family = ratio.charm if ratio.parent == "mean" else family_of(ratio.charm)
        families.setdefault(family, []).append(_shown(ratio.value, ratio.error))
    table = plain_table("Ratio of τ to the mean of e and μ", *parents)
    for family, cells in families.items():
        table.add_row(f"R{family}" if family.startswith("(") else f"R({family})", *cells)
    return table


def _between_ratios(rates: RatesTable) -> float | None:
    """Correlation of R(D) and R(D*), for the means if there are two parents."""
    at = {family_of(ratio.charm) if ratio.parent != "mean" else ratio.charm: k for k, ratio in enumerate(rates.ratios)}
    return float(rates.correlation[at["D"], at["D*"]]) if {"D", "D*"} <= set(at) else None


def _relation_table(rates: RatesTable) -> Table:
    table = plain_table("Exact relations of the form factors", "left/right − 1, or sum", "")
    for relation in rates.relations:
        if relation.kind == "bound":
            found = f"{with_error(relation.value, relation.error)} of 1"
        elif relation.status == "exact":
            found = "0"
        else:
            found = f"{with_error(100 * relation.value, 100 * relation.error)} %"
        table.add_row(f"{relation.transition}: {relation.name}", found, relation.status)
    return table


def _couplings(couplings: WilsonCoefficients) -> dict[str, tuple[float, float]]:
    values = {field.name: complex(getattr(couplings, field.name)) for field in fields(couplings)}
    return {name: (value.real, value.imag) for name, value in values.items()}


def _lists(couplings: WilsonCoefficients) -> dict[str, list[float]]:
    return {name: list(value) for name, value in _couplings(couplings).items()}


def _complex(real: float, imaginary: float) -> str:
    return f"{real:g} {'+' if imaginary > 0 else '−'} {abs(imaginary):g}i" if imaginary else f"{real:g}"


DECIMALS = 4
"""Decimals shown at most: what the form factors move less than that has no error to show."""


def _shown(value: float, error: float) -> str:
    places = digits_for(error)
    return with_error(value, error) if places <= DECIMALS and error > 0 else signed(value, DECIMALS)
