"""Stretches of past data in which a value lay beyond a limit."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from analysis.alarm.rules import microseconds
from analysis.arrays import BoolArray, FloatArray, IntArray


class Excursion(NamedTuple):
    """One stretch beyond a limit, from its first to its last reading beyond. [us UTC]"""

    begun_at_us: int
    ended_at_us: int
    worst: float
    """The value furthest beyond the limit."""
    readings: int

    @property
    def duration_s(self) -> float:
        """From the first to the last reading beyond. [s]"""
        return (self.ended_at_us - self.begun_at_us) / microseconds(1.0)


def excursions(
    value: FloatArray,
    *,
    measured_at_us: IntArray,
    usable: BoolArray,
    limit: float,
    is_high: bool,
    max_gap_s: float,
    min_duration_s: float = 0.0,
) -> tuple[Excursion, ...]:
    """Return the stretches in which usable values lie beyond a limit, one after the other.

    Unusable readings neither end nor prolong a stretch; a gap longer than `max_gap_s` ends it.

    Parameters
    ----------
    value, measured_at_us, usable : ndarray, shape (N,)
        Values in the order of their times. [any, us UTC, bool]
    limit : float
        Same unit as the value.
    is_high : bool
        Beyond is above, else below.
    max_gap_s : float
        Readings further apart belong to two stretches. [s]
    min_duration_s : float
        Shorter stretches are left out. [s]
    """
    judged = np.flatnonzero(usable & ~np.isnan(value))
    values, times = value[judged], measured_at_us[judged]
    is_beyond = values > limit if is_high else values < limit
    is_gap = np.diff(times, prepend=times[:1]) > microseconds(max_gap_s)
    # A stretch begins where it is beyond and the reading before was not, or lies before a gap.
    begins = np.flatnonzero(is_beyond & (~np.concatenate(([False], is_beyond[:-1])) | is_gap))
    is_last = ~np.concatenate((is_beyond[1:], [False])) | np.concatenate((is_gap[1:], [False]))
    ends = np.flatnonzero(is_beyond & is_last)
    worst = np.max if is_high else np.min
    found = (
        Excursion(int(times[begin]), int(times[end]), float(worst(values[begin : end + 1])), int(end - begin + 1))
        for begin, end in zip(begins.tolist(), ends.tolist(), strict=True)
    )
    return tuple(item for item in found if item.duration_s >= min_duration_s)
