"""The covariance of several fitted parameters by kind of source, as `decomposition` does for the error of one."""

from __future__ import annotations

from collections.abc import Sequence
from typing import NamedTuple

import numpy as np
from semitau.core.errors import Problem, RunError
from semitau.core.templates import Floats

from ..fitting.model import Model
from ..fitting.result import FitResult
from .decomposition import information


class SplitCovariance(NamedTuple):
    """(names, names) each; they add up. statistical : finite data and finite templates. systematic : constraints."""

    statistical: Floats
    systematic: Floats


def split_covariance(model: Model, result: FitResult, names: Sequence[str]) -> SplitCovariance:
    """Covariance of these fitted parameters by kind of source.

    With the expected information I = Σ_s I_s, the part of a source is I⁻¹ I_s I⁻¹ (decomposition.py); all are scaled so
    that the variances are those of the fit.

    Raises RunError when the fit is not valid or a parameter was held.
    """
    places = np.array([model.index(name) for name in names])
    if not result.valid or not np.all(result.errors[places] > 0):
        raise RunError(Problem("there is no covariance to take apart", ", ".join(names)))
    free = np.array([k for k in model.free if result.errors[k] > 0])
    inside = np.ix_(free, free)
    through = model.jacobian(result.values)
    counts, templates = information(model, result.values)
    data = (through.T @ (counts + templates) @ through)[inside]
    known = (through.T @ model.precision(result.values) @ through)[inside]
    scale = 1.0 / np.sqrt(np.diag(data + known))
    whole = (data + known) * np.outer(scale, scale)
    rows = (scale[:, None] * np.linalg.solve(whole, scale[:, None] * through[np.ix_(places, free)].T)).T
    parts = rows @ data @ rows.T, rows @ known @ rows.T
    to_fit = result.errors[places] / np.sqrt(np.diag(parts[0] + parts[1]))
    return SplitCovariance(*(part * np.outer(to_fit, to_fit) for part in parts))
