"""Fits of coefficients: the deepest minimum, and what should be looked at."""

from __future__ import annotations

from semitau.core.errors import InputError, Problem, RunError
from semitau.fit.fitting.coefficients import deepest, doubts
from semitau.fit.fitting.data import Data
from semitau.fit.fitting.model import Model
from semitau.fit.fitting.result import FitResult


def fit_coefficients(model: Model, data: Data) -> tuple[FitResult, tuple[str, ...]]:
    """The deepest of many fits, and notes on others nearly as deep, on limits and on effective events.

    Raises
    ------
    RunError : none of them converged.
    """
    result, others = deepest(model, data)
    if not result.valid:
        raise RunError(*(result.reasons or (Problem("the fit failed"),)))
    notes = [str(problem) for problem in doubts(model, result)]
    for other in others:
        place = ", ".join(f"{name} = {other.value(name):.3g}" for name in model.coefficients)
        higher = 2.0 * (other.minus_log_likelihood - result.minus_log_likelihood)
        notes.append(f"There is another minimum at {place}, only {higher:.2f} higher in -2 ln L.")
    return result, tuple(notes)


def refuse_hidden(model: Model, hiding: object | None) -> None:
    """Coefficients give the ratios away.

    Raises
    ------
    InputError : coefficients are to be fitted to data whose ratios are hidden.
    """
    if hiding is not None and model.following:
        raise InputError(
            Problem(
                "the coefficients would give hidden ratios away",
                "--free",
                got=", ".join(model.coefficients),
                remedy="Fit the expected events (--expected), or unblind first.",
            )
        )
