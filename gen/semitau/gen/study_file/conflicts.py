"""Rules that hold between tables of a study: names that must exist, exist once, and act on something.

Each check takes a `Sections`, which may lack tables that were broken by themselves, so that a study file with a
misspelt key still hears of its other problems. Places are paths of keys and indices as in the file.
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from semitau.core.errors import InputError

from ..decays.decay import WilsonCoefficients
from ..decays.form_factor_set import form_factor_sets
from .background_conflicts import background_conflicts
from .categories import written_out
from .chosen_sets import chosen_set, sets_describing, sound_set
from .double_charm_conflicts import double_charm_conflicts
from .fraction_conflicts import fraction_conflicts
from .idle_variations import idle_variations, nuisance_names
from .machine import FormFactorSource
from .names import CHARM_OF_RATIO, COEFFICIENTS, FORM_FACTORS_OF, LEPTONS, PION_DECAYS, RATIOS
from .quadratic_conflicts import quadratic_conflicts, shift_names
from .rules import shown, suggestion
from .sections import Conflict, Place, Sections, missing_file

RESERVED = {"data", "meta"}  # names within a template file
MOST_BINS = 100_000
LEAST_CURRENT = 1e-3  # below, decays with a tau have no rate to draw from, or that of the scalar and tensor alone


def conflicts(sections: Sections) -> list[Conflict]:
    """Everything that is wrong between the tables."""
    checks = (
        _names, _modes, _ratios, _categories, _pions, double_charm_conflicts, background_conflicts, fraction_conflicts,
        _form_factors, _couplings, _tensor_model, quadratic_conflicts, idle_variations, _fit,
    )  # fmt: skip
    return [conflict for check in checks for conflict in check(sections)]


def _names(sections: Sections) -> Iterator[Conflict]:
    """Each name once; nothing that a template file needs for itself."""
    named: list[tuple[Place, str, str]] = []
    named += [(("mode", i, "component"), mode.name, "component") for i, mode in sections.modes.items()]
    named += [(("double_charm", i, "component"), item.name, "component") for i, item in sections.double_charms.items()]
    named += [(("background", i, "component"), item.name, "component") for i, item in sections.backgrounds.items()]
    named += [
        (("variation", i, "name"), name, "variation")
        for i, item in sections.variations.items()
        for name in nuisance_names(sections, item)
    ]
    named += [(place, name, "variation") for place, name in shift_names(sections)]
    seen: set[tuple[str, str]] = set()
    for place, name, kind in named:
        if (kind, name) in seen:
            yield Conflict(place, f"names a {kind} that there is already", shown(name), remedy="Rename one of them.")
        seen.add((kind, name))
        if kind == "component" and name in RESERVED:
            yield Conflict(place, "is a name that template files keep for themselves", shown(name), remedy="Rename it.")
        if kind == "variation" and (name in (*RATIOS, *COEFFICIENTS) or name.startswith("yield_")):
            yield Conflict(place, "is a name that the fit keeps for itself", shown(name), remedy="Rename it.")


def _modes(sections: Sections) -> Iterator[Conflict]:
    """What modes follow exists; no decay belongs to two modes; something can be reconstructed."""
    by_name = {mode.name: mode for mode in sections.modes.values()}
    owner: dict[tuple[str, str, str], str] = {}
    for i, mode in sections.modes.items():
        if mode.follows is not None:
            other = by_name.get(mode.follows)
            place: Place = ("mode", i, "follows")
            if other is None and mode.follows not in sections.components:
                yield Conflict(
                    place, "names no mode", shown(mode.follows), ", ".join(by_name), suggestion(mode.follows, by_name)
                )
            elif other is mode:
                yield Conflict(place, "names the mode itself", shown(mode.follows))
            elif other is not None and (other.follows or other.scales_with):
                remedy = f"Follow what {other.name} follows."
                yield Conflict(place, "names a mode that follows another", shown(mode.follows), remedy=remedy)
        decays = [(p, c, lepton) for p in mode.parents for c in mode.charm for lepton in mode.leptons]
        for decay in decays:
            if (first := owner.setdefault(decay, mode.name)) != mode.name:
                text = f"{decay[0]} → {decay[1]} {decay[2]} ν"
                remedy = "Take it out of one of them."
                yield Conflict(("mode", i), f"holds a decay that is in {first} too", text, remedy=remedy)
                break
        if sections.detector is not None:
            tag = sections.detector.tag
            if not any(tag.kept(parent) for parent in mode.parents):
                remedy = "Raise [detector.tag] efficiency or remove the mode."
                if tag.flavour == "same" and any(tag.efficiency[parent] for parent in mode.parents):
                    remedy = "Take another flavour of the tag, or a mode with B0: only B0 mix."
                got = f"no tag for {' and '.join(mode.parents)}"
                yield Conflict(("mode", i), "is a component with no events", got, remedy=remedy)


def _ratios(sections: Sections) -> Iterator[Conflict]:
    """There is a ratio to measure, and each has its denominator."""
    if "mode" not in sections.whole or not sections.modes:
        return
    if not any(mode.scales_with for mode in sections.modes.values()):
        remedy = 'Give the tau mode of D or D* scales_with = "R_D" or "R_Dst".'
        yield Conflict(("mode",), "hold no ratio to measure", remedy=remedy)
    light = [mode for mode in sections.modes.values() if "tau" not in mode.leptons]
    by_name = {mode.name: mode for mode in light}
    for i, mode in sections.modes.items():
        if mode.scales_with is None:
            continue
        charm = CHARM_OF_RATIO[mode.scales_with]
        if mode.charm != (charm,):
            wanted = f'charm = ["{charm}"]'
            yield Conflict(("mode", i, "charm"), f"is not what {mode.scales_with} counts", shown(mode.charm), wanted)
            continue
        fitting = [other for other in light if other.charm == mode.charm and set(other.parents) >= set(mode.parents)]
        if mode.follows is not None:
            if mode.follows in by_name and by_name[mode.follows] not in fitting:
                what = f"is no denominator of {mode.scales_with}"
                wanted = f'a mode with charm = ["{charm}"], leptons e and mu, and the same parents'
                yield Conflict(("mode", i, "follows"), what, shown(mode.follows), wanted)
        elif len(fitting) != 1:
            names = ", ".join(other.name for other in fitting)
            what = f"has several denominators of {mode.scales_with}" if fitting else "has no denominator"
            missing = f'Add a mode with charm = ["{charm}"] and leptons = ["e", "mu"] for the same parents.'
            remedy = "Choose one with follows." if fitting else missing
            yield Conflict(("mode", i, "scales_with"), what, names, remedy=remedy)


def _categories(sections: Sections) -> Iterator[Conflict]:
    """Each category once; cuts leave some bins; not more bins than memory wants."""
    seen: set[str] = set()
    for i, table in sections.category_tables.items():
        place: Place = ("category", i)
        for category in written_out([table], sections.selection or {}):
            if category.name in seen:
                remedy = "Take the hadron or the lepton out of one of the tables."
                yield Conflict(place, f"makes the category {category.name} a second time", remedy=remedy)
            seen.add(category.name)
            if np.prod(category.shape) > MOST_BINS:
                got = " × ".join(map(str, category.shape)) + " bins"
                yield Conflict((*place, "observables"), "has too many bins", got, f"at most {MOST_BINS}")
                break
        without_star = [charm for charm in table.charm if "*" not in charm]
        for key in ("observables", "selection"):
            if without_star and "delta_m" in (table.observables if key == "observables" else table.selection):
                what, got = "needs a D*", ", ".join(without_star)
                remedy = "Give these hadrons a [[category]] of their own."
                yield Conflict((*place, key, "delta_m"), what, got, remedy=remedy)
        cuts = dict(sections.selection or {}) | table.selection
        for name, axis in table.observables.items():
            if (cut := cuts.get(name)) is None:
                continue
            low, high = axis.edges[0], axis.edges[-1]
            if (cut.min is not None and cut.min >= high) or (cut.max is not None and cut.max <= low):
                where: Place = (*place, "selection", name) if name in table.selection else ("selection", name)
                wanted = f"limits that meet the axis from {low:g} to {high:g}"
                yield Conflict(where, "removes every bin", cut.text, wanted)


def _pions(sections: Sections) -> Iterator[Conflict]:
    """Categories with pions: decays that fill them, and chances of identification that leave room for them."""
    for i, table in sections.category_tables.items():
        modes = sections.modes.values()
        for name, wanted in (("pi", PION_DECAYS), ("3pi", ("a1",))):
            filled = any("tau" in mode.leptons and set(wanted) & set(mode.tau_to) for mode in modes)
            if name in table.leptons and "mode" in sections.whole and not filled:
                what = f"has {name}, but no mode has a tau that goes there"
                remedy = f"Add {' or '.join(wanted)} to tau_to of a mode."
                yield Conflict(("category", i, "leptons"), what, shown(list(table.leptons)), remedy=remedy)
    if sections.detector is None or all(c.lepton in LEPTONS for c in sections.categories.values()):
        return
    identification = sections.detector.lepton_id
    for names in (("e", "e_as_mu", "e_as_pi"), ("mu", "mu_as_e", "mu_as_pi"), ("pi", "hadron_as_e", "hadron_as_mu")):
        curves = [getattr(identification, name) for name in names]
        momenta = sorted({p for curve in curves for p in curve.momentum})
        total = np.sum([curve.at(momenta) for curve in curves], axis=0)
        if total.max() > 1.0 + 1e-9:
            what = f"and {', '.join(names[1:])} add up to more than 1"
            got = f"{total.max():.4g} at {momenta[int(total.argmax())]:g} GeV"
            remedy = "Lower one of them: they are names for the same particle, where categories have pions."
            yield Conflict(("detector", "lepton_id", names[0]), what, got, "at most 1 together", remedy)


def _form_factors(sections: Sections) -> Iterator[Conflict]:
    """Sets exist and describe the decay they are chosen for."""
    if sections.form_factors is None:
        return
    for transition in dict.fromkeys(FORM_FACTORS_OF.values()):
        source, place = getattr(sections.form_factors, transition), ("form_factors", transition)
        if source.file is not None:
            yield from _own_set(sections, source, transition)
        elif source.name not in (known := sets_describing(transition)):
            name = source.name
            what = "is no form-factor set" if name not in form_factor_sets() else "does not describe this decay"
            yield Conflict(place, what, shown(name), ", ".join(known), suggestion(name, known))


def _tensor_model(sections: Sections) -> Iterator[Conflict]:
    """The tensor form factors of a heavy-quark expansion come from sets that are one."""
    if sections.wilson is None or sections.wilson.tensor != "HQE" or sections.form_factors is None:
        return
    used = {FORM_FACTORS_OF[charm] for mode in sections.modes.values() for charm in mode.charm} & {"D", "Dst"}
    for transition in sorted(used):
        source = getattr(sections.form_factors, transition)
        chosen = sound_set(source, transition, sections.folder)
        if chosen is not None and chosen[transition].parametrisation != "HQE":
            got = f"{transition} = {shown(str(source))}, a {chosen[transition].parametrisation} set"
            remedy = f'Choose form_factors.{transition} = "HQE-2021", or another tensor model.'
            yield Conflict(("wilson", "tensor"), "needs form factors of that expansion", got, remedy=remedy)


def _own_set(sections: Sections, source: FormFactorSource, transition: str) -> Iterator[Conflict]:
    if sections.folder is None:
        return
    try:
        chosen_set(source, transition, sections.folder)
    except InputError as error:
        for problem in error.problems:
            what = f"{problem.where}: {problem.what}" if problem.where else problem.what
            yield Conflict(("form_factors", transition, "file"), what, problem.got, problem.wanted, problem.remedy)


def _couplings(sections: Sections) -> Iterator[Conflict]:
    """Couplings act on a mode with their lepton, leave it a rate, and are no function of what does nothing."""
    taken = {lepton for mode in sections.modes.values() for lepton in mode.leptons}
    functions = sections.quadratic is not None and sections.quadratic.coefficients
    if "mode" in sections.whole and "tau" not in taken and functions:
        remedy = "Remove the table, or add a mode with a tau."
        yield Conflict(("quadratic",), "acts on nothing: no mode has a tau", remedy=remedy)
    if sections.wilson is None:
        return
    given, plain = sections.wilson.by_lepton, WilsonCoefficients()
    for lepton in LEPTONS:
        place: Place = ("wilson",) if lepton == "tau" else ("wilson", lepton)
        couplings, name = given[lepton], {"tau": "a tau", "e": "an electron", "mu": "a muon"}[lepton]
        asked = couplings != plain or (lepton == "tau" and given.tensor != "LO" and given.e == given.mu == plain)
        if asked and "mode" in sections.whole and lepton not in taken:
            remedy = f"Remove the table, or add a mode with {name}."
            yield Conflict(place, f"acts on nothing: no mode has {name}", remedy=remedy)
        left = 1.0 + couplings.VL
        if max(abs(left + couplings.VR), abs(left - couplings.VR)) < LEAST_CURRENT:
            got = f"1 + VL + VR = {left + couplings.VR:g}, 1 + VL - VR = {left - couplings.VR:g}"
            yield Conflict(place, "cancels the current of the Standard Model", got, "another VL or VR")
        if lepton != "tau" and given.tensor == "EOM" and couplings.T != 0.0:
            what = 'needs other tensor form factors: those of tensor = "EOM" are singular at small q²'
            yield Conflict((*place, "T"), what, f"{couplings.T:g}", remedy='Take tensor = "LO", or set T = 0.')


def _fit(sections: Sections) -> Iterator[Conflict]:
    """Injected ratios are measured; the data file is there."""
    if sections.fit is None:
        return
    if "mode" in sections.whole:
        measured = {mode.scales_with for mode in sections.modes.values() if mode.scales_with}
        for name in sections.fit.injected:
            if name not in measured:
                wanted = ", ".join(sorted(measured))
                yield Conflict(("fit", "injected", name), "is a ratio that no mode scales with", name, wanted)
    if sections.fit.data.file is not None and sections.folder is not None:
        yield from missing_file(("fit", "data", "file"), sections.fit.data.file, sections.folder)
