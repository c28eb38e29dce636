"""[[alternative]]: what a change makes of a study, and what is said of one that leads nowhere. Nothing is random."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest
from semitau.core.errors import InputError
from semitau.gen.decays.form_factor_set import form_factors
from semitau.gen.study_file.alternative_studies import alternative_changes, alternative_studies
from semitau.gen.study_file.alternatives import BiasSection
from semitau.gen.study_file.components import Background, Mode
from semitau.gen.study_file.laws import Gaussian, Uniform
from semitau.gen.study_file.reader import read_study
from semitau.gen.study_file.study import StudyConfig
from semitau.gen.templates.fit_components import components_and_parameters

from .small_study import TEXT


def read(tmp_path: Path, tables: str) -> StudyConfig:
    path = tmp_path / "study.toml"
    path.write_text(f"{TEXT}\n{tables}", encoding="utf-8")
    return read_study(path)


def changed(tmp_path: Path, change: str) -> StudyConfig:
    study = read(tmp_path, f'[[alternative]]\nname = "other"\n{change}')
    return alternative_studies(study)["other"]


def complaints(tmp_path: Path, tables: str) -> list[str]:
    with pytest.raises(InputError) as error:
        read(tmp_path, tables)
    return [str(problem).removeprefix(f"{tmp_path / 'study.toml'}:") for problem in error.value.problems]


def component(study: StudyConfig, name: str) -> Any:
    return study.component(name)


def test_a_number(tmp_path: Path) -> None:
    other = changed(tmp_path, 'change.detector.tag.momentum_resolution = "26 MeV"')
    study = read(tmp_path, "")
    assert other.detector.tag.momentum_resolution == pytest.approx(0.026)
    tag = study.detector.tag.model_copy(update={"momentum_resolution": other.detector.tag.momentum_resolution})
    assert other.detector == study.detector.model_copy(update={"tag": tag})
    assert other.model_copy(update={"detector": study.detector}).model_dump() == study.model_dump()


def test_everything_that_an_analyst_may_doubt(tmp_path: Path) -> None:
    """Form factors, tables of efficiencies, decays, new physics, injected ratio, laws, variations, yields."""
    other = changed(
        tmp_path,
        """
        [alternative.change.form_factors]
        Dst = "CLN-2012"
        [alternative.change.wilson]
        SR = [0.1, 0.05]
        [alternative.change.fit]
        injected = { R_D = 0.36 }
        [alternative.change.mode.Dss]
        yield = "free"
        [alternative.change.background.fakes]
        expected = { D0_mu = 60 }
        [alternative.change.background.fakes.shape]
        el = { mean = 1.2 }
        mm2 = { law = "gaussian", mean = 3.0, sigma = 2.0, range = [-1.0, 9.0] }
        [alternative.change.detector.tracks]
        efficiency = 0.9
        [alternative.change.variation.muon_id]
        relative = 0.04
        """,
    )
    assert other.form_factor_set("Dst") == form_factors("CLN-2012")
    assert other.wilson.couplings.SR == 0.1 + 0.05j
    _, parameters = components_and_parameters(other)
    assert {p.name: p.injected for p in parameters}["R_D"] == 0.36
    dss, fakes = component(other, "Dss"), component(other, "fakes")
    assert isinstance(dss, Mode)
    assert isinstance(fakes, Background)
    assert dss.yield_constraint.kind == "free"
    assert fakes.expected == {"D0_e": 10, "D0_mu": 60}
    law = fakes.shape["el"]
    assert isinstance(law, Gaussian)
    assert (law.mean, law.sigma) == (1.2, 0.4)
    assert isinstance(fakes.shape["mm2"], Gaussian)
    assert isinstance(component(read(tmp_path, ""), "fakes").shape["mm2"], Uniform)
    assert other.detector.tracks.efficiency.at([0.5]).tolist() == [0.9]
    assert [variation.name for variation in other.variations] == ["R0", "muon_id"]


def test_new_tables_and_another_kind(tmp_path: Path) -> None:
    """A table that the file has not, a short form for a table, and a variation of another kind under its old name."""
    other = changed(
        tmp_path,
        """
        change.radiation.photons = true
        change.form_factors.Dst = "BGL-2021"
        change.variation.R0 = { kind = "form_factor_direction", set = "Dst", direction = 1 }
        change.mode.Dss.charm = ["D1(2420)", "D2*(2460)", "D0*(2300)"]
        """,
    )
    assert other.radiation.photons
    assert other.variations[0].kind == "form_factor_direction"
    assert len(component(other, "Dss").charm) == 3


def test_seed_of_the_command_and_files_beside(tmp_path: Path) -> None:
    """The seed is that of the study at hand, and files are looked for beside the study file, wherever we stand."""
    (tmp_path / "own.toml").write_text(
        '[Dst]\nparametrisation = "CLN"\nsource = "invented"\n'
        'values = { "h(1)" = 0.9, rho2 = 1.2, "R1(1)" = 1.3, "R2(1)" = 0.85, "R0(1)" = 1.1 }\n'
        'errors = { "h(1)" = 0.01, rho2 = 0.1, "R1(1)" = 0.1, "R2(1)" = 0.05, "R0(1)" = 0.1 }\n',
        encoding="utf-8",
    )
    study = read(tmp_path, '[[alternative]]\nname = "own"\nchange.form_factors.Dst = { file = "own.toml" }\n')
    seeded = study.model_copy(update={"study": study.study.model_copy(update={"seed": 99})})
    other = alternative_studies(seeded)["own"]
    assert other.study.seed == 99
    assert other.path == study.path
    assert other.alternatives == ()
    assert other.form_factor_set("Dst").transitions == ("Dst",)


def test_changes_in_words(tmp_path: Path) -> None:
    study = read(
        tmp_path,
        '[[alternative]]\nname = "other"\nchange.detector.tracks.efficiency = 0.9\nchange.mode.Dss.events = 5\n'
        "change.fit.injected.R_D = 0.36\n",
    )
    assert alternative_changes(study, study.alternatives[0]) == [
        ("detector.tracks.efficiency", "{ momentum = [0.1, 1.0], value = [0.9, 0.95] }", "0.9"),
        ("mode[Dss].events", "1000", "5"),
        ("fit.injected.R_D", "", "0.36"),
    ]


def test_study_without_alternatives(tmp_path: Path) -> None:
    study = read(tmp_path, "")
    assert alternative_studies(study) == {}
    assert study.bias == BiasSection()


def test_study_that_was_not_read_from_a_file(tmp_path: Path) -> None:
    study = read(tmp_path, '[[alternative]]\nname = "other"\nchange.radiation.photons = true').read_from(tmp_path, "")
    with pytest.raises(InputError, match="read from a file"):
        alternative_studies(study)


LINES = TEXT.count("\n") + 2
"""Line of the first line after TEXT."""

KEYS = (
    "experiment, form_factors, branching_fractions, wilson, radiation, mode, double_charm, background, detector, "
    "selection, variation, fit, import"
)

# change of an alternative, the line of the problem below [[alternative]] name, the problem
WRONG: dict[str, tuple[str, int, str]] = {
    "unknown table": (
        "change.detektor.tag.momentum_resolution = 1",
        2,
        f'alternative[other].change.detektor: unknown key (allowed {KEYS}). Did you mean "detector"?',
    ),
    "unknown key": (
        "change.detector.tag.momentum_resolutio = 0.02",
        2,
        (
            "alternative[other].change.detector.tag.momentum_resolutio: unknown key (allowed efficiency, "
            "momentum_resolution, wrong_fraction, wrong_momentum_resolution, wrong_charge_fraction, flavour). "
            'Did you mean "momentum_resolution"?'
        ),
    ),
    "unknown unit": (
        'change.radiation.photons = true\nchange.detector.tag.momentum_resolution = "20 mm"',
        3,
        (
            "alternative[other].change.detector.tag.momentum_resolution: has the unit of a length, not of an "
            'energy (got "20 mm", allowed a number in GeV, or a string with one of GeV, MeV, keV, eV, TeV)'
        ),
    ),
    "unknown component": (
        "change.mode.Dss_light.events = 1",
        2,
        (
            'alternative[other].change.mode.Dss_light: names no mode (got "Dss_light", allowed D_tau, Dst_tau, '
            'D_light, Dst_light, Dss). Did you mean "Dst_light"?'
        ),
    ),
    "unknown double charm": (
        "change.double_charm.DD.events = 1",
        2,
        'alternative[other].change.double_charm.DD: names no double_charm (got "DD", allowed none)',
    ),
    "no table": (
        "change.mode.Dss = 3",
        2,
        "alternative[other].change.mode.Dss: must be a table (got 3). Write Dss = { key = value }.",
    ),
    "binning": (
        '[[alternative.change.category]]\ncharm = ["D0"]\nobservables = { mm2 = [0, 1] }',
        2,
        (
            "alternative[other].change.category: changes the binning: all fits need the same categories and bins "
            f"(allowed {KEYS})"
        ),
    ),
    "seed": (
        "change.study.seed = 3",
        2,
        (
            "alternative[other].change.study: is kept by every alternative: common random numbers need the same seed "
            f"(allowed {KEYS})"
        ),
    ),
    "toys": (
        "change.toys.number = 3",
        2,
        f"alternative[other].change.toys: may not be changed by an alternative (allowed {KEYS})",
    ),
    "name of a component": (
        'change.background.fakes.component = "hadrons"',
        2,
        (
            "alternative[other].change.background.fakes.component: changes the components (got fakes, hadrons). "
            "Fits of one study to another need the same: change values, not names."
        ),
    ),
    "name of a variation": (
        'change.variation.R0.name = "R1"',
        2,
        (
            "alternative[other].change.variation.R0.name: changes the parameters of the fit (got R0, R1). Fits of one "
            "study to another need the same: change values, not names."
        ),
    ),
    "a component in addition": (
        '[[alternative.change.mode]]\ncomponent = "more"',
        2,
        "alternative[other].change.mode[more]: lacks the key charm. Add charm: charm hadrons of the B decay.",
    ),
    "nothing": (
        'change.experiment.b_pairs = 1e8\nchange.fit.data = "pseudo"',
        2,
        "alternative[other].change: changes nothing: every value is that of the study already",
    ),
    "nothing at all": ("change = {}", 2, "alternative[other].change: needs at least 1 (got 0)"),
    "no change": (
        'label = "x"',
        0,
        "alternative[other]: lacks the key change. Add change: keys of the study file with other values.",
    ),
    "rule between tables": (
        'change.form_factors.Dst = "BGL-2021"',
        2,
        'alternative[other].change: variation[R0].parameter is no parameter of the set (got "R0(1)", allowed g_0, ',
    ),
    "rule between tables, at the change": (
        'change.mode.Dst_light.charm = ["D"]',
        2,
        "alternative[other].change.mode.Dst_light.charm: mode[Dst_light] holds a decay that is in D_light too (got",
    ),
    "covered by nothing known": (
        'covered_by = ["form factors", "muonid"]\nchange.radiation.photons = true',
        2,
        (
            "alternative[other].covered_by[2]: is no variation, group of variations or constrained yield (got "
            '"muonid", allowed form factors, detector, yields, R0, muon_id, yield_Dss). Did you mean "muon_id"?'
        ),
    ),
    "covered by nothing": (
        "covered_by = []\nchange.radiation.photons = true",
        2,
        "alternative[other].covered_by: needs at least 1 (got 0)",
    ),
}


@pytest.mark.parametrize("mistake", WRONG)
def test_mistakes(mistake: str, tmp_path: Path) -> None:
    change, line, message = WRONG[mistake]
    found = complaints(tmp_path, f'[[alternative]]\nname = "other"\n{change}\n')
    assert any(text.startswith(f"{LINES + line}: {message}") for text in found), found


def test_mistakes_of_names_and_of_the_bias_table(tmp_path: Path) -> None:
    twice = '[[alternative]]\nname = "a"\nchange.radiation.photons = true\n' * 2
    assert complaints(tmp_path, twice)[0].startswith(f"{LINES + 4}: alternative[a].name: names an alternative that")
    nominal = complaints(tmp_path, '[[alternative]]\nname = "nominal"\nchange.radiation.photons = true\n')
    assert "is the name of the study itself (got nominal). Rename the alternative." in nominal[0]
    assert complaints(tmp_path, "[bias]\ntoys = 10\n") == [
        f"{LINES}: bias: acts on nothing: there is no alternative. Add an [[alternative]], or remove the table."
    ]
    alone = '[[alternative]]\nname = "a"\nchange.radiation.photons = true\n[bias]\n'
    for key, message in {
        "toys = -1": "bias.toys: must not be below 0 (got -1)",
        "toys = 0.5": "bias.toys: must be a whole number (got 0.5)",
        "replicas = 3": "bias.replicas: must not be below 4 (got 3)",
        "replica_events = 0": "bias.replica_events: must be above 0 (got 0)",
        "negligible = -0.1": "bias.negligible: must not be below 0 (got -0.1)",
        "toy = 1": "bias.toy: unknown key (allowed toys, negligible, replicas, replica_events)",
    }.items():
        assert complaints(tmp_path, alone + key)[0].startswith(f"{LINES + 4}: {message}")


def test_several_alternatives_are_all_told(tmp_path: Path) -> None:
    wrong = "".join(f'[[alternative]]\nname = "a{i}"\nchange.detector.tag.x{i} = 1\n' for i in range(3))
    assert [text.split(":")[0] for text in complaints(tmp_path, wrong)] == [str(LINES + 3 * i + 2) for i in range(3)]
