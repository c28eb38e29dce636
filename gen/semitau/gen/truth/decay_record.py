"""A decay as plain JSON data: events carry it as a parameter of their records, so they know what they were drawn from.

Record parameters survive slicing, masking, concatenation of samples of one decay, pickling and Parquet files; joining
samples of different decays drops them, which is right.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import asdict, fields
from typing import Any

import awkward as ak

from ..decays.decay import Decay, WilsonCoefficients
from ..decays.form_factor_set import FormFactors, FormFactorSet

PARAMETER = "decay"


def decay_as_data(decay: Decay) -> dict[str, Any]:
    """JSON data; complex numbers as [real, imaginary]."""
    data: dict[str, Any] = {field.name: getattr(decay, field.name) for field in fields(decay)}
    data["wilson"] = {name: [value.real, value.imag] for name, value in asdict(decay.couplings).items()}
    data["form_factors"] = asdict(data["form_factors"])
    return data


def decay_from_data(data: Mapping[str, Any]) -> Decay:
    """Inverse of `decay_as_data`; the result equals the original."""
    wilson = WilsonCoefficients(**{name: complex(*value) for name, value in data["wilson"].items()})
    members = [
        FormFactors(**{name: _tuples(value) for name, value in member.items()})
        for member in data["form_factors"]["members"]
    ]
    sets = FormFactorSet(data["form_factors"]["name"], tuple(members), data["form_factors"].get("shared", False))
    return Decay(**{**data, "wilson": wilson, "form_factors": sets})


def decay_of(events: ak.Array) -> Decay | None:
    """The decay that simulated events were drawn from; None if they do not carry one."""
    layout = ak.to_layout(events)
    while not layout.is_record and hasattr(layout, "content"):
        layout = layout.content
    data = (layout.parameters or {}).get(PARAMETER) if layout.is_record else None
    return None if data is None else decay_from_data(data)


def _tuples(value: Any) -> Any:
    return tuple(map(_tuples, value)) if isinstance(value, list | tuple) else value
