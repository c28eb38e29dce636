"""From measured momenta to one candidate an event: its category and its observables, in one scenario.

The D takes its known mass, a D* its own one; the signal B flies against the tag with half the nominal collision energy.
mm2 = (p_B - p_charm - p_lepton)², q2 = (p_B - p_charm)², el is the lepton energy in the rest frame of p_B; p_lepton and
p_charm are laboratory momenta. Nothing true enters but the kind of the decay chain.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
import numpy.typing as npt
from semitau.core.compiled import kernel

from .. import block as row
from ..block import LANES
from ..truth.boost import boosted
from .charm_decay import PION
from .collider import boosted_along_z
from .detector import CHARGED_PION, NEUTRAL_PION, NO_PARTICLE, Beams, Chain
from .measuring import NEUTRAL_PION_MASS

Floats = npt.NDArray[np.float64]

_FAR = 1e9

_CHARM_X, _CHARM_Y, _CHARM_Z, _CHARM_MASS, _USED = (
    row.SCRATCH_0,
    row.SCRATCH_1,
    row.SCRATCH_2,
    row.SCRATCH_3,
    row.SCRATCH_4,
)


class Scenario(NamedTuple):
    """What may be shifted without drawing anew: factors on the width of the tag momentum, on track momenta, and on the
    residual energy."""

    tag_width: float
    momentum: float
    residual: float


class Windows(NamedTuple):
    """Limits of delta_m in GeV that a D* candidate must meet, by the charge of the D* and the lepton (or pions).

    pions : 0 if no category has pions.
    """

    pions: int
    neutral_e_min: float
    neutral_e_max: float
    neutral_mu_min: float
    neutral_mu_max: float
    neutral_pi_min: float
    neutral_pi_max: float
    neutral_3pi_min: float
    neutral_3pi_max: float
    charged_e_min: float
    charged_e_max: float
    charged_mu_min: float
    charged_mu_max: float
    charged_pi_min: float
    charged_pi_max: float
    charged_3pi_min: float
    charged_3pi_max: float


@kernel
def reconstruct(y: Floats, chain: Chain, beams: Beams, scenario: Scenario, windows: Windows) -> None:
    """Fill the observables and CATEGORY of the block in one scenario.

    CATEGORY is 2 * charm + lepton with charm in (D0, D+, D*0, D*+) and lepton in (e, mu), or 8 + 2 * charm + pions with
    pions in (one, three), or -1: the charges of charm, lepton and tag do not add up, or a charged particle is left.
    DELTA_M is 0 without a D*.
    """
    choose_charm(y, chain, scenario, windows)
    form_observables(y, beams, scenario)


@kernel
def choose_charm(y: Floats, chain: Chain, scenario: Scenario, windows: Windows) -> None:
    """A D* if a soft candidate puts delta_m into its window (the one nearest to the known value), else the D alone.

    A D* candidate that misses the window is none: the event goes on as a D if the charges allow it.
    """
    scale = scenario.momentum
    d_mass = chain.d_mass
    charged_d = float(chain.charged_d)
    soft_charged = 1.0 if chain.soft == CHARGED_PION else 0.0
    soft_mass = PION if chain.soft == CHARGED_PION else (NEUTRAL_PION_MASS if chain.soft == NEUTRAL_PION else 0.0)
    soft_neutral = 0.0 if chain.soft == NO_PARTICLE else 1.0 - soft_charged
    soft_scale = scale if chain.soft == CHARGED_PION else 1.0
    # The tag that fits the charge of D plus true soft particle: charged only for a D*0.
    fitting_tag = 1.0 if charged_d == 0.0 and soft_charged == 0.0 else 0.0
    neutral_nominal = chain.dst0_mass - d_mass
    charged_nominal = chain.dstp_mass - d_mass
    for i in range(LANES):
        px, py, pz = (
            scale * y[row.MEASURED_D_PX + i],
            scale * y[row.MEASURED_D_PY + i],
            scale * y[row.MEASURED_D_PZ + i],
        )
        e = np.sqrt(d_mass * d_mass + px * px + py * py + pz * pz)
        muon = y[row.FLAVOUR + i] == 1.0
        star_charge = 1.0 if charged_d + (1.0 - y[row.TAG_CHARGED + i]) > 0.0 else 0.0
        charged = star_charge == 1.0
        nominal = charged_nominal if charged else neutral_nominal
        electron_low = windows.charged_e_min if charged else windows.neutral_e_min
        electron_high = windows.charged_e_max if charged else windows.neutral_e_max
        muon_low = windows.charged_mu_min if charged else windows.neutral_mu_min
        muon_high = windows.charged_mu_max if charged else windows.neutral_mu_max
        low = muon_low if muon else electron_low
        high = muon_high if muon else electron_high
        if windows.pions == 1:
            three = y[row.FLAVOUR + i] == 3.0
            pion_low = windows.charged_pi_min if charged else windows.neutral_pi_min
            pion_high = windows.charged_pi_max if charged else windows.neutral_pi_max
            three_low = windows.charged_3pi_min if charged else windows.neutral_3pi_min
            three_high = windows.charged_3pi_max if charged else windows.neutral_3pi_max
            pion_low = three_low if three else pion_low
            pion_high = three_high if three else pion_high
            low = pion_low if y[row.FLAVOUR + i] >= 2.0 else low
            high = pion_high if y[row.FLAVOUR + i] >= 2.0 else high

        sx = soft_scale * y[row.MEASURED_SOFT_PX + i]
        sy = soft_scale * y[row.MEASURED_SOFT_PY + i]
        sz = soft_scale * y[row.MEASURED_SOFT_PZ + i]
        se = np.sqrt(soft_mass * soft_mass + sx * sx + sy * sy + sz * sz)
        # m² - m_D², and from it m - m_D without a difference of large numbers.
        gain = soft_mass * soft_mass + 2.0 * (e * se - px * sx - py * sy - pz * sz)
        true_delta = gain / (np.sqrt(d_mass * d_mass + gain) + d_mass)
        is_true = (
            (y[row.SOFT_FOUND + i] == 1.0)
            & (y[row.TAG_CHARGED + i] == fitting_tag)
            & (true_delta >= low)
            & (true_delta < high)
        )
        true_distance = np.abs(true_delta - nominal) if is_true else _FAR

        random_delta = y[row.RANDOM_DELTA_M + i]
        random_mass = y[row.RANDOM_MASS + i]
        re = 0.5 * (random_delta * (2.0 * d_mass + random_delta) - random_mass * random_mass) / d_mass
        square = re * re - random_mass * random_mass
        rp = np.sqrt(square if square > 0.0 else 0.0)
        rx, ry, rz, _ = boosted(
            rp * y[row.RANDOM_X + i], rp * y[row.RANDOM_Y + i], rp * y[row.RANDOM_Z + i], re,
            e / d_mass, px / d_mass, py / d_mass, pz / d_mass,
        )  # fmt: skip
        is_random = (
            (random_delta > 0.0)
            & (charged_d * y[row.TAG_CHARGED + i] == 0.0)
            & (random_delta >= low)
            & (random_delta < high)
        )
        random_distance = np.abs(random_delta - nominal) if is_random else _FAR

        use_true = 1.0 if is_true & (true_distance <= random_distance) else 0.0
        use_random = 1.0 if is_random & (random_distance < true_distance) else 0.0
        star = use_true + use_random
        unused = (1.0 - use_true) * y[row.SOFT_FOUND + i]
        alone = 1.0 if y[row.TAG_CHARGED + i] == 1.0 - charged_d else 0.0
        left = (y[row.EXTRA + i] + soft_charged * unused > 0.0) | (star + alone == 0.0)
        charm = 2.0 + star_charge if star > 0.0 else charged_d
        flavour = y[row.FLAVOUR + i]
        flavour = flavour + 6.0 if flavour >= 2.0 else flavour
        y[row.CATEGORY + i] = -1.0 if left else 2.0 * charm + flavour
        y[_CHARM_X + i] = px + use_true * sx + use_random * rx
        y[_CHARM_Y + i] = py + use_true * sy + use_random * ry
        y[_CHARM_Z + i] = pz + use_true * sz + use_random * rz
        y[_CHARM_MASS + i] = d_mass + star * nominal
        y[row.DELTA_M + i] = use_true * true_delta + use_random * random_delta
        left_over = y[row.LEFT_OVER + i] + soft_neutral * unused * y[row.LAB_SOFT_E + i]
        y[row.E_RES + i] = scenario.residual * left_over


@kernel
def form_observables(y: Floats, beams: Beams, scenario: Scenario) -> None:
    """MM2, Q2_MEASURED, EL, P_LEPTON and P_CHARM from tag, charm and lepton, all as measured."""
    half = 0.5 * beams.energy
    scale, width = scenario.momentum, scenario.tag_width
    for i in range(LANES):
        bx = y[row.TAG_PX + i] + width * y[row.TAG_SHIFT_X + i]
        by = y[row.TAG_PY + i] + width * y[row.TAG_SHIFT_Y + i]
        bz = y[row.TAG_PZ + i] + width * y[row.TAG_SHIFT_Z + i]
        parent_square = half * half - bx * bx - by * by - bz * bz
        bz, be = boosted_along_z(bz, half, beams.beta, beams.gamma)

        cx, cy, cz, cm = y[_CHARM_X + i], y[_CHARM_Y + i], y[_CHARM_Z + i], y[_CHARM_MASS + i]
        charm_square = cx * cx + cy * cy + cz * cz
        ce = np.sqrt(cm * cm + charm_square)

        lx = scale * y[row.MEASURED_LEPTON_PX + i]
        ly = scale * y[row.MEASURED_LEPTON_PY + i]
        lz = scale * y[row.MEASURED_LEPTON_PZ + i]
        lepton_square = lx * lx + ly * ly + lz * lz
        le = np.sqrt(y[row.LEPTON_MASS2 + i] + lepton_square)

        qx, qy, qz, qe = bx - cx, by - cy, bz - cz, be - ce
        y[row.Q2_MEASURED + i] = qe * qe - qx * qx - qy * qy - qz * qz
        mx, my, mz, me = qx - lx, qy - ly, qz - lz, qe - le
        y[row.MM2 + i] = me * me - mx * mx - my * my - mz * mz
        y[row.EL + i] = (be * le - bx * lx - by * ly - bz * lz) / np.sqrt(parent_square)
        y[row.P_LEPTON + i] = np.sqrt(lepton_square)
        y[row.P_CHARM + i] = np.sqrt(charm_square)
