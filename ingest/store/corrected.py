"""Corrected rows, which supersede readings that stay as they are, and the jobs that make them."""

from __future__ import annotations

from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from ingest.store.readings import COLUMNS, ReadingRows

if TYPE_CHECKING:
    import sqlite3
    from collections.abc import Iterable

_INSERT = (
    f"INSERT OR IGNORE INTO corrected ({', '.join(COLUMNS)}, reason, recorded_at)"
    f" VALUES ({', '.join('?' * (len(COLUMNS) + 2))})"
)
_UNSIGNED = {"flags": np.uint32, "quality": np.uint8}
_WHOLE = {"measured_at", "sensor", "received_at", "declaration", "derivation", "tests"}

_SHOWN = (
    "temperature_degC",
    "practical_salinity",
    "absolute_salinity_g_kg",
    "density_kg_m3",
    "osmolality_mOsm_kg",
    "conductivity_mS_cm",
    "flags",
    "quality",
)
BEST = (
    "SELECT reading.measured_at, reading.sensor, "
    + ", ".join(
        f"CASE WHEN better.sensor IS NULL THEN reading.{name} ELSE better.{name} END AS {name}" for name in _SHOWN
    )
    + " FROM reading LEFT JOIN corrected AS better ON better.measured_at = reading.measured_at"
    " AND better.sensor = reading.sensor AND better.derivation = (SELECT c.derivation FROM corrected AS c"
    " WHERE c.measured_at = reading.measured_at AND c.sensor = reading.sensor"
    " ORDER BY c.recorded_at DESC, c.derivation DESC LIMIT 1)"
)
"""Of each reading the newest corrected row, or itself where there is none."""


class JobRow(NamedTuple):
    """What has to be derived again: readings of one sensor (the store's number) in [from_us, to_us), and why."""

    sensor: int
    from_us: int
    to_us: int
    reason: str


class Job(NamedTuple):
    """A job as it stands: all before `next_us` is done."""

    id: int
    sensor: int
    slug: str
    from_us: int
    to_us: int
    reason: str
    event_id: int | None
    next_us: int
    row_count: int


class JobState(NamedTuple):
    """How far a job has come; `finished_at` is None while it runs."""

    sensor: str
    from_us: int
    to_us: int
    reason: str
    created_at: int
    next_us: int
    row_count: int
    finished_at: int | None


def add_jobs(connection: sqlite3.Connection, jobs: Iterable[JobRow], *, event_id: int | None, now_us: int) -> None:
    """Write down what has to be derived again."""
    connection.executemany(
        "INSERT INTO rederivation (sensor, from_us, to_us, reason, event_id, created_at, next_us) VALUES (?, ?, ?, ?, ?, ?, ?)",
        [(job.sensor, job.from_us, job.to_us, job.reason, event_id, now_us, job.from_us) for job in jobs],
    )


def next_job(connection: sqlite3.Connection) -> Job | None:
    """Return the oldest job that is not done, or None."""
    row = connection.execute(
        "SELECT rederivation.id, sensor, slug, from_us, to_us, reason, event_id, next_us, row_count FROM rederivation"
        " JOIN sensor ON sensor.id = rederivation.sensor WHERE finished_at IS NULL ORDER BY rederivation.id LIMIT 1"
    ).fetchone()
    return None if row is None else Job(*row)


def job_states(connection: sqlite3.Connection, *, most: int) -> list[JobState]:
    """Return the newest jobs, newest first."""
    rows = connection.execute(
        "SELECT slug, from_us, to_us, reason, created_at, next_us, row_count, finished_at FROM rederivation"
        " JOIN sensor ON sensor.id = rederivation.sensor ORDER BY rederivation.id DESC LIMIT ?",
        (most,),
    ).fetchall()
    return [JobState(*row) for row in rows]


def slice_end(connection: sqlite3.Connection, job: Job, *, most: int) -> int:
    """Return how far the next slice of *job* reaches when it looks at no more than about *most* rows of all sensors."""
    row = connection.execute(
        "SELECT measured_at FROM reading WHERE measured_at >= ? AND measured_at < ? ORDER BY measured_at LIMIT 1 OFFSET ?",
        (job.next_us, job.to_us, most),
    ).fetchone()
    if row is None:
        return job.to_us
    # More rows than that in one microsecond would stop the job; it takes them together instead.
    return max(int(row[0]), job.next_us + 1)


def readings(connection: sqlite3.Connection, *, sensor: int, from_us: int, to_us: int, most: int) -> ReadingRows:
    """Return the first *most* readings of one sensor in [from_us, to_us) as they were seen."""
    rows = connection.execute(
        f"SELECT {', '.join(COLUMNS)} FROM reading WHERE measured_at >= ? AND measured_at < ? AND sensor = ?"
        " ORDER BY measured_at LIMIT ?",
        (from_us, to_us, sensor, most),
    ).fetchall()
    columns = list(zip(*(tuple(row) for row in rows), strict=True)) or [()] * len(COLUMNS)
    return ReadingRows(
        **{name: np.array(column, dtype=_type(name)) for name, column in zip(COLUMNS, columns, strict=True)}
    )


def nearest(
    connection: sqlite3.Connection, *, sensor: int, at_us: int, within_us: int
) -> tuple[int, float | None, float | None, float | None, int] | None:
    """Return (measured time, conductivity, temperature, salinity, quality) of the reading nearest to a moment, or None."""
    found = []
    for span, order in (((at_us - within_us, at_us), "DESC"), ((at_us, at_us + within_us), "ASC")):
        row = connection.execute(
            "SELECT measured_at, conductivity_mS_cm, temperature_degC, coalesce(practical_salinity, absolute_salinity_g_kg), quality"
            f" FROM reading WHERE measured_at BETWEEN ? AND ? AND sensor = ? ORDER BY measured_at {order} LIMIT 1",
            (*span, sensor),
        ).fetchone()
        if row is not None:
            found.append(tuple(row))
    return min(found, key=lambda row: abs(row[0] - at_us), default=None)


def _type(name: str) -> type:
    return _UNSIGNED.get(name, np.int64 if name in _WHOLE else np.float64)


def corrected_times(connection: sqlite3.Connection, *, sensor: int, from_us: int, to_us: int) -> set[int]:
    """Return the measured times in [from_us, to_us) of which a corrected row exists."""
    rows = connection.execute(
        "SELECT DISTINCT measured_at FROM corrected WHERE measured_at >= ? AND measured_at < ? AND sensor = ?",
        (from_us, to_us, sensor),
    ).fetchall()
    return {int(row[0]) for row in rows}


def revisions(connection: sqlite3.Connection, derivations: Iterable[int]) -> dict[int, int]:
    """Return the revision of the site file under which each of *derivations* was made."""
    found = {}
    for number in derivations:
        row = connection.execute("SELECT revision FROM derivation WHERE id = ?", (number,)).fetchone()
        if row is not None:
            found[number] = int(row["revision"])
    return found


def revision_text(connection: sqlite3.Connection, number: int) -> str | None:
    """Return the text of a revision of the site file, or None if there is none of that number."""
    row = connection.execute("SELECT text FROM revision WHERE number = ?", (number,)).fetchone()
    return None if row is None else str(row["text"])


def insert(connection: sqlite3.Connection, rows: ReadingRows, *, reason: str, now_us: int) -> None:
    """Add corrected rows. A row of the same reading and derivation is there already when a job ran twice: it stays."""
    columns = [getattr(rows, name).tolist() for name in COLUMNS]
    connection.executemany(_INSERT, ((*values, reason, now_us) for values in zip(*columns, strict=True)))


def advance(connection: sqlite3.Connection, job: Job, *, next_us: int, rows: int, finished_at: int | None) -> None:
    """Move *job* on, in the transaction that adds its rows."""
    connection.execute(
        "UPDATE rederivation SET next_us = ?, row_count = row_count + ?, finished_at = ? WHERE id = ?",
        (next_us, rows, finished_at, job.id),
    )
