"""Bins that deserve a look, counted by hand."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from semitau.core.templates import Template
from semitau.fit.fitting.template_content import template_content

from . import problems


def test_counts_by_hand() -> None:
    base = problems.linear(10.0)
    templates = dict(base.templates)
    contents = np.array([0.0, -1.0, 0.0, *[1.0] * 9])
    variance = np.array([0.0, 1.0, 2.0, *[1.0] * 9])
    templates["wide", "a"] = Template(contents, variance)
    zero = np.zeros(12)
    templates["wide", "b"] = Template(np.array([0.0, 2.0, 1.0, *[20.0] * 9]), zero)
    templates["wide", "c"] = Template(zero, zero)
    found = template_content(replace(base, templates=templates))
    assert (found.negative, found.cancelled, found.unfilled, found.bins) == (1, 1, 1, 12)
    assert found.empty == 2  # the first bin of a and of b; c expects nothing anywhere
    assert found.poor == 2  # errors of 1 on 1 and √2 on 1
    assert "2 of 12 bins" in found.text
    assert "1 contents of single components are negative" in found.text


def test_nothing_to_say() -> None:
    assert template_content(problems.linear(1000.0)).text == ""
