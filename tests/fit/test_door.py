"""The door of the package: every name is there, none is hidden by a module, and opening it is light."""

from __future__ import annotations

import importlib
import pkgutil
import subprocess
import sys
from types import ModuleType

import pytest
from semitau import fit


def test_no_module_hides_a_public_name() -> None:
    modules = {module.name for module in pkgutil.iter_modules(fit.__path__)}
    assert not modules & set(fit.__all__)
    for name in modules:
        importlib.import_module(f"semitau.fit.{name}")
    for name in fit.__all__:
        assert not isinstance(getattr(fit, name), ModuleType)
        assert getattr(fit, name).__doc__
    assert dir(fit) == sorted(fit.__all__)


def test_unknown_name() -> None:
    with pytest.raises(AttributeError, match="no attribute 'fitter'"):
        _ = fit.fitter


def test_opening_it_compiles_nothing() -> None:
    code = "import sys; from semitau import fit; print([m for m in ('numba', 'scipy', 'numpy') if m in sys.modules])"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"
