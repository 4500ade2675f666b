"""At which time a reading is judged, whether it is judged at all, and when a tank is unwatched.

A reading is judged at its own measured time. But a wrong probe clock must never make a tank silent, and the late
rest of a burst must never speak as the present. So, for every reading, in the order received:

- within two intervals of the time received: judged at its measured time;
- ahead of the time received by more: no delay explains that; the clock is wrong; judged at the time received;
- behind by more, but arriving at the sensor's own pace and no longer catching up: the clock is wrong; judged at
  the time received;
- behind by more otherwise: delayed. Judged at its measured time while younger than the stale limit, else stored
  only;
- not newer than what was already judged of this sensor: late; stored only, it neither raises nor clears.

The limits are engineering choices after the project's design; common practice where no figure is published.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, NamedTuple

import numpy as np

from analysis.alarm.nearest import LatestReadings, SensorPlaces
from analysis.alarm.rules import microseconds
from analysis.alarm.state import NEVER_US
from analysis.arrays import BoolArray, FloatArray, IntArray

CLOCK_TOLERANCE_INTERVALS = 2
STALE_INTERVALS = 3.0
LEAST_STALE_S = 60.0
PACE_SHARE = 0.5
"""Readings that follow each other faster than this share of the interval come from a queue."""
CATCHING_UP_SHARE = 0.25
"""A delay that shrinks by more than this share of the interval from reading to reading is a queue running empty."""


@dataclass(frozen=True, slots=True)
class SensorTimes:
    """What is remembered of each sensor's times; arrays of shape (sensors,). [us UTC]"""

    received_at_us: IntArray
    offset_us: IntArray
    """Time received less measured time, of the newest reading received."""
    judged_at_us: IntArray
    """Newest judged time; `-NEVER_US` before the first."""
    is_clock_doubted: BoolArray


class JudgedTimes(NamedTuple):
    """For each reading of a block; arrays of shape (N,)."""

    judged_at_us: IntArray
    is_judged: BoolArray
    """Whether it goes the way of the alarms; the others are only stored."""
    is_clock_doubted: BoolArray
    is_late: BoolArray
    """Not newer than what was already judged of its sensor."""


def stale_after_s(interval_s: float) -> float:
    """Return the age at which a value is no longer the present: three intervals, at least a minute. [s]"""
    return max(STALE_INTERVALS * interval_s, LEAST_STALE_S)


def no_times_yet(sensor_count: int) -> SensorTimes:
    """Return the state before any reading came."""
    return SensorTimes(
        received_at_us=np.full(sensor_count, -NEVER_US, dtype=np.int64),
        offset_us=np.zeros(sensor_count, dtype=np.int64),
        judged_at_us=np.full(sensor_count, -NEVER_US, dtype=np.int64),
        is_clock_doubted=np.zeros(sensor_count, dtype=np.bool_),
    )


def judged_times(
    times: SensorTimes,
    *,
    sensor: IntArray,
    measured_at_us: IntArray,
    received_at_us: IntArray,
    interval_us: IntArray,
    stale_after_us: IntArray,
) -> tuple[SensorTimes, JudgedTimes]:
    """Return at which time each reading of a block is judged, in the order received.

    The result does not depend on how a stream is cut into blocks.

    Parameters
    ----------
    times : SensorTimes
        What is remembered from before.
    sensor : ndarray of int64, shape (N,)
        Index of each reading's sensor.
    measured_at_us, received_at_us : ndarray of int64, shape (N,)
        Its own time and the time received. [us UTC]
    interval_us, stale_after_us : ndarray of int64, shape (sensors,)
        Each sensor's expected interval and stale limit. [us]

    Returns
    -------
    tuple of (SensorTimes, JudgedTimes)
    """
    offset = received_at_us - measured_at_us
    is_trusted = np.abs(offset) <= CLOCK_TOLERANCE_INTERVALS * interval_us[sensor]
    is_plain = _is_plain(times, sensor, measured_at_us, is_trusted)
    is_late = measured_at_us <= times.judged_at_us[sensor]
    result = JudgedTimes(measured_at_us.copy(), ~is_late, np.zeros(sensor.size, dtype=np.bool_), is_late)
    after = SensorTimes(
        times.received_at_us.copy(),
        times.offset_us.copy(),
        times.judged_at_us.copy(),
        times.is_clock_doubted.copy(),
    )
    plain = sensor[is_plain]
    after.received_at_us[plain] = received_at_us[is_plain]
    after.offset_us[plain] = offset[is_plain]
    after.is_clock_doubted[plain] = False
    after.judged_at_us[plain] = np.maximum(after.judged_at_us[plain], measured_at_us[is_plain])
    for row in np.flatnonzero(~is_plain).tolist():
        _judge_row(after, result, row, int(sensor[row]), int(measured_at_us[row]), int(received_at_us[row]),
                   int(interval_us[sensor[row]]), int(stale_after_us[sensor[row]]))  # fmt: skip
    return after, result


def _is_plain(times: SensorTimes, sensor: IntArray, measured_at_us: IntArray, is_trusted: BoolArray) -> BoolArray:
    """Return which readings are of sensors of which all readings here are trusted and each is newer than the one before."""
    order = np.argsort(sensor, kind="stable")
    owner, measured = sensor[order], measured_at_us[order]
    before = times.judged_at_us[owner]
    is_next = owner[1:] == owner[:-1]
    before[1:][is_next] = measured[:-1][is_next]
    is_odd = (measured <= before) | ~is_trusted[order]
    odd_of = np.bincount(owner, weights=is_odd, minlength=times.offset_us.size)
    return np.asarray(odd_of[sensor] == 0)


def _judge_row(
    times: SensorTimes,
    result: JudgedTimes,
    row: int,
    sensor: int,
    measured_us: int,
    received_us: int,
    interval_us: int,
    stale_us: int,
) -> None:
    """Judge one reading, in place in arrays that belong to this call."""
    offset = received_us - measured_us
    newest_us = int(times.judged_at_us[sensor])
    is_doubted = _is_clock_wrong(times, sensor, offset, received_us, interval_us)
    judged_us = max(received_us, newest_us + 1) if is_doubted else measured_us
    is_late = judged_us <= newest_us
    is_judged = not is_late and (is_doubted or offset <= stale_us)
    result.judged_at_us[row] = judged_us
    result.is_judged[row] = is_judged
    result.is_clock_doubted[row] = is_doubted
    result.is_late[row] = is_late
    times.received_at_us[sensor] = received_us
    times.offset_us[sensor] = offset
    times.is_clock_doubted[sensor] = is_doubted
    if is_judged:
        times.judged_at_us[sensor] = judged_us


def _is_clock_wrong(times: SensorTimes, sensor: int, offset: int, received_us: int, interval_us: int) -> bool:
    tolerance_us = CLOCK_TOLERANCE_INTERVALS * interval_us
    if abs(offset) <= tolerance_us:
        return False
    if offset < 0:
        return True
    last_us = int(times.received_at_us[sensor])
    if last_us == -NEVER_US or received_us - last_us < PACE_SHARE * interval_us:
        return False
    growth_us = offset - int(times.offset_us[sensor])
    is_catching_up = growth_us < -CATCHING_UP_SHARE * interval_us
    if times.is_clock_doubted[sensor]:
        return abs(growth_us) <= tolerance_us
    return not is_catching_up and growth_us <= tolerance_us


def is_unwatched(
    latest: LatestReadings,
    places: SensorPlaces,
    *,
    stale_after_us: IntArray,
    hand_reading_until_us: IntArray,
    is_kept: BoolArray,
    now_us: int,
) -> BoolArray:
    """Return which tanks nobody can see: no believable sensor within its stale limit, no hand reading that stands in.

    Parameters
    ----------
    latest : LatestReadings
        Newest readings of every sensor.
    places : SensorPlaces
        Where the sensors sit.
    stale_after_us : ndarray of int64, shape (sensors,)
        Stale limits. [us]
    hand_reading_until_us : ndarray of int64, shape (tanks,)
        Until when the last hand reading stands in; 0: there is none. [us UTC]
    is_kept : ndarray of bool, shape (tanks,)
        Whether the tank has to be watched (animals in it, not under work on its probe).
    now_us : int
        The present time. [us UTC]
    """
    stale = np.zeros_like(latest.believed_at_us)
    stale[places.tank, places.slot] = stale_after_us
    # Slots without a sensor stay at the beginning of time and are never fresh.
    is_seen = (latest.believed_at_us + stale >= now_us).any(axis=1)
    return is_kept & ~is_seen & (hand_reading_until_us < now_us)


def seconds_unseen(latest: LatestReadings, *, now_us: int, since_us: int) -> FloatArray:
    """Return how long each tank has had no usable reading, counted from `since_us` where none ever came. [s]"""
    newest = np.maximum(latest.believed_at_us.max(axis=1), since_us)
    unseen: FloatArray = np.maximum(now_us - newest, 0) / microseconds(1.0)
    return unseen


def is_clock_doubted_by_tank(times: SensorTimes, places: SensorPlaces) -> BoolArray:
    """Return which tanks have a sensor whose clock is doubted."""
    doubted = np.zeros(places.tank_count, dtype=np.bool_)
    doubted[places.tank[times.is_clock_doubted]] = True
    return doubted


def sensor_times_to_dict(times: SensorTimes, sensor_ids: list[str]) -> dict[str, Any]:
    """Return what is remembered as plain JSON data, keyed by the sensor's id."""
    return {
        sensor_id: [
            int(times.received_at_us[index]),
            int(times.offset_us[index]),
            int(times.judged_at_us[index]),
            bool(times.is_clock_doubted[index]),
        ]
        for index, sensor_id in enumerate(sensor_ids)
        if times.received_at_us[index] != -NEVER_US
    }


def sensor_times_from_dict(body: dict[str, Any], sensor_ids: list[str]) -> SensorTimes:
    """Return what `sensor_times_to_dict` wrote; sensors that are gone are left out."""
    times = no_times_yet(len(sensor_ids))
    for index, sensor_id in enumerate(sensor_ids):
        if sensor_id in body:
            received, offset, judged, is_doubted = body[sensor_id]
            times.received_at_us[index] = received
            times.offset_us[index] = offset
            times.judged_at_us[index] = judged
            times.is_clock_doubted[index] = is_doubted
    return times
