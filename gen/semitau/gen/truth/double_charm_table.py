"""What the truth kernel needs of one decay chain of double charm: numbers and tables, ready for compiled loops.

The B decays to the D(*) that is reconstructed and a system: a D_s(*), or a D(*) and a kaon. The mass of such a pair
follows flat phase space, whose density in m is the product of the two breakup momenta (particle data tables, review of
kinematics). Masses and q² run over a position t in [0, 1] by t² (3 - 2t), which tames both end points.
"""

from __future__ import annotations

from functools import lru_cache
from typing import NamedTuple

import numpy as np
import numpy.typing as npt
from semitau.core.constants import MASS

from ..decays.amplitudes import helicity_amplitudes
from ..decays.charm_semileptonic import CharmDecay, angular_terms, q2_density, q2_of_position
from ..decays.decay import Decay
from ..decays.double_charm import DoubleCharmChain
from .alias import interval_table
from .channel_table import visible_table
from .tau_decay import energy_range

Floats = npt.NDArray[np.float64]

INTERVALS = 256

# Values of DoubleCharmTable.source.
TO_TAU = 0  # D_s -> tau nu
TO_MUON = 1  # D_s -> mu nu
TO_HADRON = 2  # semileptonic


class DoubleCharmTable(NamedTuple):
    """Constants and tables of one decay chain. Masses in GeV; 0 for particles that it does not have.

    charm_mass, d_mass, soft_mass : D(*) that is reconstructed, its D, the soft particle of its D*.
    soft_photon : 1 if that is a photon. partner_mass : D_s(*) or the second D(*). meson_mass : what gives the lepton.
    kaon_mass : of a three-body decay. beside_mass, photon_share : pion of the partner's decay; share of photons.
    plus, minus, zero : helicity amplitudes of D* and D_s*, squares summing to 1; all zero if the D* is unpolarised.
    source : TO_TAU, TO_MUON or TO_HADRON. lepton_mass : of the charged lepton of the meson's decay.
    visible_mass, visible_span : lowest energy and range of the tau's daughter. hadron_mass : in TO_HADRON.
    system_table (256, 3) : mass of the system, for `draw_position`. q2_table (256, 3) : of the charm decay.
    angle_table (258, 3) : sine², cosine² and odd term of the lepton's angle at the nodes, the last one twice.
    visible_table (256, 3) : energy of the tau's daughter.
    """

    parent_mass: float
    charm_mass: float
    d_mass: float
    soft_mass: float
    soft_photon: float
    partner_mass: float
    meson_mass: float
    kaon_mass: float
    beside_mass: float
    photon_share: float
    plus: float
    minus: float
    zero: float
    source: int
    lepton_mass: float
    visible_mass: float
    visible_span: float
    hadron_mass: float
    system_table: Floats
    q2_table: Floats
    angle_table: Floats
    visible_table: Floats


def double_charm_table(chain: DoubleCharmChain) -> DoubleCharmTable:
    """Table of a decay chain."""
    plus, minus, zero = helicities(chain)
    source = TO_HADRON if chain.hadron else TO_TAU if chain.tau_to else TO_MUON
    decay = CharmDecay(chain.meson, chain.hadron, chain.lepton) if chain.hadron else None
    visible_mass = chain.m_visible if chain.tau_to else 0.0
    low, high = energy_range(visible_mass)
    return DoubleCharmTable(
        parent_mass=chain.m_parent,
        charm_mass=chain.m_charm,
        d_mass=chain.m_ground,
        soft_mass=chain.m_soft,
        soft_photon=float(chain.soft == "photon"),
        partner_mass=chain.m_partner,
        meson_mass=chain.m_meson,
        kaon_mass=chain.m_kaon,
        beside_mass=MASS["pi+" if chain.beside_soft == "charged_pion" else "pi0"]
        if chain.partner != chain.meson
        else 0.0,
        photon_share=chain.photon_share,
        plus=plus,
        minus=minus,
        zero=zero,
        source=source,
        lepton_mass=MASS[chain.lepton],
        visible_mass=visible_mass,
        visible_span=high - low,
        hadron_mass=MASS[chain.hadron] if chain.hadron else 0.0,
        system_table=_system_table(chain.m_parent, chain.m_charm, chain.m_partner, chain.m_kaon),
        q2_table=_q2_table(decay) if decay else np.zeros((1, 3)),
        angle_table=_angle_table(decay) if decay else np.zeros((1, 3)),
        visible_table=visible_table(visible_mass) if chain.tau_to else np.zeros((1, 3)),
    )


def helicities(chain: DoubleCharmChain) -> tuple[float, float, float]:
    """Amplitudes of the helicities +, -, 0 of the D* (and D_s*), squares summing to 1; zeros for an unpolarised D*.

    By factorisation a D_s* takes the place of the virtual W: B -> D* D_s* has the hadron current of B -> D* l nu at
    q² = m²(D_s*). A spinless D_s, or D, leaves helicity 0 only.
    """
    if chain.kaon:
        return 0.0, 0.0, 0.0
    if chain.family == "D" or chain.partner == chain.meson:
        return 0.0, 0.0, 1.0
    return factorised(chain.decay, chain.m_partner)


@lru_cache(maxsize=16)
def factorised(decay: Decay, mass: float) -> tuple[float, float, float]:
    """Normalised helicity amplitudes +, -, 0 of B -> D* and a vector meson of this mass (GeV)."""
    found = helicity_amplitudes(decay, np.array([mass**2]))
    values = np.array([found.J_plus[0], found.J_minus[0], found.J_zero[0]]).real
    plus, minus, zero = values / np.sqrt(np.sum(values**2))
    return float(plus), float(minus), float(zero)


def breakup(mass: npt.ArrayLike, one: npt.ArrayLike, other: npt.ArrayLike) -> Floats:
    """Momentum (GeV) of the two products in the rest frame of a particle of `mass`."""
    mass, one, other = np.asarray(mass), np.asarray(one), np.asarray(other)
    product = (mass - one - other) * (mass + one + other) * (mass - one + other) * (mass + one - other)
    return np.asarray(np.sqrt(np.maximum(product, 0.0)) / (2.0 * mass))


@lru_cache(maxsize=64)
def _system_table(parent: float, charm: float, partner: float, kaon: float) -> Floats:
    if kaon == 0.0:
        return np.zeros((1, 3))
    low, high = partner + kaon, parent - charm

    def density(t: Floats) -> Floats:
        mass = low + (high - low) * t * t * (3.0 - 2.0 * t)
        return breakup(parent, charm, mass) * breakup(mass, partner, kaon) * t * (1.0 - t)

    return interval_table(density, INTERVALS)


@lru_cache(maxsize=64)
def _q2_table(decay: CharmDecay) -> Floats:
    return interval_table(lambda t: q2_density(decay, q2_of_position(decay, t)) * t * (1.0 - t), INTERVALS)


@lru_cache(maxsize=64)
def _angle_table(decay: CharmDecay) -> Floats:
    t = np.minimum(np.arange(INTERVALS + 2) / INTERVALS, 1.0)
    return np.ascontiguousarray(np.stack(angular_terms(decay, q2_of_position(decay, t)), axis=-1))
