"""Rates of decays as quadratic forms in the shifts of form factors that templates follow."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from semitau.core.quadratic import QuadraticForm
from semitau.core.templates import Form

from ..decays.chains import semileptonic_branching_fraction
from ..decays.coefficients import form_through
from ..decays.decay import Decay, charm_name
from ..decays.form_factor_shifts import FormFactorShift, shifted_decay
from ..decays.rates import observables
from ..study_file.names import CHARM_OF_RATIO, FORM_FACTORS_OF
from ..study_file.study import StudyConfig
from .component_plan import parent_pairs

LIGHT = ("e", "mu")


def study_shifts(study: StudyConfig) -> tuple[FormFactorShift, ...]:
    """The shifts of form factors among the study's coefficients."""
    return tuple(one for one in study.coefficients if not isinstance(one, str))


def ratio_forms(study: StudyConfig, name: str, parents: Sequence[str], injected: float) -> tuple[Form, Form]:
    """R_D or R_Dst as one form over another: the first is `injected` at the injected point, the second 1 there."""
    family = CHARM_OF_RATIO[name]
    if not _moved(study, (family,)):
        return (), ()
    above, below = (decay_form(study, parents, (family,), leptons) for leptons in (("tau",), LIGHT))
    return tuple((a, b, injected * piece) for a, b, piece in above), below


def decay_form(study: StudyConfig, parents: Sequence[str], families: Sequence[str], leptons: Sequence[str]) -> Form:
    """Decays beside a tag over those at the injected point; empty if no shift moves them.

    Branching fractions that the study gives are those of the injected point.
    """
    shifts = _moved(study, families)
    if not shifts:
        return ()
    parts = list(_tagged_decays(study, parents, families, leptons))
    whole = sum(weight * observables(decay).rate for weight, decay in parts)

    def decays(values: dict[str, float]) -> float:
        moves = [(shift, values[shift.name]) for shift in shifts]
        return sum(weight * observables(shifted_decay(decay, moves)).rate for weight, decay in parts) / whole

    form: QuadraticForm = form_through(decays, [shift.name for shift in shifts])
    return tuple((a, b, piece) for (a, b), piece in form.items())


def _moved(study: StudyConfig, families: Sequence[str]) -> list[FormFactorShift]:
    transitions = {FORM_FACTORS_OF[family] for family in families}
    return [shift for shift in study_shifts(study) if transitions & set(shift.transitions)]


def _tagged_decays(
    study: StudyConfig, parents: Sequence[str], families: Sequence[str], leptons: Sequence[str]
) -> Iterator[tuple[float, Decay]]:
    """Decays and what one GeV of their width counts."""
    given = study.wilson.by_lepton
    for parent in parents:
        tagged = parent_pairs(study, parent) * study.detector.tag.kept(parent)
        for family in families:
            chosen = study.form_factor_set(FORM_FACTORS_OF[family])
            for lepton in leptons:
                charm, model = charm_name(parent, family), given.model(lepton)
                decay = Decay(parent, charm, lepton, chosen, given[lepton], model)
                fraction = semileptonic_branching_fraction(decay, study.fractions)
                yield tagged * fraction / observables(decay).rate, decay
