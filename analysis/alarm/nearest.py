"""Which sensor each limit is judged on: the believable one nearest to it, never an average.

A fresh top and a salt bottom average to a calm number; so the low limit is judged on the lowest believable value
of the tank, the high limit on the highest.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import NamedTuple

import numpy as np

from analysis.alarm.limits import is_usable
from analysis.alarm.state import NEVER_US
from analysis.arrays import BoolArray, FloatArray, IntArray, QualityArray
from analysis.errors import InvalidInputError
from analysis.flags import Quality


class Nearest(NamedTuple):
    """The values that limits are judged on; arrays of one length."""

    low_value: FloatArray
    """Lowest believable value; NaN where no sensor is believable."""
    low_slot: IntArray
    """Which of the tank's sensors it came from."""
    high_value: FloatArray
    high_slot: IntArray
    believable_count: IntArray
    """How many sensors were believable."""


@dataclass(frozen=True, slots=True)
class SensorPlaces:
    """Where each sensor sits: its tank, and its slot among the sensors of that tank."""

    tank: IntArray
    slot: IntArray
    tank_count: int
    slot_count: int


@dataclass(frozen=True, slots=True)
class LatestReadings:
    """The newest processed reading of every sensor of every tank; arrays of shape (tanks, slots)."""

    value: FloatArray
    quality: QualityArray
    judged_at_us: IntArray
    """Measured time, or the time received where the sensor's clock is doubted; `-NEVER_US` before the first."""
    believed_at_us: IntArray
    """The same, of the newest reading that was usable."""


class JudgedRows(NamedTuple):
    """For each reading of a block what its tank's limits are judged on; arrays of the block's length."""

    tank: IntArray
    at_us: IntArray
    """The tank's measured time; never falls within a tank."""
    low_value: FloatArray
    low_at_us: IntArray
    """Own measured time of the reading behind the value."""
    high_value: FloatArray
    high_at_us: IntArray
    is_usable: BoolArray


def sensor_places(tank_of_sensor: IntArray, *, tank_count: int) -> SensorPlaces:
    """Number the sensors of each tank in their order.

    Parameters
    ----------
    tank_of_sensor : ndarray of int64
        Index of the tank of each sensor.
    tank_count : int
        Number of tanks.

    Raises
    ------
    InvalidInputError
        If a sensor's tank is not one of the tanks.
    """
    tank = np.asarray(tank_of_sensor, dtype=np.int64)
    if tank.size and not (tank.min() >= 0 and tank.max() < tank_count):
        raise InvalidInputError("tank of a sensor", found=tank.tolist(), allowed=f"0 to {tank_count - 1}")
    slot = np.zeros(tank.size, dtype=np.int64)
    seen = np.zeros(tank_count, dtype=np.int64)
    for sensor, place in enumerate(tank):
        slot[sensor] = seen[place]
        seen[place] += 1
    return SensorPlaces(tank, slot, tank_count, max(int(seen.max(initial=0)), 1))


def no_readings_yet(places: SensorPlaces) -> LatestReadings:
    """Return the state before any reading came."""
    shape = (places.tank_count, places.slot_count)
    return LatestReadings(
        value=np.full(shape, np.nan),
        quality=np.full(shape, Quality.MISSING, dtype=np.uint8),
        judged_at_us=np.full(shape, -NEVER_US, dtype=np.int64),
        believed_at_us=np.full(shape, -NEVER_US, dtype=np.int64),
    )


def nearest_believable(value: FloatArray, *, is_believable: BoolArray) -> Nearest:
    """Return the lowest and the highest believable value of each tank.

    Parameters
    ----------
    value : ndarray of float64, shape (rows, sensors of the tank)
        Latest value of each sensor.
    is_believable : ndarray of bool, same shape
        Usable (see `analysis.alarm.limits.is_usable`) and not older than the stale limit.
    """
    low = np.where(is_believable, value, np.inf)
    high = np.where(is_believable, value, -np.inf)
    low_slot, high_slot = np.argmin(low, axis=-1), np.argmax(high, axis=-1)
    count = np.count_nonzero(is_believable, axis=-1)
    none = count == 0
    rows = np.arange(value.shape[0])
    low_value = np.where(none, np.nan, low[rows, low_slot])
    high_value = np.where(none, np.nan, high[rows, high_slot])
    return Nearest(low_value, low_slot, high_value, high_slot, count)


def judged_rows(
    latest: LatestReadings,
    places: SensorPlaces,
    *,
    sensor: IntArray,
    value: FloatArray,
    quality: QualityArray,
    judged_at_us: IntArray,
    stale_after_us: IntArray,
) -> tuple[LatestReadings, JudgedRows]:
    """Take a block of readings in their order; return what each tank's limits are judged on after each of them.

    The result does not depend on how a stream is cut into blocks.

    Parameters
    ----------
    latest : LatestReadings
        The newest readings before the block.
    places : SensorPlaces
        Where the sensors sit.
    sensor : ndarray of int64
        Index of each reading's sensor.
    value, quality, judged_at_us : ndarray
        Value, QARTOD quality and judged time of each reading; late readings must have been taken out
        (see `analysis.alarm.timing`).
    stale_after_us : ndarray of int64, one per sensor
        A sensor's value older than this, at the judged time of its tank, is not believable.

    Returns
    -------
    tuple of (LatestReadings, JudgedRows)
        The newest readings after the block, and a row for each reading in the given order.
    """
    tank, slot = places.tank[sensor], places.slot[sensor]
    usable = is_usable(value, quality=quality)
    if places.slot_count == 1 and _is_each_once(tank, places.tank_count):
        rows = _single_rows(latest, tank, value, judged_at_us, usable)
    else:
        rows = _running_rows(latest, places, tank, slot, value, judged_at_us, usable, stale_after_us)
    return _with_block(latest, tank, slot, value, quality, judged_at_us, usable), rows


def _is_each_once(tank: IntArray, tank_count: int) -> bool:
    return tank.size <= tank_count and int(np.bincount(tank, minlength=1).max(initial=0)) <= 1


def _single_rows(
    latest: LatestReadings, tank: IntArray, value: FloatArray, judged_at_us: IntArray, usable: BoolArray
) -> JudgedRows:
    at_us = np.maximum(judged_at_us, latest.judged_at_us[tank, 0])
    judged = np.where(usable, value, np.nan)
    return JudgedRows(tank, at_us, judged, judged_at_us, judged, judged_at_us, usable)


def _running_rows(
    latest: LatestReadings,
    places: SensorPlaces,
    tank: IntArray,
    slot: IntArray,
    value: FloatArray,
    judged_at_us: IntArray,
    usable: BoolArray,
    stale_after_us: IntArray,
) -> JudgedRows:
    """Carry each sensor's newest reading forward through the rows of its tank, then pick."""
    order = np.argsort(tank, kind="stable")
    tanks = tank[order]
    position = np.arange(order.size)
    start = np.searchsorted(tanks, tanks, side="left")
    is_slot = slot[order][:, None] == np.arange(places.slot_count)
    source = np.maximum.accumulate(np.where(is_slot, position[:, None], -1), axis=0)
    in_block = source >= start[:, None]
    source = np.where(in_block, source, 0)
    values = np.where(in_block, value[order][source], latest.value[tanks])
    times = np.where(in_block, judged_at_us[order][source], latest.judged_at_us[tanks])
    before = is_usable(latest.value[tanks], quality=latest.quality[tanks])
    usables = np.where(in_block, usable[order][source], before)
    # Each sensor's own time never falls, since late readings are out: so the newest of them does not fall either.
    at_us = times.max(axis=1)
    stale = np.zeros((places.tank_count, places.slot_count), dtype=np.int64)
    stale[places.tank, places.slot] = stale_after_us
    # Compared by adding, not by subtracting: the time of a sensor that never spoke is near the smallest integer.
    is_fresh = times + stale[tanks] >= at_us[:, None]
    picked = nearest_believable(values, is_believable=usables & is_fresh)
    back = np.empty_like(order)
    back[order] = position
    low_at = times[position, picked.low_slot]
    high_at = times[position, picked.high_slot]
    return JudgedRows(
        tank,
        at_us[back],
        picked.low_value[back],
        low_at[back],
        picked.high_value[back],
        high_at[back],
        (picked.believable_count > 0)[back],
    )


def _with_block(
    latest: LatestReadings,
    tank: IntArray,
    slot: IntArray,
    value: FloatArray,
    quality: QualityArray,
    judged_at_us: IntArray,
    usable: BoolArray,
) -> LatestReadings:
    # numpy keeps the last of several assignments to one place, which is the newest reading of that sensor.
    after = replace(
        latest,
        value=latest.value.copy(),
        quality=latest.quality.copy(),
        judged_at_us=latest.judged_at_us.copy(),
        believed_at_us=latest.believed_at_us.copy(),
    )
    after.value[tank, slot] = value
    after.quality[tank, slot] = quality
    after.judged_at_us[tank, slot] = judged_at_us
    after.believed_at_us[tank[usable], slot[usable]] = judged_at_us[usable]
    return after
