"""Dice that depend on nothing but a seed and an instant: any moment can be computed without what came before."""

from math import sqrt
from typing import Final

import numpy as np
import numpy.typing as npt

Floats = npt.NDArray[np.float64]
Integers = npt.NDArray[np.int64]

_GOLDEN: Final = np.uint64(0x9E3779B97F4A7C15)
_FIRST: Final = np.uint64(0xBF58476D1CE4E5B9)
_SECOND: Final = np.uint64(0x94D049BB133111EB)


def salt(*words: str | int) -> int:
    """A 63-bit number for a combination of words, the same in every process (FNV-1a)."""
    number = 0xCBF29CE484222325
    for byte in "/".join(str(w) for w in words).encode():
        number = (number ^ byte) * 0x100000001B3 % 2**64
    return number % 2**63


def bits(keys: Integers, seed: int) -> npt.NDArray[np.uint64]:
    """64 mixed bits for every key: the finaliser of SplitMix64 (Steele, Lea and Flood 2014)."""
    z = np.asarray(keys, np.int64).astype(np.uint64) * _GOLDEN + np.uint64(seed % 2**64)
    z = (z ^ (z >> np.uint64(30))) * _FIRST
    z = (z ^ (z >> np.uint64(27))) * _SECOND
    return z ^ (z >> np.uint64(31))


def uniform(keys: Integers, seed: int) -> Floats:
    """Numbers in [0, 1), one a key."""
    return (bits(keys, seed) >> np.uint64(11)).astype(np.float64) / float(1 << 53)


def normal(keys: Integers, seed: int) -> Floats:
    """Nearly normal numbers of mean 0 and standard deviation 1, one a key: sums of four 16-bit uniforms.

    Never beyond ± 3.47, which suits the noise of a converter.
    """
    mixed = bits(keys, seed)
    total = np.zeros(mixed.shape)
    for shift in (0, 16, 32, 48):
        total += ((mixed >> np.uint64(shift)) & np.uint64(0xFFFF)).astype(np.float64)
    return (total / 65535.0 - 2.0) * sqrt(3.0)


def smooth(time_s: Floats, period_s: float, seed: int) -> Floats:
    """A smooth random curve in [0, 1] with a new independent value every ``period_s``."""
    x = np.asarray(time_s, np.float64) / period_s
    whole = np.floor(x)
    part = _ease(x - whole)
    keys = whole.astype(np.int64)
    return uniform(keys, seed) * (1.0 - part) + uniform(keys + 1, seed) * part


def smooth_across(time_s: Floats, period_s: float, across: float, seed: int) -> Floats:
    """As ``smooth``, for one place on a line: places closer than 1 in ``across`` share most of the curve."""
    row = int(np.floor(across))
    part = float(_ease(np.asarray(across - row)))
    lower = smooth(time_s, period_s, salt(seed, row))
    return lower if part == 0.0 else lower * (1.0 - part) + smooth(time_s, period_s, salt(seed, row + 1)) * part


def _ease(part: Floats) -> Floats:
    return part * part * (3.0 - 2.0 * part)
