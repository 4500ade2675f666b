"""Noise that belongs to a moment: the same reading has the same noise, however a feed is cut into pieces."""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from analysis.arrays import FloatArray, IntArray

_GOLDEN: Final = 0x9E3779B97F4A7C15
_MASK: Final = (1 << 64) - 1


def uniform(times_us: IntArray, *, seed: tuple[int, ...]) -> FloatArray:
    """Return one number from 0 to 1 for each moment.

    The moment is mixed by SplitMix64 (Steele, Lea and Flood 2014, DOI 10.1145/2660193.2660195).
    """
    start = 0
    for part in seed:
        start = int(_mixed(np.array([(start ^ part) & _MASK], dtype=np.uint64))[0])
    bits = _mixed(np.asarray(times_us, dtype=np.int64).view(np.uint64) ^ np.uint64(start))
    return np.asarray((bits >> np.uint64(11)).astype(np.float64) * 2.0**-53)


def normal(times_us: IntArray, *, seed: tuple[int, ...]) -> FloatArray:
    """Return one number of the standard normal distribution for each moment (Box and Muller 1958)."""
    radius = np.sqrt(-2.0 * np.log1p(-uniform(times_us, seed=(*seed, 1))))
    return np.asarray(radius * np.cos(2.0 * np.pi * uniform(times_us, seed=(*seed, 2))))


def _mixed(words: NDArray[np.uint64]) -> NDArray[np.uint64]:
    z = words + np.uint64(_GOLDEN)  # unsigned arrays wrap around, as the method wants
    z = (z ^ (z >> np.uint64(30))) * np.uint64(0xBF58476D1CE4E5B9)
    z = (z ^ (z >> np.uint64(27))) * np.uint64(0x94D049BB133111EB)
    return z ^ (z >> np.uint64(31))
