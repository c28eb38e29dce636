"""The report as people meet it: in a browser without network, on a narrow screen, in print, in the dark."""

from __future__ import annotations

import base64
import csv
import io
import re
import time
from collections.abc import Iterator
from pathlib import Path
from typing import Any
from urllib.parse import unquote

import pytest
from semitau.study.pictures import draw_pictures
from semitau.study.report.page import page
from semitau.study.results import Results
from semitau.study.terminal.summary import VERDICT_WORDS

from .browser import Browser, chromium
from .invented_parts import NOT_COVERED, with_every_part

A4_INSIDE = round((210 - 2 * 14) / 25.4 * 96)
"""Pixels between the margins of a printed page (CSS: 96 an inch)."""


@pytest.fixture(scope="module")
def browser(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Browser]:
    with chromium(tmp_path_factory.mktemp("profile")) as found:
        yield found


@pytest.fixture(scope="module")
def whole(results: Results) -> Results:
    return with_every_part(results)


@pytest.fixture(scope="module")
def report(whole: Results, tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A report with every section."""
    folder = tmp_path_factory.mktemp("report")
    path = folder / "report.html"
    path.write_text(page(whole, draw_pictures(whole, folder / "pictures")))
    return path


def test_it_loads_without_complaint_and_asks_for_nothing(browser: Browser, report: Path) -> None:
    browser.open(report)
    assert browser.complaints() == []
    assert [url for url in browser.requests() if not url.startswith("data:")] == [report.as_uri()]
    assert "semitau report" in browser.driver.title


def test_every_link_in_the_contents_goes_to_its_section(browser: Browser, report: Path) -> None:
    browser.open(report)
    links = browser.driver.find_elements("css selector", "nav a")
    assert len(links) >= 15
    for link in links:
        name = link.get_attribute("href").rpartition("#")[2]
        browser.run("arguments[0].click()", link)
        top, room = browser.run(
            "const e = document.getElementById(arguments[0]);"
            "return [e.getBoundingClientRect().top, document.documentElement.scrollHeight - scrollY - innerHeight]",
            name,
        )
        # The last sections cannot come to the top: the page ends.
        assert -2 <= top <= 40 or room < 2, name


def test_downloads_hold_the_numbers_of_their_tables(browser: Browser, report: Path) -> None:
    browser.open(report)
    tables = browser.run(
        """return [...document.querySelectorAll("div.table")].map(table => ({
            name: table.querySelector("a[download]").download,
            address: table.querySelector("a[download]").href,
            rows: [...table.querySelectorAll("tbody tr")].map(row =>
                [...row.children].map(cell => [cell.innerText, cell.matches("th, .text")]))}))"""
    )
    assert len(tables) >= 25
    compared = 0
    for table in tables:
        headings, *lines = csv.reader(io.StringIO(unquote(table["address"].partition(",")[2]), newline=""))
        assert re.fullmatch(r"marlow_test-\w+\.csv", table["name"])
        assert len(lines) >= len(table["rows"]) > 0
        assert len(set(headings)) == len(headings), table["name"]
        for shown, line in zip(table["rows"], lines, strict=False):
            assert len(line) == len(headings)
            numbers = [float(text) for text in line if is_number(text)]
            for text, in_words in shown:
                for value, half in [] if in_words else rounded_numbers(text):
                    compared += 1
                    assert any(abs(value - number) <= half for number in numbers), (table["name"], text, line)
    assert compared > 300


def is_number(text: str) -> bool:
    try:
        float(text)
    except ValueError:
        return False
    return True


SHOWN = re.compile(r"(<\s)?([−+]?\d+(?:\.\d+)?)(?:\s×\s10([⁰¹²³⁴⁵⁶⁷⁸⁹⁻]+))?(\s%)?")


def rounded_numbers(text: str) -> Iterator[tuple[float, float]]:
    """Numbers that a cell shows, each with half of its last place."""
    text = re.sub(r"(?<=\d)\u202f(?=\d{3})", "", text)
    for below, digits, raised, in_percent in SHOWN.findall(text):
        scale = 10.0 ** int(raised.translate(str.maketrans("⁰¹²³⁴⁵⁶⁷⁸⁹⁻", "0123456789-")) or 0)
        scale *= 0.01 if in_percent else 1.0
        value, places = float(digits.replace("−", "-")), len(digits.partition(".")[2])
        if below:
            yield scale * value / 2, scale * value / 2
        else:
            yield scale * value, 0.5000001 * scale * 10.0**-places


def test_a_click_saves_the_file(browser: Browser, report: Path, tmp_path: Path) -> None:
    browser.open(report)
    browser.command("Browser.setDownloadBehavior", behavior="allow", downloadPath=str(tmp_path))
    link = browser.driver.find_element("css selector", "#table-budget a[download]")
    link.click()
    saved = tmp_path / "marlow_test-budget.csv"
    for _ in range(100):
        if saved.exists():
            break
        time.sleep(0.1)
    lines = list(csv.reader(io.StringIO(saved.read_text(encoding="utf-8"), newline="")))
    assert lines[0][:2] == ["Source", "error of R(D)"]
    # 0.85 of 0.031, as the invented budget has it, to the last digit.
    assert lines[1][:2] == ["finite data", repr(0.85 * 0.031)]
    assert lines[-1][0] == "total"


@pytest.mark.parametrize("width", [1280, 1600, 768, 400])
def test_nothing_is_wider_than_the_window(width: int, browser: Browser, report: Path) -> None:
    browser.open(report, width)
    inside, whole = browser.run("const e = document.documentElement; return [e.clientWidth, e.scrollWidth]")
    assert whole <= inside
    assert outside(browser, inside) == []


def test_print_cuts_nothing_at_the_right(browser: Browser, report: Path) -> None:
    browser.open(report, A4_INSIDE)
    browser.command("Emulation.setEmulatedMedia", media="print")
    assert outside(browser, A4_INSIDE, within_scrollers=True) == []


def outside(browser: Browser, width: int, within_scrollers: bool = False) -> list[str]:
    """Elements that reach beyond `width`; what scrolls by itself may unless it is said otherwise."""
    found: list[str] = browser.run(
        """return [...document.querySelectorAll("body *")]
            .filter(e => !e.closest("svg *, .skip, .unseen") && (arguments[1] || !e.closest(".scroll *, pre")))
            .filter(e => e.getBoundingClientRect().right + scrollX > arguments[0] + 1)
            .map(e => e.tagName + " " + e.className + " " + (e.closest("[id]") || e).id)""",
        width,
        within_scrollers,
    )
    return found


@pytest.fixture(scope="module")
def printed(browser: Browser, report: Path) -> Any:
    from pypdf import PdfReader

    browser.open(report)
    browser.command("Emulation.clearDeviceMetricsOverride")
    found = browser.command("Page.printToPDF", printBackground=True, preferCSSPageSize=True)
    return PdfReader(io.BytesIO(base64.b64decode(found["data"])))


def test_it_prints_on_a_sane_number_of_pages(printed: Any, whole: Results) -> None:
    assert 8 <= len(printed.pages) <= 30
    for sheet in printed.pages:
        # A4 in points.
        assert (float(sheet.mediabox.width), float(sheet.mediabox.height)) == (
            pytest.approx(595.3, abs=1),
            pytest.approx(841.9, abs=1),
        )
        assert len(sheet.get_contents().get_data()) > 1000, "an empty page"


def test_print_has_every_section_and_the_verdict_first(printed: Any, whole: Results, report: Path) -> None:
    first = words_of(printed.pages[0])
    assert VERDICT_WORDS[whole.verdict.status] in first
    assert "0.311 ± 0.031" in first.replace("\u00a0", " ")
    assert NOT_COVERED[:40] in first
    text = " ".join(map(words_of, printed.pages))
    for title in re.findall(r'<h2 id="\w+-title">(.*?)</h2>', report.read_text()):
        assert title in text, title
    assert whole.study.hash in text.replace(" ", "")
    # Links to files are of no use on paper.
    assert "CSV" not in text


def words_of(sheet: Any) -> str:
    """The text of a page, with one gap between words and fonts' joined letters apart."""
    return " ".join(str(sheet.extract_text()).replace("ﬁ", "fi").replace("ﬂ", "fl").split())


def test_no_heading_stands_alone_at_the_foot_of_a_page(printed: Any, report: Path) -> None:
    titles = set(re.findall(r'<h2 id="\w+-title">(.*?)</h2>', report.read_text()))
    titles |= set(re.findall(r'<span id="title-\w+">(.*?)</span>', report.read_text()))
    for number, sheet in enumerate(printed.pages, start=1):
        lines = sheet.extract_text().replace("ﬁ", "fi").strip().splitlines()
        assert not titles & set(lines[-1:]), f"page {number}"


def test_no_words_of_a_picture_lie_on_others(browser: Browser, report: Path) -> None:
    browser.open(report)
    number, found = browser.run(
        """const bad = [];
        let number = 0;
        for (const svg of document.querySelectorAll("figure svg")) {
            const sheet = svg.getBoundingClientRect();
            const words = [...svg.querySelectorAll("g[id*='-text_']")].map(e => [e.id, e.getBoundingClientRect()])
                .filter(([, box]) => box.width > 0);
            number += words.length;
            words.forEach(([a, p], i) => {
                const wide = p.left < sheet.left - 1 || p.right > sheet.right + 1;
                if (wide || p.top < sheet.top - 1 || p.bottom > sheet.bottom + 1) bad.push(a + " is cut");
                words.slice(i + 1).forEach(([b, q]) => {
                    const across = Math.min(p.right, q.right) - Math.max(p.left, q.left);
                    const down = Math.min(p.bottom, q.bottom) - Math.max(p.top, q.top);
                    if (across > 1 && down > 1) bad.push(a + " on " + b);
                });
            });
        }
        return [number, bad]"""
    )
    assert number > 300
    assert found == []


@pytest.mark.parametrize("dark", [False, True])
def test_words_stand_out_from_what_is_behind_them(dark: bool, browser: Browser, report: Path) -> None:
    """Contrast of at least 4.5 (Web Content Accessibility Guidelines 2.2, W3C, criterion 1.4.3)."""
    browser.open(report, dark=dark)
    colours = browser.run(
        """const found = new Map();
        for (const e of document.querySelectorAll("body *")) {
            if (e.closest("svg") || ![...e.childNodes].some(n => n.nodeType === 3 && n.data.trim())) continue;
            const paper = e => getComputedStyle(e).backgroundColor;
            let behind = e;
            while (behind && paper(behind) === "rgba(0, 0, 0, 0)") behind = behind.parentElement;
            const pair = [getComputedStyle(e).color, behind ? paper(behind) : "rgb(255, 255, 255)"];
            found.set(pair.join(), [...pair, e.tagName + "." + e.className]);
        }
        return [...found.values()]"""
    )
    assert len(colours) >= 5
    for ink, paper, where in colours:
        assert contrast(ink, paper) >= 4.5, (where, ink, paper)
    # The check sees a dark page.
    assert (luminance(colours[0][1]) < 0.2) == dark


def luminance(colour: str) -> float:
    """Relative luminance of an sRGB colour (same guidelines)."""
    parts = [int(part) / 255 for part in re.findall(r"\d+", colour)[:3]]
    red, green, blue = (p / 12.92 if p <= 0.04045 else ((p + 0.055) / 1.055) ** 2.4 for p in parts)
    return 0.2126 * red + 0.7152 * green + 0.0722 * blue


def contrast(one: str, other: str) -> float:
    """Contrast ratio, 1 to 21 (same guidelines)."""
    low, high = sorted((luminance(one), luminance(other)))
    return (high + 0.05) / (low + 0.05)


def test_contrast_of_known_colours() -> None:
    # Black on white is 21; #767676 is the lightest grey that passes on white (4.54), both widely tabulated.
    assert contrast("rgb(0, 0, 0)", "rgb(255, 255, 255)") == pytest.approx(21)
    assert contrast("rgb(118, 118, 118)", "rgb(255, 255, 255)") == pytest.approx(4.54, abs=0.01)
