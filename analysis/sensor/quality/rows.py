"""A block of readings laid out sensor by sensor, each in order of time."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from analysis.errors import InvalidInputError

if TYPE_CHECKING:
    from analysis.arrays import BoolArray, FloatArray, IntArray


@dataclass(slots=True)
class Rows:
    """Readings of one or more sensors, those of each sensor together.

    Parameters
    ----------
    sensor, time_us : ndarray of int64, (rows,)
        Sensor index and measured time.
    value : ndarray of float64, (3, rows)
        Conductivity, temperature, salinity.
    starts, ends : ndarray of int64, (segments,)
        First and last row of each sensor.
    owners : ndarray of int64, (segments,)
        The sensor of each segment.
    count : int
        How many rows.
    """

    sensor: IntArray
    time_us: IntArray
    value: FloatArray
    starts: IntArray
    ends: IntArray
    owners: IntArray
    count: int

    def pick(self, per_sensor: np.ndarray) -> np.ndarray:
        """Return a per-sensor array (sensors last) for each row; one column where there is one sensor."""
        if self.owners.shape[0] == 1:
            only = int(self.owners[0])
            return per_sensor[..., only : only + 1]
        return per_sensor.take(self.sensor, axis=-1)

    def subset(self, keep: BoolArray) -> Rows:
        """Return the rows where *keep* is true."""
        return laid_out(self.sensor[keep], self.time_us[keep], self.value[:, keep])


def laid_out(sensor: IntArray, time_us: IntArray, value: FloatArray) -> Rows:
    """Return rows whose sensors stand together already.

    Raises
    ------
    InvalidInputError
        If the times of a sensor run backwards.
    """
    count = sensor.shape[0]
    if count < 2:
        starts = ends = np.zeros(count, dtype=np.int64)
    else:
        changes = sensor[1:] != sensor[:-1]
        if changes.all():
            each = np.arange(count)
            return Rows(sensor=sensor, time_us=time_us, value=value, starts=each, ends=each, owners=sensor, count=count)
        inner = np.flatnonzero(changes)
        starts, ends = np.empty(inner.shape[0] + 1, dtype=np.int64), np.empty(inner.shape[0] + 1, dtype=np.int64)
        starts[0], ends[-1] = 0, count - 1
        np.add(inner, 1, out=starts[1:])
        ends[:-1] = inner
        _check_order(sensor, time_us, changes)
    return Rows(
        sensor=sensor, time_us=time_us, value=value, starts=starts, ends=ends, owners=sensor[starts], count=count
    )


def _check_order(sensor: IntArray, time_us: IntArray, changes: BoolArray) -> None:
    backwards = time_us[1:] < time_us[:-1]
    backwards &= ~changes
    if backwards.any():
        row = int(np.flatnonzero(backwards)[0]) + 1
        raise InvalidInputError(
            "measured_at_us",
            found=int(time_us[row]),
            allowed="rows in order of measured time",
            where=f"sensor {int(sensor[row])}",
        )


def order_by_sensor(sensor: IntArray) -> IntArray | None:
    """Return the stable order that brings the rows of each sensor together, or None where they are together."""
    if sensor.shape[0] < 2 or bool((sensor[1:] >= sensor[:-1]).all()):
        return None
    return np.argsort(sensor, kind="stable")
