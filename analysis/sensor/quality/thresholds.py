"""The thresholds of all sensors as arrays: what `evaluate` reads."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Self

import numpy as np

from analysis.arrays import MICROSECONDS_PER_SECOND
from analysis.errors import InvalidInputError
from analysis.sensor.quality.limits import MEMORY_BUCKETS

if TYPE_CHECKING:
    from collections.abc import Sequence

    from analysis.arrays import BoolArray, FloatArray, IntArray
    from analysis.sensor.quality.limits import SensorLimits

NO_NEIGHBOUR = -1


@dataclass(frozen=True, slots=True)
class Thresholds:
    """Thresholds of many sensors: variables along the first axis where there are three, sensors along the last.

    Made by `from_limits`; the columns are those of `analysis.sensor.quality.limits.SensorLimits`, times in
    microseconds and windows in buckets.
    """

    row: FloatArray
    """(7, 3, sensors): what a single row is held against; indices `FAIL_LOW` to `NOISE_LIMIT` below."""
    in_air_mS_cm: FloatArray
    climatology: FloatArray | None
    """(12, 2, 3, sensors) or None where no sensor has one."""
    gap_us: IntArray
    bucket_us: IntArray
    rate_deviations: FloatArray
    multi_variate_deviations: FloatArray
    rate_floor: FloatArray
    rate_buckets: IntArray
    flat_tolerance: FloatArray
    flat_suspect_buckets: IntArray
    flat_fail_buckets: IntArray
    attenuated_suspect: FloatArray
    attenuated_fail: FloatArray
    attenuated_buckets: IntArray
    is_still: BoolArray
    moved: FloatArray
    noise_share: FloatArray
    noise_buckets: IntArray
    neighbour: IntArray
    neighbour_difference: FloatArray

    @property
    def sensors(self) -> int:
        """How many sensors there are."""
        return int(self.gap_us.shape[0])

    @classmethod
    def from_limits(cls, limits: Sequence[SensorLimits], *, neighbour: Sequence[int] | None = None) -> Self:
        """Return the thresholds of sensors 0, 1, 2, ... as arrays.

        Parameters
        ----------
        limits : sequence of SensorLimits
            One for each sensor.
        neighbour : sequence of int, optional
            For each sensor the index of a second sensor in the same tank, or -1.

        Raises
        ------
        InvalidInputError
            If the two lengths differ or a neighbour is the sensor itself or none at all.
        """
        row = np.stack([_per_variable(limits, name, side) for name, side in _ROW_COLUMNS])
        beside = _neighbours(neighbour, len(limits))
        bucket_s = _in_step(np.array([one.bucket_s for one in limits]), beside)
        return cls(
            row=row,
            in_air_mS_cm=np.array([one.in_air_mS_cm for one in limits]),
            climatology=_climatology(limits),
            gap_us=_microseconds([one.gap_s for one in limits]),
            bucket_us=_microseconds(bucket_s),
            rate_deviations=np.array([one.rate_deviations for one in limits]),
            multi_variate_deviations=np.array([one.multi_variate_deviations for one in limits]),
            rate_floor=_per_variable(limits, "rate_floor"),
            rate_buckets=_buckets(bucket_s, np.array([[one.rate_h for one in limits]]))[0],
            flat_tolerance=_per_variable(limits, "flat_tolerance"),
            flat_suspect_buckets=_buckets(bucket_s, _per_variable(limits, "flat_suspect_h")),
            flat_fail_buckets=_buckets(bucket_s, _per_variable(limits, "flat_fail_h")),
            attenuated_suspect=_per_variable(limits, "attenuated_suspect"),
            attenuated_fail=_per_variable(limits, "attenuated_fail"),
            attenuated_buckets=_buckets(bucket_s, np.array([[one.attenuated_h for one in limits]]))[0],
            is_still=np.array([one.is_still for one in limits], dtype=np.bool_),
            moved=_per_variable(limits, "moved"),
            noise_share=np.array([one.noise_share for one in limits]),
            noise_buckets=_buckets(bucket_s, np.array([[one.noise_h for one in limits]]))[0],
            neighbour=beside,
            neighbour_difference=_per_variable(limits, "neighbour_difference"),
        )


_ROW_COLUMNS: tuple[tuple[str, int | None], ...] = (
    ("fail_span", 0),
    ("fail_span", 1),
    ("suspect_span", 0),
    ("suspect_span", 1),
    ("spike_suspect", None),
    ("spike_fail", None),
    ("noise_limit", None),
)
FAIL_LOW, FAIL_HIGH, SUSPECT_LOW, SUSPECT_HIGH, SPIKE_SUSPECT, SPIKE_FAIL, NOISE_LIMIT = range(7)


def _per_variable(limits: Sequence[SensorLimits], name: str, side: int | None = None) -> FloatArray:
    columns = [getattr(one, name) for one in limits]
    if side is not None:
        columns = [[pair[side] for pair in column] for column in columns]
    return np.ascontiguousarray(np.array(columns, dtype=np.float64).reshape(len(limits), 3).T)


def _microseconds(seconds: Sequence[float] | FloatArray) -> IntArray:
    return np.rint(np.array(seconds, dtype=np.float64) * MICROSECONDS_PER_SECOND).astype(np.int64)


def _in_step(bucket_s: FloatArray, neighbour: IntArray) -> FloatArray:
    """Return bucket widths, those of neighbours made equal: their buckets are compared by number."""
    widths = bucket_s.copy()
    has_one = np.flatnonzero(neighbour != NO_NEIGHBOUR)
    other = neighbour[has_one]
    for _ in range(has_one.shape[0]):
        before = widths.copy()
        np.maximum.at(widths, has_one, before[other])
        np.maximum.at(widths, other, before[has_one])
        if np.array_equal(before, widths):
            break
    return widths


def _buckets(bucket_s: FloatArray, hours: FloatArray) -> IntArray:
    """Return how many whole buckets cover *hours* (variables, sensors): at least 1, at most the memory."""
    covering = np.ceil(np.nan_to_num(hours, nan=MEMORY_BUCKETS) * 3600.0 / bucket_s - 1e-9)
    return np.clip(covering, 1, MEMORY_BUCKETS).astype(np.int64)


def _climatology(limits: Sequence[SensorLimits]) -> FloatArray | None:
    if all(one.climatology is None for one in limits):
        return None
    table = np.full((12, 2, 3, len(limits)), np.nan)
    for index, one in enumerate(limits):
        if one.climatology is not None:
            table[:, :, :, index] = np.array(one.climatology, dtype=np.float64).transpose(0, 2, 1)
    return table


def _neighbours(neighbour: Sequence[int] | None, sensors: int) -> IntArray:
    if neighbour is None:
        return np.full(sensors, NO_NEIGHBOUR, dtype=np.int64)
    if len(neighbour) != sensors:
        raise InvalidInputError("neighbour", found=len(neighbour), allowed=f"one index for each of {sensors} sensors")
    found = np.array(neighbour, dtype=np.int64)
    wrong = (found < NO_NEIGHBOUR) | (found >= sensors) | (found == np.arange(sensors))
    if wrong.any():
        first = int(np.nonzero(wrong)[0][0])
        raise InvalidInputError(
            "neighbour", found=int(found[first]), allowed="-1 or another sensor's index", where=f"sensor {first}"
        )
    return found
