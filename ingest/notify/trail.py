"""The way of every tank's water over the last quarter of an hour, kept beside the chain: for the trend in a message.

It is a memory of what the chain holds anyway, taken every few seconds; after a restart it begins anew, and for some
minutes messages say no trend.
"""

from __future__ import annotations

import math
from collections import deque
from dataclasses import dataclass
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from analysis.alarm.state import NEVER_US
from analysis.animal.forecast import MIN_READINGS, current_slope
from analysis.arrays import MICROSECONDS_PER_SECOND
from analysis.flags import Quality

if TYPE_CHECKING:
    from collections.abc import Sequence

    from analysis.alarm.nearest import LatestReadings
    from analysis.arrays import FloatArray, IntArray
    from ingest.chain.chain import ChainState

EVERY_S = 10.0
LENGTH = 90
"""Snapshots kept: a quarter of an hour."""
RESOLUTION = {"salinity": 0.02, "temperature": 0.05}
"""Steps of the values as they are trusted. Common practice for field probes."""
LONGEST_MIN = 6 * 60.0
"""Beyond half a tide a straight line is no forecast."""
STALE_US = 15 * 60 * MICROSECONDS_PER_SECOND


class Way(NamedTuple):
    """Where one quantity of a tank stands and goes; NaN where nothing can be told.

    `soonest_min` and `latest_min` are at the steepest and the flattest slope that the readings allow (90 %, one-sided each).
    """

    value: float = math.nan
    per_h: float = math.nan
    next_limit: float = math.nan
    likely_min: float = math.nan
    soonest_min: float = math.nan
    latest_min: float = math.nan
    is_steady: bool = False
    """There were readings enough to tell a trend, and there is none."""


@dataclass(frozen=True, slots=True)
class _Snapshot:
    value: FloatArray
    judged_at_us: IntArray


class Trail:
    """What the newest readings of all tanks were, at every few seconds. Arrays of shape (tanks, slots)."""

    def __init__(self) -> None:
        self._kept: dict[str, deque[_Snapshot]] = {name: deque(maxlen=LENGTH) for name in RESOLUTION}
        self._latest: dict[str, LatestReadings] = {}

    def clear(self) -> None:
        """Forget everything: the site file has changed, and with it who is where in the arrays."""
        for kept in self._kept.values():
            kept.clear()

    def follow(self, state: ChainState) -> None:
        """Keep hold of the present state; its arrays are never changed in place."""
        self._latest = {"salinity": state.wet, "temperature": state.temperature}

    def keep(self) -> None:
        """Take a snapshot."""
        for name, latest in self._latest.items():
            believed = np.where(latest.quality < Quality.FAIL, latest.value, np.nan)
            self._kept[name].append(_Snapshot(believed, latest.judged_at_us.copy()))

    def way(self, tank: int, quantity: str, *, limits: Sequence[float], is_high: bool, now_us: int) -> Way:
        """Return where a quantity of a tank stands, by the believable sensor that is nearest to the limit, and where it goes.

        Parameters
        ----------
        tank : int
            Index of the tank.
        quantity : str
            salinity or temperature.
        limits : sequence of float
            Every limit that matters, on both sides; NaN are passed over.
        is_high : bool
            Which sensor speaks: that of the highest value, or of the lowest.
        now_us : int
            The present time. [us UTC]
        """
        latest = self._latest.get(quantity)
        if latest is None:
            return Way()
        is_told = (latest.quality[tank] < Quality.FAIL) & (
            latest.judged_at_us[tank] > max(now_us - STALE_US, -NEVER_US)
        )
        values = np.where(is_told, latest.value[tank], np.nan)
        if np.isnan(values).all():
            return Way()
        slot = int(np.nanargmax(values) if is_high else np.nanargmin(values))
        value = float(values[slot])
        times, series = self._series(quantity, tank, slot)
        slope = current_slope(times, series, resolution=RESOLUTION[quantity])
        if slope is None:
            return Way(value=value, is_steady=int(np.isfinite(series).sum()) >= MIN_READINGS)
        way = Way(value=value, per_h=slope.per_min * 60)
        ahead = [limit for limit in limits if (limit - slope.now) * slope.per_min > 0]
        if not ahead:
            return way
        limit = min(ahead, key=lambda level: abs(level - slope.now))
        distance, speed = abs(limit - slope.now), abs(slope.per_min)
        if distance / speed > LONGEST_MIN:
            return way
        slowest = speed - slope.error_per_min
        return way._replace(
            next_limit=limit,
            likely_min=distance / speed,
            soonest_min=distance / (speed + slope.error_per_min),
            latest_min=distance / slowest if slowest > 0 else math.nan,
        )

    def _series(self, quantity: str, tank: int, slot: int) -> tuple[IntArray, FloatArray]:
        """Return the readings of one sensor, each once, up to the newest."""
        latest = self._latest[quantity]
        shape = latest.value.shape
        kept = [item for item in self._kept[quantity] if item.value.shape == shape]
        times = np.array([*(item.judged_at_us[tank, slot] for item in kept), latest.judged_at_us[tank, slot]], np.int64)
        values = np.array([*(item.value[tank, slot] for item in kept), latest.value[tank, slot]], np.float64)
        is_known = times > -NEVER_US
        times, first = np.unique(times[is_known], return_index=True)
        return times, values[is_known][first]
