"""Tests that need no history: timing gap, gross range, climatology, in air.

Levels here and in the other kernels: 0 not evaluated, 1 pass, 3 suspect, 4 fail; so that the largest prevails.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from analysis.arrays import MICROSECONDS_PER_SECOND
from analysis.sensor.quality.thresholds import FAIL_HIGH, FAIL_LOW, SUSPECT_HIGH, SUSPECT_LOW

if TYPE_CHECKING:
    from analysis.arrays import BoolArray, FloatArray, IntArray, QualityArray

MICROSECONDS_PER_DAY = 86_400 * MICROSECONDS_PER_SECOND


def level(judged: BoolArray, suspect: BoolArray, fail: BoolArray | None = None) -> QualityArray:
    """Return 0 where not judged, else 4 where *fail*, 3 where *suspect*, 1 elsewhere.

    *fail* must imply *suspect*, and both must be false where *judged* is false.
    """
    if not suspect.any():
        return judged.view(np.uint8)
    out = judged.view(np.uint8) + (suspect.view(np.uint8) << 1)
    if fail is not None:
        out += fail.view(np.uint8)
    return np.asarray(out)


def timing_gap(elapsed_us: IntArray, *, limit_us: IntArray) -> BoolArray:
    """Return True where more time has passed than allowed (QARTOD test 1: NOW - TIM_STMP > TIM_INC).

    Parameters
    ----------
    elapsed_us : ndarray of int64
        From the reading before to this one; or from the newest reading to now. [us]
    limit_us : ndarray of int64
        [us]
    """
    return np.asarray(elapsed_us > limit_us)


def gross_range(value: FloatArray, limits: FloatArray) -> tuple[BoolArray, BoolArray]:
    """Return where a value is outside the suspect span and outside the fail span (limits included, test 4).

    Parameters
    ----------
    value : ndarray of float64, (3, rows)
    limits : ndarray of float64, (7, 3, rows or 1)
        Row thresholds; NaN is "not set".

    Returns
    -------
    tuple of ndarray of bool
        Suspect (or worse) and fail. False for NaN.
    """
    suspect = value < limits[SUSPECT_LOW]
    suspect |= value > limits[SUSPECT_HIGH]
    if not suspect.any():  # the suspect span lies within the fail span
        return suspect, suspect
    return suspect, (value < limits[FAIL_LOW]) | (value > limits[FAIL_HIGH])


def month_index(time_us: IntArray) -> IntArray:
    """Return the month of the year, 0 to 11, in UTC."""
    days = (time_us // MICROSECONDS_PER_DAY).astype("datetime64[D]")
    return np.asarray(days.astype("datetime64[M]").astype(np.int64) % 12)


def climatology(value: FloatArray, *, time_us: IntArray, table: FloatArray, sensor: IntArray) -> QualityArray:
    """Return levels of the seasonal range test: suspect outside the month's span, limits included (test 5).

    Parameters
    ----------
    value : ndarray of float64, (3, rows)
    time_us : ndarray of int64, (rows,)
    table : ndarray of float64, (12, 2, 3, sensors)
        Lowest and highest for each month; NaN where there is none: not evaluated.
    sensor : ndarray of int64, (rows,)
    """
    spans = table[month_index(time_us), :, :, sensor]
    low, high = spans[:, 0].T, spans[:, 1].T
    judged = np.isfinite(low) & np.isfinite(high) & np.isfinite(value)
    return level(judged, judged & ((value < low) | (value > high)))


def in_air(conductivity: FloatArray, *, limit_mS_cm: FloatArray) -> BoolArray:
    """Return True where the cell reads so little that it must be dry (not a QARTOD test)."""
    return np.asarray(conductivity <= limit_mS_cm)
