"""Limits with a deadband: what one value says about a condition.

NaN makes every comparison false, so value and quality are judged together: what is not usable is `UNKNOWN`,
never "normal". Suspect (3) does not take a value out of the alarm path; only fail (4) and missing (9) do.
"""

from __future__ import annotations

from typing import TypeAlias

import numpy as np
from numpy.typing import ArrayLike, NDArray

from analysis.alarm.events import Verdict
from analysis.arrays import BoolArray, FloatArray
from analysis.flags import Quality

VerdictArray: TypeAlias = NDArray[np.int8]

COMPOSITION_DEADBAND_SHARE = 0.01
"""1 % of span for composition and temperature: EEMUA 191 as restated in public articles."""
SALINITY_SPAN = 42.0
"""Engineering span of a salinity channel: the published range of PSS-78."""
DEADBAND_SHARE_OF_HALF_WIDTH = 0.25
"""Common practice: a deadband that fills the band would never let the alarm return."""

NEAR_SHARE_OF_DEADBAND = 0.25
"""How much of the deadband next to the limit is called near. Common practice: more than the noise of a sound
probe, far less than the deadband."""


def is_usable(value: ArrayLike, *, quality: ArrayLike) -> BoolArray:
    """Return whether a value may be judged: it is a number, and neither fail (4) nor missing (9).

    Parameters
    ----------
    value : array_like
        Any quantity.
    quality : array_like of int
        QARTOD quality of each value.

    Returns
    -------
    ndarray of bool
        Shape of the broadcast inputs.
    """
    quality = np.asarray(quality)
    usable: BoolArray = ~np.isnan(np.asarray(value)) & (quality != Quality.FAIL) & (quality != Quality.MISSING)
    return usable


def high_verdict(value: ArrayLike, *, limit: ArrayLike, deadband: ArrayLike, usable: ArrayLike) -> VerdictArray:
    """Return what values say about a high limit.

    Parameters
    ----------
    value : array_like
        Any quantity.
    limit : array_like
        High limit in the unit of the value; NaN: there is none, and the verdict is `FALSE`.
    deadband : array_like
        How far below the limit a value must fall to be back; 0 or more, same unit.
    usable : array_like of bool
        From `is_usable`.

    Returns
    -------
    ndarray of int8
        `Verdict` values: `TRUE` above the limit, `FALSE` below the limit less the deadband, between them `NEAR`
        next to the limit and else `BETWEEN`; `UNKNOWN` where the value is not usable.

    References
    ----------
    OPC 10000-9 v1.05, 5.8.19 (deadband per limit); 1 % of span: EEMUA 191 as restated publicly.
    """
    value = np.asarray(value, dtype=np.float64)
    limit = np.asarray(limit, dtype=np.float64)
    # TRUE is 2 and BETWEEN is 1: two comparisons add up to the verdict. With no limit both are false.
    verdict = (value > limit).astype(np.int8) + (value >= limit - deadband)
    if (verdict == Verdict.BETWEEN).any():
        is_near = (verdict == Verdict.BETWEEN) & (value >= limit - NEAR_SHARE_OF_DEADBAND * np.asarray(deadband))
        verdict = np.where(is_near, np.int8(Verdict.NEAR), verdict)
    unknown = ~np.asarray(usable) & ~np.isnan(limit)
    if unknown.any():
        verdict = np.where(unknown, np.int8(Verdict.UNKNOWN), verdict)
    return verdict


def low_verdict(value: ArrayLike, *, limit: ArrayLike, deadband: ArrayLike, usable: ArrayLike) -> VerdictArray:
    """Return what values say about a low limit; see `high_verdict`."""
    return high_verdict(
        -np.asarray(value, dtype=np.float64),
        limit=-np.asarray(limit, dtype=np.float64),
        deadband=deadband,
        usable=usable,
    )


def deadband_of_band(half_width: ArrayLike, *, span: float) -> FloatArray:
    """Return the deadband of a band: 1 % of span, at most a quarter of the half-width.

    Parameters
    ----------
    half_width : array_like
        Distance from the middle of the band to its limits.
    span : float
        Engineering span of the channel, same unit.
    """
    share = DEADBAND_SHARE_OF_HALF_WIDTH * np.asarray(half_width, dtype=np.float64)
    return np.minimum(COMPOSITION_DEADBAND_SHARE * span, share)
