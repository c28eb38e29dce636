"""Layout of a block of events: one flat float64 array, 256 lanes per row, row offsets known at compile time.

Constant offsets into one array let the compiler prove that rows do not overlap, so loops over the lanes vectorise:
event i of row Q2 is x[Q2 + i]. Rows hold the B rest frame unless said otherwise; momenta in GeV. A stage reads some
rows and writes others.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

LANES = 256

# --- truth ---------------------------------------------------------------------------------------------------------
# Q2: (p_B - p_charm)². NODE: the same as a position in the amplitude tables (node number plus fraction).
# COS_THETA: lepton direction in the W* frame against the W* flight. COS_V: D (or D*) direction in the charm frame
# against the charm flight. COS_CHI, SIN_CHI: azimuth between the two decay planes.
# VISIBLE_E: energy of the charged daughter of the tau in the tau rest frame; VISIBLE_X, _Y, _Z: its unit direction on
# the axes (theta-hat, phi-hat, n) of the tau in the W* frame. POLARISATION: of the tau on these axes. All these are
# unset in channels without a tau. For a tau that gives several pions, VISIBLE_X, _Y, _Z is the polarimeter vector.
# SOFT: pion or photon of the D*. PION: pion of a D** (or eta). PION2: its second pion. TAU: the tau. LEPTON: the
# charged lepton (daughter) that is seen. PARTNER1, PARTNER2: other pions of a tau: the pi0 of a rho; of three pions the
# single charged one or the two of like charge come first. Particles that a channel does not have are zero rows.
# CHARM_MASS: of the charm hadron of the B decay. MASS_POINT: which of the amplitude tables of a broad state an event
# takes. LIGHT_MASS: what recoils against the D or D* in its decay, a particle or a pair of pions.
(
    Q2, NODE, COS_THETA, COS_V, COS_CHI, SIN_CHI,
    VISIBLE_E, VISIBLE_X, VISIBLE_Y, VISIBLE_Z, POLARISATION_X, POLARISATION_Y, POLARISATION_Z,
    D_PX, D_PY, D_PZ, D_E,
    SOFT_PX, SOFT_PY, SOFT_PZ, SOFT_E,
    PION_PX, PION_PY, PION_PZ, PION_E,
    PION2_PX, PION2_PY, PION2_PZ, PION2_E,
    TAU_PX, TAU_PY, TAU_PZ, TAU_E,
    LEPTON_PX, LEPTON_PY, LEPTON_PZ, LEPTON_E,
    CHARM_MASS, MASS_POINT, LIGHT_MASS,
    PARTNER1_PX, PARTNER1_PY, PARTNER1_PZ, PARTNER1_E,
    PARTNER2_PX, PARTNER2_PY, PARTNER2_PZ, PARTNER2_E,
) = (LANES * row for row in range(48))  # fmt: skip
TRUTH_ROWS = 48

# Rows that a truth kernel may scribble on; free for later stages afterwards.
(
    SCRATCH_0, SCRATCH_1, SCRATCH_2, SCRATCH_3, SCRATCH_4, SCRATCH_5, SCRATCH_6, SCRATCH_7,
    SCRATCH_8, SCRATCH_9, SCRATCH_10, SCRATCH_11, SCRATCH_12, SCRATCH_13, SCRATCH_14, SCRATCH_15,
    SCRATCH_16, SCRATCH_17, SCRATCH_18, SCRATCH_19, SCRATCH_20, SCRATCH_21, SCRATCH_22, SCRATCH_23,
) = (LANES * row for row in range(TRUTH_ROWS, TRUTH_ROWS + 24))  # fmt: skip
SCRATCH_END = TRUTH_ROWS + 24

# --- response ------------------------------------------------------------------------------------------------------
# Laboratory frame unless said otherwise. BOOST_*: signal B in the centre-of-mass frame, gamma and gamma*beta vector.
# TRACK*: true momenta of the charged daughters of the D (the third is zero for a D0). LAB_LEPTON: true momentum.
# FLAVOUR: what stands in for the lepton, 0 electron, 1 muon, 2 charged pion, 3 three charged pions. LAB_PARTNER*: true
# momenta of the PARTNER rows, in channels that have them.
(
    BOOST_GAMMA, BOOST_X, BOOST_Y, BOOST_Z,
    TRACK1_PX, TRACK1_PY, TRACK1_PZ, TRACK2_PX, TRACK2_PY, TRACK2_PZ, TRACK3_PX, TRACK3_PY, TRACK3_PZ,
    LAB_LEPTON_PX, LAB_LEPTON_PY, LAB_LEPTON_PZ, LAB_LEPTON_E,
    FLAVOUR,
    LAB_PARTNER1_PX, LAB_PARTNER1_PY, LAB_PARTNER1_PZ, LAB_PARTNER1_E,
    LAB_PARTNER2_PX, LAB_PARTNER2_PY, LAB_PARTNER2_PZ, LAB_PARTNER2_E,
) = (LANES * row for row in range(SCRATCH_END, SCRATCH_END + 26))  # fmt: skip
FOUND_END = SCRATCH_END + 26

# Rows of events whose D and lepton were found. MEASURED_*: sums of smeared momenta at the nominal momentum scale.
# TAG_*: true momentum of the signal B in the centre-of-mass frame; TAG_SHIFT_*: what the nominal resolution adds to it.
# TAG_CHARGED: 1 if the tag looks like a charged B. SOFT_EFFICIENCY: chance that the soft particle is found, 0 where it
# cannot be; SOFT_FOUND: 1 if it was. EXTRA: 1 if the charged pion of a D** was seen as a track.
# LEPTON_MASS2: squared mass that goes with MEASURED_LEPTON.
# RANDOM_*: delta_m of a random soft candidate (0: there is none), its mass, and its direction in the D frame.
(
    LAB_SOFT_PX, LAB_SOFT_PY, LAB_SOFT_PZ, LAB_SOFT_E, LAB_PION_PX, LAB_PION_PY, LAB_PION_PZ, LAB_PION_E,
    MEASURED_D_PX, MEASURED_D_PY, MEASURED_D_PZ, MEASURED_LEPTON_PX, MEASURED_LEPTON_PY, MEASURED_LEPTON_PZ,
    MEASURED_SOFT_PX, MEASURED_SOFT_PY, MEASURED_SOFT_PZ,
    TAG_PX, TAG_PY, TAG_PZ, TAG_SHIFT_X, TAG_SHIFT_Y, TAG_SHIFT_Z, TAG_CHARGED, TAG_WRONG,
    SOFT_EFFICIENCY, SOFT_FOUND, EXTRA, LEFT_OVER,
    RANDOM_DELTA_M, RANDOM_MASS, RANDOM_X, RANDOM_Y, RANDOM_Z, LEPTON_MASS2,
) = (LANES * row for row in range(FOUND_END, FOUND_END + 35))  # fmt: skip
MEASURED_END = FOUND_END + 35

# One scenario of the reconstruction. CATEGORY: 2 * charm (D0, D+, D*0, D*+) + FLAVOUR, and 6 more for pions; -1 if
# there is no candidate.
(
    MM2, Q2_MEASURED, EL, P_LEPTON, P_CHARM, E_RES, DELTA_M, CATEGORY,
) = (LANES * row for row in range(MEASURED_END, MEASURED_END + 8))  # fmt: skip
SCENARIO_END = MEASURED_END + 8

# --- double charm --------------------------------------------------------------------------------------------------
# What a B decay to two charmed mesons has beside the D(*) and the lepton, in the rest frame of the B; zero if absent.
# BESIDE_SOFT: pion or photon of a D_s* or D*. KAON: of B -> D(*) D(*) K. HADRON: what comes with the lepton pair of a
# charm decay. OTHERS_SEEN: 1 if a charged product of these made a track. OTHERS_LEFT: energy that neutral ones leave.
(
    BESIDE_SOFT_PX, BESIDE_SOFT_PY, BESIDE_SOFT_PZ, BESIDE_SOFT_E,
    KAON_PX, KAON_PY, KAON_PZ, KAON_E, HADRON_PX, HADRON_PY, HADRON_PZ, HADRON_E,
    OTHERS_SEEN, OTHERS_LEFT,
) = (LANES * row for row in range(SCENARIO_END, SCENARIO_END + 14))  # fmt: skip
DOUBLE_CHARM_END = SCENARIO_END + 14

# --- photons of the lepton -----------------------------------------------------------------------------------------
# PHOTONS: how many there are, in channels that radiate. PHOTON_PX and what follows: px, py, pz, E of each in the rest
# frame of the B, later in the laboratory.
MOST_PHOTONS = 6
PHOTONS = LANES * DOUBLE_CHARM_END
PHOTON_PX = PHOTONS + LANES
RADIATION_END = DOUBLE_CHARM_END + 1 + 4 * MOST_PHOTONS

# --- all -----------------------------------------------------------------------------------------------------------
ROWS = RADIATION_END


def new_block() -> npt.NDArray[np.float64]:
    """A zeroed block: (ROWS * LANES,) float64."""
    return np.zeros(ROWS * LANES)
