"""From what a tank's limits are judged on to observations of conditions, whole blocks at once."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from analysis.alarm.events import Verdict
from analysis.alarm.kinds import ConditionKind
from analysis.alarm.limits import VerdictArray, high_verdict, low_verdict
from analysis.alarm.nearest import JudgedRows
from analysis.arrays import BoolArray, FloatArray, IntArray, QualityArray
from analysis.flags import Quality

DRY_BELOW_SALINITY = 0.5
"""A conductivity cell in air reads close to zero. Common practice: below half a unit, or a tenth of the set point
where that is less, nothing but air or fresh water is at the probe."""
DRY_SHARE_OF_SET_POINT = 0.1
SALT_WATER_FROM = 3.0
"""Tanks kept below this salinity can hold water that reads near zero: there nothing is called dry."""


@dataclass(frozen=True, slots=True)
class LimitCondition:
    """One limit of many tanks.

    Parameters
    ----------
    kind : ConditionKind
        Which condition it is.
    limit, deadband : ndarray of float64, one per tank
        NaN limit: this tank has none.
    is_high : bool
        A high limit is judged on the highest believable value, a low one on the lowest.
    """

    kind: ConditionKind
    limit: FloatArray
    deadband: FloatArray
    is_high: bool


@dataclass(frozen=True, slots=True)
class ObservedBlock:
    """Observations of K conditions by N readings, in the order of the readings.

    `tank`, `measured_at_us` and `now_us` (time received) have shape (N,); the rest (K, N).
    """

    kinds: tuple[ConditionKind, ...]
    tank: IntArray
    measured_at_us: IntArray
    now_us: IntArray
    verdict: VerdictArray
    value: FloatArray
    limit: FloatArray
    reading_at_us: IntArray
    is_worse: BoolArray | None = None


def limit_block(conditions: Sequence[LimitCondition], rows: Sequence[JudgedRows], *, now_us: IntArray) -> ObservedBlock:
    """Judge a block of readings against limits.

    Parameters
    ----------
    conditions : sequence of LimitCondition
        K conditions.
    rows : sequence of JudgedRows
        For each condition the rows of its quantity, all made from the same N readings.
    now_us : ndarray of int64, shape (N,)
        Time received of each reading.
    """
    count = (len(conditions), rows[0].tank.size)
    verdict = np.empty(count, dtype=np.int8)
    value, limit = np.empty(count), np.empty(count)
    reading_at_us = np.empty(count, dtype=np.int64)
    for index, (condition, row) in enumerate(zip(conditions, rows, strict=True)):
        value[index] = row.high_value if condition.is_high else row.low_value
        reading_at_us[index] = row.high_at_us if condition.is_high else row.low_at_us
        limit[index] = condition.limit[row.tank]
        judge = high_verdict if condition.is_high else low_verdict
        deadband = condition.deadband[row.tank]
        verdict[index] = judge(value[index], limit=limit[index], deadband=deadband, usable=row.is_usable)
    kinds = tuple(condition.kind for condition in conditions)
    return ObservedBlock(kinds, rows[0].tank, rows[0].at_us, now_us, verdict, value, limit, reading_at_us)


def tank_block(
    condition: LimitCondition, value: ArrayLike, *, usable: ArrayLike, at_us: ArrayLike, now_us: int
) -> ObservedBlock:
    """Judge one number per tank (stress, rate of change, time left, distance from a plan, ...).

    Parameters
    ----------
    condition : LimitCondition
        Its limits.
    value : array_like, shape (tanks,)
        The number; infinity is a number (nothing in sight), NaN is unknown.
    usable : array_like of bool, shape (tanks,)
        Whether the number may be judged.
    at_us : array_like of int64, shape (tanks,)
        Measured time of the number; the same time as before is the same reading.
    now_us : int
        The present time.
    """
    judged = np.asarray(value, dtype=np.float64)
    tank = np.arange(judged.size)
    judge = high_verdict if condition.is_high else low_verdict
    is_known = np.asarray(usable, dtype=np.bool_) & ~np.isnan(judged)
    verdict = judge(judged, limit=condition.limit, deadband=condition.deadband, usable=is_known)
    return _one_kind(condition.kind, tank, verdict, judged, condition.limit, at_us, now_us)


def truth_block(
    kind: ConditionKind, is_true: ArrayLike, *, at_us: ArrayLike, now_us: int, value: ArrayLike = np.nan
) -> ObservedBlock:
    """Observe a plain yes or no per tank (unwatched, clock wrong, store full, ...).

    Parameters
    ----------
    kind : ConditionKind
        The condition.
    is_true : array_like of bool, shape (tanks,)
        Whether it holds.
    at_us : array_like of int64
        Time of the look. [us UTC]
    now_us : int
        The present time.
    value : array_like
        A number that belongs to it (for example minutes without a reading); NaN: none.
    """
    holds = np.asarray(is_true, dtype=np.bool_)
    verdict = np.where(holds, Verdict.TRUE, Verdict.FALSE).astype(np.int8)
    limit = np.full(holds.shape, np.nan)
    return _one_kind(kind, np.arange(holds.size), verdict, value, limit, at_us, now_us)


def _one_kind(
    kind: ConditionKind,
    tank: IntArray,
    verdict: VerdictArray,
    value: ArrayLike,
    limit: FloatArray,
    at_us: ArrayLike,
    now_us: int,
) -> ObservedBlock:
    measured = np.broadcast_to(np.asarray(at_us, dtype=np.int64), tank.shape)
    return ObservedBlock(
        kinds=(kind,),
        tank=tank,
        measured_at_us=measured,
        now_us=np.full(tank.shape, now_us, dtype=np.int64),
        verdict=verdict[None, :],
        value=np.broadcast_to(np.asarray(value, dtype=np.float64), tank.shape)[None, :],
        limit=limit[None, :],
        reading_at_us=measured[None, :],
    )


def dry_limit(set_point_salinity: ArrayLike) -> FloatArray:
    """Return the salinity below which a reading means "probe dry or tank empty"; NaN where nothing can be said.

    Parameters
    ----------
    set_point_salinity : array_like
        Salinity the tank is kept at (or the low end of its tidal band); NaN: unknown.
    """
    point = np.asarray(set_point_salinity, dtype=np.float64)
    limit = np.minimum(DRY_BELOW_SALINITY, DRY_SHARE_OF_SET_POINT * point)
    return np.where(point >= SALT_WATER_FROM, limit, np.nan)


def wet_quality(salinity: FloatArray, *, quality: QualityArray, tank: IntArray, dry_below: FloatArray) -> QualityArray:
    """Return the quality with which readings may speak about the water: fail (4) where the probe is dry.

    For the salinity limits of tanks with several sensors: a dry probe then neither speaks nor hides what the
    tank's other probe says. The condition "probe dry or tank empty" itself is judged with the quality as it was.

    Parameters
    ----------
    salinity, quality, tank : ndarray, shape (N,)
        Salinity, QARTOD quality and tank of each reading.
    dry_below : ndarray of float64, one per tank
        From `dry_limit`.
    """
    is_dry = salinity < dry_below[tank]
    return np.where(is_dry, np.uint8(Quality.FAIL), quality)


def without_dry(rows: JudgedRows, dry_below: FloatArray) -> JudgedRows:
    """Return salinity rows in which a dry probe says nothing about the water.

    A probe in air is no proof of fresh water: while the lowest value is that of a dry probe, salinity limits
    hold their state and "probe dry or tank empty" speaks instead.

    Parameters
    ----------
    rows : JudgedRows
        Rows of salinity.
    dry_below : ndarray of float64, one per tank
        From `dry_limit`.
    """
    is_dry = rows.low_value < dry_below[rows.tank]
    if not is_dry.any():
        return rows
    return rows._replace(is_usable=rows.is_usable & ~is_dry)
