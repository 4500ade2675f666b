"""Where a tank's water is heading: its slope now, and how long until the next limit."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

from analysis.animal.forecast import current_slope

if TYPE_CHECKING:
    from analysis.animal.forecast import Slope
    from analysis.arrays import FloatArray, IntArray
    from dashboard.browser.sights import SpeciesLimit

LOOK_BACK_US = 60 * 60_000_000
RESOLUTION = {"salinity": 0.02, "temperature": 0.05}
"""Steps of the values as the board trusts them. Common practice for field probes."""
LONGEST_MIN = 6 * 60.0
"""Beyond half a tide a straight line is no forecast."""


@dataclass(frozen=True, slots=True)
class Trend:
    """The water's way: NaN where nothing can be told.

    Attributes
    ----------
    per_h : float
        Signed slope. [unit/h]
    next_limit : float
        The nearest limit ahead.
    likely_min, soonest_min, latest_min : float
        Time to it at the fitted slope, and at the steepest and the flattest that the readings allow (90 %, one-sided each).
    """

    per_h: float = math.nan
    next_limit: float = math.nan
    likely_min: float = math.nan
    soonest_min: float = math.nan
    latest_min: float = math.nan


STANDING = Trend()


def trend_of(times_us: IntArray, values: FloatArray, *, kind: str, limits: tuple[float, ...]) -> Trend:
    """Return the trend of the last hour's readings.

    Parameters
    ----------
    times_us, values : ndarray
        Readings of one probe, ascending; NaN where not believable.
    kind : str
        "salinity" or "temperature".
    limits : tuple of float
        Every limit that matters, on both sides.
    """
    slope = current_slope(times_us, values, resolution=RESOLUTION[kind])
    if slope is None:
        return STANDING
    ahead = [limit for limit in limits if (limit - slope.now) * slope.per_min > 0]
    if not ahead:
        return Trend(per_h=slope.per_min * 60)
    limit = min(ahead, key=lambda level: abs(level - slope.now))
    return _towards(limit, slope)


def _towards(limit: float, slope: Slope) -> Trend:
    distance, speed = abs(limit - slope.now), abs(slope.per_min)
    likely = distance / speed
    if likely > LONGEST_MIN:
        return Trend(per_h=slope.per_min * 60)
    slowest = speed - slope.error_per_min
    return Trend(
        per_h=slope.per_min * 60,
        next_limit=limit,
        likely_min=likely,
        soonest_min=distance / (speed + slope.error_per_min),
        latest_min=distance / slowest if slowest > 0 else math.nan,
    )


def limits_of(band: tuple[float, float] | None, species: tuple[SpeciesLimit, ...]) -> tuple[float, ...]:
    """Return the limits of a tank: of its band, and of its animals."""
    return (*(band or ()), *(limit.value for limit in species))
