"""Doors are pinned: a public name comes or goes only on purpose, with this list."""

from __future__ import annotations

import importlib
import subprocess
import sys

import pytest

PUBLIC = {
    "gen": {
        "Decay", "WilsonCoefficients", "differential_rate", "form_factor_sets", "form_factors", "observables", "ratio",
        "read_form_factors", "simulate", "weights", "DoubleCharmChain", "double_charm_chains", "simulate_double_charm",
    },
    "fit": {"Model", "maximise", "profile", "read_templates", "run_toys"},
}  # fmt: skip


@pytest.mark.parametrize("package", PUBLIC)
def test_promised_names_are_there(package: str) -> None:
    door = importlib.import_module(f"semitau.{package}")
    assert PUBLIC[package] <= set(door.__all__)
    for name in door.__all__:
        assert getattr(door, name) is not None
        assert getattr(door, name).__doc__, f"semitau.{package}.{name} has no docstring"


@pytest.mark.parametrize("package", ["core", "gen", "fit", "study"])
def test_doors_are_light(package: str) -> None:
    """Opening a door must not compile or plot: heavy libraries come with the function that needs them."""
    code = f"import sys, semitau.{package}; print([m for m in ('numba', 'matplotlib', 'awkward') if m in sys.modules])"
    out = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout
    assert out.strip() == "[]"


def test_unknown_name_is_an_attribute_error() -> None:
    from semitau import gen

    with pytest.raises(AttributeError, match="no_such_name"):
        _ = gen.no_such_name
