"""Numbers of the random draws of double charm (256 to 319; see core/streams.py for how they are shared out).

The numbers are part of the result: changing one changes every event.
"""

from __future__ import annotations

import numpy as np

SYSTEM_INTERVAL = np.uint64(256)
SYSTEM_INSIDE = np.uint64(257)
SYSTEM_SIDE = np.uint64(258)

HELICITY = np.uint64(259)
V_1 = np.uint64(260)
V_2 = np.uint64(261)
V_3 = np.uint64(262)
V_TERM = np.uint64(263)
BESIDE_KIND = np.uint64(264)
BESIDE_1 = np.uint64(265)
BESIDE_2 = np.uint64(266)
BESIDE_3 = np.uint64(267)
BESIDE_TERM = np.uint64(268)
CHI_BASE = np.uint64(269)
CHI_QUARTER = np.uint64(270)

PARTNER_COS = np.uint64(271)
PARTNER_AZIMUTH = np.uint64(272)
MESON_COS = np.uint64(273)
MESON_AZIMUTH = np.uint64(274)

Q2_INTERVAL = np.uint64(275)
Q2_INSIDE = np.uint64(276)
Q2_SIDE = np.uint64(277)
W_COS = np.uint64(278)
W_AZIMUTH = np.uint64(279)
THETA_1 = np.uint64(280)
THETA_2 = np.uint64(281)
THETA_3 = np.uint64(282)
THETA_TERM = np.uint64(283)
THETA_SIGN = np.uint64(284)
LEPTON_AZIMUTH = np.uint64(285)

VISIBLE_INTERVAL = np.uint64(286)
VISIBLE_INSIDE = np.uint64(287)
VISIBLE_SIDE = np.uint64(288)
VISIBLE_COS = np.uint64(289)
VISIBLE_AZIMUTH = np.uint64(290)
VISIBLE_FLIP = np.uint64(291)

ROTATION_COS = np.uint64(292)
ROTATION_AZIMUTH = np.uint64(293)
ROTATION_SPIN = np.uint64(294)
