"""Readings: one row a moment and sensor, with what came in, what was made of it, and how far it can be believed."""

from __future__ import annotations

from dataclasses import dataclass, fields
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    import sqlite3
    from collections.abc import Sequence

    from analysis.arrays import FlagArray, FloatArray, IntArray, QualityArray


@dataclass(frozen=True, slots=True)
class ReadingRows:
    """Rows of the table `reading`, one array a column, all of one length.

    `sensor`, `declaration` and `derivation` are the store's own numbers. Times are microseconds UTC.
    NaN is stored as NULL.
    """

    measured_at: IntArray
    sensor: IntArray
    received_at: IntArray
    declaration: IntArray
    derivation: IntArray
    conductivity: FloatArray
    temperature: FloatArray
    pressure: FloatArray
    conductivity_mS_cm: FloatArray
    temperature_degC: FloatArray
    practical_salinity: FloatArray
    absolute_salinity_g_kg: FloatArray
    density_kg_m3: FloatArray
    osmolality_mOsm_kg: FloatArray
    osmolality_in_situ_mOsm_kg: FloatArray
    flags: FlagArray
    quality: QualityArray
    tests: IntArray

    def __len__(self) -> int:
        return len(self.measured_at)


COLUMNS = tuple(field.name for field in fields(ReadingRows))
_INSERT = f"INSERT INTO reading ({', '.join(COLUMNS)}) VALUES ({', '.join('?' * len(COLUMNS))})"
_LATEST_COLUMNS = (
    "sensor",
    "measured_at",
    "received_at",
    "conductivity_mS_cm",
    "temperature_degC",
    "practical_salinity",
    "absolute_salinity_g_kg",
    "density_kg_m3",
    "osmolality_mOsm_kg",
    "flags",
    "quality",
)
_UPSERT_LATEST = (
    f"INSERT INTO latest ({', '.join(_LATEST_COLUMNS)}, state, newest_at) VALUES ({', '.join('?' * (len(_LATEST_COLUMNS) + 2))}) "
    f"ON CONFLICT (sensor) DO UPDATE SET {', '.join(f'{name} = excluded.{name}' for name in (*_LATEST_COLUMNS[1:], 'state'))},"
    " newest_at = max(newest_at, excluded.newest_at)"
)


def insert(connection: sqlite3.Connection, rows: ReadingRows) -> None:
    """Insert *rows*, all of which must be new to the store."""
    connection.executemany(_INSERT, zip(*(getattr(rows, name).tolist() for name in COLUMNS), strict=True))


def upsert_latest(
    connection: sqlite3.Connection,
    rows: ReadingRows,
    chosen: IntArray,
    states: Sequence[bytes | None],
    newest_at: Sequence[int],
) -> None:
    """Make the rows at the indices *chosen* the newest of their sensors, each with the state of its sensor.

    *newest_at* is the newest measured time that was admitted of each (empty: that of the row). It never falls, also where a clock that
    steps back makes an older reading the one to be shown: by it, readings that are stored already are known.
    """
    columns = [getattr(rows, name)[chosen].tolist() for name in _LATEST_COLUMNS]
    connection.executemany(
        _UPSERT_LATEST, zip(*columns, states, newest_at or rows.measured_at[chosen].tolist(), strict=True)
    )


def as_sent(connection: sqlite3.Connection, *, measured_at: int, sensor: int) -> tuple[float, float, float] | None:
    """Return (conductivity, temperature, pressure) as sent of a stored reading, NaN for NULL, or None if there is none."""
    row = connection.execute(
        "SELECT conductivity, temperature, pressure FROM reading WHERE measured_at = ? AND sensor = ?",
        (measured_at, sensor),
    ).fetchone()
    if row is None:
        return None
    conductivity, temperature, pressure = (np.nan if value is None else float(value) for value in row)
    return conductivity, temperature, pressure


def record_conflict(
    connection: sqlite3.Connection,
    *,
    measured_at: int,
    sensor: int,
    received_at: int,
    values: tuple[float, float, float],
    reason: str,
) -> None:
    """Keep a second, different reading of the same moment and sensor, with the reason why it did not become the first."""
    connection.execute(
        "INSERT INTO conflict (measured_at, sensor, received_at, conductivity, temperature, pressure, reason)"
        " VALUES (?, ?, ?, ?, ?, ?, ?)",
        (measured_at, sensor, received_at, *values, reason),
    )
