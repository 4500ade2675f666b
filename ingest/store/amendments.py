"""Second thoughts of the quality tests: what a later reading revealed of earlier ones, kept beside the flags given at arrival."""

from __future__ import annotations

from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from analysis.sensor.quality.words import worst

if TYPE_CHECKING:
    import sqlite3
    from collections.abc import Iterable

    from analysis.arrays import IntArray


class AmendmentRow(NamedTuple):
    """The readings of a sensor from one moment to another, both included, have this flag in this test for this variable."""

    sensor: int
    from_us: int
    to_us: int
    test: int
    variable: int
    quality: int


def insert(connection: sqlite3.Connection, rows: Iterable[AmendmentRow]) -> None:
    """Keep *rows*, inside the caller's transaction."""
    connection.executemany("INSERT OR IGNORE INTO amendment VALUES (?, ?, ?, ?, ?, ?)", rows)


def worsened(connection: sqlite3.Connection, *, sensor: int, time_us: IntArray, quality: IntArray) -> IntArray:
    """Return the quality of one sensor's readings with the amendments worked in: it can only get worse, and missing stays missing.

    Parameters
    ----------
    time_us, quality : ndarray of int64
        Of the readings, in order of time.
    """
    if not len(time_us):
        return quality
    rows = connection.execute(
        "SELECT from_us, to_us, quality FROM amendment WHERE sensor = ? AND to_us >= ? AND from_us <= ?",
        (sensor, int(time_us[0]), int(time_us[-1])),
    ).fetchall()
    if not rows:
        return quality
    found = quality.astype(np.uint8)
    for row in rows:
        part = slice(
            int(np.searchsorted(time_us, row["from_us"])), int(np.searchsorted(time_us, row["to_us"], "right"))
        )
        found[part] = worst(found[part], np.full(found[part].shape, row["quality"], dtype=np.uint8))
    return found.astype(np.int64)
