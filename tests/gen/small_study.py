"""The smallest sound study file, for tests to change."""

from __future__ import annotations

TEXT = """\
[study]
name = "small"
seed = 7
output = "out/small"

[experiment]
kind = "lepton-collider"
b_pairs = 1e8

[[mode]]
component = "D_tau"
charm = ["D"]
leptons = ["tau"]
scales_with = "R_D"
events = 1000

[[mode]]
component = "Dst_tau"
charm = ["D*"]
leptons = ["tau"]
scales_with = "R_Dst"
events = 1000

[[mode]]
component = "D_light"
charm = ["D"]
leptons = ["e", "mu"]
events = 2000

[[mode]]
component = "Dst_light"
charm = ["D*"]
leptons = ["e", "mu"]
events = 2000

[[mode]]
component = "Dss"
charm = ["D1(2420)", "D2*(2460)"]
leptons = ["e", "mu"]
yield = { uncertainty = 0.3 }
events = 1000

[[background]]
component = "fakes"
events = 1000
misidentified = true
expected = { D0_e = 10, D0_mu = 40.5 }
[background.shape]
mm2 = { law = "uniform", range = [-1.0, 9.0] }
el = { law = "gaussian", mean = "1 GeV", sigma = 0.4, range = [0.2, 2.5] }
p_lepton = { law = "exponential", scale = 0.5, range = [0.3, 3.0] }
[background.correlation]
mm2.el = -0.5

[detector.tracks]
efficiency = { momentum = [0.1, 1.0], value = [0.9, 0.95] }
polar_acceptance = ["17 deg", "150 deg"]

[selection]
p_lepton = { min = "300 MeV" }
q2 = { min = 4.0 }

[[category]]
charm = ["D0"]
leptons = ["e", "mu"]
[category.observables]
mm2 = [-1.0, 1.0, 3.0, 9.0]
el = { min = 0.2, max = 2.5, bins = 4 }

[[category]]
charm = ["D*+"]
[category.observables]
mm2 = [-1.0, 1.0, 9.0]

[[variation]]
name = "R0"
kind = "form_factor"
set = "Dst"
parameter = "R0(1)"

[[variation]]
name = "muon_id"
kind = "lepton_identification"
lepton = "mu"
relative = 0.02
"""
