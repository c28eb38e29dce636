"""Numbers of the random draws of the detector response (50 to 127; see core/streams.py for how they are shared out).

The numbers are part of the result: changing one changes every template. Each normal pair takes two.
"""

from __future__ import annotations

import numpy as np

ENERGY_AND_TAG_X = np.uint64(50)  # normal pair: collision energy, tag momentum along x
FLIGHT_COS = np.uint64(52)  # three draws
FLIGHT_AZIMUTH = np.uint64(55)
TAG_Y_AND_Z = np.uint64(56)  # normal pair
WRONG_TAG = np.uint64(58)
WRONG_CHARGE = np.uint64(59)

CHARM_COS = np.uint64(60)
CHARM_AZIMUTH = np.uint64(61)
PAIR_MASS = np.uint64(62)
PAIR_COS = np.uint64(63)
PAIR_AZIMUTH = np.uint64(64)

TRACK1_SEEN = np.uint64(65)
TRACK2_SEEN = np.uint64(66)
TRACK3_SEEN = np.uint64(67)
LEPTON_SEEN = np.uint64(68)
LEPTON_IDENTIFIED = np.uint64(69)

TRACK1_SMEAR = np.uint64(70)  # two normal pairs each
TRACK2_SMEAR = np.uint64(74)
TRACK3_SMEAR = np.uint64(78)
LEPTON_SMEAR = np.uint64(82)
SOFT_SMEAR = np.uint64(86)

SOFT_SEEN = np.uint64(90)
PION_SEEN = np.uint64(91)

NO_CLUSTER = np.uint64(92)
CLUSTER_ENERGY = np.uint64(93)
SOFT_LEFT_OVER = np.uint64(94)  # of a photon

RANDOM_KIND = np.uint64(96)
RANDOM_DELTA_M = np.uint64(97)
RANDOM_COS = np.uint64(98)
RANDOM_AZIMUTH = np.uint64(99)

WRONG_TAG_ENERGY = np.uint64(100)

PION2_SEEN = np.uint64(101)

PARTNER1_SEEN = np.uint64(110)
PARTNER2_SEEN = np.uint64(111)
PARTNER1_SMEAR = np.uint64(112)  # two normal pairs each
PARTNER2_SMEAR = np.uint64(116)

SOFT_PHOTONS = np.uint64(1024)  # four for each neutral pion: `neutral_pions.energy_left`
PION_PHOTONS = np.uint64(1028)
PION2_PHOTONS = np.uint64(1032)
PARTNER1_PHOTONS = np.uint64(1036)
PARTNER2_PHOTONS = np.uint64(1040)

RADIATED_FIRST = np.uint64(2112)  # eight for each photon of a lepton

ONE = np.uint64(1)
TWO = np.uint64(2)
THREE = np.uint64(3)
