"""Mistakes in the small study, and what must be said of each."""

from __future__ import annotations

import tomllib
from pathlib import Path

ROOT = Path(__file__).parents[2]

UNITS_OF_ENERGY = "a number in GeV, or a string with one of GeV, MeV, keV, eV, TeV"
FAMILIES = "D, D*, D1(2420), D2*(2460), D0*(2300), D1'(2430), (D pi), (D* pi), (D pi pi), (D* pi pi), (D eta), (D* eta)"
LAWS = (
    "exponential, gaussian, double_gaussian, power, threshold, end_point, phase_space, uniform, polynomial, "
    "histogram, column"
)
SETS = ", ".join(
    path.stem
    for path in sorted((ROOT / "gen/semitau/gen/decays/form_factor_sets").glob("*.toml"))
    if {"Dst", "D+Dst"} & set(tomllib.loads(path.read_text(encoding="utf-8")))
)
OBSERVABLES = "mm2, q2, el, p_lepton, p_charm, e_res, delta_m"
D0_MODE = 'component = "D_tau"\ncharm = ["D"]\nleptons = ["tau"]\nscales_with = "R_D"\n'

# what is in TEXT, what stands there instead, the message after "study.toml:LINE: "; LINE is that of the first changed
# line, plus a number where given
MISTAKES: dict[str, tuple[str, str, str] | tuple[str, str, str, int]] = {
    "unknown key": (
        "seed = 7",
        "seed = 7\nouput = 3",
        'study.ouput: unknown key (allowed name, seed, output). Did you mean "output"?',
        1,
    ),
    "unknown key, nothing like it": (
        "seed = 7",
        "seed = 7\nzzz = 3",
        "study.zzz: unknown key (allowed name, seed, output)",
        1,
    ),
    "unknown table": (
        "[selection]",
        "[seletion]\nel = { min = 1 }\n[selection]",
        (
            "seletion: unknown key (allowed study, experiment, form_factors, branching_fractions, wilson, radiation, "
            "quadratic, mode, double_charm, background, detector, selection, category, variation, fit, toys, import, "
            "sizing, alternative, bias, design, reach, average, blinding). "
            'Did you mean "selection"?'
        ),
    ),
    "missing key": (
        "b_pairs = 1e8\n",
        "",
        "experiment: lacks the key b_pairs. Add b_pairs: number of B B̄ pairs.",
        -2,
    ),
    "missing table": (
        '[study]\nname = "small"\nseed = 7\noutput = "out/small"\n',
        "# no name",
        "lacks the key study. Add study.",
    ),
    "wrong type": ("b_pairs = 1e8", 'b_pairs = "many"', 'experiment.b_pairs: must be a number (got "many")'),
    "truth is no number": ("b_pairs = 1e8", "b_pairs = true", "experiment.b_pairs: must be a number (got true)"),
    "not a number": ("b_pairs = 1e8", "b_pairs = nan", "experiment.b_pairs: must be finite (got nan)"),
    "seed of half": ("seed = 7", "seed = 7.5", "study.seed: must be a whole number (got 7.5)"),
    "negative seed": ("seed = 7", "seed = -7", "study.seed: must not be below 0 (got -7)"),
    "empty name": ('name = "small"', 'name = ""', 'study.name: must not be empty (got "")'),
    "events not positive": (
        "events = 1000\n\n[[mode]]",
        "events = 0\n\n[[mode]]",
        "mode[D_tau].events: must be above 0 (got 0)",
    ),
    "events not whole": (
        "events = 1000\n\n[[mode]]",
        "events = 1e-3\n\n[[mode]]",
        "mode[D_tau].events: must be a whole number (got 0.001)",
    ),
    "word for a list": (
        'charm = ["D*+"]',
        'charm = "D*+"',
        'category[2].charm: must be a list (got "D*+"). Write ["D*+"].',
    ),
    "one table for a list of tables": (
        '[[variation]]\nname = "R0"\nkind = "form_factor"\nset = "Dst"\nparameter = "R0(1)"\n\n[[variation]]',
        "[variation]",
        (
            'variation: must be a list (got { name = "muon_id", kind = "lepton_identification", lepton = "mu", '
            "relative ...). Write [[variation]] instead of [variation]."
        ),
    ),
    "list of tables for one table": (
        "[selection]\np_lepton",
        "[[selection]]\np_lepton",
        (
            'selection: must be a table (got [{ p_lepton = { min = "300 MeV" }, q2 = { min = 4.0 } }]). '
            "Write [selection] instead of [[selection]]."
        ),
    ),
    "number for a table": ("q2 = { min = 4.0 }", "q2 = 4.0", "selection.q2: must be a table (got 4.0)"),
    "hadron collider": (
        '"lepton-collider"',
        '"hadron-collider"',
        'experiment.kind: is not available yet (got "hadron-collider", allowed "lepton-collider")',
    ),
    "unknown machine": (
        '"lepton-collider"',
        '"lepton collider"',
        (
            'experiment.kind: is not known here (got "lepton collider", allowed lepton-collider). '
            'Did you mean "lepton-collider"?'
        ),
    ),
    "wrong unit": (
        'min = "300 MeV"',
        'min = "300 mrad"',
        (
            'selection.p_lepton.min: has the unit of an angle, not of an energy (got "300 mrad", allowed '
            f"{UNITS_OF_ENERGY})"
        ),
    ),
    "unit of another observable": (
        'mean = "1 GeV"',
        'mean = "1 GeV2"',
        (
            "background[fakes].shape.el.mean: has the unit of an energy squared, not of an energy "
            f'(got "1 GeV2", allowed {UNITS_OF_ENERGY})'
        ),
    ),
    "misspelt unit": (
        'min = "300 MeV"',
        'min = "300 Mev"',
        f'selection.p_lepton.min: has an unknown unit (got "300 Mev", allowed {UNITS_OF_ENERGY}). Did you mean "MeV"?',
    ),
    "number as text": (
        'min = "300 MeV"',
        'min = "0.3"',
        (
            f'selection.p_lepton.min: is a string without a unit (got "0.3", allowed {UNITS_OF_ENERGY}). '
            "Take the quotation marks away or add the unit."
        ),
    ),
    "beams off the resonance": (
        "b_pairs = 1e8",
        "b_pairs = 1e8\nbeam_energies = [7.0, 3.5]",
        (
            "experiment.beam_energies: do not meet at the Υ(4S) (got [7.0, 3.5], allowed beams with 2 √(E1 E2) from "
            "10.560 to 10.620 GeV, e.g. [8.0, 3.4981])"
        ),
        1,
    ),
    "one beam": (
        "b_pairs = 1e8",
        "b_pairs = 1e8\nbeam_energies = [7.0]",
        "experiment.beam_energies: has too few values (got 1)",
        1,
    ),
    "unknown particle": (
        'charm = ["D1(2420)", "D2*(2460)"]',
        'charm = ["D1(2420)", "D2(2460)"]',
        f'mode[Dss].charm[2]: is not known here (got "D2(2460)", allowed {FAMILIES}). Did you mean "D2*(2460)"?',
    ),
    "charged particle where none is wanted": (
        'component = "D_light"\ncharm = ["D"]',
        'component = "D_light"\ncharm = ["D+"]',
        f'mode[D_light].charm[1]: is not known here (got "D+", allowed {FAMILIES}). Did you mean "D"?',
        1,
    ),
    "particle twice": (
        'charm = ["D1(2420)", "D2*(2460)"]',
        'charm = ["D1(2420)", "D1(2420)"]',
        'mode[Dss].charm: must not name anything twice (got ["D1(2420)", "D1(2420)"])',
    ),
    "unknown observable": (
        "q2 = { min = 4.0 }",
        "qq = { min = 4.0 }",
        f'selection.qq: is no observable (got qq, allowed {OBSERVABLES}). Did you mean "q2"?',
    ),
    "unknown observable of an axis": (
        "mm2 = [-1.0, 1.0, 9.0]",
        "mmm2 = [-1.0, 1.0, 9.0]",
        f'category[2].observables.mmm2: is no observable (got mmm2, allowed {OBSERVABLES}). Did you mean "mm2"?',
    ),
    "edges do not increase": (
        "mm2 = [-1.0, 1.0, 9.0]",
        "mm2 = [-1.0, 1.0, 1.0, 9.0]",
        (
            "category[2].observables.mm2: edges must increase (got [-1.0, 1.0, 1.0, 9.0], allowed each edge larger "
            "than the one before)"
        ),
    ),
    "one edge": (
        "mm2 = [-1.0, 1.0, 9.0]",
        "mm2 = [-1.0]",
        "category[2].observables.mm2: needs at least 2 (got 1)",
    ),
    "axis without bins": (
        "el = { min = 0.2, max = 2.5, bins = 4 }",
        "el = { min = 0.2, max = 2.5 }",
        (
            "category[1].observables.el: is no axis (got { min = 0.2, max = 2.5 }, allowed a list of edges, or "
            "{ min = ..., max = ..., bins = ... })"
        ),
    ),
    "no axis": (
        "[category.observables]\nmm2 = [-1.0, 1.0, 9.0]",
        "observables = {}",
        "category[2].observables: needs at least 1 (got 0)",
    ),
    "four axes": (
        "el = { min = 0.2, max = 2.5, bins = 4 }",
        "el = { min = 0.2, max = 2.5, bins = 4 }\nq2 = [4, 9]\ne_res = [0, 1]",
        "category[1].observables: takes at most 3 (got 4)",
        -2,
    ),
    "too many bins": (
        "mm2 = [-1.0, 1.0, 9.0]",
        "mm2 = { min = 0, max = 1, bins = 1000 }\nq2 = { min = 4, max = 12, bins = 200 }",
        "category[2].observables: has too many bins (got 1000 × 200 bins, allowed at most 100000)",
        -1,
    ),
    "cut upside down": (
        "q2 = { min = 4.0 }",
        "q2 = { min = 4.0, max = 3.0 }",
        "selection.q2: removes everything (got min = 4, max = 3, allowed min below max)",
    ),
    "cut without limits": ("q2 = { min = 4.0 }", "q2 = {}", "selection.q2: cuts nothing (allowed min, max or both)"),
    "cut that removes every bin": (
        "q2 = { min = 4.0 }",
        "mm2 = { min = 9.0 }",
        "selection.mm2: removes every bin (got min = 9, allowed limits that meet the axis from -1 to 9)",
    ),
    "mass difference without D*": (
        "el = { min = 0.2, max = 2.5, bins = 4 }",
        "delta_m = [0.13, 0.16]",
        "category[1].observables.delta_m: needs a D* (got D0). Give these hadrons a [[category]] of their own.",
    ),
    "category twice": (
        'charm = ["D*+"]\n',
        'charm = ["D*+", "D0"]\n',
        "category[2]: makes the category D0_e a second time. Take the hadron or the lepton out of one of the tables.",
        -1,
    ),
    "component twice": (
        'component = "D_light"',
        'component = "Dss"',
        'mode[Dss].component: names a component that there is already (got "Dss"). Rename one of them.',
        12,
    ),
    "variation twice": (
        'name = "muon_id"',
        'name = "R0"',
        'variation[R0].name: names a variation that there is already (got "R0"). Rename one of them.',
    ),
    "name that files keep": (
        'component = "fakes"',
        'component = "data"',
        'background[data].component: is a name that template files keep for themselves (got "data"). Rename it.',
    ),
    "name that the fit keeps": (
        'name = "muon_id"',
        'name = "R_D"',
        'variation[R_D].name: is a name that the fit keeps for itself (got "R_D"). Rename it.',
    ),
    "no identifier": (
        'component = "fakes"',
        'component = "fake leptons"',
        (
            'background[fake leptons].component: is no identifier (got "fake leptons", allowed letters, digits and _, '
            "not starting with a digit)"
        ),
    ),
    "decay in two modes": (
        'component = "Dss"\ncharm = ["D1(2420)", "D2*(2460)"]',
        'component = "Dss"\ncharm = ["D1(2420)", "D*"]',
        "mode[Dss]: holds a decay that is in Dst_light too (got B+ → D* e ν). Take it out of one of them.",
        -1,
    ),
    "ratio without denominator": (
        'component = "D_light"\ncharm = ["D"]\n',
        'component = "D_light"\ncharm = ["D0*(2300)"]\n',
        (
            "mode[D_tau].scales_with: has no denominator. "
            'Add a mode with charm = ["D"] and leptons = ["e", "mu"] for the same parents.'
        ),
        -11,
    ),
    "ratio of other charm": (
        D0_MODE,
        D0_MODE.replace('["D"]', '["D1\'(2430)"]'),
        'mode[D_tau].charm: is not what R_D counts (got ["D1\'(2430)"], allowed charm = ["D"])',
        1,
    ),
    "ratio of light leptons": (
        D0_MODE,
        D0_MODE.replace('"tau"', '"e"'),
        "mode[D_tau]: scales with R_D but its leptons are not tau alone (got ['e'], allowed leptons = [\"tau\"])",
        -1,
    ),
    "ratio and yield": (
        D0_MODE,
        D0_MODE + 'yield = "free"\n',
        "mode[D_tau]: has both scales_with and yield. Remove yield: the ratio sets it.",
        -1,
    ),
    "unknown ratio": (
        'scales_with = "R_Dst"',
        'scales_with = "R_D*"',
        'mode[Dst_tau].scales_with: is not known here (got "R_D*", allowed R_D, R_Dst). Did you mean "R_D"?',
    ),
    "follows nothing": (
        "yield = { uncertainty = 0.3 }",
        'follows = "Dst_lihgt"',
        (
            'mode[Dss].follows: names no mode (got "Dst_lihgt", allowed D_tau, Dst_tau, D_light, Dst_light, Dss). '
            'Did you mean "Dst_light"?'
        ),
    ),
    "follows itself": (
        "yield = { uncertainty = 0.3 }",
        'follows = "Dss"',
        'mode[Dss].follows: names the mode itself (got "Dss")',
    ),
    "follows a follower": (
        "yield = { uncertainty = 0.3 }",
        'follows = "D_tau"',
        'mode[Dss].follows: names a mode that follows another (got "D_tau"). Follow what D_tau follows.',
    ),
    "wrong denominator": (
        'scales_with = "R_Dst"',
        'scales_with = "R_Dst"\nfollows = "D_light"',
        (
            'mode[Dst_tau].follows: is no denominator of R_Dst (got "D_light", allowed a mode with charm = ["D*"], '
            "leptons e and mu, and the same parents)"
        ),
        1,
    ),
    "yield in words": (
        "yield = { uncertainty = 0.3 }",
        'yield = "fre"',
        (
            'mode[Dss].yield: is no yield (got "fre", allowed "free", "fixed" or { uncertainty = 0.3 }). '
            'Did you mean "free"?'
        ),
    ),
    "yield without uncertainty": (
        "yield = { uncertainty = 0.3 }",
        "yield = {}",
        'mode[Dss].yield: is no yield (got {}, allowed "free", "fixed" or { uncertainty = 0.3 })',
    ),
    "no tag": (
        "[detector.tracks]",
        '[detector.tag]\nefficiency = { "B+" = 0.0, B0 = 0.0 }\n[detector.tracks]',
        (
            "mode[D_tau]: is a component with no events (got no tag for B+ and B0). "
            "Raise [detector.tag] efficiency or remove the mode."
        ),
        -45,
    ),
    "half of the tags": (
        "[detector.tracks]",
        '[detector.tag]\nefficiency = { "B+" = 0.01 }\n[detector.tracks]',
        "detector.tag.efficiency: lacks the key B0. Add B0: neutral B.",
        1,
    ),
    "efficiency above one": (
        "value = [0.9, 0.95]",
        "value = [0.9, 1.95]",
        "detector.tracks.efficiency.value[2]: must not be above 1 (got 1.95)",
    ),
    "bare efficiency above one": (
        "efficiency = { momentum = [0.1, 1.0], value = [0.9, 0.95] }",
        "efficiency = 95",
        "detector.tracks.efficiency: must be a probability (got 95, allowed 0 to 1)",
    ),
    "momenta do not increase": (
        "momentum = [0.1, 1.0]",
        "momentum = [1.0, 0.1]",
        (
            "detector.tracks.efficiency.momentum: must increase (got [1.0, 0.1], allowed each value larger than the "
            "one before)"
        ),
    ),
    "table of two lengths": (
        "momentum = [0.1, 1.0]",
        "momentum = [0.1, 1.0, 2.0]",
        "detector.tracks.efficiency: needs as many values as momenta (got 3 momenta, 2 values)",
    ),
    "acceptance upside down": (
        '["17 deg", "150 deg"]',
        '["150 deg", "17 deg"]',
        'detector.tracks.polar_acceptance: must increase within 0 to π (got ["150 deg", "17 deg"])',
    ),
    "unknown law": (
        'law = "uniform"',
        'law = "unifrom"',
        f'background[fakes].shape.mm2.law: is no law (got "unifrom", allowed {LAWS}). Did you mean "uniform"?',
    ),
    "no law": (
        'law = "uniform", ',
        "",
        f"background[fakes].shape.mm2: lacks the key law (allowed {LAWS})",
    ),
    "law without range": (
        'mm2 = { law = "uniform", range = [-1.0, 9.0] }',
        'mm2 = { law = "uniform" }',
        "background[fakes].shape.mm2: lacks the key range. Add range: limits within which it is drawn.",
    ),
    "key of another law": (
        'law = "uniform", ',
        'law = "uniform", sigma = 3, ',
        "background[fakes].shape.mm2.sigma: unknown key (allowed law, range)",
    ),
    "range upside down": (
        "range = [-1.0, 9.0]",
        "range = [9.0, -1.0]",
        (
            "background[fakes].shape.mm2.range: must increase (got [9.0, -1.0], allowed each value larger than the one "
            "before)"
        ),
    ),
    "width of zero": (
        "sigma = 0.4",
        "sigma = 0",
        "background[fakes].shape.el.sigma: must be above 0 (got 0)",
    ),
    "peak far away": (
        "sigma = 0.4, range = [0.2, 2.5]",
        "sigma = 0.001, range = [0.2, 0.5]",
        (
            "background[fakes].shape.el: misses its range (got mean 1, sigma 0.001, range [0.2, 0.5], allowed a range "
            "within 30 sigma of the mean)"
        ),
    ),
    "slope of zero": (
        "scale = 0.5",
        "scale = 0",
        "background[fakes].shape.p_lepton.scale: must not be zero (got 0)",
    ),
    "power left of its origin": (
        'law = "uniform", range = [-1.0, 9.0]',
        'law = "power", exponent = 2, range = [-1.0, 9.0]',
        "background[fakes].shape.mm2: must stay right of the origin (got range from -1, allowed from 0)",
    ),
    "power without area": (
        'law = "uniform", range = [-1.0, 9.0]',
        'law = "power", exponent = -1, range = [0.0, 9.0]',
        (
            "background[fakes].shape.mm2: has all its area at the origin (got -1, allowed an exponent from -0.99, or a "
            "range that starts above the origin)"
        ),
    ),
    "below the threshold": (
        'law = "uniform", range = [-1.0, 9.0]',
        'law = "threshold", threshold = 10, scale = 1, range = [-1.0, 9.0]',
        "background[fakes].shape.mm2: ends below the threshold (got 9, allowed a range beyond 10)",
    ),
    "beyond the end point": (
        'law = "uniform", range = [-1.0, 9.0]',
        'law = "end_point", end = 2, range = [3.0, 9.0]',
        "background[fakes].shape.mm2: misses the law (got [3.0, 9.0], allowed a range that meets 0 to 2)",
    ),
    "polynomial below zero": (
        'law = "uniform", range = [-1.0, 9.0]',
        'law = "polynomial", coefficients = [3, -4, 1], range = [-1.0, 9.0]',
        # x² - 4x + 3 has its minimum -1 at 2
        "background[fakes].shape.mm2: is negative within its range (got -1 at 2, allowed no negative value)",
    ),
    "polynomial of nothing": (
        'law = "uniform", range = [-1.0, 9.0]',
        'law = "polynomial", coefficients = [0, 0], range = [-1.0, 9.0]',
        "background[fakes].shape.mm2.coefficients: must not all be zero (got [0, 0])",
    ),
    "unknown category": (
        "expected = { D0_e = 10, D0_mu = 40.5 }",
        "expected = { D0_e = 10, D0_nu = 40.5 }",
        (
            "background[fakes].expected.D0_nu: is no category (got D0_nu, allowed D0_e, D0_mu, Dstp_e, Dstp_mu). "
            'Did you mean "D0_mu"?'
        ),
    ),
    "negative expectation": (
        "D0_mu = 40.5",
        "D0_mu = -40.5",
        "background[fakes].expected.D0_mu: must not be below 0 (got -40.5)",
    ),
    "nothing expected": (
        "expected = { D0_e = 10, D0_mu = 40.5 }",
        "expected = { D0_e = 0, Dstp_mu = 0.0 }",
        "background[fakes].expected: makes a component with no events. Expect some, or remove it.",
    ),
    "axis without law": (
        'el = { law = "gaussian", mean = "1 GeV", sigma = 0.4, range = [0.2, 2.5] }\n',
        'e_res = { law = "uniform", range = [0, 1] }\n',
        'background[fakes].shape: draws no el (an axis of D0_e, D0_mu). Add el = { law = "...", range = [...] }.',
        -2,
    ),
    "misidentified without momentum": (
        "p_lepton = { law",
        "p_charm = { law",
        (
            "background[fakes].shape: draws no p_lepton (misidentified leptons need it in D0_e, D0_mu). "
            'Add p_lepton = { law = "...", range = [...] }.'
        ),
        -3,
    ),
    "law beside the axis": (
        "range = [-1.0, 9.0]",
        "range = [9.0, 19.0]",
        (
            "background[fakes].shape.mm2.range: misses the axis of D0_e: a component with no events "
            "(got [9.0, 19.0], allowed a range that meets -1 to 9)"
        ),
    ),
    "shape for an unknown category": (
        "[background.correlation]",
        "[background.shape_in.D0_m]\n[background.correlation]",
        'background[fakes].shape_in.D0_m: is no category or charm hadron (got D0_m). Did you mean "D0_mu"?',
    ),
    "correlation above one": (
        "mm2.el = -0.5",
        "mm2.el = -1.5",
        "background[fakes].correlation.mm2.el: must be above -1 (got -1.5)",
    ),
    "correlation with itself": (
        "mm2.el = -0.5",
        "mm2.mm2 = -0.5",
        "background[fakes].correlation.mm2.mm2: correlates an observable with itself. Remove it.",
    ),
    "correlation twice": (
        "mm2.el = -0.5",
        "mm2.el = -0.5\nel.mm2 = 0.5",
        "background[fakes].correlation.el.mm2: gives the pair a second time. Remove it.",
        1,
    ),
    "correlation of what is not drawn": (
        "mm2.el = -0.5",
        "mm2.q2 = -0.5",
        "background[fakes].correlation.mm2.q2: correlates q2, which is not drawn. Remove it.",
    ),
    "correlation not positive definite": (
        "mm2.el = -0.5",
        "mm2.el = -0.9\nmm2.p_lepton = 0.9\nel.p_lepton = 0.9",
        # eigenvalues of [[1, -c, c], [-c, 1, c], [c, c, 1]] are 1 + c (twice) and 1 - 2c = -0.8
        (
            "background[fakes].correlation: is not positive definite (got smallest eigenvalue -0.8, allowed a smallest "
            "eigenvalue above 0). Make the correlations smaller, or give those of the pairs left out."
        ),
        -1,
    ),
    "missing file": (
        'mm2 = { law = "uniform", range = [-1.0, 9.0] }',
        'mm2 = { law = "histogram", file = "no.root", name = "h" }',
        (
            'background[fakes].shape.mm2.file: there is no such file (got "no.root"). '
            "Relative names are looked for beside the study file."
        ),
    ),
    "missing data file": (
        "[selection]",
        '[fit]\ndata = { file = "no.root" }\n[selection]',
        'fit.data.file: there is no such file (got "no.root"). Relative names are looked for beside the study file.',
        1,
    ),
    "unknown set": (
        "[selection]",
        '[form_factors]\nDst = "CLN-2022"\n[selection]',
        f'form_factors.Dst: is no form-factor set (got "CLN-2022", allowed {SETS}). Did you mean "CLN-2021"?',
        1,
    ),
    "set of another decay": (
        "[selection]",
        '[form_factors]\nDst = "BCL-2021"\n[selection]',
        f'form_factors.Dst: does not describe this decay (got "BCL-2021", allowed {SETS}). Did you mean "CLN-2021"?',
        1,
    ),
    "unknown kind": (
        'kind = "form_factor"',
        'kind = "formfactor"',
        (
            'variation[R0].kind: is no kind (got "formfactor", allowed form_factor, form_factor_direction, '
            "form_factor_directions, fraction, branching_fraction, double_charm_share, production_ratio, "
            "soft_pion_efficiency, lepton_identification, misidentification, tag_resolution, momentum_scale, "
            "residual_energy). "
            'Did you mean "form_factor"?'
        ),
    ),
    "unknown parameter": (
        'parameter = "R0(1)"',
        'parameter = "R0(l)"',
        (
            'variation[R0].parameter: is no parameter of the set (got "R0(l)", allowed rho2, R1(1), R2(1), R0(1)). '
            'Did you mean "R0(1)"?'
        ),
    ),
    "normalisation": (
        'parameter = "R0(1)"',
        'parameter = "h(1)"',
        (
            "variation[R0].parameter: acts on nothing: the fit's yields take up the normalisation of a rate "
            '(got "h(1)", allowed rho2, R1(1), R2(1), R0(1))'
        ),
    ),
    "direction that is not there": (
        'kind = "form_factor"\nset = "Dst"\nparameter = "R0(1)"',
        'kind = "form_factor_direction"\nset = "Dst"\ndirection = 6',
        "variation[R0].direction: is no direction of the set (got 6, allowed 1 to 5)",
        2,
    ),
    "share of a lone hadron": (
        'kind = "form_factor"\nset = "Dst"\nparameter = "R0(1)"',
        'kind = "fraction"\ncharm = "D*"\nrelative = 0.1',
        'variation[R0].charm: acts on nothing: no mode mixes it with other charm (got "D*")',
        1,
    ),
    "share in a mode without it": (
        'kind = "form_factor"\nset = "Dst"\nparameter = "R0(1)"',
        'kind = "fraction"\ncharm = "D1(2420)"\nrelative = 0.1\ncomponents = ["D_tau"]',
        'variation[R0].components[1]: does not mix D1(2420) with other charm (got "D_tau", allowed Dss)',
        3,
    ),
    "variation of all and more": (
        "relative = 0.02",
        "relative = 1.02",
        "variation[muon_id].relative: must be below 1 (got 1.02)",
    ),
    "injected ratio that is not measured": (
        "[selection]",
        "[fit]\ninjected = { R_Dst = 0.3, R_X = 0.3 }\n[selection]",
        'fit.injected.R_X: is not known here (got "R_X", allowed R_D, R_Dst). Did you mean "R_D"?',
        1,
    ),
    "data in words": (
        "[selection]",
        '[fit]\ndata = "expcted"\n[selection]',
        (
            'fit.data: is no data (got "expcted", allowed "expected", "pseudo", "import" or { file = "data.root" }). '
            'Did you mean "expected"?'
        ),
        1,
    ),
    "coefficient of words": (
        "[selection]",
        '[wilson]\nSR = "large"\n[selection]',
        'wilson.SR: is no coefficient (got "large", allowed a number or [real, imaginary] of size up to 4)',
        1,
    ),
    "coefficient of three numbers": (
        "[selection]",
        "[wilson]\nVL = [1, 2, 3]\n[selection]",
        "wilson.VL: is no coefficient (got [1, 2, 3], allowed a number or [real, imaginary] of size up to 2)",
        1,
    ),
    "coefficient that is no number": (
        "[selection]",
        "[wilson]\nVL = [0.1, nan]\n[selection]",
        "wilson.VL: is no coefficient (got [0.1, nan], allowed a number or [real, imaginary] of size up to 2)",
        1,
    ),
    "coefficient too large": (
        "[selection]",
        "[wilson]\nT = [0.8, -0.8]\n[selection]",
        (
            "wilson.T: is larger than any such coefficient can be (got [0.8, -0.8], allowed a number or "
            "[real, imaginary] of size up to 1)"
        ),
        1,
    ),
    "residual energy that nothing looks at": (
        'name = "R0"\nkind = "form_factor"\nset = "Dst"\nparameter = "R0(1)"',
        'name = "R0"\nkind = "residual_energy"\nrelative = 0.1',
        (
            "variation[R0]: acts on nothing: no category cuts on e_res or has it as an axis. Remove the variation, or "
            "give [selection] e_res a max."
        ),
        -1,
    ),
    "unknown coefficient": (
        "[selection]",
        "[wilson]\nS = 0.1\n[selection]",
        'wilson.S: unknown key (allowed VL, VR, SL, SR, T, tensor, e, mu). Did you mean "SR"?',
        1,
    ),
    "no current left": (
        "[selection]",
        "[wilson]\nVL = -1.0\n[selection]",
        (
            "wilson: cancels the current of the Standard Model (got 1 + VL + VR = 0+0j, 1 + VL - VR = 0+0j, allowed "
            "another VL or VR)"
        ),
    ),
    "coupling of the muon too large": (
        "[selection]",
        "[wilson.mu]\nSL = 4.5\n[selection]",
        (
            "wilson.mu.SL: is larger than any such coefficient can be (got 4.5, allowed a number or [real, imaginary] "
            "of size up to 4)"
        ),
        1,
    ),
    "tensor model of a light lepton": (
        "[selection]",
        "[wilson.e]\ntensor = 1\n[selection]",
        'wilson.e.tensor: unknown key (allowed VL, VR, SL, SR, T). Did you mean "SR"?',
        1,
    ),
    "couplings of an unknown lepton": (
        "[selection]",
        "[wilson.muon]\nVL = 0.1\n[selection]",
        'wilson.muon: unknown key (allowed VL, VR, SL, SR, T, tensor, e, mu). Did you mean "mu"?',
        0,
    ),
    "no current left for electrons": (
        "[selection]",
        "[wilson.e]\nVL = -1.0\n[selection]",
        (
            "wilson.e: cancels the current of the Standard Model (got 1 + VL + VR = 0+0j, 1 + VL - VR = 0+0j, allowed "
            "another VL or VR)"
        ),
    ),
    "singular tensor of muons": (
        "[selection]",
        '[wilson]\ntensor = "EOM"\n[wilson.mu]\nT = 0.1\n[selection]',
        (
            'wilson.mu.T: needs other tensor form factors: those of tensor = "EOM" are singular at small q² '
            '(got 0.1+0j). Take tensor = "LO", or set T = 0.'
        ),
        3,
    ),
    "quadratic in nothing": (
        "[selection]",
        "[quadratic]\ncoefficients = []\n[selection]",
        "quadratic.coefficients: needs at least 1 (got 0)",
        1,
    ),
    "quadratic in the same twice": (
        "[selection]",
        '[quadratic]\ncoefficients = ["T", "T"]\n[selection]',
        'quadratic.coefficients: must not name anything twice (got ["T", "T"])',
        1,
    ),
    "quadratic in a word": (
        "[selection]",
        '[quadratic]\ncoefficients = ["Im_S"]\n[selection]',
        (
            'quadratic.coefficients[1]: is not known here (got "Im_S", allowed VL, VR, SL, SR, T, Im_VL, Im_VR, '
            'Im_SL, Im_SR, Im_T). Did you mean "Im_SR"?'
        ),
        1,
    ),
    "variation named as a coefficient": (
        'name = "R0"',
        'name = "SR"',
        'variation[SR].name: is a name that the fit keeps for itself (got "SR"). Rename it.',
    ),
    "two charmed mesons, unknown companion": (
        "[selection]",
        '[[double_charm]]\ncomponent = "DD"\nbeside = ["Ds"]\nevents = 10\n[selection]',
        ('double_charm[DD].beside[1]: is not known here (got "Ds", allowed D_s, D_s*, D K, D* K). Did you mean "D_s"?'),
        2,
    ),
    "two charmed mesons without events": (
        "[selection]",
        '[[double_charm]]\ncomponent = "DD"\nbeside = ["D K"]\nleptons = ["tau"]\nevents = 10\n[selection]',
        (
            "double_charm[DD]: is a component with no events (got no tau from it). "
            "A tau comes from D_s alone: add e and mu to leptons, or D_s to beside."
        ),
    ),
    "the same two charmed mesons twice": (
        "[selection]",
        (
            '[[double_charm]]\ncomponent = "DD"\nevents = 10\n[[double_charm]]\ncomponent = "DDK"\nbeside = ["D K"]\n'
            "events = 10\n[selection]"
        ),
        ("double_charm[DDK]: holds a decay that is in DD too (got B+ → D D K with e). Take it out of one of them."),
        3,
    ),
    "two charmed mesons named as a mode": (
        "[selection]",
        '[[double_charm]]\ncomponent = "Dss"\nevents = 10\n[selection]',
        'double_charm[Dss].component: names a component that there is already (got "Dss"). Rename one of them.',
        1,
    ),
    "share of double charm that there is not": (
        'kind = "form_factor"\nset = "Dst"\nparameter = "R0(1)"',
        'kind = "double_charm_share"\nsource = "phi"',
        ('variation[R0].source: acts on nothing: no [[double_charm]] mixes it with others (got "phi")'),
        1,
    ),
    "share of nothing": (
        'kind = "form_factor"\nset = "Dst"\nparameter = "R0(1)"',
        'kind = "double_charm_share"',
        "variation[R0]: does not say what varies (allowed beside or source, one of them)",
        -2,
    ),
    "no toys": ("[selection]", "[toys]\nnumber = 0\n[selection]", "toys.number: must not be below 2 (got 0)", 1),
    "design for a ratio that is held": (
        "[selection]",
        '[fit]\nfixed = { R_D = 0.3 }\n[design]\nminimise = "R_D"\n[selection]',
        'design.minimise: names no ratio that is fitted (got "R_D", allowed mean, area, R_Dst)',
        3,
    ),
    "reach of an unknown ratio": (
        "[selection]",
        "[reach]\nagainst = { R_D = 0.3, R_Ds = 0.25 }\n[selection]",
        'reach.against.R_Ds: names no ratio that is fitted (got "R_Ds", allowed R_D, R_Dst). Did you mean "R_Dst"?',
        1,
    ),
    "reach with two axes": (
        "[selection]",
        "[reach]\npairs = 7e8\nluminosity = 711\n[selection]",
        "reach: has two axes (allowed either pairs or luminosity). Leave one of them out.",
    ),
    "reach with a word to compare with": (
        "[selection]",
        '[reach]\nagainst = { R_Dst = "SM" }\n[selection]',
        'reach.against.R_Dst: is nothing to compare with (got "SM", allowed a number or { value = ..., error = ... })',
        1,
    ),
    "reach with one amount of data": (
        "[selection]",
        "[reach]\nfactors = [1.0]\n[selection]",
        "reach.factors: needs at least 2 (got 1)",
        1,
    ),
    "reach with no ratio": (
        "[selection]",
        "[reach]\n[fit]\nfixed = { R_D = 0.3, R_Dst = 0.25 }\n[selection]",
        "reach: has no ratio that is fitted. Remove the table.",
    ),
    "average with a file that is not there": (
        "[selection]",
        '[average]\nfile = "none.toml"\n[selection]',
        'average.file: there is no such file (got "none.toml"). Relative names are looked for beside the study file.',
        1,
    ),
    "average with an unknown ratio of a source": (
        "[selection]",
        '[average]\nfile = "none.toml"\nsources.x = { R_Ds = 0.01 }\n[selection]',
        'average.sources.x.R_Ds: unknown key (allowed R_D, R_Dst). Did you mean "R_Dst"?',
        2,
    ),
}
