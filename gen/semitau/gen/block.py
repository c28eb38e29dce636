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
# the axes (theta-hat, phi-hat, n) of the tau in the W* frame. Unset in channels without a tau.
# SOFT: pion or photon of the D*. PION: pion of a D**. TAU: the tau. LEPTON: the charged lepton (daughter) that is seen.
# Particles that a channel does not have are zero rows.
(
    Q2, NODE, COS_THETA, COS_V, COS_CHI, SIN_CHI,
    VISIBLE_E, VISIBLE_X, VISIBLE_Y, VISIBLE_Z,
    D_PX, D_PY, D_PZ, D_E,
    SOFT_PX, SOFT_PY, SOFT_PZ, SOFT_E,
    PION_PX, PION_PY, PION_PZ, PION_E,
    TAU_PX, TAU_PY, TAU_PZ, TAU_E,
    LEPTON_PX, LEPTON_PY, LEPTON_PZ, LEPTON_E,
) = (LANES * row for row in range(30))  # fmt: skip
TRUTH_ROWS = 30

# Rows that a truth kernel may scribble on; free for later stages afterwards.
(
    SCRATCH_0, SCRATCH_1, SCRATCH_2, SCRATCH_3, SCRATCH_4, SCRATCH_5, SCRATCH_6, SCRATCH_7,
    SCRATCH_8, SCRATCH_9, SCRATCH_10, SCRATCH_11, SCRATCH_12, SCRATCH_13, SCRATCH_14, SCRATCH_15,
    SCRATCH_16, SCRATCH_17, SCRATCH_18, SCRATCH_19, SCRATCH_20, SCRATCH_21, SCRATCH_22, SCRATCH_23,
) = (LANES * row for row in range(TRUTH_ROWS, TRUTH_ROWS + 24))  # fmt: skip
SCRATCH_END = TRUTH_ROWS + 24

# --- all -----------------------------------------------------------------------------------------------------------
ROWS = SCRATCH_END


def new_block() -> npt.NDArray[np.float64]:
    """A zeroed block: (ROWS * LANES,) float64."""
    return np.zeros(ROWS * LANES)
