"""The report: one file that needs nothing else, in valid order, with every number that matters."""

from __future__ import annotations

import re
from collections import Counter
from html.parser import HTMLParser
from itertools import pairwise
from pathlib import Path

import pytest
from semitau.study.pictures import draw_pictures
from semitau.study.report.page import page
from semitau.study.report.sections import SECTIONS
from semitau.study.results import STATEMENT, Results
from semitau.study.terminal.summary import VERDICT_WORDS


@pytest.fixture(scope="module")
def html(results: Results, tmp_path_factory: pytest.TempPathFactory) -> str:
    keep = results.categories[:2]
    shown = tuple(p for p in results.projections if p.category in {category.name for category in keep})
    few = results.model_copy(update={"categories": keep, "projections": shown})
    return page(few, draw_pictures(few, tmp_path_factory.mktemp("pictures")))


class Outline(HTMLParser):
    """Ids, references, visible text and whether tags close in order."""

    VOID = frozenset({"meta", "link", "br", "hr", "img", "input"})

    def __init__(self) -> None:
        super().__init__(convert_charrefs=True)
        self.open: list[str] = []
        self.ids: list[str] = []
        self.targets: list[str] = []
        self.held: list[str] = []
        self.outside: list[str] = []
        self.text: list[str] = []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        if tag not in self.VOID:
            self.open.append(tag)
        self._note(attrs)

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self._note(attrs)

    def handle_endtag(self, tag: str) -> None:
        assert self.open, tag
        assert self.open.pop() == tag, tag

    def handle_data(self, data: str) -> None:
        if not {"style", "defs"} & set(self.open):
            self.text.append(data)

    def _note(self, attrs: list[tuple[str, str | None]]) -> None:
        for name, value in attrs:
            value = value or ""
            if name == "id":
                self.ids.append(value)
            elif name in ("href", "src", "xlink:href"):
                kept = (
                    self.targets if value.startswith("#") else self.held if value.startswith("data:") else self.outside
                )
                kept.append(value)
            self.targets += [f"#{target}" for target in re.findall(r"url\(#([^)]+)\)", value)]


@pytest.fixture(scope="module")
def outline(html: str) -> Outline:
    parser = Outline()
    parser.feed(html)
    parser.close()
    return parser


def test_tags_close_in_order(outline: Outline) -> None:
    assert outline.open == []


def test_it_needs_nothing_from_outside(html: str, outline: Outline) -> None:
    assert outline.outside == []
    assert "<script" not in html
    assert "@import" not in html
    assert not re.search(r"url\((?!#)", html)
    # The only addresses are the names of XML vocabularies, which nothing loads.
    assert set(re.findall(r"https?://[^\s\"'<>]+", html)) <= {
        "http://www.w3.org/2000/svg",
        "http://www.w3.org/1999/xlink",
    }


def test_ids_are_unique_and_every_reference_leads_somewhere(outline: Outline) -> None:
    assert [name for name, count in Counter(outline.ids).items() if count > 1] == []
    assert {target[1:] for target in outline.targets} <= set(outline.ids)


def test_statement_and_verdict_come_first(html: str, outline: Outline) -> None:
    text = " ".join(" ".join(outline.text).split())
    order = [STATEMENT, VERDICT_WORDS["sound"], "R(D)", "Uncertainty by source", "Provenance"]
    # The navigation names the sections, too: look behind it.
    places = [text.index(words, text.index(STATEMENT)) for words in order]
    assert places[0] < places[1]
    assert text.count(STATEMENT) == 2
    sections = re.findall(r'<section id="(\w+)"', html)
    assert sections[:3] == ["verdict", "ratios", "uncertainty"]
    assert sections[-2:] == ["study", "provenance"]


def test_contents_name_every_section(html: str) -> None:
    contents = re.search(r"<nav.*?</nav>", html, flags=re.S)
    assert contents is not None
    linked = re.findall(r'href="#(\w+)"', contents[0])
    assert linked == re.findall(r'<section id="(\w+)"', html)


def test_headings_go_down_one_step_at_a_time(html: str) -> None:
    levels = [int(level) for level in re.findall(r"<h([1-6])", html)]
    assert levels[0] == 1
    assert levels.count(1) == 1
    assert all(after - before <= 1 for before, after in pairwise(levels))


def test_table_headings_say_what_they_head(html: str) -> None:
    tables = re.findall(r"<table.*?</table>", html, flags=re.S)
    assert len(tables) >= 6
    for table in tables:
        assert 'aria-labelledby="' in table
        assert re.findall(r"<th(?! scope=\"(?:col|row)\")[ >]", table) == []
        assert table.count('<th scope="row"') == table.count("<tr") - 1


def test_numbers_of_the_results_stand_in_it(outline: Outline, results: Results) -> None:
    text = " ".join(outline.text).replace("\u00a0", " ")
    assert "0.311 ± 0.031" in text
    assert "injected 0.299" in text
    assert "560.0 for 567 degrees of freedom, p = 0.570" in text
    assert results.study.hash in text
    assert results.study.text in " ".join(outline.text)


def test_user_text_is_escaped(results: Results) -> None:
    nasty = results.study.model_copy(update={"name": "<script>alert(1)</script>", "text": "a < b & c > d"})
    html = page(results.model_copy(update={"study": nasty}), ())
    assert "<script>" not in html
    assert "a &lt; b &amp; c &gt; d" in html


def test_pictures_are_told_to_those_who_cannot_see_them(html: str) -> None:
    figures = re.findall(r"<figure.*?</figure>", html, flags=re.S)
    assert len(figures) == 8
    for figure in figures:
        assert re.search(r'<svg[^>]*role="img"[^>]*aria-label="[^"]{20,}"', figure, flags=re.S)


@pytest.mark.parametrize("status", VERDICT_WORDS)
def test_every_verdict_has_its_words(status: str, results: Results) -> None:
    verdict = results.verdict.model_copy(update={"status": status})
    assert f"{VERDICT_WORDS[status]}." in page(results.model_copy(update={"verdict": verdict}), ())


def test_template_and_style_are_package_data() -> None:
    import semitau.study.report.page as home

    folder = Path(home.__file__).parent
    for name in ("page.html.j2", "macros.html.j2", "page.css", *(f"sections/{s.name}.html.j2" for s in SECTIONS)):
        assert (folder / name).is_file(), name
    # And none that no section shows.
    assert {file.name for file in (folder / "sections").iterdir()} == {f"{s.name}.html.j2" for s in SECTIONS}


def test_docs_explain_every_section() -> None:
    text = (Path(__file__).parents[2] / "docs" / "report.md").read_text()
    assert re.findall(r"^## (.*)$", text, flags=re.M) == [section.title for section in SECTIONS]
