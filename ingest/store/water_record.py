"""What is on record of a tank's water and of what a cohort felt in it, for animals that came and went."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    import sqlite3
    from collections.abc import Sequence

    from analysis.arrays import FloatArray, IntArray

MOST_BELIEVABLE_QUALITY = 3


def read(
    connection: sqlite3.Connection, *, sensors: Sequence[int], from_us: int, to_us: int
) -> tuple[IntArray, FloatArray, FloatArray]:
    """Return times, osmolality and temperature that *sensors* (the store's numbers) believably measured in [from_us, to_us).

    In the order of time; temperature is NaN where it was not measured.
    """
    places = ", ".join("?" * len(sensors))
    rows = connection.execute(
        "SELECT measured_at, osmolality_mOsm_kg, temperature_degC FROM reading WHERE measured_at >= ? AND measured_at < ?"
        f" AND sensor IN ({places}) AND quality <= ? AND osmolality_mOsm_kg IS NOT NULL ORDER BY measured_at, sensor",
        (from_us, to_us, *sensors, MOST_BELIEVABLE_QUALITY),
    ).fetchall()
    table = np.array([tuple(row) for row in rows], dtype=np.float64).reshape(-1, 3)
    return np.array([row[0] for row in rows], dtype=np.int64), table[:, 1], table[:, 2]


def felt(
    connection: sqlite3.Connection, *, cohort: str, from_us: int, to_us: int
) -> tuple[int, float | None, float | None, float | None, float | None] | None:
    """Return the newest row of what a cohort felt in [from_us, to_us]: time, acclimated, internal, gap, exposure."""
    row = connection.execute(
        "SELECT measured_at, acclimated_mOsm_kg, internal_mOsm_kg, gap_mOsm_kg, exposure_strain FROM stress"
        " WHERE measured_at >= ? AND measured_at <= ? AND cohort = ? ORDER BY measured_at DESC LIMIT 1",
        (from_us, to_us, cohort),
    ).fetchone()
    return None if row is None else (row[0], row[1], row[2], row[3], row[4])


def mean_temperature_degC(connection: sqlite3.Connection, *, tank: str, since_us: int) -> float | None:
    """Return the mean temperature that the sensors now in *tank* measured since *since_us*, from the hours rolled up so far."""
    row = connection.execute(
        "SELECT sum(temperature_sum) / nullif(sum(temperature_n), 0) FROM h1 WHERE bucket >= ? AND sensor IN ("
        " SELECT placed.sensor FROM placement AS placed JOIN tank ON tank.id = placed.tank WHERE slug = ?"
        " AND placed.since = (SELECT max(since) FROM placement AS newest WHERE newest.sensor = placed.sensor))",
        (since_us, tank),
    ).fetchone()
    return None if row[0] is None else float(row[0])
