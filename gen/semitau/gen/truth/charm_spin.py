"""How the helicities of a charmed meson add up in its decay: what the directions of its daughters know of its spin.

For charm helicities l, m the decay is described by the matrix G_lm = incoherent * delta_lm + coherent * sum of
conj(w_l) w_m, with one or two waves w_l = exp(i l chi) d_l(theta_V). The density of an event is sum over l, m of
conj(K_l) G_lm K_m. Helicities of a D* from a D** are summed.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from semitau.core.compiled import inlined

from ..decays.orbital_states import CharmState

# Values of CharmSpin.wave.
ONE_UNIT = 0  # spin 1 -> two particles without spin; with an incoherent part, D* -> D photon and D1 -> D* pion
TWO_UNITS = 1  # spin 2 -> two particles without spin
TWO_UNITS_TO_VECTOR = 2  # spin 2 -> D* pion: two waves, one for each linear polarisation of the D*


class CharmSpin(NamedTuple):
    """The matrix G of the module's docstring, up to a factor.

    wave : ONE_UNIT, TWO_UNITS or TWO_UNITS_TO_VECTOR.
    alignment : of a D* from a D**: 1 + alignment cos² is the density of its D about the flight of the D* in the D**
        frame; -1 for sin².
    """

    incoherent: float
    coherent: float
    wave: int
    alignment: float


ISOTROPIC = CharmSpin(1.0, 0.0, ONE_UNIT, 0.0)
TO_SPINLESS = CharmSpin(0.0, 1.0, ONE_UNIT, 0.0)
TO_PHOTON = CharmSpin(0.5, -0.5, ONE_UNIT, 0.0)
D_WAVE = CharmSpin(0.5, 1.5, ONE_UNIT, 3.0)
TENSOR_TO_SPINLESS = CharmSpin(0.0, 5.0, TWO_UNITS, 0.0)
TENSOR_TO_VECTOR = CharmSpin(0.0, 2.5, TWO_UNITS_TO_VECTOR, -1.0)


def spin_of_vector(photon: bool) -> CharmSpin:
    """Of a D* that decays to D photon or D pion."""
    return TO_PHOTON if photon else TO_SPINLESS


def spin_of_orbital(state: CharmState, to_vector: bool, two_pions: bool) -> CharmSpin:
    """Of a D** or continuum that decays to D* or D and one light meson or two pions.

    Spin and parity leave D2* -> D pion and D* pion one amplitude each. D1 -> D* pion is a D wave, as for light quarks
    of spin 3/2 in the heavy-quark limit (Phys. Rev. Lett. 66 (1991) 1130, from memory), D1' -> D* pion an S wave. Two
    pions, and systems without a resonance, are flat in phase space.
    """
    if not state.narrow or two_pions:
        return ISOTROPIC
    if state.spin == 1:
        return D_WAVE
    return TENSOR_TO_VECTOR if to_vector else TENSOR_TO_SPINLESS


def with_photon(spin: CharmSpin) -> CharmSpin:
    """Of a D** whose D* decays to D photon: helicity 0 of the D* gives sin² in the place of cos², 1 the contrary."""
    return spin._replace(alignment=-spin.alignment / (2.0 + spin.alignment))


_ROOT_HALF = float(np.sqrt(0.5))
_ROOT_THREE_HALVES = float(np.sqrt(1.5))
_ROOT_THREE = float(np.sqrt(3.0))


@inlined
def first_wave(wave: int, cos_v: float) -> tuple[float, float]:
    """d of helicity + and of helicity 0; that of - is minus the first. Wigner's functions of spin 1 and 2."""
    sine = np.sqrt((1.0 - cos_v) * (1.0 + cos_v))
    turned = _ROOT_THREE_HALVES * sine * cos_v if wave == TWO_UNITS else _ROOT_HALF * (2.0 * cos_v * cos_v - 1.0)
    straight = 1.5 * cos_v * cos_v - 0.5 if wave == TWO_UNITS else -_ROOT_THREE * sine * cos_v
    return (
        _ROOT_HALF * sine if wave == ONE_UNIT else turned,
        cos_v if wave == ONE_UNIT else straight,
    )


@inlined
def second_wave(wave: int, cos_v: float) -> float:
    """d of helicities + and -, which are the same; that of helicity 0 is none."""
    return _ROOT_HALF * cos_v if wave == TWO_UNITS_TO_VECTOR else 0.0
