"""What the completed buckets of a sensor say of the one being filled: limits and levels that hold for a bucket.

Computed once a bucket and sensor, not once a reading; a block of live readings mostly finds them in the state.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import numpy as np

from analysis.sensor.quality.limits import MEMORY_BUCKETS
from analysis.sensor.quality.state import (
    ATTENUATED_LEVEL,
    BEYOND,
    COMPARED,
    COMPARED_BEFORE,
    COUNT,
    FLAT_FAIL_HIGH,
    FLAT_FAIL_LOW,
    FLAT_JUDGED,
    FLAT_SUSPECT_HIGH,
    FLAT_SUSPECT_LOW,
    HIGHEST,
    LOWEST,
    NEIGHBOUR_LEVEL,
    NOISY,
    NOISY_BEFORE,
    RATE_LIMIT,
    RESOLUTION,
    SQUARES,
    SUM,
    TALLIES,
    TIGHT_RATE_LIMIT,
    VERDICTS,
)
from analysis.sensor.quality.thresholds import NO_NEIGHBOUR
from analysis.sensor.quality.words import VARIABLES, Variable

if TYPE_CHECKING:
    from collections.abc import Callable

    from analysis.arrays import FloatArray, IntArray
    from analysis.sensor.quality.thresholds import Thresholds

FEWEST_FOR_DEVIATION: Final = 12
"""Readings needed before a standard deviation is used."""

FULL_SIZE: Final = np.array([5.0, 0.0, 3.0])
"""Below 5 mS/cm, or 3 of salinity, less movement is due: EPS and MIN_VAR shrink in proportion. Temperature: never."""

SHARE_OF_WINDOW: Final = 0.75
"""Share of an attenuated-signal window's buckets that must hold readings."""


@dataclass(slots=True)
class Line:
    """Tallies of one sensor's buckets in a row, the empty ones between them filled in.

    Parameters
    ----------
    tally : ndarray of int64, (buckets, 7, 3)
        The first `MEMORY_BUCKETS` are padding.
    sums : ndarray of int64, (buckets + 1, 7, 3)
        Running sums of the above.
    """

    tally: IntArray
    sums: IntArray

    def over(self, at: IntArray, width: int) -> IntArray:
        """Return sums over the *width* buckets before each of *at*."""
        return np.asarray(self.sums[at] - self.sums[at - width])

    def before(self, at: IntArray) -> Before:
        """Return lowest, highest and filled buckets over every width of window before each of *at*."""
        held = self.tally[at[:, None] - np.arange(1, MEMORY_BUCKETS + 1)]
        return Before(
            lowest=np.minimum.accumulate(held[:, :, LOWEST], axis=1),
            highest=np.maximum.accumulate(held[:, :, HIGHEST], axis=1),
            filled=np.cumsum(held[:, :, COUNT] > 0, axis=1),
        )


@dataclass(slots=True)
class Before:
    """Windows that end before a bucket: (buckets, widths, 3), the width of 1 first."""

    lowest: IntArray
    highest: IntArray
    filled: IntArray


def line(bucket: IntArray, tally: IntArray) -> tuple[Line, IntArray]:
    """Return buckets in a row, and the place of each of *bucket* in it.

    A hole longer than the memory is closed up to one bucket more than the memory: nothing looks across it.
    """
    steps = np.minimum(np.diff(bucket), MEMORY_BUCKETS + 1)
    place = np.concatenate(([MEMORY_BUCKETS], MEMORY_BUCKETS + np.cumsum(steps)))
    length = int(place[-1]) + 1
    full = np.zeros((length, TALLIES, VARIABLES), dtype=np.int64)
    full[:, LOWEST], full[:, HIGHEST] = BEYOND, -BEYOND
    full[place] = tally
    sums = np.zeros((length + 1, TALLIES, VARIABLES), dtype=np.int64)
    np.cumsum(full, axis=0, out=sums[1:])
    return Line(tally=full, sums=sums), place


def verdicts(
    sensor: int,
    *,
    bucket: IntArray,
    tally: IntArray,
    count: int,
    thresholds: Thresholds,
    water_changed_us: int,
    neighbour_tally: Callable[[int], IntArray | None],
) -> FloatArray:
    """Return what holds for the last *count* of a sensor's buckets, from those before each.

    Parameters
    ----------
    sensor : int
    bucket : ndarray of int64, (buckets,)
        Numbers of the buckets that hold readings, rising.
    tally : ndarray of int64, (buckets, 7, 3)
    count : int
        How many of the last buckets are asked for.
    thresholds : Thresholds
    water_changed_us : int
        Time of the last logged water change.
    neighbour_tally : callable
        Returns the neighbour's tally of a bucket by number, or None.

    Returns
    -------
    ndarray of float64, (count, 11, 3)
        Rows `RATE_LIMIT` to `NEIGHBOUR_LEVEL` of `analysis.sensor.quality.state`.
    """
    row, place = line(bucket, tally)
    at, numbers = place[-count:], bucket[-count:]
    out = np.zeros((count, VERDICTS, VARIABLES))
    _rate_limits(out, row, at, sensor, thresholds)
    _noise_before(out, row, at, int(thresholds.noise_buckets[sensor]))
    before = row.before(at)
    _flat_windows(out, before, sensor, thresholds)
    out[:, ATTENUATED_LEVEL] = _attenuated(row, before, at, sensor, thresholds)
    if thresholds.is_still[sensor]:
        _hold_back_still_water(out, row, at, numbers, sensor, thresholds, water_changed_us, neighbour_tally)
    if thresholds.neighbour[sensor] != NO_NEIGHBOUR:
        out[:, NEIGHBOUR_LEVEL] = _neighbour(row, at, numbers, sensor, thresholds, neighbour_tally)
    return out


def _deviation(sums: IntArray) -> FloatArray:
    """Return standard deviations from tallies (..., 7, 3); NaN where there are too few readings."""
    count = sums[..., COUNT, :].astype(np.float64)
    total = sums[..., SUM, :].astype(np.float64)
    enough = count >= FEWEST_FOR_DEVIATION
    safe = np.where(enough, count, 1.0)
    variance = (sums[..., SQUARES, :] - total * total / safe) / safe
    return np.where(enough, np.sqrt(np.maximum(variance, 0.0)) * RESOLUTION, np.nan)


def _rate_limits(out: FloatArray, row: Line, at: IntArray, sensor: int, thresholds: Thresholds) -> None:
    deviation = _deviation(row.over(at, int(thresholds.rate_buckets[sensor])))
    floored = np.maximum(deviation, thresholds.rate_floor[:, sensor])
    out[:, RATE_LIMIT] = floored * thresholds.rate_deviations[sensor]
    out[:, TIGHT_RATE_LIMIT] = floored * thresholds.multi_variate_deviations[sensor]


def _noise_before(out: FloatArray, row: Line, at: IntArray, width: int) -> None:
    sums = row.over(at, width)
    out[:, NOISY_BEFORE], out[:, COMPARED_BEFORE] = sums[:, NOISY], sums[:, COMPARED]


def _flat_windows(out: FloatArray, before: Before, sensor: int, thresholds: Thresholds) -> None:
    windows = (
        (thresholds.flat_suspect_buckets, FLAT_SUSPECT_LOW, FLAT_SUSPECT_HIGH),
        (thresholds.flat_fail_buckets, FLAT_FAIL_LOW, FLAT_FAIL_HIGH),
    )
    each = np.arange(VARIABLES)
    for widths, low, high in windows:
        width = widths[:, sensor]
        covered = before.filled[:, width - 1, each] == width
        out[:, low] = np.where(covered, before.lowest[:, width - 1, each], -BEYOND)
        out[:, high] = np.where(covered, before.highest[:, width - 1, each], BEYOND)
        if low == FLAT_SUSPECT_LOW:
            out[:, FLAT_JUDGED] = covered & np.isfinite(thresholds.flat_tolerance[:, sensor])


def shrunk(level: FloatArray) -> FloatArray:
    """Return the factor for thresholds on how much a value must move, by its level, (..., 3): 1 in salt water."""
    share = np.clip(level / np.where(FULL_SIZE > 0.0, FULL_SIZE, 1.0), 0.0, 1.0)
    return np.where(FULL_SIZE > 0.0, share, 1.0)


def _attenuated(row: Line, before: Before, at: IntArray, sensor: int, thresholds: Thresholds) -> FloatArray:
    width = int(thresholds.attenuated_buckets[sensor])
    sums = row.over(at, width)
    deviation, due = _deviation(sums), shrunk(_mean(sums))
    suspect, fail = due * thresholds.attenuated_suspect[:, sensor], due * thresholds.attenuated_fail[:, sensor]
    judged = (before.filled[:, width - 1] >= SHARE_OF_WINDOW * width) & np.isfinite(deviation) & np.isfinite(suspect)
    return np.where(judged, 1.0 + 2.0 * (deviation < suspect) + (deviation < fail), 0.0)


def _hold_back_still_water(
    out: FloatArray,
    row: Line,
    at: IntArray,
    numbers: IntArray,
    sensor: int,
    thresholds: Thresholds,
    water_changed_us: int,
    neighbour_tally: Callable[[int], IntArray | None],
) -> None:
    """Take back flat line and attenuated signal where nothing shows that the water should have moved."""
    moved = thresholds.moved[:, sensor] / RESOLUTION
    changed_bucket = water_changed_us // int(thresholds.bucket_us[sensor])
    tolerance = thresholds.flat_tolerance[:, sensor] / RESOLUTION
    for index, (place, number) in enumerate(zip(at, numbers, strict=True)):
        for variable in Variable:
            lying = _flat_for(row.tally[place - MEMORY_BUCKETS : place], variable, float(tolerance[variable]))
            windows = (
                (FLAT_JUDGED, max(lying, int(thresholds.flat_suspect_buckets[variable, sensor]))),
                (ATTENUATED_LEVEL, int(thresholds.attenuated_buckets[sensor])),
            )
            for verdict, width in windows:
                own = row.tally[place - width : place]
                beside = [tally for tally in map(neighbour_tally, range(number - width, number)) if tally is not None]
                if not (number - width <= changed_bucket < number or _has_moved(own, beside, variable, moved)):
                    out[index, verdict, variable] = 0.0


def _flat_for(tally: IntArray, variable: Variable, tolerance: float) -> int:
    """Return for how many of the last buckets the line has been flat: it may have been due to move in any."""
    highest = np.maximum.accumulate(tally[::-1, HIGHEST, variable])
    lowest = np.minimum.accumulate(tally[::-1, LOWEST, variable])
    is_flat = (highest - lowest <= tolerance) & (tally[::-1, COUNT, variable] > 0)
    return int(is_flat.shape[0] if is_flat.all() else np.argmin(is_flat))


def _has_moved(own: IntArray, beside: list[IntArray], variable: Variable, moved: FloatArray) -> bool:
    warmth = Variable.TEMPERATURE
    if variable is not warmth and _spread(own)[warmth] > moved[warmth]:
        return True
    if not beside:
        return False
    spread = _spread(np.stack(beside))
    return bool(spread[variable] > moved[variable] or spread[warmth] > moved[warmth])


def _spread(tally: IntArray) -> IntArray:
    """Return highest less lowest over buckets (buckets, 7, 3): negative where there was no reading."""
    return np.asarray(tally[:, HIGHEST].max(axis=0) - tally[:, LOWEST].min(axis=0))


def _neighbour(
    row: Line,
    at: IntArray,
    numbers: IntArray,
    sensor: int,
    thresholds: Thresholds,
    neighbour_tally: Callable[[int], IntArray | None],
) -> FloatArray:
    """Return levels of the neighbour test: mean of the bucket before against the neighbour's of the same bucket."""
    allowed = thresholds.neighbour_difference[:, sensor]
    levels = np.zeros((at.shape[0], VARIABLES))
    for index, (place, number) in enumerate(zip(at, numbers, strict=True)):
        own, other = row.tally[place - 1], neighbour_tally(int(number) - 1)
        if other is None:
            continue
        judged = (own[COUNT] > 0) & (other[COUNT] > 0) & np.isfinite(allowed)
        difference = np.abs(_mean(own) - _mean(other))
        levels[index] = np.where(judged, 1.0 + 2.0 * (difference > np.nan_to_num(allowed)), 0.0)
    return levels


def _mean(tally: IntArray) -> FloatArray:
    return np.asarray(tally[..., SUM, :] / np.maximum(tally[..., COUNT, :], 1) * RESOLUTION)
