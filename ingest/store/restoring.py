"""What the worker takes up again from the store when it starts or reloads."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import msgspec

from analysis.alarm.state import state_from_dict
from ingest.chain.animal_roster import Stocked
from ingest.chain.services import in_order, service
from ingest.store import calibrations, cohorts
from ingest.store.alarms import read_all as alarm_rows
from ingest.store.block import OutcomeRow

if TYPE_CHECKING:
    import sqlite3
    from collections.abc import Iterable

    from analysis.alarm.state import AlarmState
    from ingest.chain.services import Service
    from ingest.store.alarms import AlarmRow
    from ingest.store.cohorts import CohortRow
    from ingest.store.inbox import Command

__all__ = [
    "alarm_rows",
    "alarm_state",
    "animal_bodies",
    "has_outcome",
    "meta_number",
    "meta_text",
    "newest_times",
    "outcome_row",
    "quality_memory",
    "services",
    "stocked",
    "stocked_tanks",
    "tank_bodies",
]


def meta_number(connection: sqlite3.Connection, name: str) -> int:
    """Return a named whole number of the store, 0 if it is not there."""
    row = connection.execute("SELECT value FROM meta WHERE name = ?", (name,)).fetchone()
    return 0 if row is None else int(row[0])


def meta_text(connection: sqlite3.Connection, name: str) -> str:
    """Return a named text of the store, empty if it is not there."""
    row = connection.execute("SELECT value FROM meta WHERE name = ?", (name,)).fetchone()
    return "" if row is None else str(row[0])


def newest_times(connection: sqlite3.Connection) -> dict[str, int]:
    """Return the newest processed measured time of each sensor, by its id. [us UTC]"""
    rows = connection.execute("SELECT slug, newest_at FROM latest JOIN sensor ON sensor.id = latest.sensor").fetchall()
    return {row["slug"]: int(row["newest_at"]) for row in rows}


def tank_bodies(connection: sqlite3.Connection) -> dict[str, dict[str, Any]]:
    """Return what the chain remembered of the readings of each tank, by the tank's id."""
    rows = connection.execute("SELECT slug, body FROM tank_state JOIN tank ON tank.id = tank_state.tank").fetchall()
    return {row["slug"]: msgspec.json.decode(row["body"]) for row in rows}


def animal_bodies(connection: sqlite3.Connection) -> dict[str, dict[str, Any]]:
    """Return what the chain remembered of the animals, by the cohort's id."""
    rows = connection.execute("SELECT cohort, body FROM animal_state").fetchall()
    return {row["cohort"]: msgspec.json.decode(row["body"]) for row in rows}


def quality_memory(connection: sqlite3.Connection, sensor: str) -> tuple[bytes | None, bytes | None]:
    """Return what the quality tests remembered of a sensor: of its newest readings, and of the time before."""
    row = connection.execute(
        "SELECT state, body FROM sensor LEFT JOIN latest ON latest.sensor = sensor.id"
        " LEFT JOIN sensor_ring ON sensor_ring.sensor = sensor.id WHERE slug = ?",
        (sensor,),
    ).fetchone()
    return (None, None) if row is None else (row["state"], row["body"])


def stocked_tanks(connection: sqlite3.Connection) -> dict[str, tuple[Stocked, ...]]:
    """Return which cohorts are in each tank now, by the tank's id, in the order in which they came."""
    return stocked(cohorts.read_all(connection))


def stocked(rows: Iterable[CohortRow]) -> dict[str, tuple[Stocked, ...]]:
    """Return which of *rows* are in each tank, by the tank's id, in the order given; those that have ended are left out."""
    found: dict[str, tuple[Stocked, ...]] = {}
    for row in rows:
        if row.ended_at is None:
            found[row.tank] = (*found.get(row.tank, ()), _stocked(row))
    return found


def _stocked(row: CohortRow) -> Stocked:
    used_to, proposed = row.body.get("used_to_salinity"), row.body.get("proposed")
    return Stocked(
        row.id,
        row.animal,
        float("nan") if used_to is None else float(used_to),
        None if proposed is None else str(proposed["stage"]),
    )


def services(connection: sqlite3.Connection) -> dict[str, tuple[Service, ...]]:
    """Return the work done on each sensor, in order, by the sensor's id."""
    found: dict[str, list[Service]] = {}
    for row in calibrations.services(connection):
        found.setdefault(row.sensor, []).append(service(row.sensor, row.performed_at, row.kind, row.body))
    return {sensor: tuple(in_order(own)) for sensor, own in found.items()}


def alarm_state(row: AlarmRow) -> AlarmState:
    """Return the state that the state machine kept in *row*."""
    return state_from_dict(row.body)


def has_outcome(connection: sqlite3.Connection, command_id: str) -> bool:
    """Return whether a command has been decided already."""
    return connection.execute("SELECT 1 FROM command_outcome WHERE id = ?", (command_id,)).fetchone() is not None


def outcome_row(command: Command, outcome: str, reason: str, decided_at: int) -> OutcomeRow:
    """Return what became of *command* as a row."""
    return OutcomeRow(command.id, command.kind, command.subject, command.actor, outcome, reason, decided_at)
