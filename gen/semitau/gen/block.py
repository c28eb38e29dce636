"""Layout of a block of events: one flat float64 array, 256 lanes per row, row offsets known at compile time.

Constant offsets into one array let the compiler prove that rows do not overlap, so loops over the lanes vectorise.
Rows hold the B rest frame unless said otherwise; momenta in GeV. A stage reads some rows and writes others.
"""

from __future__ import annotations

LANES = 256

_names = """
Q2 NODE COS_THETA COS_V COS_CHI SIN_CHI TAU_E TAU_NX TAU_NY TAU_NZ
D_PX D_PY D_PZ D_E
SOFT_PX SOFT_PY SOFT_PZ SOFT_E
PION_PX PION_PY PION_PZ PION_E
LEPTON_PX LEPTON_PY LEPTON_PZ LEPTON_E
""".split()
