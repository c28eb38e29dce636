"""What `semitau reach` is told on the command line, as the table of a study file."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from semitau.core.errors import InputError, Problem
from semitau.gen.study_file.reach import ComparedValue, ReachSection

from ..run.fitting import read_factors


def asked_reach(
    factors: str,
    true: Sequence[str],
    against: Sequence[str],
    pairs: float | None,
    luminosity: float | None,
    growing: bool,
) -> ReachSection:
    """The table. factors : numbers between commas. true, against : see `read_true`, `read_compared`.

    Raises InputError for anything that is not of this form.
    """
    multiples = tuple(sorted(set(read_factors(factors))))
    if len(multiples) < 2:
        raise InputError(Problem("needs at least two amounts of data", "--factors", str(len(multiples))))
    if not 0.0 < multiples[0] <= multiples[-1] < float("inf"):
        raise InputError(Problem("must be positive", "--factors", repr(factors)))
    return ReachSection(
        factors=multiples,
        true=read_true(true),
        against=read_compared(against),
        generated="grows" if growing else "fixed",
        pairs=pairs,
        luminosity=luminosity,
    )


def read_true(texts: Sequence[str]) -> dict[str, float]:
    """Ratio -> value from NAME=VALUE. Raises InputError for anything else."""
    found = {name: numbers[0] for name, numbers in _named(texts, "--true", 1)}
    for name, value in found.items():
        if value <= 0.0:
            raise InputError(Problem("must be positive", "--true", f"{name}={value:g}"))
    return found


def read_compared(texts: Sequence[str]) -> dict[str, ComparedValue]:
    """Ratio -> value and error from NAME=VALUE or NAME=VALUE:ERROR. Raises InputError for anything else."""
    return {
        name: ComparedValue(value=numbers[0], error=(*numbers, 0.0)[1])
        for name, numbers in _named(texts, "--against", 2)
    }


def _named(texts: Sequence[str], option: str, most: int) -> Iterator[tuple[str, list[float]]]:
    wanted = "NAME=VALUE, e.g. R_D=0.35" if most == 1 else "NAME=VALUE:ERROR, e.g. R_D=0.298:0.004"
    for text in texts:
        name, _, rest = text.partition("=")
        try:
            numbers = [float(part) for part in rest.split(":")]
        except ValueError:
            numbers = []
        finite = all(abs(number) < float("inf") for number in numbers)
        usable = name.strip().isidentifier() and name.isascii()
        if not (usable and 1 <= len(numbers) <= most and finite and min(numbers[1:], default=0.0) >= 0.0):
            raise InputError(Problem("not a ratio and its value", where=option, got=repr(text), wanted=wanted))
        yield name.strip(), numbers
