"""[blinding]: what hides the ratios until the analysis is final."""

from __future__ import annotations

from typing import Literal

from pydantic import Field

from .rules import Positive, Table


class Blinding(Table):
    """Hides every fitted ratio behind a number that follows from a passphrase, until `semitau unblind`.

    The passphrase is asked for, or taken from the environment variable SEMITAU_PASSPHRASE; it stands in no file. Fits
    of expected events hide nothing.
    """

    kind: Literal["offset", "factor"] = Field(default="offset", description="what each ratio gets")
    width: Positive = Field(
        description="the largest offset, in the ratio's unit; or the factor lies between 1/(1 + width) and 1 + width. "
        "At least five errors of every ratio"
    )
