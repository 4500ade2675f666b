"""The alarm table: a projection of the ledger that the screen reads; the ledger alone is the truth."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, NamedTuple

import msgspec

if TYPE_CHECKING:
    import sqlite3


class AlarmRow(NamedTuple):
    """Where one alarm stands.

    `body` is the alarm's whole state as the state machine keeps it; the other columns are for reading.
    """

    subject: str
    condition: str
    state: str
    priority: str
    is_active: bool
    occurrence: int
    raised_at: int | None
    value: float | None
    limit_value: float | None
    updated_at: int
    body: dict[str, Any]


def upsert(connection: sqlite3.Connection, row: AlarmRow, *, event_id: int | None) -> None:
    """Write where an alarm stands now; *event_id* names the event that brought it there, None keeps the one before."""
    connection.execute(
        "INSERT INTO alarm VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?) ON CONFLICT (subject, condition) DO UPDATE SET"
        " state = excluded.state, priority = excluded.priority, is_active = excluded.is_active, occurrence = excluded.occurrence,"
        " raised_at = excluded.raised_at, value = excluded.value, limit_value = excluded.limit_value,"
        " updated_at = excluded.updated_at, event_id = coalesce(excluded.event_id, alarm.event_id), body = excluded.body",
        (
            row.subject,
            row.condition,
            row.state,
            row.priority,
            int(row.is_active),
            row.occurrence,
            row.raised_at,
            row.value,
            row.limit_value,
            row.updated_at,
            event_id,
            msgspec.json.encode(row.body).decode(),
        ),
    )


def read_all(connection: sqlite3.Connection) -> list[AlarmRow]:
    """Return where every alarm stands."""
    rows = connection.execute("SELECT * FROM alarm ORDER BY subject, condition").fetchall()
    return [
        AlarmRow(
            subject=row["subject"],
            condition=row["condition"],
            state=row["state"],
            priority=row["priority"],
            is_active=bool(row["is_active"]),
            occurrence=row["occurrence"],
            raised_at=row["raised_at"],
            value=row["value"],
            limit_value=row["limit_value"],
            updated_at=row["updated_at"],
            body=msgspec.json.decode(row["body"]),
        )
        for row in rows
    ]
