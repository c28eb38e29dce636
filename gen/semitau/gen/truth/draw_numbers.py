"""Numbers of the random draws of a true decay (0 to 49; see core/streams.py for how they are shared out).

The numbers are part of the result: changing one changes every event.
"""

from __future__ import annotations

import numpy as np

Q2_INTERVAL = np.uint64(0)
Q2_INSIDE = np.uint64(1)
Q2_SIDE = np.uint64(2)

THETA_1 = np.uint64(3)
THETA_2 = np.uint64(4)
THETA_3 = np.uint64(5)
THETA_TERM = np.uint64(6)
THETA_SIGN = np.uint64(7)

V_1 = np.uint64(8)
V_2 = np.uint64(9)
V_3 = np.uint64(10)
V_TERM = np.uint64(11)
CHI_BASE = np.uint64(12)
CHI_QUARTER = np.uint64(13)

VISIBLE_INTERVAL = np.uint64(14)
VISIBLE_INSIDE = np.uint64(15)
VISIBLE_SIDE = np.uint64(16)
VISIBLE_COS = np.uint64(17)
VISIBLE_AZIMUTH = np.uint64(18)
VISIBLE_FLIP = np.uint64(19)

ROTATION_COS = np.uint64(20)
ROTATION_AZIMUTH = np.uint64(21)
ROTATION_SPIN = np.uint64(22)

SOFT_1 = np.uint64(23)  # flight of the D in a D* from a D**; the others are 37 to 39
SOFT_AZIMUTH = np.uint64(24)

FLIGHT_1 = np.uint64(25)  # of the B in the Upsilon(4S) frame: three draws, then its azimuth
FLIGHT_2 = np.uint64(26)
FLIGHT_3 = np.uint64(27)
FLIGHT_AZIMUTH = np.uint64(28)

CHAIN = np.uint64(29)  # which decay chain, where a sample mixes them

CHARM_MASS_INTERVAL = np.uint64(30)  # mass of a broad charm state, then its table
CHARM_MASS_INSIDE = np.uint64(31)
CHARM_MASS_SIDE = np.uint64(32)
CHARM_MASS_POINT = np.uint64(33)
PION_PAIR_MASS = np.uint64(34)  # of a state that gives two pions
PION_PAIR_COS = np.uint64(35)
PION_PAIR_AZIMUTH = np.uint64(36)
SOFT_2 = np.uint64(37)
SOFT_3 = np.uint64(38)
SOFT_TERM = np.uint64(39)

HADRON_1 = np.uint64(40)  # pions of a tau: flight of the neutrino seen from them
HADRON_2 = np.uint64(41)
HADRON_3 = np.uint64(42)
HADRON_TERM = np.uint64(43)
HADRON_AZIMUTH = np.uint64(44)
HADRON_SIGN = np.uint64(45)
HADRON_TURN = np.uint64(46)

DALITZ_FIRST = 192  # three draws for each try; a tau that gives pions has no neutrinos to be drawn
PHOTON_NUMBER = np.uint64(2048)
PHOTON_FIRST = np.uint64(2049)  # four draws each: energy, angle, acceptance, azimuth
ONE, TWO, THREE = np.uint64(1), np.uint64(2), np.uint64(3)

NEUTRINO_FIRST = 192  # three draws for each try
