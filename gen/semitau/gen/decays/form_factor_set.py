"""Form-factor sets, shipped and brought: parameters with covariance, shifts of them, the functions they stand for."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from functools import lru_cache
from importlib.resources import files
from pathlib import Path

import numpy as np
from semitau.core.errors import InputError, Problem

from ..truth.kinematics import Floats
from . import bcl, bgl, cln, heavy_quark
from .form_factor_file import Member, read_members, toml_members
from .form_factor_parameters import SHARED, TRANSITIONS
from .form_factor_values import PseudoscalarFormFactors, VectorFormFactors

Values = PseudoscalarFormFactors | VectorFormFactors
Function = Callable[[Mapping[str, float], float, float, Floats], Values]

_FUNCTIONS: Mapping[tuple[str, str], Function] = {
    ("CLN", "D"): cln.pseudoscalar,
    ("CLN", "Dst"): cln.vector,
    ("BCL", "D"): bcl.pseudoscalar,
    ("BCL", "Dst"): bcl.vector,
    ("HQE", "D"): heavy_quark.pseudoscalar,
    ("HQE", "Dst"): heavy_quark.vector,
    ("BGL", "D"): bgl.pseudoscalar,
    ("BGL", "Dst"): bgl.vector,
}


@dataclass(frozen=True)
class FormFactors:
    """Form factors of one transition.

    transition : "D", "Dst" or "Dss" (the orbitally excited states).
    parametrisation : "CLN", "BCL", "BGL", "HQE" (heavy-quark expansion) or "Isgur-Wise".
    names, values, errors : parameters, in one order. correlation : their correlation matrix, row by row.
    source : where the numbers come from.
    """

    transition: str
    parametrisation: str
    names: tuple[str, ...]
    values: tuple[float, ...]
    errors: tuple[float, ...]
    correlation: tuple[tuple[float, ...], ...]
    source: str

    @property
    def parameters(self) -> dict[str, float]:
        """Name -> value."""
        return dict(zip(self.names, self.values, strict=True))

    @property
    def covariance(self) -> Floats:
        """(n, n) float64, in the order of `names`."""
        matrix: Floats = np.array(self.correlation) * np.outer(self.errors, self.errors)
        return matrix

    def __call__(self, parent_mass: float, charm_mass: float, q2: Floats) -> Values:
        """The form factors at q2 (GeV2) for these masses (GeV). InputError for D**, which has no such functions."""
        try:
            function = _FUNCTIONS[self.parametrisation, self.transition]
        except KeyError:
            raise InputError(
                Problem(f"{self.parametrisation} gives universal functions, not form factors of one state")
            ) from None
        return function(self.parameters, parent_mass, charm_mass, np.asarray(q2, dtype=np.float64))

    def shifted(self, shifts: Mapping[str, float]) -> FormFactors:
        """The same with numbers added to some parameters. InputError for an unknown one."""
        unknown = [name for name in shifts if name not in self.names]
        if unknown:
            rule, allowed = f"{TRANSITIONS[self.transition]} has no such parameter", ", ".join(self.names)
            raise InputError(*(Problem(rule, got=name, wanted=allowed) for name in unknown))
        pairs = zip(self.names, self.values, strict=True)
        return replace(self, values=tuple(value + float(shifts.get(name, 0.0)) for name, value in pairs))

    @property
    def directions(self) -> Floats:
        """(d, n): shifts of the parameters for one standard deviation along d independent directions.

        They are eigenvectors of the correlation matrix, times root of the eigenvalue and the errors, so that the sum of
        their outer products is the covariance whatever the units. Largest eigenvalue first; parameters that correlate
        with no other are directions of their own.
        """
        shifts: Floats = np.array(_directions(self.correlation)) * np.array(self.errors)
        return shifts

    def along(self, direction: int, n_sigma: float) -> FormFactors:
        """The same, moved by `n_sigma` along one of `directions` (counted from 0). InputError if there is none."""
        directions = self.directions
        if not 0 <= direction < len(directions):
            raise InputError(
                Problem("no such direction of the covariance", got=str(direction), wanted=f"0 to {len(directions) - 1}")
            )
        return self.shifted(dict(zip(self.names, n_sigma * directions[direction], strict=True)))


@lru_cache(maxsize=64)
def _directions(correlation: tuple[tuple[float, ...], ...]) -> tuple[tuple[float, ...], ...]:
    matrix = np.array(correlation)
    left, found = set(range(len(matrix))), []
    while left:
        block = {min(left)}
        while (grown := {j for i in block for j in range(len(matrix)) if matrix[i, j] != 0.0}) != block:
            block = grown
        left -= block
        index = sorted(block)
        eigenvalues, vectors = np.linalg.eigh(matrix[np.ix_(index, index)])
        for eigenvalue, vector in zip(eigenvalues, vectors.T, strict=True):
            vector = vector * np.sign(vector[np.argmax(np.abs(vector))])
            full = np.zeros(len(matrix))
            full[index] = np.sqrt(eigenvalue) * vector
            found.append((-eigenvalue, tuple(full.tolist())))
    return tuple(vector for _, vector in sorted(found, key=lambda pair: pair[0]))


@dataclass(frozen=True)
class FormFactorSet:
    """A named set: form factors of one or more transitions.

    shared : B -> D and B -> D* have one set of parameters (and equal numbers), so that a shift moves both.
    """

    name: str
    members: tuple[FormFactors, ...]
    shared: bool = False

    @property
    def transitions(self) -> tuple[str, ...]:
        return tuple(member.transition for member in self.members)

    @property
    def values(self) -> dict[str, dict[str, float]]:
        """Transition -> parameter -> value."""
        return {member.transition: member.parameters for member in self.members}

    @property
    def covariance(self) -> dict[str, Floats]:
        """Transition -> covariance matrix in the order of `values`."""
        return {member.transition: member.covariance for member in self.members}

    @property
    def source(self) -> str:
        return "; ".join(f"{TRANSITIONS[member.transition]}: {member.source}" for member in self.members)

    def __getitem__(self, transition: str) -> FormFactors:
        """The member for "D", "Dst" or "Dss". InputError if the set does not describe it."""
        for member in self.members:
            if member.transition == transition:
                return member
        raise InputError(
            Problem(
                f"the form-factor set {self.name} does not describe {TRANSITIONS.get(transition, transition)}",
                wanted=", ".join(self.transitions),
                remedy=f"Sets that do: {', '.join(_sets_describing(transition)) or 'none'}.",
            )
        )

    def shifted(self, shifts: Mapping[str, float], transition: str | None = None) -> FormFactorSet:
        """The same with numbers added to parameters of one transition.

        transition : may be left out if only one transition of the set has all these parameters, or if they share them.
        """
        if self.shared:
            return replace(self, members=tuple(member.shifted(shifts) for member in self.members))
        chosen = self._pick([m.transition for m in self.members if set(shifts) <= set(m.names)], transition)
        return self._with(self[chosen].shifted(shifts))

    def along(self, direction: int, n_sigma: float, transition: str | None = None) -> FormFactorSet:
        """The same, moved along a direction of the covariance of one transition; see `FormFactors.directions`."""
        if self.shared:
            return replace(self, members=tuple(member.along(direction, n_sigma) for member in self.members))
        return self._with(self[self._pick(list(self.transitions), transition)].along(direction, n_sigma))

    def _pick(self, fitting: list[str], transition: str | None) -> str:
        if transition is not None:
            return transition
        if len(fitting) == 1:
            return fitting[0]
        if not fitting and len(self.members) == 1:
            return self.transitions[0]
        raise InputError(
            Problem(
                f"the form-factor set {self.name} describes several transitions",
                wanted=", ".join(fitting or self.transitions),
                remedy="Say which one with `transition`; parameters: "
                + "; ".join(f"{m.transition}: {', '.join(m.names)}" for m in self.members)
                + ".",
            )
        )

    def _with(self, changed: FormFactors) -> FormFactorSet:
        members = (changed if member.transition == changed.transition else member for member in self.members)
        return replace(self, members=tuple(members))


def form_factor_sets() -> tuple[str, ...]:
    """Names of the shipped parameter sets, in alphabetical order."""
    folder = files(__package__) / "form_factor_sets"
    return tuple(sorted(entry.name[: -len(".toml")] for entry in folder.iterdir() if entry.name.endswith(".toml")))


@lru_cache(maxsize=32)
def form_factors(name: str) -> FormFactorSet:
    """The shipped set of this name: values, covariance, source and the functions. InputError if there is none."""
    if name not in form_factor_sets():
        raise InputError(Problem("no such form-factor set", got=str(name), wanted=", ".join(form_factor_sets())))
    place = files(__package__) / "form_factor_sets" / f"{name}.toml"
    return _assembled(name, toml_members(place.read_text(encoding="utf-8"), str(place)))


def read_form_factors(
    path: Path | str, parametrisation: str | None = None, transition: str | None = None
) -> FormFactorSet:
    """The set in a TOML or CSV file of one's own; see `form_factor_file` for the format.

    parametrisation, transition : of a CSV file, which does not say: "BCL", "D".

    Raises InputError with all that is wrong: no such file, parameters missing or unknown, a covariance that is not
    symmetric or not positive definite, with the numbers.
    """
    path = Path(path)
    return _assembled(str(path), read_members(path, parametrisation, transition))


def _assembled(name: str, members: list[Member]) -> FormFactorSet:
    found = []
    for table, parametrisation, names, values, covariance, source in members:
        errors = np.sqrt(np.diag(covariance))
        scale = np.outer(errors, errors)
        correlation = np.divide(covariance, scale, out=np.eye(len(names)), where=scale > 0.0)
        for transition in ("D", "Dst") if table == SHARED else (table,):
            found.append(
                FormFactors(
                    transition=transition,
                    parametrisation=parametrisation,
                    names=names,
                    values=tuple(values.tolist()),
                    errors=tuple(errors.tolist()),
                    correlation=tuple(map(tuple, correlation.tolist())),
                    source=source,
                )
            )
    return FormFactorSet(name, tuple(found), shared=any(member[0] == SHARED for member in members))


def _sets_describing(transition: str) -> list[str]:
    return [name for name in form_factor_sets() if transition in form_factors(name).transitions]
