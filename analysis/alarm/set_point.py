"""The band a tank alarms on: its own set point, tightened (never widened) by what the animals tolerate."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from analysis.alarm.limits import SALINITY_SPAN, deadband_of_band
from analysis.arrays import BoolArray, FloatArray
from analysis.errors import InvalidInputError

HALF_WIDTH_LARVAE = 1.0
HALF_WIDTH = 2.0
SHARE_OF_SET_POINT = 0.05
"""Salinity held within 5 % or 2 of the set point: husbandry guidance found publicly (species practice notes);
+-1 for larvae is common practice."""
SMALLEST_HALF_WIDTH = 0.25
"""Common practice: below a set point of 5, 5 % is less than a field sensor can tell apart."""


@dataclass(frozen=True, slots=True)
class SetPointBand:
    """Alarm limits of many tanks; arrays of one shape, NaN where there is no limit.

    `is_low_backstop` and `is_high_backstop` mark limits that come from the animals' tolerable limits.
    `is_set_point_outside` marks tanks whose set point itself lies outside what the animals tolerate: there the
    set point's band stands, since a limit that is always exceeded warns of nothing, and `check` has to refuse
    or explain such a tank.
    """

    low: FloatArray
    high: FloatArray
    deadband: FloatArray
    is_low_backstop: BoolArray
    is_high_backstop: BoolArray
    is_set_point_outside: BoolArray


def salinity_band(
    set_point: ArrayLike,
    *,
    is_larva: ArrayLike,
    site_half_width: ArrayLike = np.nan,
    tidal_low: ArrayLike = np.nan,
    tidal_high: ArrayLike = np.nan,
    tolerable_low: ArrayLike = np.nan,
    tolerable_high: ArrayLike = np.nan,
) -> SetPointBand:
    """Return the salinity band each tank alarms on.

    The set point +-1 (larvae) or +-2, or 5 %, whichever is tighter; or the site's own half-width; or an accepted
    tidal band. The tolerable limits of the animals may only tighten it.

    Parameters
    ----------
    set_point : array_like
        Salinity the tank is kept at; NaN with a tidal band. [practical salinity, or g/kg]
    is_larva : array_like of bool
        Whether larvae are in the tank.
    site_half_width : array_like
        The site's own half-width; NaN: the rule above.
    tidal_low, tidal_high : array_like
        Accepted tidal band; NaN: none. It replaces the set point's band.
    tolerable_low, tolerable_high : array_like
        Tolerable limits of the animals; NaN: none known.

    Returns
    -------
    SetPointBand
        Arrays of the broadcast shape.

    Raises
    ------
    InvalidInputError
        If a half-width is not above 0, a set point is negative, or a tidal band is upside down.
    """
    point, larva, width, tide_low, tide_high, low_limit, high_limit = np.broadcast_arrays(
        *(np.asarray(item, dtype=np.float64) for item in (set_point, is_larva, site_half_width, tidal_low)),
        *(np.asarray(item, dtype=np.float64) for item in (tidal_high, tolerable_low, tolerable_high)),
    )
    _refuse("set point of salinity", point, point < 0, "0 or more")
    _refuse("half-width of the salinity band", width, width <= 0, "above 0")
    _refuse("tidal band", tide_low, tide_low >= tide_high, "a low limit below the high limit")
    rule = np.minimum(np.where(larva > 0, HALF_WIDTH_LARVAE, HALF_WIDTH), SHARE_OF_SET_POINT * point)
    half = np.where(np.isnan(width), np.maximum(rule, SMALLEST_HALF_WIDTH), width)
    is_tidal = ~np.isnan(tide_low) & ~np.isnan(tide_high)
    low = np.where(is_tidal, tide_low, point - half)
    high = np.where(is_tidal, tide_high, point + half)
    middle = np.where(is_tidal, (tide_low + tide_high) / 2, point)
    return _tightened(low, high, low_limit, high_limit, middle=middle)


def temperature_band(
    set_point_degC: ArrayLike,
    *,
    half_width_K: ArrayLike,
    span_K: float = 40.0,
    tolerable_low_degC: ArrayLike = np.nan,
    tolerable_high_degC: ArrayLike = np.nan,
) -> SetPointBand:
    """Return the temperature band each tank alarms on: set point and half-width, tightened by what is tolerated.

    Parameters
    ----------
    set_point_degC, half_width_K : array_like
        NaN: no band. [degC, K]
    span_K : float
        Span of the channel, for the deadband of 1 %. [K]
    tolerable_low_degC, tolerable_high_degC : array_like
        Tolerable limits of the animals; NaN: none known. [degC]
    """
    point, half, low_limit, high_limit = np.broadcast_arrays(
        *(np.asarray(item, dtype=np.float64) for item in (set_point_degC, half_width_K)),
        *(np.asarray(item, dtype=np.float64) for item in (tolerable_low_degC, tolerable_high_degC)),
    )
    _refuse("half-width of the temperature band", half, half <= 0, "above 0 K")
    return _tightened(point - half, point + half, low_limit, high_limit, middle=point, span=span_K)


def _refuse(what: str, values: FloatArray, is_bad: BoolArray, allowed: str) -> None:
    if np.any(is_bad):
        position = int(np.flatnonzero(is_bad)[0])
        raise InvalidInputError(what, found=float(values.flat[position]), allowed=allowed, where=f"tank {position}")


def _tightened(
    low: FloatArray,
    high: FloatArray,
    low_limit: FloatArray,
    high_limit: FloatArray,
    *,
    middle: FloatArray,
    span: float = SALINITY_SPAN,
) -> SetPointBand:
    is_outside = (low_limit > middle) | (high_limit < middle)
    is_low_backstop = (low_limit > low) & ~is_outside
    is_high_backstop = (high_limit < high) & ~is_outside
    low = np.where(is_low_backstop, low_limit, low)
    high = np.where(is_high_backstop, high_limit, high)
    deadband = deadband_of_band((high - low) / 2, span=span)
    return SetPointBand(low, high, deadband, is_low_backstop, is_high_backstop, is_outside)
