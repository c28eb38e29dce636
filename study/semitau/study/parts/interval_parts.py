"""Intervals of every kind, as plain numbers and as a table."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Any

import numpy as np
from rich.table import Table
from semitau.core.errors import SemitauError
from semitau.fit.fitting.data import Data
from semitau.fit.fitting.model import Model
from semitau.fit.fitting.result import FitResult
from semitau.fit.toys.neyman import toy_interval
from semitau.fit.toys.poor_templates import correct_for_templates
from semitau.fit.uncertainty.curves import profile

from ..blinding.cover import Cover
from ..numbers import digits_for, signed, with_error
from ..terminal.summary import plain_table

Report = Callable[[str, int, int], None]
NAMES = {
    "curvature": "curvature of the likelihood",
    "likelihood": "likelihood curve, 68.3 %",
    "likelihood_two": "likelihood curve, 95.4 %",
    "toys": "toys",
    "corrected": "corrected for poor templates",
}


def found_intervals(
    model: Model,
    data: Data,
    best: FitResult,
    hiding: Cover | None,
    confidence: float,
    toys: int,
    seed: int,
    precision: float,
    workers: int | None,
    report: Report | None,
) -> list[dict[str, Any]]:
    """For each ratio its label, value, error, and the intervals by kind: low, high, and what else there is to say.

    An end that is not reached is null; a kind that cannot be had has a "reason" instead of ends.
    """
    found = []
    for name in (name for name in model.ratios if best.error(name) > 0):
        value, error = best.value(name), best.error(name)
        shift = 0.0 if hiding is None else hiding.hidden(name, value) - value
        curve = profile(model, data, name, [value], result=best)
        kinds: dict[str, dict[str, Any]] = {
            "curvature": _ends(value - error, value + error, shift),
            "likelihood": _ends(curve.low, curve.high, shift),
            "likelihood_two": _ends(curve.low_two, curve.high_two, shift),
        }
        if toys > 0:
            interval = toy_interval(
                model, data, name, confidence=confidence, toys=toys, seed=seed, precision=precision,
                workers=workers, report=report, result=best,
            )  # fmt: skip
            kinds["toys"] = {
                **_ends(interval.low, interval.high, shift),
                "low_error": interval.low_error,
                "high_error": interval.high_error,
                "confidence": confidence,
                "toys": toys,
                "failures": interval.failures,
            }
        if model.template_statistics and model.likelihood == "light":
            try:
                better = correct_for_templates(model, best)
            except SemitauError as refusal:
                kinds["corrected"] = {"reason": str(refusal)}
            else:
                middle, width = better.value(name), better.error(name)
                kinds["corrected"] = {**_ends(middle - width, middle + width, shift), "noise": better.noise}
        label = model.parameters[model.index(name)].label
        found.append({"name": name, "label": label, "value": value + shift, "error": error, "intervals": kinds})
    return found


def interval_table(found: Sequence[dict[str, Any]]) -> Table:
    """One line a ratio and kind."""
    table = plain_table("Interval", "fitted", "from", "to", "ends known to")
    for ratio in found:
        places = digits_for(ratio["error"]) + 1
        table.add_row(ratio["label"], with_error(ratio["value"], ratio["error"]), "", "", "", style="bold")
        for kind, ends in ratio["intervals"].items():
            known = f"± {max(ends['low_error'], ends['high_error']):.{places}f}" if "low_error" in ends else ""
            cells = [
                "not reached" if ends.get(side) is None else signed(ends[side], places) for side in ("low", "high")
            ]
            if "reason" in ends:
                cells = ["not to be had", ""]
            level = f", {100 * ends['confidence']:.1f} %" if "confidence" in ends else ""
            table.add_row(f"  {NAMES[kind]}{level}", "", *cells, known)
    return table


def _ends(low: float, high: float, shift: float) -> dict[str, float | None]:
    return {
        "low": low + shift if np.isfinite(low) else None,
        "high": high + shift if np.isfinite(high) else None,
    }
