"""Study files: what is read, and what is said of every kind of mistake (place, value, what is allowed, remedy)."""

from __future__ import annotations

import hashlib
import os
import pickle
import random
import subprocess
import sys
import tomllib
from collections.abc import Callable
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from pydantic import ValidationError
from semitau.core.errors import InputError
from semitau.gen.study_file.reader import checked, read_study
from semitau.gen.study_file.study import StudyConfig, json_schema

from .small_study import TEXT
from .study_mistakes import MISTAKES

ROOT = Path(__file__).parents[2]
SEED = int(os.environ.get("SEMITAU_TEST_SEED", "20261201"))


def write(folder: Path, text: str) -> Path:
    path = folder / "study.toml"
    path.write_text(text, encoding="utf-8")
    return path


def complaint(folder: Path, text: str) -> list[str]:
    """Messages about a study file, without the folder."""
    path = write(folder, text)
    with pytest.raises(InputError) as error:
        read_study(path)
    assert error.value.status == 2
    return [str(problem).replace(f"{folder}/", "") for problem in error.value.problems]


# ── What is read ────────────────────────────────────────────────────────────────────────────────────────────────────


def test_values(tmp_path: Path) -> None:
    study = read_study(write(tmp_path, TEXT))
    assert study.study.seed == 7
    assert study.detector.tracks.polar_acceptance == pytest.approx((0.29670597, 2.61799388))  # 17°, 150°
    assert study.detector.tracks.efficiency.at([0.0, 0.1, 0.55, 1.0, 5.0]) == pytest.approx(
        [0.9, 0.9, 0.925, 0.95, 0.95]
    )
    assert study.detector.tag.efficiency["B+"] == 0.0035  # a default
    assert study.selection["p_lepton"].min == 0.3
    assert study.modes[0].role == "signal"
    assert study.modes[2].role == "normalisation"
    assert study.modes[4].role == "feed-down"
    assert study.modes[4].yield_constraint.uncertainty == 0.3
    assert study.modes[2].yield_constraint.kind == "free"
    assert study.modes[0].yield_constraint.kind == "fixed"
    followed = study.followed_by(study.modes[1])
    assert followed is not None
    assert followed.name == "Dst_light"
    assert study.followed_by(study.modes[3]) is None
    assert study.backgrounds[0].events_in == {"D0_e": 500, "D0_mu": 500}
    assert study.backgrounds[0].correlated == ("mm2", "el")
    assert study.component("fakes").role == "background"


def test_categories_are_written_out(tmp_path: Path) -> None:
    study = read_study(write(tmp_path, TEXT))
    assert [category.name for category in study.categories] == ["D0_e", "D0_mu", "Dstp_e", "Dstp_mu"]
    first = study.category("D0_e")
    assert first.label == "D⁰ e"
    assert first.axes["mm2"] == (-1.0, 1.0, 3.0, 9.0)
    assert first.axes["el"] == pytest.approx((0.2, 0.775, 1.35, 1.925, 2.5))  # (2.5 - 0.2) / 4 = 0.575 apart
    assert first.shape == (3, 4)
    assert study.observables == ("mm2", "el")


def test_cuts_of_a_category_go_before_the_general_ones(tmp_path: Path) -> None:
    text = TEXT.replace("q2 = { min = 4.0 }", "q2 = { min = 4.0 }\ndelta_m = { max = 0.16 }")
    text = text.replace('charm = ["D*+"]\n', 'charm = ["D*+"]\nselection = { q2 = { max = 9 } }\n')
    study = read_study(write(tmp_path, text))
    without, with_star = study.category("D0_e").cuts, study.category("Dstp_e").cuts
    assert set(without) == {"p_lepton", "q2"}
    assert set(with_star) == {"p_lepton", "q2", "delta_m"}
    assert (with_star["q2"].min, with_star["q2"].max) == (None, 9.0)


def test_file_is_remembered(tmp_path: Path) -> None:
    path = write(tmp_path, TEXT)
    study = read_study(path)
    assert study.text == TEXT
    assert study.path == path
    assert study.digest == hashlib.sha256(TEXT.encode()).hexdigest()
    assert study.beside("a.root") == tmp_path / "a.root"
    again = pickle.loads(pickle.dumps(study))
    assert again == study
    assert again.digest == study.digest


def test_windows_line_ends_and_byte_order_mark_are_no_harm(tmp_path: Path) -> None:
    path = tmp_path / "study.toml"
    path.write_bytes(b"\xef\xbb\xbf" + TEXT.replace("\n", "\r\n").encode())
    assert read_study(path).text == TEXT


def test_study_does_not_change(tmp_path: Path) -> None:
    study = read_study(write(tmp_path, TEXT))
    with pytest.raises(ValidationError, match="frozen"):
        study.study.seed = 8  # type: ignore[misc]


@pytest.mark.parametrize(("name", "least", "most"), [("marlow_small.toml", 5e6, 9e6), ("marlow.toml", 2e7, 1e8)])
def test_shipped_studies(name: str, least: float, most: float) -> None:
    study = read_study(ROOT / "configs" / name)
    assert least <= sum(mode.events for mode in study.modes) <= most
    assert len(study.categories) == 8
    assert len(study.backgrounds) >= 3
    assert len(study.variations) >= 12
    kinds = {variation.kind for variation in study.variations}
    assert len(kinds) == 9
    assert {mode.scales_with for mode in study.modes} == {"R_D", "R_Dst", None}
    assert study.toys.number >= 2000
    assert "invented" in study.text.split("[study]")[0]


def test_reading_a_study_imports_nothing_heavy() -> None:
    code = (
        "import sys; from semitau.gen.study_file.reader import read_study; read_study(sys.argv[1]);"
        "print([m for m in ('numba', 'scipy', 'awkward', 'uproot', 'matplotlib') if m in sys.modules])"
    )
    run = subprocess.run(
        [sys.executable, "-c", code, str(ROOT / "configs/marlow_small.toml")],
        capture_output=True,
        text=True,
        check=True,
    )
    assert run.stdout.strip() == "[]"


# ── What is wrong, one by one ───────────────────────────────────────────────────────────────────────────────────────


@pytest.mark.parametrize("name", MISTAKES)
def test_message(tmp_path: Path, name: str) -> None:
    old, new, message, *offset = MISTAKES[name]
    assert TEXT.count(old) >= 1
    line = TEXT[: TEXT.index(old)].count("\n") + 1 + (offset[0] if offset else 0)  # type: ignore[call-overload]
    got = complaint(tmp_path, TEXT.replace(old, new, 1))
    assert f"study.toml:{line}: {message}" in got


@pytest.mark.parametrize("name", MISTAKES)
def test_one_mistake_makes_few_messages(tmp_path: Path, name: str) -> None:
    """No avalanche: what a mistake drags along is told at most once for each table that it touches."""
    old, new, *_ = MISTAKES[name]
    assert len(complaint(tmp_path, TEXT.replace(old, new, 1))) <= 5


def test_all_problems_at_once_in_the_order_of_the_file(tmp_path: Path) -> None:
    """Problems within tables and between tables are told together, although some tables cannot be understood."""
    names = [
        "wrong type",
        "events not whole",
        "half of the tags",
        "unknown law",
        "edges do not increase",
        "normalisation",
    ]
    text = TEXT
    for name in [*names, "unknown category"]:
        old, new, *_ = MISTAKES[name]
        assert old in text
        text = text.replace(old, new, 1)
    got = complaint(tmp_path, text)
    for name in names:  # the category table with wrong edges hides which categories there are
        assert any(line.endswith(MISTAKES[name][2]) for line in got), name
    lines = [int(line.split(":")[1]) for line in got]
    assert lines == sorted(lines)
    assert len(got) == len(names)


def test_study_made_without_a_file_is_checked_too() -> None:
    """Without a file there is no line; the rule is still told."""
    data = tomllib.loads(TEXT.replace('name = "muon_id"', 'name = "R0"'))
    with pytest.raises(ValidationError, match="names a variation that there is already"):
        StudyConfig.model_validate(data)


# ── Files that are no study ─────────────────────────────────────────────────────────────────────────────────────────


@pytest.mark.parametrize(
    ("text", "message"),
    [
        # line and column of the first character that does not fit, counted by hand
        ("[study]\nname = \n", "study.toml:2:8: is no TOML: invalid value"),
        ("[study]\nname = 'a'\nname = 'b'\n", "study.toml:3:11: is no TOML: cannot overwrite a value"),
        ("[study\n", "study.toml:1:7: is no TOML: expected ']' at the end of a table declaration"),
        ("a = 1\n\nb = [1,\n", "study.toml:3:8: is no TOML: invalid value at the end of the file"),
        ('a = """x\n\n', "study.toml:1:9: is no TOML: unterminated string at the end of the file"),
    ],
)
def test_syntax(tmp_path: Path, text: str, message: str) -> None:
    assert [line.lower() for line in complaint(tmp_path, text)] == [message.lower()]


def test_file_without_tables_lacks_everything(tmp_path: Path) -> None:
    got = complaint(tmp_path, "# nothing yet\n")
    assert [line.split(": ")[1].split(". ")[0] for line in got] == [
        f"lacks the key {key}" for key in ("study", "experiment", "mode", "category")
    ]


@pytest.mark.parametrize(
    ("make", "message"),
    [
        (lambda path: None, "there is no such file"),
        (lambda path: path.mkdir(), "is a folder. Name the file in it."),
        (lambda path: path.write_bytes(b"\n \n"), "is empty. Examples are in configs/ and docs/."),
        (
            lambda path: path.write_text("a = “300\u00a0MeV”"),
            ":1:5: is no TOML: invalid value (got \u00a0 (U+00A0), “ (U+201C)",
        ),
        (lambda path: path.write_text("a = ‘b’\n"), "’ (U+2019)). Write straight quotes and plain blanks"),
        (lambda path: path.write_bytes(b"root\x00\x00\xff\xfe"), ":1: is no UTF-8 text. Save the file as UTF-8 text."),
        (lambda path: path.write_bytes(b"# a\n# \xe9\n"), ":2: is no UTF-8 text. Save the file as UTF-8 text."),
        (lambda path: path.write_bytes(b"#" * 5_000_000), "is too large"),
        (lambda path: path.write_text("a = " + "[" * 5000), "is no TOML: nested too deeply"),
        (lambda path: path.write_text("a = 2026-02-31"), "is no TOML"),
        (lambda path: path.write_text("a = " + "9" * 5000), "is no TOML"),
    ],
)
def test_not_a_study_file(tmp_path: Path, make: Callable[[Path], object], message: str) -> None:
    path = tmp_path / "study.toml"
    make(path)
    with pytest.raises(InputError) as error:
        read_study(path)
    assert str(error.value).startswith(str(path))
    assert message in str(error.value)


@pytest.mark.skipif(os.geteuid() == 0, reason="root may read everything")
def test_no_permission(tmp_path: Path) -> None:
    path = write(tmp_path, TEXT)
    path.chmod(0)
    with pytest.raises(InputError, match="cannot be read"):
        read_study(path)


# ── Anything at all ─────────────────────────────────────────────────────────────────────────────────────────────────

STUDIES = [TEXT, (ROOT / "configs" / "marlow_small.toml").read_text(encoding="utf-8")]
SCRAPS = ["", "=", "[", "]", "{}", '"', "'", "\n", "nan", "-inf", "true", "1e999", "[[mode]]\n", "0", "-1", '"D*"']
SCRAPS += ["\x00", "é", "\\"]


def mangled(text: str, seed: int) -> str:
    """Some pieces cut out, doubled, swapped or replaced."""
    chance = random.Random(seed)
    for _ in range(chance.randint(1, 6)):
        start = chance.randrange(len(text) + 1)
        stop = min(len(text), start + chance.choice([0, 1, 2, 5, 20, 80]))
        piece = chance.choice([*SCRAPS, text[start:stop] * 2, text[stop : stop + 30]])
        text = text[:start] + piece + text[stop:]
    return text


@settings(max_examples=150, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(which=st.integers(0, 1), seed=st.integers(0, 2**32))
def test_mangled_text_is_read_or_complained_about(tmp_path: Path, which: int, seed: int) -> None:
    path = write(tmp_path, mangled(STUDIES[which], seed ^ SEED))
    try:
        read_study(path)
    except InputError as error:
        for problem in error.problems:
            assert str(problem).startswith(str(path)), problem
            assert problem.what, problem


VALUES: list[object] = [0, -1, 1, 0.5, 1e300, -1e-300, True, "", "D", "e", "300 MeV", "no unit"]
VALUES += [[], {}, [1, "a"], {"min": 1}]


def leaves(value: object, path: tuple[str | int, ...] = ()) -> list[tuple[str | int, ...]]:
    items = value.items() if isinstance(value, dict) else enumerate(value) if isinstance(value, list) else ()
    return [path, *(place for key, item in items for place in leaves(item, (*path, key)))]


@settings(max_examples=200, deadline=None)
@given(value=st.sampled_from(VALUES), place=st.randoms(use_true_random=False))
def test_any_value_anywhere_is_understood_or_complained_about(value: object, place: random.Random) -> None:
    """Replaces one value of a sound study, wherever it stands; only the study's own kind of error may come out."""
    data = tomllib.loads(TEXT)
    *way, last = place.choice(leaves(data)[1:])
    spot = data
    for key in way:
        spot = spot[key]  # type: ignore[index]
    spot[last] = value  # type: ignore[index]
    study, found = checked(data, Path("."))
    assert (study is None) == bool(found)
    assert all(conflict.what for conflict in found)


def test_schema_knows_every_table() -> None:
    schema = json_schema()
    tables = tomllib.loads(STUDIES[1])
    assert set(tables) <= set(schema["properties"])
    assert schema["additionalProperties"] is False
