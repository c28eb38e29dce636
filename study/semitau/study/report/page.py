"""Results and pictures laid out as one HTML page."""

from __future__ import annotations

import re
from collections.abc import Sequence
from pathlib import Path
from urllib.parse import quote

from jinja2 import Environment, FileSystemLoader, StrictUndefined
from markupsafe import Markup
from semitau.core.whole_files import write_whole

from ..averages.summary import quality_line, tension_text
from ..findings import findings
from ..numbers import counted, digits_for, duration, percent, signed, with_error
from ..pictures.gallery import DATA_LABELS
from ..pictures.sheet import Picture
from ..results import Results
from ..terminal.summary import VERDICT_WORDS
from .inline_svg import inline_svg
from .sections import report_tables, shown_sections
from .table import chance

HERE = Path(__file__).parent


def write_report(results: Results, pictures: Sequence[Picture], path: Path) -> None:
    """Write the report to `path`, whole or not at all.

    Raises
    ------
    RunError : it cannot be written.
    """
    write_whole(path, page(results, pictures))


def page(results: Results, pictures: Sequence[Picture]) -> str:
    """The report as HTML: pictures, style and numbers in one text, no link to anything outside."""
    environment = Environment(
        loader=FileSystemLoader(HERE),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
        keep_trailing_newline=True,
    )
    environment.filters |= {
        "counted": counted,
        "percent": percent,
        "signed": signed,
        "with_error": with_error,
        "digits_for": digits_for,
        "duration": duration,
        "p_value": lambda value: chance(value).shown,
    }
    sections = shown_sections(results)
    return environment.get_template("page.html.j2").render(
        results=results,
        sections=sections,
        tables=report_tables(results, sections),
        findings=findings(results),
        data_label=DATA_LABELS[results.data.kind],
        headline=VERDICT_WORDS[results.verdict.status],
        stem=file_stem(results.study.name),
        study_address=_address(results.study.text),
        snippet_address=_address(results.design.snippet if results.design is not None else ""),
        quality_of_average=quality_line(results.average).plain if results.average is not None else "",
        tension_of_average=tension_text(results.average).plain if results.average is not None else "",
        style=Markup((HERE / "page.css").read_text()),
        pictures={
            picture.name: {
                "name": picture.name,
                "title": picture.title,
                "caption": picture.caption,
                "svg": Markup(inline_svg(picture.svg, picture.name, f"{picture.title}. {picture.caption}")),
            }
            for picture in pictures
        },
    )


def _address(text: str) -> str:
    """A text as a link that downloads it."""
    return f"data:text/plain;charset=utf-8,{quote(text, safe='')}"


def file_stem(name: str) -> str:
    """The name of a study as the beginning of file names."""
    return re.sub(r"[^a-z0-9]+", "_", name.lower()).strip("_") or "study"
