"""Keys of components: whatever changes what a component's events give, changes its key.

Brute force: every number, word and switch of a study file that uses everything is changed in turn. Components whose key
is still the same are generated anew and must give the same histograms to the last bit.
"""

from __future__ import annotations

import os
import tomllib
from collections.abc import Iterator, Mapping
from functools import cache
from typing import Any

import numpy as np
import pytest
from pydantic import ValidationError
from semitau.core.content_digest import content_digest
from semitau.core.errors import InputError
from semitau.gen.study_file.study import StudyConfig
from semitau.gen.templates.build import Build, build_templates, component_keys
from semitau.gen.templates.chunk_tasks import make_bench
from semitau.gen.templates.component_parts import component_parts
from semitau.gen.templates.kept_sums import component_key, packed, unpacked
from semitau.gen.templates.part_runs import by_component, run_parts

SEED = int(os.environ.get("SEMITAU_TEST_SEED", "20261201"))

TEXT = """
[study]
name = "keys"
seed = 7
output = "out"

[experiment]
kind = "lepton-collider"
b_pairs = 1e8

[radiation]
photons = true
recovery_angle = 0.05

[quadratic]
coefficients = ["SR"]

[[mode]]
component = "D_tau"
parents = ["B+"]
charm = ["D"]
leptons = ["tau"]
tau_to = ["mu", "pi"]
scales_with = "R_D"
events = 6000

[[mode]]
component = "D_light"
parents = ["B+"]
charm = ["D"]
leptons = ["e", "mu"]
events = 12_000

[[mode]]
component = "Dst_light"
parents = ["B0"]
charm = ["D*"]
leptons = ["mu"]
events = 16_000

[[mode]]
component = "Dss"
parents = ["B0"]
charm = ["D2*(2460)", "D*"]
leptons = ["e"]
yield = { uncertainty = 0.3 }
events = 18_000

[[double_charm]]
component = "double_charm"
parents = ["B+"]
charm = ["D"]
beside = ["D_s"]
leptons = ["tau"]
yield = { uncertainty = 0.3 }
events = 12_000

[[background]]
component = "fakes"
events = 10_000
misidentified = true
expected = { D0_e = 10, D0_mu = 40.5 }
[background.shape]
mm2 = { law = "uniform", range = [-1.0, 9.0] }
el = { law = "gaussian", mean = "1 GeV", sigma = 0.4, range = [0.2, 2.5] }
p_lepton = { law = "exponential", scale = 0.5, range = [0.3, 3.0] }
[background.correlation]
mm2.el = -0.5

[selection]
p_lepton = { min = "300 MeV" }
e_res = { max = 2.0 }

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

[[category]]
charm = ["D0"]
leptons = ["pi"]
[category.observables]
mm2 = [-1.0, 1.0, 12.0]

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

[[variation]]
name = "soft"
kind = "soft_pion_efficiency"
particle = "charged"
relative = 0.05

[[variation]]
name = "tag"
kind = "tag_resolution"
relative = 0.1

[fit]
injected = { R_D = 0.35 }
"""


def study_of(document: Mapping[str, Any]) -> StudyConfig:
    return StudyConfig.model_validate(document)


@cache
def nominal() -> dict[str, Any]:
    """The whole study with all defaults written out."""
    document = tomllib.loads(TEXT)
    document["study"]["seed"] = SEED
    return without_empty(study_of(document).model_dump(by_alias=True, mode="json"))


def without_empty(value: Any) -> Any:
    """Without lists that are empty: they are defaults that may not be written."""
    if isinstance(value, dict):
        return {key: without_empty(item) for key, item in value.items() if item != []}
    return value


def leaves(value: Any, place: tuple[str | int, ...] = ()) -> Iterator[tuple[str | int, ...]]:
    if isinstance(value, dict):
        for key, item in value.items():
            yield from leaves(item, (*place, key))
    elif isinstance(value, list):
        for number, item in enumerate(value):
            yield from leaves(item, (*place, number))
    elif value is not None:
        yield place


WORDS: dict[Any, tuple[Any, ...]] = {
    "B+": ("B0",), "B0": ("B+",), "D": ("D*",), "D*": ("D",), "e": ("mu",), "mu": ("e", "tau"), "pi": ("rho", "3pi"),
    "D0": ("D+", "D*0"), "D*+": ("D*0",), "D2*(2460)": ("D1(2420)",), "D_s": ("D_s*",), "tau": ("mu", "e"),
    "SR": ("T", "SL"),
    "R_D": ("R_Dst",), "BCL-2021": ("CLN-2012",), "CLN-2021": ("BGL-2021",), "IW-1998": ("IW-2017",), "LO": ("EOM",),
    "Dst": ("D",), "charged": ("neutral",), "isospin": ("separate",), "light": ("exact",), "uniform": ("triangle",),
    "expected": ("pseudo",), "free": ("fixed",), "fixed": ("free",), "R0(1)": ("R1(1)",),
}  # fmt: skip


def others(value: Any) -> Iterator[Any]:
    """Other values to try, until one is allowed."""
    if isinstance(value, bool):
        yield not value
    elif isinstance(value, int):
        yield from (value + 1, value + 7, value - 1)
    elif isinstance(value, float):
        yield from (value * 1.3, value * 0.7, value * 1.01, value * 0.99, value + 0.01, value - 0.01, value + 0.3)
    else:
        yield from WORDS.get(value, ())
        yield f"{value}_other"


def changed(place: tuple[str | int, ...]) -> StudyConfig | None:
    """The study with another value there; None if no other one is allowed."""
    value: Any = nominal()
    for key in place:
        value = value[key]
    for other in others(value):
        if other == value:
            continue
        try:
            return study_of(replaced(nominal(), place, other))
        except (ValidationError, InputError):
            continue
    return None


def replaced(value: Any, place: tuple[str | int, ...], other: Any) -> Any:
    if not place:
        return other
    first, *rest = place
    if isinstance(value, list):
        return [replaced(item, tuple(rest), other) if i == first else item for i, item in enumerate(value)]
    return {key: replaced(item, tuple(rest), other) if key == first else item for key, item in value.items()}


class Memory:
    """Keeps sums in memory, and counts."""

    pause = 1e9

    def __init__(self, known: Mapping[str, Any] | None = None) -> None:
        self.known = dict(known or {})
        self.made: list[str] = []

    def take(self, kind: str, key: str) -> Any:
        return self.known.get(key)

    def keep(self, kind: str, key: str, arrays: Any) -> None:
        self.known[key] = arrays
        self.made.append(key)


@cache
def remembered() -> Memory:
    memory = Memory()
    build_templates(study_of(nominal()), 1, kept=memory)
    return memory


def contents(made: Build) -> str:
    """Digest of everything that a build holds, but for times and the text of the study."""
    templates = [(key, vars(template)) for key, template in made.templates.templates.items()]
    parts = made.templates.components, made.templates.parameters, made.templates.nuisances
    return content_digest(templates, parts, made.cut_flow, made.reweightings, made.events)


NO_OTHER = {
    "kind", "law", "flavour", "photons", "parents", "charm", "leptons", "tau_to", "set", "scales_with", "name",
}  # fmt: skip
"""Words that may have no other value here: another one contradicts the rest of the study."""


def raw(study: StudyConfig, names: set[str]) -> dict[str, list[dict[str, bytes]]]:
    """Component -> what its events give, before anything is multiplied."""
    bench = make_bench(study, variations=True)
    parts = [part for part in component_parts(study, bench, "templates") if part.component in names]
    found: dict[str, list[dict[str, bytes]]] = {}
    for part, whole in run_parts(parts, bench, 1):
        sums = {name: array.tobytes() for name, array in packed([whole]).items() if name not in ("seconds", "paces")}
        found.setdefault(part.component, []).append(sums)
    return found


def test_whatever_changes_what_a_component_gives_changes_its_key() -> None:
    study = study_of(nominal())
    keys, given = component_keys(study), raw(study, ALL)
    tried, unchanged = 0, 0
    for place in leaves(nominal()):
        other = changed(place)
        if other is None:
            assert {str(key) for key in place} & NO_OTHER, f"no other value of {place} is allowed"
            continue
        same = {name for name, key in component_keys(other).items() if keys.get(name) == key}
        assert raw(other, same) == {name: given[name] for name in given if name in same}, f"another {place}"
        tried += 1
        unchanged += len(same)
    assert tried > 200
    assert unchanged > 300  # of 6 components each time: keys do not change for nothing


@pytest.mark.parametrize("place", [p for p in leaves(nominal()) if p[0] in ("experiment", "fit", "variation")])
def test_templates_with_and_without_what_was_kept_are_the_same(place: tuple[str | int, ...]) -> None:
    """Also what is multiplied afterwards: expected numbers, constant factors, names."""
    study = changed(place)
    if study is not None:
        memory = Memory(remembered().known)
        assert contents(build_templates(study, 1, kept=memory)) == contents(build_templates(study, 1))


ALL = {"D_tau", "D_light", "Dst_light", "Dss", "double_charm", "fakes"}
CHAINS = ALL - {"fakes"}


@pytest.mark.parametrize(
    ("place", "anew"),
    [
        (("study", "seed"), ALL),
        (("study", "name"), set()),
        (("study", "output"), set()),
        (("experiment", "b_pairs"), set()),
        (("experiment", "energy_spread"), CHAINS),
        (("form_factors", "D", "name"), {"D_tau", "D_light"}),
        (("wilson", "T"), {"D_tau"}),
        (("radiation", "minimum_energy"), CHAINS - {"double_charm"}),
        (("mode", 1, "events"), {"D_light"}),
        (("mode", 3, "yield", "uncertainty"), set()),
        (("background", 0, "expected", "D0_mu"), set()),
        (("background", 0, "shape", "el", "sigma"), {"fakes"}),
        (("detector", "tag", "efficiency", "B+"), set()),
        (("detector", "tracks", "angle_resolution"), CHAINS),
        (("detector", "lepton_id", "hadron_as_mu", "value", 0), ALL),
        (("selection", "e_res", "max"), ALL),
        (("category", 1, "observables", "mm2", "edges", 1), ALL),
        (("variation", 0, "name"), set()),
        (("variation", 0, "parameter"), {"Dst_light", "Dss"}),
        (("variation", 1, "relative"), set()),
        (("variation", 2, "relative"), {"Dst_light", "Dss"}),
        (("variation", 3, "relative"), CHAINS),
        (("fit", "template_statistics"), set()),
        (("fit", "injected", "R_D"), set()),
        (("toys", "number"), set()),
    ],
)
def test_only_what_depends_on_a_change_is_made_again(place: tuple[str | int, ...], anew: set[str]) -> None:
    study = changed(place)
    assert study is not None
    before, after = component_keys(study_of(nominal())), component_keys(study)
    assert {name for name, key in after.items() if before.get(name) != key} == anew


def test_labels_and_variations_of_others_change_no_key() -> None:
    before = component_keys(study_of(nominal()))
    labelled = {**nominal(), "mode": [{**mode, "label": "a label"} for mode in nominal()["mode"]]}
    assert component_keys(study_of(labelled)) == before
    fewer = study_of({**nominal(), "variation": nominal()["variation"][1:]})  # without form factors of D*
    changed_names = {name for name, key in component_keys(fewer).items() if key != before[name]}
    assert changed_names == {"Dst_light", "Dss"}


def test_other_purposes_have_other_keys() -> None:
    study = study_of(nominal())
    assert not set(component_keys(study).values()) & set(component_keys(study, "check").values())


# --- interrupted ----------------------------------------------------------------------------------------------------


def large() -> StudyConfig:
    """Components of several chunks."""
    document = nominal()
    modes = [{**mode, "events": 300_000} for mode in document["mode"]]
    back = [{**background, "events": 200_000} for background in document["background"]]
    return study_of({**document, "mode": modes, "background": back})


class Stop(Exception):
    pass


@pytest.mark.parametrize("workers", [1, 2])
def test_interrupted_work_goes_on_where_it_stopped(workers: int) -> None:
    """Every six chunks; the sum over all runs is generated once, the bits are those of one run."""
    study = large()
    whole = contents(build_templates(study, 1))
    memory, already, stops = Memory(), 0, 0

    def stop_after(chunks: int) -> Any:
        calls = 0

        def report(what: str, done: int, total: int | None) -> None:
            nonlocal calls, already
            calls += 1
            assert done >= already  # nothing is made twice
            already = done
            if calls > chunks:
                raise Stop

        return report

    while True:
        try:
            made = build_templates(study, workers, stop_after(6), kept=memory)
            break
        except Stop:
            stops += 1
    assert stops > 3
    assert contents(made) == whole


def test_incomplete_sums_are_kept_while_a_component_is_at_work() -> None:
    """A killed run loses what is behind the last keeping at most."""
    memory = Memory()
    memory.pause = -1.0
    build_templates(large(), 1, kept=memory)
    keys = component_keys(large())
    assert memory.made.count(keys["D_light"]) >= 4
    assert memory.made.count(keys["fakes"]) >= 4


@pytest.mark.parametrize("wrong", ["name", "length", "kind", "shape", "events", "too many", "nothing"])
def test_arrays_that_are_not_the_sums_are_not_taken(wrong: str) -> None:
    study = study_of(nominal())
    bench = make_bench(study, variations=True)
    parts = by_component(component_parts(study, bench, "templates"))["Dst_light"]
    arrays = dict(remembered().known[component_key(parts, bench)])
    assert unpacked(arrays, parts, bench) is not None
    if wrong == "name":
        del arrays["counts"]
    elif wrong == "length":
        arrays["contents"] = arrays["contents"][:-1]
    elif wrong == "kind":
        arrays["contents"] = arrays["contents"].astype(np.float32)
    elif wrong == "shape":
        arrays["contents"] = arrays["contents"][None]
    elif wrong == "events":
        arrays["events"] = arrays["events"] - 1
    elif wrong == "too many":
        arrays["events"] = np.append(arrays["events"], 256)
    else:
        arrays = {name: array[:0] for name, array in arrays.items()}
    assert unpacked(arrays, parts, bench) is None
    memory = Memory({component_key(parts, bench): arrays})
    assert contents(build_templates(study, 1, kept=memory)) == contents(build_templates(study, 1))
