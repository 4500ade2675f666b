"""The calibrations in force as arrays: which record holds for each reading, looked up by sensor and measured time."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from ingest.chain.services import UNTOUCHED, Setting, settings

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from analysis.arrays import BoolArray, FloatArray, IntArray
    from ingest.chain.services import Service


@dataclass(frozen=True, slots=True)
class InForce:
    """Settings of every sensor, the newest in the last column.

    Attributes
    ----------
    from_us : ndarray of int64, (sensors, settings)
        From when on each holds. Sensors with fewer begin with settings that change nothing.
    factor, offset_mS_cm, temperature_offset_K : ndarray of float64, (sensors, settings)
    is_calibrated : ndarray of bool, (sensors, settings)
    """

    from_us: IntArray
    factor: FloatArray
    offset_mS_cm: FloatArray
    temperature_offset_K: FloatArray
    is_calibrated: BoolArray

    def apply(
        self,
        sensor: IntArray,
        *,
        measured_at_us: IntArray,
        conductivity_mS_cm: FloatArray,
        temperature_degC: FloatArray,
    ) -> tuple[FloatArray, FloatArray, BoolArray]:
        """Return corrected conductivity and temperature, and which readings a calibration holds for."""
        which = self._which(sensor, measured_at_us)
        corrected = self.factor[sensor, which] * conductivity_mS_cm + self.offset_mS_cm[sensor, which]
        # An offset must not turn a dry probe into an impossible one: nothing that is there conducts less than nothing.
        corrected = np.where(conductivity_mS_cm >= 0.0, np.maximum(corrected, 0.0), corrected)
        return (
            corrected,
            np.asarray(temperature_degC + self.temperature_offset_K[sensor, which]),
            self.is_calibrated[sensor, which],
        )

    def _which(self, sensor: IntArray, measured_at_us: IntArray) -> IntArray:
        """Return for each reading the setting that holds at its measured time: nearly always the newest."""
        newest = self.from_us.shape[1] - 1
        is_older = measured_at_us < self.from_us[sensor, newest]
        which = np.full(sensor.shape, newest, dtype=np.int64)
        if is_older.any():
            begun = self.from_us[sensor[is_older]] <= measured_at_us[is_older, None]
            which[is_older] = begun.sum(axis=1) - 1
        return which


def in_force(sensors: Sequence[str], services: Mapping[str, Sequence[Service]]) -> InForce | None:
    """Return the settings of *sensors*, or None where no calibration is known: then nothing has to be looked up.

    Parameters
    ----------
    sensors : sequence of str
        Ids in the order of the roster.
    services : mapping of str to sequence of Service
        In order (`ingest.chain.services.in_order`), by the sensor's id.
    """
    held = [settings(services.get(sensor, ())) for sensor in sensors]
    most = max((len(own) for own in held), default=0)
    if not most:
        return None
    rows = [[UNTOUCHED] * (most + 1 - len(own)) + own for own in held]

    def column(name: str) -> FloatArray:
        return np.array([[getattr(one, name) for one in row] for row in rows], dtype=np.float64)

    return InForce(
        from_us=np.array([[one.from_us for one in row] for row in rows], dtype=np.int64),
        factor=column("factor"),
        offset_mS_cm=column("offset_mS_cm"),
        temperature_offset_K=column("temperature_offset_K"),
        is_calibrated=np.array([[one is not UNTOUCHED for one in row] for row in rows], dtype=np.bool_),
    )


def holds_at(services: Sequence[Service], at_us: int) -> Setting:
    """Return what holds for one sensor at one moment, before any work of that moment."""
    earlier = [one for one in settings(services) if one.from_us < at_us]
    return earlier[-1] if earlier else UNTOUCHED
