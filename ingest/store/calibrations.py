"""Work done on sensors, what it says of the record before, and samples from the bench: projections of the ledger."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, NamedTuple

import msgspec

if TYPE_CHECKING:
    import sqlite3
    from collections.abc import Iterable

NO_CALIBRATION = "none"
"""The calibration set of a site where nothing has been calibrated yet."""


class ServiceRow(NamedTuple):
    """A calibration or a cleaning. `sensor` is the store's number, `kind` that of the event; times in us UTC."""

    sensor: int
    performed_at: int
    kind: str
    actor: str
    next_due: int | None
    body: dict[str, Any]


class PeriodRow(NamedTuple):
    """What a service says of a sensor's record before it; None where it says nothing."""

    sensor: int
    to_us: int
    from_us: int | None
    fouling_percent: float | None
    drift_percent: float | None
    temperature_error_K: float | None
    rating: str | None
    temperature_rating: str | None
    is_corrected: bool


class SampleRow(NamedTuple):
    """A reading that a person took by hand. `tank` and `sensor` are the store's numbers."""

    taken_at: int
    tank: int | None
    sensor: int | None
    actor: str
    body: dict[str, Any]


class KeptService(NamedTuple):
    """A service as it lies in the store, with the id of its sensor."""

    sensor: str
    performed_at: int
    event_id: int
    kind: str
    actor: str
    next_due: int | None
    body: dict[str, Any]


class PeriodOfRecord(NamedTuple):
    """A stretch of a sensor's record, from the work before to a service, as that service judges it (USGS TM 1-D3).

    `rating` and `temperature_rating` are the words of TM 1-D3, None where nothing can be said.
    """

    to_us: int
    from_us: int | None
    fouling_percent: float | None
    drift_percent: float | None
    temperature_error_K: float | None
    rating: str | None
    temperature_rating: str | None
    is_corrected: bool


class HealthRow(NamedTuple):
    """Whether a sensor can be believed: `belief` is a number of `analysis.sensor.health.Belief`, held since `since`.

    `body` holds `reasons`, each with `finding`, `belief` and `figures`, and `compensation`, what the data say of the
    declared compensation.
    """

    sensor: str
    assessed_at: int
    belief: int
    since: int
    body: dict[str, Any]


def insert(connection: sqlite3.Connection, services: Iterable[ServiceRow], *, event_id: int) -> None:
    """Keep services that *event_id* tells of."""
    connection.executemany(
        "INSERT INTO service (sensor, performed_at, event_id, kind, actor, next_due, body) VALUES (?, ?, ?, ?, ?, ?, ?)",
        [
            (row.sensor, row.performed_at, event_id, row.kind, row.actor, row.next_due, _text(row.body))
            for row in services
        ],
    )


def replace_periods(connection: sqlite3.Connection, periods: Iterable[PeriodRow]) -> None:
    """Write anew what is said of the records of the sensors in *periods*."""
    rows = list(periods)
    connection.executemany(
        "DELETE FROM record_period WHERE sensor = ?", [(sensor,) for sensor in {r.sensor for r in rows}]
    )
    connection.executemany(
        "INSERT INTO record_period (sensor, to_us, from_us, fouling_percent, drift_percent, temperature_error_K, rating,"
        " temperature_rating, is_corrected) VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?)",
        [(*row[:-1], int(row.is_corrected)) for row in rows],
    )


def insert_samples(connection: sqlite3.Connection, samples: Iterable[SampleRow], *, event_id: int) -> None:
    """Keep samples that *event_id* tells of."""
    connection.executemany(
        "INSERT INTO bench_sample (taken_at, event_id, tank, sensor, actor, body) VALUES (?, ?, ?, ?, ?, ?)",
        [(row.taken_at, event_id, row.tank, row.sensor, row.actor, _text(row.body)) for row in samples],
    )


def services(connection: sqlite3.Connection) -> list[KeptService]:
    """Return all services in the order of time; of two of one moment the later event comes later."""
    rows = connection.execute(
        "SELECT slug AS sensor, performed_at, event_id, kind, actor, next_due, body FROM service"
        " JOIN sensor ON sensor.id = service.sensor ORDER BY performed_at, event_id"
    ).fetchall()
    return [KeptService(**{**dict(row), "body": msgspec.json.decode(row["body"])}) for row in rows]


def periods(connection: sqlite3.Connection, sensor: str) -> list[PeriodOfRecord]:
    """Return what is said of the record of a sensor, oldest first."""
    rows = connection.execute(
        "SELECT to_us, from_us, fouling_percent, drift_percent, temperature_error_K, rating, temperature_rating, is_corrected"
        " FROM record_period WHERE sensor = (SELECT id FROM sensor WHERE slug = ?) ORDER BY to_us",
        (sensor,),
    ).fetchall()
    return [PeriodOfRecord(**{**dict(row), "is_corrected": bool(row["is_corrected"])}) for row in rows]


def due(connection: sqlite3.Connection) -> dict[str, int | None]:
    """Return when the next calibration of each sensor is due, None where it never had one, by the sensor's id."""
    rows = connection.execute(
        "SELECT slug, (SELECT next_due FROM service WHERE service.sensor = sensor.id AND next_due IS NOT NULL"
        " ORDER BY performed_at DESC, event_id DESC LIMIT 1) AS next_due FROM sensor"
    ).fetchall()
    return {row["slug"]: row["next_due"] for row in rows}


def health(connection: sqlite3.Connection) -> dict[str, HealthRow]:
    """Return the newest assessment of each sensor, by its id."""
    rows = connection.execute(
        "SELECT slug AS sensor, assessed_at, belief, since, body FROM sensor_health JOIN sensor ON sensor.id = sensor_health.sensor"
    ).fetchall()
    return {row["sensor"]: HealthRow(**{**dict(row), "body": msgspec.json.decode(row["body"])}) for row in rows}


def belief(connection: sqlite3.Connection, *, sensor: int) -> tuple[int, int] | None:
    """Return how far a sensor (the store's number) was believed at its newest assessment, and since when; None before the first."""
    row = connection.execute("SELECT belief, since FROM sensor_health WHERE sensor = ?", (sensor,)).fetchone()
    return None if row is None else (int(row["belief"]), int(row["since"]))


def upsert_health(
    connection: sqlite3.Connection, *, sensor: int, assessed_at: int, belief: int, since: int, body: dict[str, Any]
) -> None:
    """Write down the newest assessment of a sensor (the store's number)."""
    connection.execute(
        "INSERT OR REPLACE INTO sensor_health (sensor, assessed_at, belief, since, body) VALUES (?, ?, ?, ?, ?)",
        (sensor, assessed_at, belief, since, _text(body)),
    )


def calibration_set(connection: sqlite3.Connection) -> str:
    """Return the name of all services so far: as nothing in the ledger changes, its newest event's id says which they are."""
    newest = connection.execute("SELECT max(event_id) FROM service").fetchone()[0]
    return NO_CALIBRATION if newest is None else str(newest)


def samples(connection: sqlite3.Connection, *, since_us: int) -> list[dict[str, Any]]:
    """Return samples taken since *since_us*, oldest first: their body with `tank`, `sensor` (ids), `taken_at` and `actor`."""
    rows = connection.execute(
        "SELECT taken_at, tank.slug AS tank, sensor.slug AS sensor, actor, body FROM bench_sample"
        " LEFT JOIN tank ON tank.id = bench_sample.tank LEFT JOIN sensor ON sensor.id = bench_sample.sensor"
        " WHERE taken_at >= ? ORDER BY taken_at, event_id",
        (since_us,),
    ).fetchall()
    return [
        {
            **msgspec.json.decode(row["body"]),
            "taken_at": row["taken_at"],
            "tank": row["tank"],
            "sensor": row["sensor"],
            "actor": row["actor"],
        }
        for row in rows
    ]


def _text(body: dict[str, Any]) -> str:
    return msgspec.json.encode(body, order="deterministic").decode()
