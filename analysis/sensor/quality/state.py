"""What the quality tests remember of each sensor: plain arrays, bounded, and the same however the stream is cut.

Sums are kept as whole numbers of `RESOLUTION`, so that adding a block at a time or a row at a time gives the
same digits. The memory ends after `MEMORY_BUCKETS` completed buckets (25 hours by default) and three readings;
so the state can also be rebuilt by evaluating the stored readings of the last `MEMORY_BUCKETS` + 1 buckets.

A worker that stores the state with each block writes the *recent* part (about 300 bytes a sensor); the *ring*
(about 5 kB) changes only when a bucket is completed, about once an hour: see `QualityResult.ring_changed`.
"""

from __future__ import annotations

from dataclasses import dataclass, fields
from typing import TYPE_CHECKING, Any, Final, Self

import numpy as np

from analysis.errors import InvalidInputError
from analysis.sensor.quality.limits import MEMORY_BUCKETS
from analysis.sensor.quality.words import VARIABLES

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from analysis.arrays import BoolArray, FloatArray, IntArray

RESOLUTION: Final = 1e-4
"""Step in which history is kept: 0.0001 mS/cm, K or unit of salinity."""

HISTORY: Final = 3
"""How many of the last readings are kept: a spike is judged from three, its forerunner from one more."""

NEVER_US: Final = -(1 << 60)
"""Time of a reading that has not been."""

NO_BUCKET: Final = -(1 << 40)
"""Number of a bucket that has not been."""

COUNT, SUM, SQUARES, LOWEST, HIGHEST, COMPARED, NOISY = range(7)
TALLIES: Final = 7

(
    RATE_LIMIT,
    TIGHT_RATE_LIMIT,
    FLAT_SUSPECT_LOW,
    FLAT_SUSPECT_HIGH,
    FLAT_FAIL_LOW,
    FLAT_FAIL_HIGH,
    FLAT_JUDGED,
    ATTENUATED_LEVEL,
    NOISY_BEFORE,
    COMPARED_BEFORE,
    NEIGHBOUR_LEVEL,
) = range(11)
VERDICTS: Final = 11

BEYOND: Final = 1 << 22
"""Above every value in steps of `RESOLUTION`: the lowest and highest of nothing."""

RECENT: Final = ("newest_us", "last_us", "last_value", "bucket", "tally", "was_noisy", "water_changed_us")
RING: Final = ("ring_bucket", "ring")


@dataclass(slots=True)
class QualityState:
    """Carried from block to block; sensors along the first axis of every array.

    Parameters
    ----------
    newest_us : ndarray of int64, (sensors,)
        Measured time of the newest processed reading, usable or not.
    last_us : ndarray of int64, (sensors, 3)
        Times of the last three usable readings, oldest first.
    last_value : ndarray of float64, (sensors, 3, 3)
        Those readings: reading, variable.
    bucket : ndarray of int64, (sensors,)
        Number of the bucket that is being filled.
    tally : ndarray of int64, (sensors, 7, 3)
        What is in it: count, sum, sum of squares, lowest, highest, compared, noisy; for each variable.
    was_noisy : ndarray of bool, (sensors, 3)
        Whether the noise test spoke at the last usable reading.
    water_changed_us : ndarray of int64, (sensors,)
        When a water change was last logged for the sensor's tank.
    ring_bucket : ndarray of int64, (sensors, 25)
        Numbers of the completed buckets that are held.
    ring : ndarray of int64, (sensors, 25, 7, 3)
        Their tallies.
    """

    newest_us: IntArray
    last_us: IntArray
    last_value: FloatArray
    bucket: IntArray
    tally: IntArray
    was_noisy: BoolArray
    water_changed_us: IntArray
    ring_bucket: IntArray
    ring: IntArray
    verdict: FloatArray
    """What the completed buckets say of the one being filled, (sensors, 11, 3); made from the ring, never stored."""
    verdict_bucket: IntArray
    """The bucket for which that was said; another number means that it must be made anew."""

    @classmethod
    def fresh(cls, sensors: int) -> Self:
        """Return the state of sensors that have never been heard."""
        ring = np.zeros((sensors, MEMORY_BUCKETS, TALLIES, VARIABLES), dtype=np.int64)
        ring[:, :, LOWEST], ring[:, :, HIGHEST] = BEYOND, -BEYOND
        return cls(
            newest_us=np.full(sensors, NEVER_US, dtype=np.int64),
            last_us=np.full((sensors, HISTORY), NEVER_US, dtype=np.int64),
            last_value=np.full((sensors, HISTORY, VARIABLES), np.nan),
            bucket=np.full(sensors, NO_BUCKET, dtype=np.int64),
            tally=ring[:, 0].copy(),
            was_noisy=np.zeros((sensors, VARIABLES), dtype=np.bool_),
            water_changed_us=np.full(sensors, NEVER_US, dtype=np.int64),
            ring_bucket=np.full((sensors, MEMORY_BUCKETS), NO_BUCKET, dtype=np.int64),
            ring=ring,
            verdict=np.zeros((sensors, VERDICTS, VARIABLES)),
            verdict_bucket=np.full(sensors, NO_BUCKET, dtype=np.int64),
        )

    @property
    def sensors(self) -> int:
        """How many sensors it holds."""
        return int(self.newest_us.shape[0])

    def copy(self) -> Self:
        """Return a state that shares no array with this one."""
        return type(self)(**{field.name: getattr(self, field.name).copy() for field in fields(self)})

    def with_recent_copied(self) -> Self:
        """Return a state that shares only the ring and what follows from it with this one."""
        return type(self)(
            newest_us=self.newest_us.copy(),
            last_us=self.last_us.copy(),
            last_value=self.last_value.copy(),
            bucket=self.bucket.copy(),
            tally=self.tally.copy(),
            was_noisy=self.was_noisy.copy(),
            water_changed_us=self.water_changed_us.copy(),
            ring_bucket=self.ring_bucket,
            ring=self.ring,
            verdict=self.verdict,
            verdict_bucket=self.verdict_bucket,
        )

    def rearranged(self, former: Sequence[int]) -> Self:
        """Return the state for another list of sensors: after a change of the site.

        Parameters
        ----------
        former : sequence of int
            For each sensor of the new list its index in the old one, or -1 for a sensor that is new.

        Raises
        ------
        InvalidInputError
            If an index is not one of this state's.
        """
        index = np.array(former, dtype=np.int64).reshape(-1)
        if index.shape[0] and not (index.min() >= -1 and index.max() < self.sensors):
            raise InvalidInputError("former index of a sensor", found=former, allowed=f"-1 to {self.sensors - 1}")
        state = type(self).fresh(index.shape[0])
        known = index >= 0
        for name in (*RECENT, *RING):
            getattr(state, name)[known] = getattr(self, name)[index[known]]
        return state

    def note_water_change(self, sensor: int, *, at_us: int) -> None:
        """Remember that the water around *sensor* was changed: a still tank may be judged for flat lines."""
        self.water_changed_us[sensor] = max(int(self.water_changed_us[sensor]), at_us)
        self.verdict_bucket[sensor] = NO_BUCKET

    def recent_bytes(self, sensor: int) -> bytes:
        """Return the part of *sensor*'s state that changes with every reading."""
        return b"".join(getattr(self, name)[sensor].tobytes() for name in RECENT)

    def ring_bytes(self, sensor: int) -> bytes:
        """Return the part of *sensor*'s state that changes when a bucket is completed."""
        return b"".join(getattr(self, name)[sensor].tobytes() for name in RING)

    def restore(self, sensor: int, *, recent: bytes, ring: bytes) -> None:
        """Put back what `recent_bytes` and `ring_bytes` gave.

        Raises
        ------
        InvalidInputError
            If the bytes are of another length: they were written by another version.
        """
        self._fill(sensor, RECENT, recent)
        self._fill(sensor, RING, ring)
        self.verdict_bucket[sensor] = NO_BUCKET

    def _fill(self, sensor: int, names: tuple[str, ...], stored: bytes) -> None:
        expected = sum(getattr(self, name)[sensor].nbytes for name in names)
        if len(stored) != expected:
            raise InvalidInputError(
                "stored quality state",
                found=f"{len(stored)} bytes",
                allowed=f"{expected} bytes",
                where=f"sensor {sensor}",
            )
        offset = 0
        for name in names:
            column = getattr(self, name)
            part = column[sensor]
            size = part.nbytes
            column[sensor] = np.frombuffer(stored[offset : offset + size], dtype=column.dtype).reshape(np.shape(part))
            offset += size

    def to_jsonable(self) -> dict[str, Any]:
        """Return a dict of nested lists of numbers that JSON can hold (NaN as null)."""
        plain: dict[str, Any] = {name: getattr(self, name).tolist() for name in (*RECENT, *RING)}
        held = self.last_value.astype(object)
        held[np.isnan(self.last_value)] = None
        plain["last_value"] = held.tolist()
        return plain

    @classmethod
    def from_jsonable(cls, plain: Mapping[str, Any]) -> Self:
        """Return the state that `to_jsonable` wrote.

        Raises
        ------
        InvalidInputError
            If a part is missing or has another shape.
        """
        missing = [name for name in (*RECENT, *RING) if name not in plain]
        if missing:
            raise InvalidInputError(
                "stored quality state", found=f"no {missing[0]}", allowed=", ".join((*RECENT, *RING))
            )
        state = cls.fresh(len(plain["newest_us"]))
        for name in (*RECENT, *RING):
            column = getattr(state, name)
            stored = np.array(plain[name], dtype=column.dtype)
            if stored.shape != column.shape and column.size:
                raise InvalidInputError(f"stored quality state, {name}", found=stored.shape, allowed=str(column.shape))
            column[...] = stored.reshape(column.shape)
        return state
