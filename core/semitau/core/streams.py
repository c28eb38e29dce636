"""Random numbers by counting: a pure function of (seed, words, event, draw), whatever the order, blocks or workers.

Every number is the SplitMix64 finaliser of a counter (Steele, Lea, Flood, OOPSLA 2014; the constants are those of its
published 64-bit variant). A stream key names a purpose ("truth", channel, ...), an event key one event of it, and a
draw is a numbered constant of the code. A new draw never shifts the others, so scenarios of one event stay correlated.

Draw numbers are shared out: truth 0-49, response 50-127, shapes 128-191, single neutrinos of tau decays 192-255,
double charm 256-319, light hadrons that decay 320-1023, neutral pions 1024-1151, photons of leptons 2048-2175 (the
detector from 2112 on).
"""

from __future__ import annotations

import hashlib

import numpy as np
import numpy.typing as npt

from .compiled import inlined, kernel
from .errors import InputError, Problem

_MASK = (1 << 64) - 1
_STEP_INT = 0x9E3779B97F4A7C15  # odd part of 2^64 / golden ratio

_STEP = np.uint64(_STEP_INT)
_FACTOR_1 = np.uint64(0xBF58476D1CE4E5B9)
_FACTOR_2 = np.uint64(0x94D049BB133111EB)
_SHIFT_1 = np.uint64(30)
_SHIFT_2 = np.uint64(27)
_SHIFT_3 = np.uint64(31)
_ONE = np.uint64(1)
_TO_53_BITS = np.uint64(11)
_2_TO_MINUS_53 = 2.0**-53


@inlined
def mix(z: np.uint64) -> np.uint64:
    """SplitMix64 finaliser: a bijection of 64-bit integers whose output bits look independent."""
    z = (z ^ (z >> _SHIFT_1)) * _FACTOR_1
    z = (z ^ (z >> _SHIFT_2)) * _FACTOR_2
    return z ^ (z >> _SHIFT_3)


@inlined
def event_key(stream: np.uint64, event: np.uint64) -> np.uint64:
    """Key of one event of a stream; different events of one stream never share a key.

    The casts cost nothing and make plain whole numbers safe: int64 mixed with uint64 would become floating point.
    """
    return mix(np.uint64(stream) + (np.uint64(event) + _ONE) * _STEP)  # type: ignore[no-any-return]


@inlined
def uniform(key: np.uint64, draw: np.uint64) -> float:
    """Uniform number in [0, 1) with 53 bits for an event key and a draw number."""
    return np.int64(mix(np.uint64(key) + (np.uint64(draw) + _ONE) * _STEP) >> _TO_53_BITS) * _2_TO_MINUS_53


@kernel
def _fill_uniforms(stream: np.uint64, first_event: np.uint64, draw: np.uint64, out: npt.NDArray[np.float64]) -> None:
    for i in range(out.shape[0]):
        out[i] = uniform(event_key(stream, first_event + np.uint64(i)), draw)


def uniforms(stream: int | np.uint64, first_event: int, n: int, draw: int) -> npt.NDArray[np.float64]:
    """Draw number `draw` of the events first_event ... first_event + n - 1, as (n,) float64 in [0, 1).

    Bit-identical to calling `uniform(event_key(stream, event), draw)` in a compiled kernel.
    """
    out = np.empty(n)
    _fill_uniforms(np.uint64(stream), np.uint64(first_event), np.uint64(draw), out)
    return out


def stream_key(seed: int, *words: int | str) -> np.uint64:
    """64-bit key of a stream.

    seed : any whole number from 0 to 2^64 - 1; the study's or the call's seed.
    words : what the stream is for, e.g. "toys", 17; order matters, and 1 differs from "1".

    Raises InputError for a seed outside its range.
    """
    whole = int(seed) if isinstance(seed, int | float | np.integer) and seed == seed // 1 else -1
    if not 0 <= whole <= _MASK:
        raise InputError(
            Problem("the seed must be a whole number", where="seed", got=str(seed), wanted="0 to 2^64 - 1")
        )
    key = _mix_int(whole + _STEP_INT)
    for word in words:
        key = _mix_int((key ^ _word_number(word)) + _STEP_INT)
    return np.uint64(key)


def _word_number(word: int | str) -> int:
    kind = b"text" if isinstance(word, str) else b"int"
    return int.from_bytes(hashlib.blake2b(str(word).encode(), digest_size=8, person=kind).digest(), "little")


def _mix_int(z: int) -> int:
    """`mix` for Python integers: numpy scalars would warn of the overflow that is meant here."""
    z &= _MASK
    z = (z ^ (z >> 30)) * int(_FACTOR_1) & _MASK
    z = (z ^ (z >> 27)) * int(_FACTOR_2) & _MASK
    return z ^ (z >> 31)
