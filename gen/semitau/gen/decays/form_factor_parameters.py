"""Which parameters each parametrisation has for each transition."""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping, Sequence

from semitau.core.errors import Problem

from . import bcl

TRANSITIONS = {"D": "B -> D", "Dst": "B -> D*", "Dss": "B -> D**"}
SHARED = "D+Dst"
"""Table of a set whose parameters are the same for B -> D and B -> D*."""

_HEAVY_QUARK = (
    *("V1(1)", "h(1)", "rho2", "chi2(1)", "chi2_slope", "chi3_slope", "eta(1)", "eta_slope", "m_b", "m_b-m_c"),
)
_ORBITAL = ("tau(1)", "tau_slope", "zeta(1)", "zeta_slope")
FIXED: dict[tuple[str, str], tuple[str, ...]] = {
    ("CLN", "D"): ("V1(1)", "rho2"),
    ("CLN", "Dst"): ("h(1)", "rho2", "R1(1)", "R2(1)", "R0(1)"),
    ("BCL", "D"): ("a0", "a1", "a2", "b0", "b1"),
    ("BCL", "Dst"): (*(f"{stem}_{n}" for stem in ("V", "A0", "A1") for n in range(bcl.TERMS)), "A12_2"),
    ("HQE", "D"): _HEAVY_QUARK,
    ("HQE", "Dst"): _HEAVY_QUARK,
    ("Isgur-Wise", "Dss"): _ORBITAL,
    ("Isgur-Wise-1/m", "Dss"): (*_ORBITAL, "tau1_hat", "tau2_hat", "zeta1_hat"),
}
"""Parametrisations with a fixed list of parameters."""

OPTIONAL: dict[str, tuple[str, ...]] = {
    "Dss": (
        *("D0*_mass", "D0*_width", "D1'_mass", "D1'_width"),
        *("continuum_slope", "continuum_scale"),
    )
}
"""By transition: parameters that a set may leave out."""

SERIES: dict[tuple[str, str], dict[str, int]] = {
    ("BGL", "D"): {"plus": 0, "zero": 0},
    ("BGL", "Dst"): {"g": 0, "f": 0, "F1": 1, "F2": 0},
}
"""Those with series of any length: STEM_n from this n on, without gaps."""

NORMALISATIONS = frozenset({"h(1)", "V1(1)", "tau(1)", "zeta(1)"})
"""Parameters that only normalise all form factors of their decay: shapes and ratios do not know them."""


def parametrisations(transition: str) -> tuple[str, ...]:
    """Those that describe a transition."""
    return tuple(sorted({name for name, described in (*FIXED, *SERIES) if described == transition}))


def parameter_problems(parametrisation: str, transition: str, names: Sequence[str]) -> Iterator[Problem]:
    """Parameters that are missing, unknown or there twice."""
    key = parametrisation, transition
    twice = sorted({name for name in names if names.count(name) > 1})
    if twice:
        yield Problem("has parameters twice", got=", ".join(twice))
    if key in FIXED:
        wanted = ", ".join(FIXED[key])
        missing = [name for name in FIXED[key] if name not in names]
        unknown = [name for name in names if name not in (*FIXED[key], *OPTIONAL.get(transition, ()))]
    else:
        stems = SERIES[key]
        wanted = ", ".join(f"{stem}_{first} {stem}_{first + 1} ..." for stem, first in stems.items())
        missing, unknown = [], []
        for stem, first in stems.items():
            last = max((_order(name, stem) for name in names), default=-1)
            missing += [f"{stem}_{n}" for n in range(first, max(last, first) + 1) if f"{stem}_{n}" not in names]
        for name in names:
            if not any(_order(name, stem) >= first for stem, first in stems.items()):
                unknown.append(name)
    what = f"{parametrisation} for {TRANSITIONS[transition]}"
    if missing:
        yield Problem(
            f"lacks parameters of {what}", got=", ".join(names) or "none", wanted=wanted, remedy=_add(missing)
        )
    if unknown:
        yield Problem(f"has parameters that {what} does not know", got=", ".join(unknown), wanted=wanted)


def value_problems(parametrisation: str, values: Mapping[str, float]) -> Iterator[Problem]:
    """Quark masses that no heavy-quark expansion can be made with."""
    if parametrisation != "HQE":
        return
    bottom, charm = values["m_b"], values["m_b"] - values["m_b-m_c"]
    if not (4.0 < bottom < 5.2 and 0.8 < charm < 2.2):
        got = f"m_b = {bottom:g}, m_c = {charm:g} GeV"
        yield Problem("has quark masses out of range", got=got, wanted="m_b from 4 to 5.2, m_c from 0.8 to 2.2 GeV")


def _order(name: str, stem: str) -> int:
    """n of STEM_n, -1 for another name."""
    match = re.fullmatch(rf"{re.escape(stem)}_(0|[1-9]\d?)", name)
    return int(match[1]) if match else -1


def _add(missing: Sequence[str]) -> str:
    return f"Add {', '.join(missing)}."
