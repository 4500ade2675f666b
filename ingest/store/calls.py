"""Calls to people as the store keeps them: call-outs, calls made, deliveries and every attempt at one."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, NamedTuple

import msgspec

from ingest.store import ledger

if TYPE_CHECKING:
    import sqlite3
    from collections.abc import Iterable, Sequence

    from ingest.store.ledger import Event

ALARM_PREFIX = "alarm."
LONGEST_WAIT_US = 600_000_000
"""No delivery waits longer than this for its next attempt."""


class CallOutRow(NamedTuple):
    """Where one call-out stands; its id is that of the event that began it."""

    id: int
    phase: str
    body: dict[str, Any]


class CallRow(NamedTuple):
    """One call of one person, and the alarms that its message lists; the answer to it covers those and no others."""

    call_out: int
    number: int
    person: str
    at: int
    reason: str
    covered: tuple[tuple[str, str, int], ...] = ()
    answered_at: int | None = None


class Delivery(NamedTuple):
    """One message to one person by one channel; title and body are empty until it is handed over for the first time.

    A test message has no call-out: 0.
    """

    id: int
    call_out: int
    number: int
    person: str
    channel: str
    address: str
    reason: str
    title: str
    body: str
    created_at: int
    next_attempt_at: int
    attempts: int


class WaitingAlarm(NamedTuple):
    """An alarm that asks for a person, and the event that brought it where it stands."""

    event_id: int
    subject: str
    condition: str
    occurrence: int
    raised_at: int
    priority: str


class AttemptRow(NamedTuple):
    """One attempt at a delivery, and how it ended."""

    delivery: int
    number: int
    begun_at: int
    ended_at: int
    is_delivered: bool
    detail: str


def alarm_events(connection: sqlite3.Connection, *, after_id: int, most: int) -> tuple[list[tuple[int, Event]], int]:
    """Return what happened to alarms after an event, in order, and the id up to which this is all."""
    newest = int(connection.execute("SELECT coalesce(max(id), 0) FROM event").fetchone()[0])
    if newest <= after_id:
        return [], after_id
    rows = connection.execute(
        "SELECT * FROM event WHERE id > ? AND substr(kind, 1, ?) = ? ORDER BY id LIMIT ?",
        (after_id, len(ALARM_PREFIX), ALARM_PREFIX, most),
    ).fetchall()
    found = [(int(row["id"]), ledger.from_row(row)) for row in rows]
    return found, found[-1][0] if len(found) == most else newest


def waiting_alarms(connection: sqlite3.Connection, states: Iterable[str]) -> list[WaitingAlarm]:
    """Return the alarms that hold and are in one of *states*."""
    wanted = set(states)
    rows = connection.execute(
        "SELECT event_id, subject, condition, state, occurrence, raised_at, priority FROM alarm"
        " WHERE is_active AND event_id IS NOT NULL ORDER BY event_id"
    ).fetchall()
    return [WaitingAlarm(row[0], row[1], row[2], row[4], row[5] or 0, row[6]) for row in rows if row["state"] in wanted]


def close_outbox(connection: sqlite3.Connection, *, until_event: int, outcome: str, at_us: int) -> None:
    """Mark what has been turned into calls, up to an event, inside the caller's transaction."""
    connection.execute(
        "UPDATE outbox SET outcome = ?, finished_at = ? WHERE finished_at IS NULL AND channel = 'duty' AND event_id <= ?",
        (outcome, at_us, until_event),
    )


def open_call_outs(connection: sqlite3.Connection) -> list[CallOutRow]:
    """Return the call-outs that are not over, oldest first."""
    rows = connection.execute("SELECT id, phase, body FROM call_out WHERE phase <> 'over' ORDER BY id").fetchall()
    return [CallOutRow(row["id"], row["phase"], msgspec.json.decode(row["body"])) for row in rows]


def write_call_out(connection: sqlite3.Connection, row: CallOutRow, *, at_us: int) -> None:
    """Write where a call-out stands, inside the caller's transaction."""
    connection.execute(
        "INSERT OR REPLACE INTO call_out VALUES (?, ?, ?, ?)",
        (row.id, row.phase, at_us, msgspec.json.encode(row.body).decode()),
    )


def write_call(connection: sqlite3.Connection, call: CallRow) -> None:
    """Write a call, inside the caller's transaction; the same call again changes nothing but what it lists."""
    connection.execute(
        "INSERT INTO call_made VALUES (?, ?, ?, ?, ?, ?, ?) ON CONFLICT (call_out, number) DO UPDATE SET covered = excluded.covered",
        (*call[:5], msgspec.json.encode(call.covered).decode(), call.answered_at),
    )


def read_call(connection: sqlite3.Connection, *, call_out: int, number: int) -> CallRow | None:
    """Return a call, None if it was never made."""
    row = connection.execute("SELECT * FROM call_made WHERE call_out = ? AND number = ?", (call_out, number)).fetchone()
    if row is None:
        return None
    covered = tuple((tank, kind, occurrence) for tank, kind, occurrence in msgspec.json.decode(row["covered"]))
    return CallRow(
        call_out=row["call_out"],
        number=row["number"],
        person=row["person"],
        at=row["at"],
        reason=row["reason"],
        covered=covered,
        answered_at=row["answered_at"],
    )


def mark_answered(connection: sqlite3.Connection, *, call_out: int, number: int, at_us: int) -> None:
    """Write that the code of a call has been used, inside the caller's transaction."""
    connection.execute(
        "UPDATE call_made SET answered_at = ? WHERE call_out = ? AND number = ?", (at_us, call_out, number)
    )


def calls_between(connection: sqlite3.Connection, *, from_us: int, until_us: int) -> list[CallRow]:
    """Return the calls made in a time, in order: for how well the alarms work."""
    rows = connection.execute(
        "SELECT call_out, number FROM call_made WHERE at >= ? AND at < ? ORDER BY at, call_out, number",
        (from_us, until_us),
    ).fetchall()
    found = (read_call(connection, call_out=row["call_out"], number=row["number"]) for row in rows)
    return [call for call in found if call is not None]


def add_delivery(connection: sqlite3.Connection, delivery: Delivery) -> int:
    """Write a new delivery, inside the caller's transaction, and return its id (that of *delivery* is not used)."""
    cursor = connection.execute(
        "INSERT INTO delivery (call_out, number, person, channel, address, reason, title, body, created_at, next_attempt_at)"
        " VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?)",
        delivery[1:11],
    )
    return int(cursor.lastrowid or 0)


def due_deliveries(connection: sqlite3.Connection, *, now_us: int, without: Iterable[int]) -> list[Delivery]:
    """Return deliveries that are due and not in *without*, oldest first.

    What seems to be due further ahead than anything waits is due now: the clock has been set back meanwhile.
    """
    rows = connection.execute(
        "SELECT id, call_out, number, person, channel, address, reason, title, body, created_at, next_attempt_at, attempts"
        " FROM delivery WHERE finished_at IS NULL AND (next_attempt_at <= ? OR next_attempt_at > ?) ORDER BY id",
        (now_us, now_us + LONGEST_WAIT_US),
    ).fetchall()
    taken = set(without)
    return [Delivery(*row) for row in rows if row["id"] not in taken]


def waiting_delivery(connection: sqlite3.Connection, *, call_out: int, person: str) -> Delivery | None:
    """Return a delivery of a call-out to a person that has no text yet: whoever joins now stands in it too."""
    row = connection.execute(
        "SELECT id, call_out, number, person, channel, address, reason, title, body, created_at, next_attempt_at, attempts"
        " FROM delivery WHERE finished_at IS NULL AND call_out = ? AND person = ? AND title = '' ORDER BY id LIMIT 1",
        (call_out, person),
    ).fetchone()
    return None if row is None else Delivery(*row)


def write_text(connection: sqlite3.Connection, delivery: Delivery) -> None:
    """Write the text of a delivery, inside the caller's transaction."""
    connection.execute(
        "UPDATE delivery SET title = ?, body = ? WHERE id = ?", (delivery.title, delivery.body, delivery.id)
    )


def attempt_count(connection: sqlite3.Connection, delivery: int) -> int:
    """Return how often a delivery has been tried."""
    row = connection.execute("SELECT attempts FROM delivery WHERE id = ?", (delivery,)).fetchone()
    return 0 if row is None else int(row[0])


def write_attempt(connection: sqlite3.Connection, attempt: AttemptRow, *, next_attempt_at: int) -> None:
    """Write an attempt and what follows from it for its delivery, inside the caller's transaction."""
    connection.execute(
        "INSERT OR IGNORE INTO delivery_attempt SELECT ?, attempts + 1, ?, ?, ?, ? FROM delivery WHERE id = ?",
        (
            attempt.delivery,
            attempt.begun_at,
            attempt.ended_at,
            int(attempt.is_delivered),
            attempt.detail,
            attempt.delivery,
        ),
    )
    connection.execute(
        "UPDATE delivery SET attempts = attempts + 1, next_attempt_at = ?, outcome = ?, finished_at = ?"
        " WHERE id = ? AND (finished_at IS NULL OR ?)",
        (
            next_attempt_at,
            "delivered" if attempt.is_delivered else None,
            attempt.ended_at if attempt.is_delivered else None,
            attempt.delivery,
            int(attempt.is_delivered),
        ),
    )


def finish_deliveries(connection: sqlite3.Connection, ids: Sequence[int], *, outcome: str, at_us: int) -> None:
    """Give deliveries up, inside the caller's transaction."""
    connection.executemany(
        "UPDATE delivery SET outcome = ?, finished_at = ? WHERE id = ? AND finished_at IS NULL",
        [(outcome, at_us, delivery) for delivery in ids],
    )


def oldest_unsent_us(connection: sqlite3.Connection, *, now_us: int) -> int | None:
    """Return since when the oldest message waits that should have left; None if none does. [us UTC]"""
    found = connection.execute(
        "SELECT min(created_at) FROM delivery WHERE finished_at IS NULL AND (next_attempt_at <= ? OR attempts > 0)",
        (now_us,),
    ).fetchone()[0]
    return None if found is None else int(found)


def attempts(connection: sqlite3.Connection) -> list[AttemptRow]:
    """Return every attempt, in order."""
    rows = connection.execute("SELECT * FROM delivery_attempt ORDER BY delivery, number").fetchall()
    return [AttemptRow(**{**dict(row), "is_delivered": bool(row["is_delivered"])}) for row in rows]


def batches(connection: sqlite3.Connection) -> dict[str, tuple[str, str, int | None]]:
    """Return (id, animal, number) of the animals in each tank, by the tank's id; of several the one that came last."""
    rows = connection.execute(
        "SELECT slug, cohort.id AS batch, animal, number FROM cohort JOIN tank ON tank.id = cohort.tank"
        " WHERE ended_at IS NULL ORDER BY since, cohort.id"
    ).fetchall()
    return {row["slug"]: (row["batch"], row["animal"], row["number"]) for row in rows}
