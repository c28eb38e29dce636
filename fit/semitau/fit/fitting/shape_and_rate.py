"""Variations rearranged before a fit: shape apart from rate, one side mirrored on request.

Each takes templates and gives templates; nothing is done unless asked for.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import replace

import numpy as np
from numpy.typing import ArrayLike
from semitau.core.errors import InputError, Problem
from semitau.core.templates import Floats, Nuisance, TemplateSet

SIDES = ("plus", "minus")


def split_shape_and_rate(templates: TemplateSet, names: Iterable[str]) -> TemplateSet:
    """Each named nuisance as two of its own: `<name>_shape` and `<name>_rate`.

    The rate part moves a component's total over all categories by the factor that the variation does, and nothing
    else; the shape part keeps that total: plus = plus / r₊ with r₊ = Σ plus / Σ nominal, and the same for minus.
    With both at the same value they give back the variation, to first order.

    Raises InputError for a name that is no nuisance, or where a total is not positive, so that there is no rate.
    """
    names = tuple(names)
    if not names:
        return templates
    _refuse([*_unknown(templates, names), *_without_rate(templates, names)])
    rates = {
        (component.name, side, name): rate
        for component in templates.components
        for name in names
        for side in SIDES
        if (rate := _rate(templates, component.name, side, name)) is not None
    }
    nuisances: list[Nuisance] = []
    for nuisance in templates.nuisances:
        if nuisance.name not in names:
            nuisances.append(nuisance)
            continue
        for part in ("shape", "rate"):
            nuisances.append(replace(nuisance, name=f"{nuisance.name}_{part}", label=f"{nuisance.label} ({part})"))
    taken = [n.name for n in nuisances] + [p.name for p in templates.parameters]
    _refuse(
        Problem("the name of a part is taken", f"nuisance {name}", remedy="Rename the other parameter.")
        for name in dict.fromkeys(taken)
        if taken.count(name) > 1
    )
    changed = {}
    for (category, component), template in templates.templates.items():
        sides: dict[str, dict[str, Floats]] = {side: dict(getattr(template, side)) for side in SIDES}
        for name in names:
            if name not in template.plus:
                continue
            for side in SIDES:
                whole, rate = sides[side].pop(name), rates[component, side, name]
                sides[side][f"{name}_shape"] = whole / rate
                sides[side][f"{name}_rate"] = template.nominal * rate
        changed[category, component] = replace(template, plus=sides["plus"], minus=sides["minus"])
    return replace(templates, nuisances=tuple(nuisances), templates=changed)


def mirrored(templates: TemplateSet, keep: Mapping[str, str]) -> TemplateSet:
    """The side of each nuisance that is not kept becomes the mirror image of the other: 2 nominal - kept.

    keep : nuisance name -> "plus" or "minus". For variations of which only one side means something, e.g. another
    model of a background.

    Raises InputError for a name that is no nuisance, or another side.
    """
    if not keep:
        return templates
    _refuse(
        [
            *_unknown(templates, keep),
            *(
                Problem("no side of a variation", f"mirrored: {name}", got=repr(side), wanted="plus, minus")
                for name, side in keep.items()
                if side not in SIDES
            ),
        ]
    )
    changed = {}
    for place, template in templates.templates.items():
        sides: dict[str, dict[str, Floats]] = {side: dict(getattr(template, side)) for side in SIDES}
        for name, side in keep.items():
            if name in template.plus:
                other = "minus" if side == "plus" else "plus"
                sides[other][name] = mirror(template.nominal, sides[side][name])
        changed[place] = replace(template, plus=sides["plus"], minus=sides["minus"])
    return replace(templates, templates=changed)


def mirror(nominal: ArrayLike, side: ArrayLike) -> Floats:
    """The missing side of a variation: 2 nominal - side, so that the template is straight in the nuisance."""
    out: Floats = 2.0 * np.asarray(nominal, dtype=np.float64) - np.asarray(side, dtype=np.float64)
    return out


def one_sided(templates: TemplateSet) -> tuple[str, ...]:
    """Nuisances whose two sides shift the templates to the same side, mostly.

    Over all bins the part that is even in the nuisance is larger than the odd one, each in units of the expected
    Poisson error. A fit with such a nuisance has two minima or a flat one.
    """
    found = []
    for nuisance in templates.nuisances:
        odd, even = 0.0, 0.0
        for template in templates.templates.values():
            if nuisance.name in template.plus:
                up, down = (getattr(template, side)[nuisance.name] - template.nominal for side in SIDES)
                weight = 1.0 / np.maximum(template.nominal, 1.0)
                odd += float(np.sum(weight * (up - down) ** 2))
                even += float(np.sum(weight * (up + down) ** 2))
        if even > odd:
            found.append(nuisance.name)
    return tuple(found)


def _rate(templates: TemplateSet, component: str, side: str, name: str) -> float | None:
    """Σ side / Σ nominal of a component over all categories; None where the nuisance does nothing to it."""
    mine = [template for (_, owner), template in templates.templates.items() if owner == component]
    if not any(name in template.plus for template in mine):
        return None
    nominal = sum(float(template.nominal.sum()) for template in mine)
    varied = sum(float(getattr(template, side).get(name, template.nominal).sum()) for template in mine)
    return varied / nominal if nominal > 0 and varied > 0 else float("nan")


def _without_rate(templates: TemplateSet, names: Iterable[str]) -> Iterator[Problem]:
    for component in templates.components:
        for name in names:
            for side in SIDES:
                rate = _rate(templates, component.name, side, name)
                if rate is not None and not rate > 0:
                    yield Problem(
                        "shape and rate cannot be told apart: a total is not positive",
                        where=f"component {component.name}, {side}/{name}",
                        remedy="Leave this nuisance whole.",
                    )


def _unknown(templates: TemplateSet, names: Iterable[str]) -> Iterator[Problem]:
    known = [nuisance.name for nuisance in templates.nuisances]
    for name in names:
        if name not in known:
            yield Problem("there is no such nuisance", got=repr(name), wanted=", ".join(known) or "none")


def _refuse(problems: Iterable[Problem]) -> None:
    found = tuple(problems)
    if found:
        raise InputError(*found)
