"""Slow one-sided change of a sensor against what it should agree with: the mark of fouling and drift."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import numpy as np

from analysis.arrays import MICROSECONDS_PER_SECOND

if TYPE_CHECKING:
    from collections.abc import Sequence

    from analysis.arrays import BoolArray, FloatArray, IntArray

BLOCK_US: Final = 2 * 3600 * MICROSECONDS_PER_SECOND
DAY_US: Final = 86_400 * MICROSECONDS_PER_SECOND
FEWEST_BLOCKS: Final = 12
MOST_BLOCKS: Final = 180
"""A fortnight of two-hour blocks; longer records use longer blocks."""

LEAST_STEP: Final = 0.004
"""Steps of the water below 0.4 % are left in. [ln]"""

LEAST_CAUSE: Final = 0.1
"""A cause must change by so much between blocks: 0.1 K, 0.1 m."""

_NORMAL_95 = 1.645


@dataclass(frozen=True, slots=True)
class Trend:
    """A straight line through the medians of blocks of time, by the method of Theil and Sen.

    Parameters
    ----------
    percent_per_day : float
        Slope. [%/d]
    low_percent_per_day, high_percent_per_day : float
        Its 90 % confidence bounds: one-sided 95 % each.
    days : float
        Length of the record. [d]
    percent : float
        Slope times length. [%]
    steadiness : float
        Change from the first to the last quarter of the record over the sum of the changes between quarters,
        each without its sign: 1 for a creep that never turns back.
    largest_step_share : float
        Largest change between neighbouring blocks over the whole change: near 1 for a step, small for a creep.
    """

    percent_per_day: float
    low_percent_per_day: float
    high_percent_per_day: float
    days: float
    percent: float
    steadiness: float
    largest_step_share: float


def block_medians(values: FloatArray, *, time_us: IntArray, block_us: int = BLOCK_US) -> tuple[FloatArray, FloatArray]:
    """Return the median of each block of time that holds values, and the blocks' middles [d]; rows in order of time."""
    keep = np.isfinite(values)
    if not keep.any():
        return np.zeros(0), np.zeros(0)
    block = time_us[keep] // block_us
    starts = np.flatnonzero(np.concatenate(([True], block[1:] != block[:-1])))
    counts = np.diff(starts, append=block.shape[0])
    ordered = values[keep][np.lexsort((values[keep], block))]
    medians = 0.5 * (ordered[starts + (counts - 1) // 2] + ordered[starts + counts // 2])
    days = (block[starts].astype(np.float64) + 0.5) * (block_us / DAY_US)
    return medians, np.asarray(days)


STEP_DEVIATIONS: Final = 6.0
"""A change between neighbouring blocks this many times the usual one is a step of the water, not a creep."""


def steps_of_the_water(level: FloatArray, *, least_step: float) -> BoolArray:
    """Return which changes between neighbouring blocks are steps: water was changed, it rained, a valve was opened.

    Parameters
    ----------
    level : ndarray of float64, (blocks,)
        One value a block of time.
    least_step : float
        Changes smaller than this are never taken for a step.

    Returns
    -------
    ndarray of bool, (blocks - 1,)
    """
    change = np.diff(level)
    if not change.shape[0]:
        return np.zeros(0, dtype=np.bool_)
    away = np.abs(change - np.median(change))
    usual = 1.4826 * float(np.median(away))
    return np.asarray(away > max(STEP_DEVIATIONS * usual, least_step))


def without_changes(level: FloatArray, left_out: BoolArray) -> FloatArray:
    """Return *level* from the same start, with the changes that are *left_out* not made."""
    if not level.shape[0]:
        return level
    kept = np.where(left_out, 0.0, np.diff(level))
    return np.asarray(level[0] + np.concatenate(([0.0], np.cumsum(kept))))


def trend(values: FloatArray, *, time_us: IntArray, explained_by: Sequence[FloatArray] = ()) -> Trend | None:
    """Return the trend of positive *values* in percent, or None where the record is too short.

    Parameters
    ----------
    values : ndarray of float64, (rows,)
        Salinity, or its ratio to a neighbour's. NaN is left out.
    time_us : ndarray of int64, (rows,)
        In order of time.
    explained_by : sequence of ndarray of float64, (rows,)
        Temperature, water level: what goes with them is taken out first, fouling does not.
    """
    with np.errstate(invalid="ignore", divide="ignore"):
        logarithm = np.where(values > 0.0, np.log(values), np.nan)
    span_us = int(time_us[-1] - time_us[0]) if time_us.shape[0] else 0
    block_us = max(BLOCK_US, -(-span_us // MOST_BLOCKS))
    level, day = block_medians(logarithm, time_us=time_us, block_us=block_us)
    if level.shape[0] < FEWEST_BLOCKS:
        return None
    steps = steps_of_the_water(level, least_step=LEAST_STEP)
    causes = [
        medians
        for cause in explained_by
        for medians, _ in [
            block_medians(np.where(np.isfinite(logarithm), cause, np.nan), time_us=time_us, block_us=block_us)
        ]
        if medians.shape == level.shape
    ]
    level = without_changes(_without(level, causes, ~steps), steps)
    slope, low, high = _theil_sen(level, day)
    quarters = np.array([np.median(part) for part in np.array_split(level, 4)])
    total = float(np.abs(np.diff(quarters)).sum())
    whole = abs(float(quarters[-1] - quarters[0]))
    days = float(day[-1] - day[0])
    return Trend(
        percent_per_day=100.0 * slope,
        low_percent_per_day=100.0 * low,
        high_percent_per_day=100.0 * high,
        days=days,
        percent=100.0 * slope * days,
        steadiness=whole / total if total > 0.0 else 0.0,
        largest_step_share=float(np.abs(np.diff(level)).max()) / whole if whole > 0.0 else 1.0,
    )


def _without(level: FloatArray, causes: list[FloatArray], judged: BoolArray) -> FloatArray:
    """Take out of *level* what goes with its causes, judged from changes so that two trends do not pair up.

    A cause that hardly moves from block to block explains nothing.
    """
    changes = [np.diff(cause) for cause in causes]
    moving = [index for index, change in enumerate(changes) if float(np.abs(change).max(initial=0.0)) >= LEAST_CAUSE]
    if not moving or int(judged.sum()) < FEWEST_BLOCKS - 2:
        return level
    # the mean is taken out of the changes: a steady creep leaves no trace in them
    terms = np.stack([changes[index][judged] for index in moving], axis=1)
    answer = np.diff(level)[judged]
    shares = np.linalg.lstsq(terms - terms.mean(axis=0), answer - answer.mean(), rcond=None)[0]
    explained = np.stack([causes[index] - causes[index].mean() for index in moving], axis=1) @ shares
    return np.asarray(level - explained)


def _theil_sen(level: FloatArray, day: FloatArray) -> tuple[float, float, float]:
    """Return slope and its 90 % bounds (Theil 1950; Sen 1968), Kendall's variance without ties."""
    first, second = np.triu_indices(level.shape[0], k=1)
    slopes = np.sort((level[second] - level[first]) / (day[second] - day[first]))
    count, pairs = level.shape[0], slopes.shape[0]
    width = _NORMAL_95 * np.sqrt(count * (count - 1) * (2 * count + 5) / 18.0)
    low = max(0, int((pairs - width) / 2.0))
    high = min(pairs - 1, int((pairs + width) / 2.0) + 1)
    return float(np.median(slopes)), float(slopes[low]), float(slopes[high])
