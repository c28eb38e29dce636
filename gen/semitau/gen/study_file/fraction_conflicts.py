"""Rules of [branching_fractions]: what sums to one does, nothing sums to more, and each fraction acts on a decay."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from ..decays.branching_fractions import COMPLETE, LIGHT, PION_PAIR, TABLES, BranchingFractions
from ..decays.charm_semileptonic import muon_over_electron
from ..decays.double_charm import class_of, source_of
from ..decays.orbital_states import CHARM_STATES
from .fractions import BranchingFractionTables
from .sections import Conflict, Place, Sections
from .variations import BranchingFractionChange

TABLE = "branching_fractions"
TOLERANCE = 1e-6


def fraction_conflicts(sections: Sections) -> Iterator[Conflict]:
    """Everything that is wrong with the table."""
    if sections.fractions is None:
        return
    given, fractions = sections.fractions.by_particle, sections.fractions.fractions
    for particle in given:
        yield from _sums(particle, fractions)
    if {"mode", "double_charm"} <= sections.whole:
        yield from _idle(sections, sections.fractions)
        yield from _changes(sections, sections.fractions)


def _sums(particle: str, fractions: BranchingFractions) -> Iterator[Conflict]:
    given = fractions.given[particle]
    parts = {final: fractions.one(particle, final) for final in TABLES[particle]}
    # What the form factors give to a B, and what its other decays have, is no business of the file.
    counted = {f: one.value for f, one in parts.items() if one is not None and (f in given or particle[0] != "B")}
    total = sum(_times(particle, final) * value for final, value in counted.items())
    got = " + ".join(_term(particle, final, value) for final, value in counted.items())
    place: Place = (TABLE, particle)
    left_out = [final for final in counted if final not in given]
    if particle in COMPLETE:
        if abs(total - 1.0) > TOLERANCE:
            remedy = f"Give {_and(left_out)} as well: the tables have that." if left_out else "Change one of them."
            yield Conflict(place, "does not sum to one", f"{got} = {total:g}", "1", remedy)
        elif particle in CHARM_STATES and counted.get("D pi pi", 0.0) > 1.0 - TOLERANCE:
            yield Conflict((*place, "D pi pi"), "leaves no decay to one pion", "1", "below 1")
    elif total > 1.0 + TOLERANCE:
        rest = f" ({_and(left_out)} from the tables)" if left_out else ""
        yield Conflict(place, "sums to more than one", f"{got} = {total:g}{rest}", "at most 1")


def _times(particle: str, final: str) -> float:
    """How many decays a fraction stands for: both light leptons."""
    if final.endswith(LIGHT):
        return 2.0
    return 1.0 + muon_over_electron(particle, final[:-2]) if final.endswith(" e") else 1.0


def _term(particle: str, final: str, value: float) -> str:
    times = _times(particle, final)
    return f"{value:g}" if times == 1.0 else f"{times:.3g} × {value:g}"


def _and(names: list[str]) -> str:
    return " and ".join(f'"{name}"' for name in names)


def _idle(sections: Sections, tables: BranchingFractionTables) -> Iterator[Conflict]:
    remedy = "Remove it."
    used = _used(sections, tables)
    for particle, table in tables.by_particle.items():
        if particle in COMPLETE:
            if particle not in used:
                yield Conflict((TABLE, particle), "acts on nothing: nothing in the study decays so", remedy=remedy)
            continue
        for final in table:
            if final not in used.get(particle, set()):
                what = "acts on nothing: no component has this decay"
                yield Conflict((TABLE, particle, final), what, remedy=remedy)
    for family in tables.R:
        if not any("tau" in mode.leptons and family in mode.charm for mode in sections.modes.values()):
            what = "acts on nothing: no mode has this with a tau"
            yield Conflict((TABLE, "R", family), what, remedy=remedy)


def _changes(sections: Sections, tables: BranchingFractionTables) -> Iterator[Conflict]:
    """Variations of fractions: of what there is, by how much, and not beyond one."""
    used, fractions = _used(sections, tables), tables.fractions
    for i, variation in sections.variations.items():
        if not isinstance(variation, BranchingFractionChange):
            continue
        particle, final, place = variation.particle, variation.decay, ("variation", i)
        one, relative = fractions.one(particle, final), fractions.relative_error(particle, final, variation.relative)
        got = f"{particle} → {final}"
        if particle not in used or (particle not in COMPLETE and final not in used[particle]):
            yield Conflict((*place, "decay"), "acts on nothing: no component has this decay", got)
        elif one is None or one.value == 0.0:
            remedy = f'Give "{particle}"."{final}" in [branching_fractions].'
            yield Conflict((*place, "decay"), "has no value to change", got, remedy=remedy)
        elif relative == 0.0:
            remedy = f'Add relative, or an error to "{particle}"."{final}" in [branching_fractions].'
            yield Conflict(place, "does not say how far it goes", got, remedy=remedy)
        elif one.value * (1.0 + relative) >= 1.0 or relative >= 1.0:
            shown = f"{one.value:g} × {1.0 + relative:.4g} and {one.value:g} × {1.0 - relative:.4g}"
            yield Conflict(place, "leaves the range of a branching fraction", shown, "above 0 and below 1")


def _used(sections: Sections, tables: BranchingFractionTables) -> Mapping[str, set[str]]:
    """Decays of a study by particle, as far as fractions can be given for them."""
    used: dict[str, set[str]] = {}
    for particle, *finals in (*_of_modes(sections, tables), *_of_double_charm(sections)):
        used.setdefault(particle, set()).update(finals)
    return used


def _of_modes(sections: Sections, tables: BranchingFractionTables) -> Iterator[tuple[str, ...]]:
    for mode in sections.modes.values():
        for family in mode.charm:
            light = family + LIGHT
            for parent in mode.parents:
                yield parent, light
                if light not in tables.by_particle.get(parent, {}):  # then that of the other B is taken
                    yield "B0" if parent == "B+" else "B+", light
                if family == "D*":
                    yield (_vector(parent),)
            if family in CHARM_STATES:
                yield (family,)
                if _gives_pairs(family, tables.fractions):
                    yield (PION_PAIR,)
                if _gives_vector(family, tables.fractions):
                    yield ("D*0",)
                    yield ("D*+",)
        if "tau" in mode.leptons:
            yield "tau", *mode.tau_to


def _of_double_charm(sections: Sections) -> Iterator[tuple[str, ...]]:
    for item in sections.double_charms.values():
        for parent in item.parents:
            for final in TABLES[parent]:
                first, *beside = final.split(" ")
                if final.endswith(LIGHT) or first not in item.charm or class_of(tuple(beside)) not in item.beside:
                    continue
                yield parent, final
                if first == "D*":
                    yield (_vector(parent),)
                partner = beside[0]
                yield (partner,)
                # A charged D* gives a D+ or a D0.
                for meson in {"D*+": ("D+", "D0"), "D*0": ("D0",)}.get(partner, (partner.replace("*", ""),)):
                    sources = [f for f in TABLES[meson] if source_of(f.removesuffix(" e")) in item.sources]
                    yield meson, *sources
                    if "tau" in sources:
                        yield "tau", "e", "mu"


def _gives_vector(family: str, fractions: BranchingFractions) -> bool:
    if family in COMPLETE:
        return fractions.value(family, "D* pi") > 0.0
    return CHARM_STATES[family].to_vector > 0.0


def _gives_pairs(family: str, fractions: BranchingFractions) -> bool:
    if family in COMPLETE:
        return fractions.value(family, "D pi pi") > 0.0
    return CHARM_STATES[family].light == "pi pi"


def _vector(parent: str) -> str:
    """Species of the D* that a B gives."""
    return "D*0" if parent == "B+" else "D*+"
