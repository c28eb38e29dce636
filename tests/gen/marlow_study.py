"""A study of the Marlow kind for tests of the response: every category, every kind of variation, changed at will."""

from __future__ import annotations

import tomllib
from typing import Any

from semitau.gen.study_file.study import StudyConfig

TEXT = """\
[study]
name = "Marlow, for tests"
seed = 20261201
output = "out/test"

[experiment]
kind = "lepton-collider"
b_pairs = 700e6

[[mode]]
component = "D_tau"
charm = ["D"]
leptons = ["tau"]
scales_with = "R_D"
events = 20_000

[[mode]]
component = "Dst_tau"
charm = ["D*"]
leptons = ["tau"]
scales_with = "R_Dst"
events = 30_000

[[mode]]
component = "D_light"
charm = ["D"]
leptons = ["e", "mu"]
events = 40_000

[[mode]]
component = "Dst_light"
charm = ["D*"]
leptons = ["e", "mu"]
events = 150_000

[[mode]]
component = "Dss_light"
charm = ["D1(2420)", "D2*(2460)", "D0*(2300)", "D1'(2430)"]
leptons = ["e", "mu"]
yield = { uncertainty = 0.3 }
events = 50_000

[[background]]
component = "continuum"
events = 20_000
yield = { uncertainty = 0.1 }
expected = { D0_e = 60, D0_mu = 60, Dp_e = 40, Dp_mu = 40, Dst0_e = 30, Dst0_mu = 30, Dstp_e = 20, Dstp_mu = 20 }
[background.shape]
mm2 = { law = "exponential", scale = 4.0, range = [-3.0, 10.0] }
el = { law = "uniform", range = [0.2, 2.5] }

[[background]]
component = "fakes"
events = 20_000
misidentified = true
yield = { uncertainty = 0.1 }
expected = { D0_e = 20, D0_mu = 80 }
[background.shape]
mm2 = { law = "exponential", scale = 4.0, range = [-2.0, 9.0] }
el = { law = "uniform", range = [0.2, 2.5] }
p_lepton = { law = "uniform", range = [0.2, 2.5] }

[selection]
p_lepton = { min = 0.3 }
q2 = { min = 4.0 }
e_res = { max = 1.2 }
delta_m = { min = 0.135, max = 0.160 }

[[category]]
charm = ["D0", "D+", "D*0", "D*+"]
[category.observables]
mm2 = [-2.0, -0.3, 0.0, 0.3, 1.0, 3.0, 5.0, 9.0]
el = [0.2, 0.9, 1.5, 2.5]

[[variation]]
name = "Dst_R0"
kind = "form_factor"
set = "Dst"
parameter = "R0(1)"

[[variation]]
name = "D_first"
kind = "form_factor_direction"
set = "D"
direction = 1

[[variation]]
name = "D1_share"
kind = "fraction"
charm = "D1(2420)"
relative = 0.2

[[variation]]
name = "soft_neutral"
kind = "soft_pion_efficiency"
particle = "neutral"
relative = 0.1

[[variation]]
name = "muon_id"
kind = "lepton_identification"
lepton = "mu"
relative = 0.02

[[variation]]
name = "muon_fakes"
kind = "misidentification"
lepton = "mu"
relative = 0.2

[[variation]]
name = "tag_width"
kind = "tag_resolution"
relative = 0.2

[[variation]]
name = "scale"
kind = "momentum_scale"
relative = 0.01
"""


def study(**changes: Any) -> StudyConfig:
    """The study above with whole tables or, by dotted keys with "__" for the dot, single values replaced.

    study(detector__tag__wrong_fraction=0.0, selection={}) has no wrong tags and no cuts.
    """
    tables = tomllib.loads(TEXT)
    for place, value in changes.items():
        *path, last = place.split("__")
        table = tables
        for key in path:
            table = table.setdefault(key, {})
        table[last] = value
    return StudyConfig.model_validate(tables)


PERFECT: dict[str, Any] = {
    "experiment__energy_spread": 1e-12,
    "detector__tag__momentum_resolution": 1e-12,
    "detector__tag__wrong_fraction": 0.0,
    "detector__tracks": {
        "momentum_resolution": [0.0, 0.0],
        "angle_resolution": 1e-12,
        "polar_acceptance": [0.0, 3.1415926],
        "minimum_transverse_momentum": 1e-12,
        "efficiency": 1.0,
    },
    "detector__photons": {
        "energy_resolution": [0.0, 0.0],
        "angle_resolution": 1e-12,
        "polar_acceptance": [0.0, 3.1415926],
        "efficiency": 1.0,
    },
    "detector__soft_pion": {
        "charged": 1.0,
        "neutral": 1.0,
        "random": {"charged": 0.0, "neutral": 0.0, "photon": 0.0},
    },
    "detector__lepton_id": {"e": 1.0, "mu": 1.0, "e_as_mu": 0.0, "mu_as_e": 0.0},
    "selection": {},
}
"""Changes that make a detector without faults and a study without cuts."""
