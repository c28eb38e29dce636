"""A study that mixes its own components with templates and data from other files, from end to end."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
import uproot
from semitau.core.errors import InputError
from semitau.core.template_file import read_templates
from semitau.gen.study_file.categories import StudyCategory
from semitau.gen.study_file.reader import read_study
from semitau.study.run.study_folder import study_key
from semitau.study.run.study_run import run_study

from .conftest import WriteStudy

MM2, EL = np.linspace(-2.0, 9.0, 56), np.linspace(0.2, 2.6, 25)
COMPONENT = """
[[import.component]]
component = "cascade"
label = "cascade"
file = "sim.root"
histogram = "{category}"
scale = 0.5
yield = { uncertainty = 0.2 }

[toys]"""
DATA = '[import.data]\nfile = "out/templates.root"\nhistogram = "{category}/data"\n'


def test_templates_and_data_from_elsewhere(mini: WriteStudy) -> None:
    path = mini({"[toys]": COMPONENT}, questions=False)
    categories = [category.name for category in read_study_without_files(path)]
    rng = np.random.default_rng(5)
    filled = {name: rng.poisson(0.4, (MM2.size - 1, EL.size - 1)).astype(float) for name in categories}
    with uproot.recreate("sim.root") as file:
        for name, counts in filled.items():
            file[name] = counts, MM2, EL
    first = run_study(path, workers=2).results
    templates = read_templates("out/templates.root")
    assert {"cascade", "D_tau"} <= {component.name for component in first.components}
    # Contents of the file, halved, whatever the bins; the yield is a parameter of the fit.
    for name, counts in filled.items():
        assert templates.templates[name, "cascade"].nominal.sum() == pytest.approx(0.5 * counts.sum())
        assert templates.templates[name, "cascade"].variance.sum() == pytest.approx(0.25 * counts.sum())
    assert next(p for p in first.fit.parameters if p.name == "yield_cascade").constraint == 0.2

    # Its own pseudo-data taken as data of another file: the same fit.
    path = mini(
        {"[toys]": COMPONENT.replace("[toys]", DATA + "\n[toys]"), 'data = "pseudo"': 'data = "import"'},
        questions=False,
    )
    second = run_study(path, output=Path("again"), workers=2).results
    assert second.data.kind == "file"
    assert second.data.events == first.data.events
    for one, other in zip(first.ratios, second.ratios, strict=True):
        assert other.value == pytest.approx(one.value, rel=1e-9)

    # A changed file is another study.
    study = read_study(path)
    key = study_key(study)
    with uproot.recreate("sim.root") as file:
        for name, counts in filled.items():
            file[name] = counts + 1.0, MM2, EL
    assert study_key(study) != key


def read_study_without_files(path: Path) -> tuple[StudyCategory, ...]:
    """Categories of a study whose imported files are still to be made."""
    with pytest.raises(InputError, match=r"import.component.*there is no such file"):
        read_study(path)
    bare = path.read_text().replace(COMPONENT, "\n[toys]")
    path.with_name("bare.toml").write_text(bare)
    return read_study(path.with_name("bare.toml")).categories
