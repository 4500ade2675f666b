"""Readings handled together, as columns."""

from __future__ import annotations

from dataclasses import dataclass, fields
from typing import TYPE_CHECKING, Self

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Sequence

    from analysis.arrays import FlagArray, FloatArray, IntArray
    from ingest.reading import RawReading


@dataclass(frozen=True, slots=True)
class RawBlock:
    """Decoded readings, one array a column, all of one length; the meaning of each is that of `RawReading`."""

    sensor: IntArray
    measured_at_us: IntArray
    received_at_us: IntArray
    conductivity: FloatArray
    temperature: FloatArray
    pressure: FloatArray
    flags: FlagArray

    def __len__(self) -> int:
        return len(self.sensor)

    @classmethod
    def from_readings(cls, readings: Sequence[RawReading]) -> Self:
        """Return *readings* as columns, in the same order."""
        columns = list(zip(*readings, strict=True)) or [()] * 7
        return cls(
            sensor=np.array(columns[0], dtype=np.int64),
            measured_at_us=np.array(columns[1], dtype=np.int64),
            received_at_us=np.array(columns[2], dtype=np.int64),
            conductivity=np.array(columns[3], dtype=np.float64),
            temperature=np.array(columns[4], dtype=np.float64),
            pressure=np.array(columns[5], dtype=np.float64),
            flags=np.array(columns[6], dtype=np.uint32),
        )

    def take(self, order: IntArray) -> Self:
        """Return the rows at the indices *order*."""
        return type(self)(*(getattr(self, field.name)[order] for field in fields(self)))
