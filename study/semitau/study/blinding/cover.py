"""Hidden ratios: every number that is shown has an offset that only the passphrase knows.

    key     = scrypt(passphrase, salt = study name)           RFC 7914; makes guessing slow
    u       = HMAC-SHA-256(key, ratio) / 2^256 in [0, 1)      RFC 2104, one for each ratio
    offset  = width (2u - 1),  or  factor = (1 + width)^(2u - 1)

The offset depends on passphrase, study name, ratio, kind and width alone, so it stays while an analysis is improved. A
fit is hidden right where it ends; what comes after sees the hidden values only. Errors, pulls of nuisances and the
shape of likelihood curves are as they are: curves and regions move with the value.
"""

from __future__ import annotations

import getpass
import hashlib
import hmac
import os
import sys
from collections.abc import Mapping
from dataclasses import dataclass, replace
from math import isfinite
from typing import TYPE_CHECKING, Any

from semitau.core.errors import InputError, Problem, RunError

from ..results import Blinding as BlindingPart

if TYPE_CHECKING:
    from semitau.core.templates import TemplateSet
    from semitau.fit.fitting.model import Model, Parameter
    from semitau.fit.fitting.result import FitResult
    from semitau.fit.uncertainty.curves import Profile, Region

VARIABLE = "SEMITAU_PASSPHRASE"
SHORTEST = 12
"""Letters of a passphrase: its fingerprint is public, and short ones can be tried."""

WIDE = 5.0
"""Errors that the largest offset must reach, so that the hidden value says nothing about the true one."""

WITHHELD = 0.01
"""Expected share of signal in a bin above which its counts are not shown: they would tell the ratio."""


@dataclass(frozen=True)
class Cover:
    """What hides the ratios of one study. kind : "offset" or "factor"; width as in the study file."""

    kind: str
    width: float
    fingerprint: str
    _units: bytes = b""

    def hidden(self, ratio: str, value: float) -> float:
        """The value as it is shown."""
        digest = hmac.digest(self._units, f"ratio {ratio}".encode(), "sha256")
        side = 2.0 * int.from_bytes(digest, "big") / 2**256 - 1.0
        return value + self.width * side if self.kind == "offset" else float(value * (1.0 + self.width) ** side)

    def __repr__(self) -> str:  # never the key
        return f"Cover({self.kind!r}, {self.width!r}, {self.fingerprint!r})"

    @property
    def part(self) -> BlindingPart:
        """For results.json."""
        return BlindingPart(kind=self.kind, width=self.width, fingerprint=self.fingerprint)

    def result(self, model: Model, result: FitResult) -> FitResult:
        """The fit with its ratios hidden.

        Raises
        ------
        InputError : a ratio is held, bounded, constrained or followed: one could find the true one by trying.
        RunError : the width is less than five errors of a ratio.
        """
        held = [p.name for p in model.parameters if p.kind == "ratio" and not _is_free(p)]
        held += [p.name for p in model.parameters if any(name in (p.function or "") for name in model.ratios)]
        if held:
            raise InputError(
                Problem(
                    "a hidden ratio cannot be held, bounded, constrained or followed",
                    where=", ".join(dict.fromkeys(held)),
                    remedy="What the fit does then would tell it. Fit the expected events (--expected).",
                )
            )
        harmless = ("ratio", "yield", "nuisance", "size")
        others = [p.name for p in model.parameters if p.fixed is None and p.kind not in harmless]
        if others or not model.ratios:
            raise InputError(
                Problem(
                    "only ratios can be hidden",
                    where="blinding",
                    got=", ".join(others) or "a model without ratios",
                    remedy="Hold the others, or fit the expected events (--expected).",
                )
            )
        values = result.values.copy()
        for name in model.ratios:
            place = model.index(name)
            self._check_width(name, result.error(name), model.parameters[place].injected)
            values[place] = self.hidden(name, result.value(name))
        values.flags.writeable = False
        return replace(result, values=values)

    def curve(self, curve: Profile) -> Profile:
        """A likelihood curve moved to the hidden value."""
        shift = self.hidden(curve.parameter, curve.value) - curve.value
        return replace(
            curve, points=curve.points + shift, value=curve.value + shift, low=curve.low + shift,
            high=curve.high + shift, low_two=curve.low_two + shift, high_two=curve.high_two + shift,
        )  # fmt: skip

    def region(self, region: Region) -> Region:
        """A region of two ratios moved to the hidden values."""
        shifts = [
            self.hidden(name, value) - value for name, value in zip(region.parameters, region.values, strict=True)
        ]
        first, second = region.values
        return replace(
            region,
            first=region.first + shifts[0],
            second=region.second + shifts[1],
            values=(first + shifts[0], second + shifts[1]),
        )

    def _check_width(self, name: str, error: float, injected: float) -> None:
        reach = self.width if self.kind == "offset" else self.width * injected
        if error > 0 and reach < WIDE * error:
            needed = WIDE * error / (1.0 if self.kind == "offset" else injected)
            raise RunError(
                Problem(
                    "the blinding is not wide against the error",
                    where=f"[blinding] width, for {name}",
                    got=f"{self.width:g}",
                    wanted=f"{needed:.2g} or more ({WIDE:g} errors)",
                    remedy="Give a larger width.",
                )
            )


def _is_free(parameter: Parameter) -> bool:
    unbound = not any(map(isfinite, parameter.bounds))
    return parameter.fixed is None and parameter.constraint is None and parameter.function is None and unbound


def cover(kind: str, width: float, study: str, passphrase: str) -> Cover:
    """The cover of a study. Raises InputError for a passphrase that is too short."""
    if len(passphrase) < SHORTEST:
        raise InputError(
            Problem(
                "the passphrase is too short",
                where="blinding",
                got=f"{len(passphrase)} letters",
                wanted=f"{SHORTEST} or more",
                remedy="A few words that nobody would guess are good.",
            )
        )
    salt = f"semitau blinding\n{study}".encode()
    key = hashlib.scrypt(passphrase.encode(), salt=salt, n=2**14, r=8, p=1)
    fingerprint = hmac.digest(key, b"fingerprint", "sha256").hex()[:16]
    return Cover(kind, width, fingerprint, key)


def provenance(kind: str, width: float, study: str) -> dict[str, Any]:
    """What a template file keeps, so that every command that fits data to it hides the ratios."""
    return {"kind": kind, "width": width, "study": study}


def cover_of(templates: TemplateSet, data_kind: str) -> Cover | None:
    """The cover for a fit of these templates, None if nothing is to be hidden; asks for the passphrase.

    data_kind : "expected", "pseudo" or "file"; expected events hide nothing.

    Raises
    ------
    InputError : there is no passphrase, or it is too short.
    """
    kept = templates.provenance.get("blinding")
    if data_kind == "expected" or not isinstance(kept, Mapping):
        return None
    return cover(str(kept["kind"]), float(kept["width"]), str(kept["study"]), passphrase())


def passphrase() -> str:
    """From the environment, or typed in unseen. Raises InputError when there is neither."""
    given = os.environ.get(VARIABLE)
    if given is None and sys.stdin is not None and sys.stdin.isatty():
        given = getpass.getpass("Passphrase of the blinding: ")
    if not given:
        raise InputError(
            Problem(
                "the ratios are hidden, and there is no passphrase",
                where="blinding",
                remedy=f"Set the environment variable {VARIABLE}, or fit the expected events.",
            )
        )
    return given
