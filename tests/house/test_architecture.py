"""The layout is a promise: one namespace package, imports that point one way, small files, a true file map."""

from __future__ import annotations

import ast
import re
from collections.abc import Iterator
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]
PACKAGES = ("core", "gen", "fit", "study")
ALLOWED = {"core": set(), "gen": {"core"}, "fit": {"core"}, "study": {"core", "gen", "fit"}}


def sources() -> list[tuple[str, Path]]:
    return [
        (package, path) for package in PACKAGES for path in sorted((ROOT / package / "semitau" / package).rglob("*.py"))
    ]


def imported_packages(tree: ast.AST) -> Iterator[tuple[int, str]]:
    """Line and package of each import of semitau.<package>, however it is written."""
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            names = [alias.name for alias in node.names]
        elif isinstance(node, ast.ImportFrom) and node.level == 0 and node.module == "semitau":
            names = [f"semitau.{alias.name}" for alias in node.names]
        elif isinstance(node, ast.ImportFrom) and node.level == 0 and node.module:
            names = [node.module]
        else:
            continue
        for name in names:
            parts = name.split(".")
            if parts[0] == "semitau":
                yield node.lineno, parts[1] if len(parts) > 1 else ""


def test_imports_point_one_way() -> None:
    wrong = []
    for package, path in sources():
        for line, target in imported_packages(ast.parse(path.read_text())):
            if target == package:
                wrong.append(f"{path.relative_to(ROOT)}:{line}: absolute import of its own package; make it relative")
            elif target and target not in ALLOWED[package]:  # the bare namespace belongs to nobody
                wrong.append(f"{path.relative_to(ROOT)}:{line}: {package} must not import semitau.{target}")
    assert not wrong, "\n".join(wrong)


def test_the_arrow_check_sees_each_way_of_writing() -> None:
    text = "import semitau.fit.model\nfrom semitau import gen\nfrom semitau.study.pictures import x\nimport numpy"
    assert [target for _, target in imported_packages(ast.parse(text))] == ["fit", "gen", "study"]


@pytest.mark.parametrize("package", PACKAGES)
def test_namespace_package(package: str) -> None:
    assert not (ROOT / package / "semitau" / "__init__.py").exists()
    assert (ROOT / package / "semitau" / package / "__init__.py").is_file()


def test_doors_hold_no_code() -> None:
    for package in PACKAGES:
        for path in (ROOT / package / "semitau" / package).rglob("__init__.py"):
            for node in ast.parse(path.read_text()).body:
                assert not isinstance(node, ast.ClassDef | ast.For | ast.While | ast.With), f"{path}:{node.lineno}"
                if isinstance(node, ast.FunctionDef):
                    assert node.name in {"__getattr__", "__dir__"}, f"{path}:{node.lineno}: {node.name}"


def test_one_idea_a_file() -> None:
    vague = {"utils", "util", "helpers", "helper", "common", "misc", "tools"}
    for _, path in sources():
        assert path.stem not in vague, f"{path}: name the file for its idea"
        lines = len(path.read_text().splitlines())
        assert lines <= 500, f"{path}: {lines} lines; about 400 is where a file wants splitting"


def test_users_mistakes_are_not_asserts() -> None:
    for _, path in sources():
        for node in ast.walk(ast.parse(path.read_text())):
            assert not isinstance(node, ast.Assert), f"{path}:{node.lineno}: raise an InputError with advice instead"


def test_no_global_random_state() -> None:
    for _, path in sources():
        found = re.search(r"np\.random\.(seed|rand|normal|uniform|poisson)\b|import random\b", path.read_text())
        assert found is None, f"{path}: {found[0] if found else ''}"


def file_map() -> set[str]:
    """Paths in the fenced block that follows the heading 'File map' in DEVELOPERS.md."""
    text = (ROOT / "DEVELOPERS.md").read_text().split("## File map", 1)[1]
    block = text.split("```", 2)[1]
    folder, paths = "", set()
    for line in block.splitlines()[1:]:
        if not line.strip():
            continue
        name = line.split()[0]
        if not line.startswith(" "):
            folder = name if name.endswith("/") else ""
            paths |= set() if folder else {name}
        else:
            paths.add(folder + name)
    return paths


def test_file_map_is_true() -> None:
    mapped = file_map()
    real = {
        str(path.relative_to(ROOT))
        for folder in (*(f"{p}/semitau/{p}" for p in PACKAGES), "benchmarks")
        for path in (ROOT / folder).rglob("*.py")
    }
    real |= {
        str(path.relative_to(ROOT))
        for folder, glob in (("configs", "*.toml"), ("docs", "*.md"))
        for path in (ROOT / folder).glob(glob)
    }
    missing = sorted(real - mapped)
    gone = sorted(path for path in mapped if not (ROOT / path).exists())
    assert not missing, f"not in the file map of DEVELOPERS.md: {missing}"
    assert not gone, f"in the file map of DEVELOPERS.md but not in the tree: {gone}"
