"""results.json: whole round trip, refusal of what is not ours, and docs that do not drift."""

from __future__ import annotations

import json
import re
from pathlib import Path
from typing import get_args

import pytest
from pydantic import BaseModel, ValidationError
from semitau.core.errors import InputError
from semitau.study.findings import Finding, findings
from semitau.study.result_part import Part
from semitau.study.results import Results, read_results

from .invented_parts import with_every_part

DOCS = Path(__file__).parents[2] / "docs" / "results.md"


def test_round_trip(results: Results, tmp_path: Path) -> None:
    path = tmp_path / "results.json"
    path.write_text(results.text())
    assert read_results(path) == results
    assert read_results(path).text() == results.text()


def test_infinite_numbers_are_refused(results: Results) -> None:
    document = json.loads(results.text())
    document["ratios"][0]["value"] = float("nan")
    with pytest.raises(ValidationError, match="finite"):
        Results.model_validate(document)


@pytest.mark.parametrize(
    ("content", "message"),
    [
        ("", "not a whole JSON file"),
        ('{"format": "semitau results", "vers', "not a whole JSON file"),
        ("[1, 2]", "not results of a study"),
        ('{"format": "something else"}', "not results of a study"),
        ('{"format": "semitau results", "version": 2}', r"another version \(got 2, allowed 1\)"),
        ('{"format": "semitau results", "version": 1}', "study: Field required"),
    ],
)
def test_bad_files_are_refused_with_advice(content: str, message: str, tmp_path: Path) -> None:
    path = tmp_path / "results.json"
    path.write_text(content)
    with pytest.raises(InputError, match=message) as caught:
        read_results(path)
    assert "Run `semitau study` again" in str(caught.value)
    assert "results.json" in str(caught.value)


def test_missing_file(tmp_path: Path) -> None:
    with pytest.raises(InputError, match=r"results.json: there is no such file"):
        read_results(tmp_path / "results.json")
    with pytest.raises(InputError, match="this is a folder"):
        read_results(tmp_path)


def models(kind: object, seen: dict[str, type[BaseModel]]) -> dict[str, type[BaseModel]]:
    """Every model that a type is made of, by its name: no two may share one."""
    if isinstance(kind, type) and issubclass(kind, BaseModel):
        assert seen.get(kind.__name__, kind) is kind, f"two models are called {kind.__name__}"
        if kind.__name__ not in seen:
            seen[kind.__name__] = kind
            for field in kind.model_fields.values():
                models(field.annotation, seen)
    for part in get_args(kind):
        models(part, seen)
    return seen


def test_docs_explain_every_field() -> None:
    text = DOCS.read_text()
    for name, model in models(Results, {}).items():
        section = re.search(rf"^### {name}\n(.*?)(?=^### |^## |\Z)", text, flags=re.M | re.S)
        assert section is not None, f"docs/results.md has no section {name}"
        rows = dict(re.findall(r"^\| `(\w+)` \| .*? \| (.*?) \|$", section[1], flags=re.M))
        assert rows == {field: info.description for field, info in model.model_fields.items()}, name


def test_findings_of_a_design_and_of_too_few_events(results: Results) -> None:
    """Why a gain is not confirmed, and what is marked in the sizing: first, and with one mark."""
    whole = with_every_part(results)
    assert whole.design is not None
    assert whole.sizing is not None

    def told(section: str, **changes: Part) -> Finding:
        found = findings(whole.model_copy(update=changes))
        return next(finding for finding in found if finding.section == section)

    doubtful = whole.design.confirmation.model_copy(update={"confirmed": False})
    unknown = doubtful.model_copy(update={"noise": None})
    for check, words in (
        (whole.design.confirmation, "on those of the search)."),
        (doubtful, ": not confirmed. Keep the study as it is, or generate more events."),
        (unknown, ": not confirmed, there are too few events to tell it from fluctuations of the templates."),
    ):
        assert words in told("design", design=whole.design.model_copy(update={"confirmation": check})).text
    same = told("design", design=whole.design.model_copy(update={"snippet": ""})).text
    assert same.startswith("Nothing better than the study as it is was found.")
    marked = whole.sizing.model_copy(update={"sentences": ("Fine.", "Look at this: with R(D) all is bad.")})
    finding = told("sizing", sizing=marked)
    assert finding.alarming
    assert finding.text.startswith("With R(D) all is bad. ")
    assert "Look at this" not in finding.text
