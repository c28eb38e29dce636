"""docs/study_file.md says what the models say, and its examples are sound."""

from __future__ import annotations

import re
import tomllib
from pathlib import Path

import pytest
from semitau.core.errors import InputError
from semitau.gen.shapes.sampler import samplers
from semitau.gen.study_file.reader import read_study
from semitau.gen.study_file.reference import models_in_reference, reference
from semitau.gen.study_file.study import json_schema

from .small_study import TEXT

DOCS = Path(__file__).parents[2] / "docs" / "study_file.md"


def test_document_is_up_to_date() -> None:
    written = DOCS.read_text(encoding="utf-8")
    assert written.endswith(reference()), (
        "put the output of python -m semitau.gen.study_file.reference below the introduction"
    )


def test_every_table_has_a_section() -> None:
    assert models_in_reference() == {*json_schema()["$defs"], "StudyConfig"}


def test_examples(tmp_path: Path) -> None:
    """The TOML of the introduction, put in place of what the small study has, lacks nothing but its file."""
    category, background = re.findall(r"```toml\n(.*?)```", DOCS.read_text(encoding="utf-8"), re.DOTALL)
    assert list(tomllib.loads(category)["category"][0]["observables"]) == ["mm2", "el"]
    head, rest = TEXT.split("[background.shape]")
    middle, tail = rest.split("[detector.tracks]")
    momentum = next(line for line in middle.splitlines() if line.startswith("p_lepton"))
    text = head + background.replace("[background.shape]", f"[background.shape]\n{momentum}")
    text += "[detector.tracks]" + tail + category.replace("D0", "D*0")
    path = tmp_path / "study.toml"
    path.write_text(text, encoding="utf-8")
    with pytest.raises(InputError) as error:
        read_study(path)
    assert [problem.what for problem in error.value.problems] == ["there is no such file"]
    (tmp_path / "sideband.root").write_text("no histogram")
    study = read_study(path)
    assert [category.name for category in study.categories][-4:] == ["Dst0_e", "Dst0_mu", "Dp_e", "Dp_mu"]
    with pytest.raises(InputError, match="not a ROOT file"):
        samplers(study)
