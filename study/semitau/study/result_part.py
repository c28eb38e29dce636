"""What every part of `results.json` is: frozen, strict, finite."""

from __future__ import annotations

from pydantic import BaseModel, ConfigDict


class Part(BaseModel):
    """A frozen part of the results; unknown keys and infinite numbers are errors."""

    model_config = ConfigDict(frozen=True, extra="forbid", allow_inf_nan=False)
