"""The amplitudes of a decay taken apart by operator.

Amplitudes are linear in the Wilson coefficients, A(C) = sum of g_m(C) A_m with real amplitudes A_m: the left-handed
current with g = 1 + VL, the right-handed one, the scalar and the tensor. Those that are multiples of each other count
once (both currents in B -> D; SL and SR always, with opposite signs in B -> D*), so there are four at most, and a
density of events, a Hermitian form in g, has 16 real pieces at most, whatever the coefficients.

Where amplitudes are linear in shifts s_i of form-factor parameters, A = A_0 + sum of s_i A_i with g = (1, s_1, ...); at
complex couplings the real and the imaginary part of each A_i are operators of their own.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt

from .coefficients import part_of, with_values
from .decay import Decay, WilsonCoefficients
from .form_factor_shifts import Coefficient, shifted_decay

Floats = npt.NDArray[np.float64]
Complexes = npt.NDArray[np.complex128]

_NAMES = ("VL", "VR", "SL", "SR", "T")
_SAME = 1e-10


@dataclass(frozen=True, eq=False)
class Operators:
    """Amplitudes by operator, and how coefficients combine them.

    amplitudes : (operators, ...) real, as the function of the decay gives them.
    base : (operators,) strengths g at the couplings of the decay.
    strengths : (1 + k, operators) what g is without the k named parts, and its derivative with respect to each.
    """

    amplitudes: Floats
    base: Complexes
    strengths: Complexes

    @property
    def number(self) -> int:
        return len(self.amplitudes)

    @property
    def imaginary(self) -> bool:
        """Whether the imaginary parts of interferences matter."""
        return bool(np.any(self.strengths.imag) or np.any(self.base.imag))

    @property
    def pieces(self) -> tuple[Complexes, ...]:
        """Hermitian matrices (operators, operators) that a density is a sum of, in the order of the kernel: the real
        parts of all pairs m <= n, then, if they matter, the imaginary parts of all pairs m < n."""
        found = []
        for imaginary in (False, True) if self.imaginary else (False,):
            for m in range(self.number):
                for n in range(m + imaginary, self.number):
                    matrix = np.zeros((self.number, self.number), dtype=np.complex128)
                    matrix[m, n] = 1j if imaginary else 1.0
                    matrix[n, m] = np.conj(matrix[m, n])
                    found.append(matrix)
        return tuple(found)

    @property
    def drawn(self) -> Floats:
        """(pieces,) what each piece counts in the density at the couplings of the decay."""
        return np.array([(self.base.conj() @ piece @ self.base).real for piece in self.pieces])

    @property
    def contraction(self) -> Floats:
        """(pairs, pieces) what each piece counts in the pieces of the quadratic form in (one, *names)."""
        rows = [
            [
                (self.strengths[a].conj() @ piece @ self.strengths[b]).real * (1.0 if a == b else 2.0)
                for piece in self.pieces
            ]
            for a in range(len(self.strengths))
            for b in range(a, len(self.strengths))
        ]
        return np.array(rows)


def operators(decay: Decay, names: Sequence[str], amplitudes_of: Callable[[Decay], Complexes]) -> Operators:
    """The operators that matter for a decay and the named parts ("SR", "Im_T") of its coefficients.

    amplitudes_of : amplitudes of a decay, any shape; they are linear in its couplings.
    """
    plain = amplitudes_of(replace(decay, wilson=WilsonCoefficients()))
    found = [plain.real]
    multiples = {"VL": (0, 1.0)}
    for name in _NAMES[1:]:
        added = (amplitudes_of(replace(decay, wilson=WilsonCoefficients(**{name: 1.0}))) - plain).real
        for place, known in enumerate(found):
            # No BLAS: it wakes threads for arrays of this size, which costs a thousand times the product.
            factor = float((known * added).sum() / (known * known).sum())
            if np.abs(added - factor * known).max() <= _SAME * np.abs(added).max():
                multiples[name] = place, factor
                break
        else:
            multiples[name] = len(found), 1.0
            found.append(added)

    def strength(couplings: WilsonCoefficients) -> Complexes:
        g = np.zeros(len(found), dtype=np.complex128)
        g[0] = 1.0
        for name, (place, factor) in multiples.items():
            g[place] += factor * getattr(couplings, name)
        return g

    rest = strength(with_values(decay.couplings, dict.fromkeys(names, 0.0)))
    slopes = np.zeros((len(names), len(found)), dtype=np.complex128)
    for row, name in enumerate(names):
        coefficient, unit = part_of(name)
        place, factor = multiples[coefficient]
        slopes[row, place] = unit * factor
    base, strengths = strength(decay.couplings), np.vstack([rest[None], slopes])
    at_work = np.any(strengths != 0.0, axis=0) | (base != 0.0)
    return Operators(np.stack(found)[at_work], base[at_work], strengths[:, at_work])


SPAN = 4.0
"""Standard deviations over which the slope of amplitudes is taken: they are linear, and rounding counts less."""


def shift_operators(
    decay: Decay, coefficients: Sequence[Coefficient], amplitudes_of: Callable[[Decay], Complexes]
) -> Operators:
    """The same for coefficients that shift form factors; those that do not act on the decay have no strengths."""
    plain = amplitudes_of(decay)
    slopes = [(amplitudes_of(shifted_decay(decay, [(one, SPAN)])) - plain) / SPAN for one in coefficients]
    found, strengths = [], []
    for row, amplitudes in enumerate([plain, *slopes]):
        for part, unit in ((amplitudes.real, 1.0), (amplitudes.imag, 1j)):
            if part.any():
                found.append(part)
                strengths.append(unit * np.eye(1 + len(slopes))[row])
    columns = np.array(strengths, dtype=np.complex128).T
    return Operators(np.stack(found), columns[0], columns)
