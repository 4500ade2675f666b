"""The recent past of all sensors, thinned: what the assessment of the sensors looks at."""

from __future__ import annotations

from typing import TYPE_CHECKING, NamedTuple

import numpy as np

if TYPE_CHECKING:
    import sqlite3

    from analysis.arrays import FloatArray, IntArray

THIN_US = 60_000_000
"""Of each sensor one reading a minute is taken."""


class RecentRows(NamedTuple):
    """Readings as columns; `sensor` is the store's number, `tests` the packed flags of the tests."""

    sensor: IntArray
    measured_at: IntArray
    salinity: FloatArray
    temperature_degC: FloatArray
    tests: IntArray


class Quarters(NamedTuple):
    """Quarter hours of one sensor: the start of each, and the means in it."""

    start: IntArray
    salinity: FloatArray
    temperature_degC: FloatArray


def span_end(connection: sqlite3.Connection, *, from_us: int, to_us: int, most: int) -> int:
    """Return how far from *from_us* about *most* rows of all sensors reach."""
    row = connection.execute(
        "SELECT measured_at FROM reading WHERE measured_at >= ? AND measured_at < ? ORDER BY measured_at LIMIT 1 OFFSET ?",
        (from_us, to_us, most),
    ).fetchone()
    return to_us if row is None else max(int(row[0]), from_us + 1)


def thinned(connection: sqlite3.Connection, *, from_us: int, to_us: int) -> RecentRows:
    """Return the first reading of each sensor and minute in [from_us, to_us)."""
    rows = connection.execute(
        "SELECT sensor, min(measured_at), coalesce(practical_salinity, absolute_salinity_g_kg), temperature_degC, tests"
        " FROM reading WHERE measured_at >= ? AND measured_at < ? GROUP BY sensor, measured_at / ?",
        (from_us, to_us, THIN_US),
    ).fetchall()
    columns = list(zip(*(tuple(row) for row in rows), strict=True)) or [()] * 5
    return RecentRows(
        sensor=np.array(columns[0], dtype=np.int64),
        measured_at=np.array(columns[1], dtype=np.int64),
        salinity=np.array(columns[2], dtype=np.float64),
        temperature_degC=np.array(columns[3], dtype=np.float64),
        tests=np.array(columns[4], dtype=np.int64),
    )


def quarters(connection: sqlite3.Connection, *, sensor: int, from_us: int, to_us: int) -> Quarters:
    """Return the quarter hours of a sensor (the store's number) that begin in [from_us, to_us)."""
    rows = connection.execute(
        "SELECT bucket, salinity_sum / nullif(salinity_n, 0), temperature_sum / nullif(temperature_n, 0) FROM q15"
        " WHERE sensor = ? AND bucket >= ? AND bucket < ? ORDER BY bucket",
        (sensor, from_us, to_us),
    ).fetchall()
    columns = list(zip(*(tuple(row) for row in rows), strict=True)) or [()] * 3
    return Quarters(
        start=np.array(columns[0], dtype=np.int64),
        salinity=np.array(columns[1], dtype=np.float64),
        temperature_degC=np.array(columns[2], dtype=np.float64),
    )


def declared_once(connection: sqlite3.Connection, *, sensor: int) -> bool:
    """Return whether a sensor (the store's number) has had one declaration only."""
    found = connection.execute("SELECT count(*) FROM declaration WHERE sensor = ?", (sensor,)).fetchone()[0]
    return int(found) <= 1


def accepted_at(connection: sqlite3.Connection, *, revision: int) -> int:
    """Return when a revision of the site file was accepted. [us UTC]"""
    row = connection.execute("SELECT accepted_at FROM revision WHERE number = ?", (revision,)).fetchone()
    return 0 if row is None else int(row["accepted_at"])
