"""Which variations of a study act on anything, and if not, why."""

from __future__ import annotations

from collections.abc import Iterator

from ..decays.form_factor_directions import directions
from ..decays.form_factor_parameters import NORMALISATIONS
from ..decays.form_factor_set import FormFactorSet
from .chosen_sets import sound_set
from .components import Mode
from .names import FORM_FACTORS_OF, PION_DECAYS
from .rules import shown, suggestion
from .sections import Conflict, Sections
from .variations import (
    ComponentFraction,
    FormFactor,
    FormFactorDirection,
    FormFactorDirections,
    LeptonIdentificationEfficiency,
    Misidentification,
    ProductionRatio,
    ResidualEnergyScale,
    SoftPionEfficiency,
    Variation,
)
from .written_variations import excited_families, kept_directions


def idle_variations(sections: Sections) -> Iterator[Conflict]:
    """Variations that would change no template; only those that can be judged with the tables that are sound."""
    modes = list(sections.modes.values())
    categories = sections.categories.values()
    leptons = {category.lepton for category in categories}
    for i, variation in sections.variations.items():
        place = ("variation", i)
        match variation:
            case FormFactor() | FormFactorDirection() | FormFactorDirections():
                if "mode" in sections.whole and not any(_described(mode, variation.set) for mode in modes):
                    what = "acts on nothing: no mode has these form factors"
                    yield Conflict((*place, "set"), what, shown(variation.set), remedy="Remove the variation.")
                else:
                    yield from _form_factor(sections, place, variation)
            case ComponentFraction():
                yield from _fraction(sections, place, variation)
            case ProductionRatio():
                share = sections.experiment.charged_fraction if sections.experiment is not None else 0.5
                if share in (0.0, 1.0):
                    what = f"acts on nothing: there are {'B0' if share == 0.0 else 'B+'} alone"
                    remedy = "Remove the variation, or set charged_fraction between 0 and 1."
                    yield Conflict(place, what, f"[experiment] charged_fraction = {share:g}", remedy=remedy)
            case ResidualEnergyScale():
                used = any("e_res" in one.cuts or "e_res" in one.axes for one in categories)
                if "category" in sections.whole and sections.selection is not None and not used:
                    what = "acts on nothing: no category cuts on e_res or has it as an axis"
                    yield Conflict(place, what, remedy="Remove the variation, or give [selection] e_res a max.")
            case SoftPionEfficiency():
                if "mode" in sections.whole and all(mode.charm == ("D",) for mode in modes):
                    what = "acts on nothing: no mode has a D*"
                    yield Conflict(place, what, remedy="Remove the variation.")
            case LeptonIdentificationEfficiency():
                if "category" in sections.whole and variation.lepton not in leptons:
                    what = "acts on nothing: no category has this lepton"
                    yield Conflict((*place, "lepton"), what, shown(variation.lepton), ", ".join(sorted(leptons)))
            case Misidentification():
                taken = {
                    sections.categories[name].lepton
                    for background in sections.backgrounds.values()
                    if background.misidentified
                    for name, expected in background.expected.items()
                    if expected and name in sections.categories
                }
                if any("tau" in mode.leptons and set(mode.tau_to) & set(PION_DECAYS) for mode in modes):
                    taken |= leptons
                if {"category", "background", "mode"} <= sections.whole and variation.lepton not in taken:
                    what = "acts on nothing: no background with misidentified = true in a category of this lepton"
                    yield Conflict((*place, "lepton"), what, shown(variation.lepton))


def nuisance_names(sections: Sections, variation: Variation) -> list[str]:
    """Names of the nuisance parameters that a table makes."""
    if isinstance(variation, FormFactorDirections) and (chosen := _chosen(sections, variation.set)) is not None:
        return [part.name for part in kept_directions(variation, chosen, _excited(sections))]
    return [variation.name]


def _excited(sections: Sections) -> tuple[str, ...]:
    return excited_families(charm for mode in sections.modes.values() for charm in mode.charm)


def _described(mode: Mode, transition: str) -> bool:
    return any(FORM_FACTORS_OF[charm] == transition for charm in mode.charm)


def _chosen(sections: Sections, transition: str) -> FormFactorSet | None:
    """The study's set; None if it is not sound, which is told elsewhere."""
    if sections.form_factors is None:
        return None
    return sound_set(getattr(sections.form_factors, transition), transition, sections.folder)


def _form_factor(
    sections: Sections, place: tuple[str, int], variation: FormFactor | FormFactorDirection | FormFactorDirections
) -> Iterator[Conflict]:
    chosen = _chosen(sections, variation.set)
    if chosen is None:
        return
    known = chosen[variation.set]
    if chosen.shared:
        yield from _moved_twice(sections, place, variation)
    idle = "acts on nothing: the fit's yields take up the normalisation of a rate"
    if isinstance(variation, FormFactor):
        given, allowed = variation.parameter, [name for name in known.names if name not in NORMALISATIONS]
        if given in NORMALISATIONS and given in known.names:
            yield Conflict((*place, "parameter"), idle, shown(given), ", ".join(allowed))
        elif given not in known.names:
            near = suggestion(given, allowed)
            what = "is no parameter of the set"
            yield Conflict((*place, "parameter"), what, shown(given), ", ".join(allowed), near)
        return
    if isinstance(variation, FormFactorDirections):
        if not kept_directions(variation, chosen, _excited(sections)):
            yield Conflict((*place, "set"), "acts on nothing: the set has no covariance", shown(variation.set))
        return
    shifts = directions(chosen, variation.set, variation.order, _excited(sections)).shifts
    if variation.direction > len(shifts):
        what = "is no direction of the set"
        yield Conflict((*place, "direction"), what, str(variation.direction), f"1 to {len(shifts)}")
        return
    moved = {name for name, shift in zip(known.names, shifts[variation.direction - 1], strict=True) if shift != 0}
    if moved <= NORMALISATIONS:
        yield Conflict((*place, "direction"), idle, f"{variation.direction}, along {', '.join(sorted(moved))}")


def _moved_twice(
    sections: Sections, place: tuple[str, int], variation: FormFactor | FormFactorDirection | FormFactorDirections
) -> Iterator[Conflict]:
    """D and D* have the same parameters here: what is varied under one name must not be varied under the other."""
    if variation.set != "Dst" or sections.form_factors is None:
        return
    if sections.form_factors.Dst != sections.form_factors.D:
        return
    for other in sections.variations.values():
        if isinstance(other, FormFactor | FormFactorDirection | FormFactorDirections) and other.set == "D":
            what = f"moves what {other.name} moves already: D and D* share the parameters of this set"
            remedy = 'Vary set = "D" alone: it acts on both.'
            yield Conflict((*place, "set"), what, shown(variation.set), remedy=remedy)
            return


def _fraction(sections: Sections, place: tuple[str, int], variation: ComponentFraction) -> Iterator[Conflict]:
    by_name = {mode.name: mode for mode in sections.modes.values()}
    mixed = [mode for mode in by_name.values() if variation.charm in mode.charm and len(mode.charm) > 1]
    for k, name in enumerate(variation.components or ()):
        where = (*place, "components", k)
        if name not in sections.components or (name not in by_name and "mode" in sections.whole):
            yield Conflict(where, "is no mode", shown(name), ", ".join(by_name), suggestion(name, by_name))
        elif name in by_name and by_name[name] not in mixed:
            wanted = ", ".join(mode.name for mode in mixed)
            yield Conflict(where, f"does not mix {variation.charm} with other charm", shown(name), wanted)
    if variation.components is None and not mixed and "mode" in sections.whole:
        what = "acts on nothing: no mode mixes it with other charm"
        yield Conflict((*place, "charm"), what, shown(variation.charm))
