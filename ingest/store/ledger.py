"""The ledger: what happened, who did it and why, append-only, each row chained to the one before by its hash."""

from __future__ import annotations

import hashlib
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import msgspec

if TYPE_CHECKING:
    import sqlite3
    from collections.abc import Iterator

WORKER = "worker"
"""The actor of what the program does by itself."""

_encode = msgspec.json.Encoder(order="deterministic").encode


@dataclass(frozen=True, slots=True)
class Event:
    """Something to be written into the ledger.

    Attributes
    ----------
    kind : str
        Noun and past participle, such as ``alarm.raised``.
    subject : str
        What it is about, such as ``tank/l3``.
    measured_at : int or None
        When it was so, by the data. [us UTC]
    recorded_at : int
        When it was written down. [us UTC]
    actor : str
        The person, or ``worker``.
    cause_id : int or None
        The event that led to this one.
    body : dict
        JSON-able details.
    body_version : int
        Version of the details' layout.
    """

    kind: str
    subject: str
    recorded_at: int
    measured_at: int | None = None
    actor: str = WORKER
    cause_id: int | None = None
    body: dict[str, Any] = field(default_factory=dict)
    body_version: int = 1


def _digest(event_id: int, event: Event, body: str, previous_hash: str) -> str:
    content = _encode(
        [
            event_id,
            event.kind,
            event.subject,
            event.measured_at,
            event.recorded_at,
            event.actor,
            event.cause_id,
            body,
            event.body_version,
            previous_hash,
        ]
    )
    return hashlib.sha256(content).hexdigest()


def append(connection: sqlite3.Connection, event: Event) -> int:
    """Write *event* inside the caller's transaction and return its id."""
    last = connection.execute("SELECT id, hash FROM event ORDER BY id DESC LIMIT 1").fetchone()
    event_id, previous_hash = (1, "") if last is None else (int(last["id"]) + 1, str(last["hash"]))
    body = _encode(event.body).decode()
    connection.execute(
        "INSERT INTO event VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)",
        (
            event_id,
            event.kind,
            event.subject,
            event.measured_at,
            event.recorded_at,
            event.actor,
            event.cause_id,
            body,
            event.body_version,
            previous_hash,
            _digest(event_id, event, body, previous_hash),
        ),
    )
    return event_id


def from_row(row: sqlite3.Row) -> Event:
    """Return the event in a row of the table `event`."""
    return Event(
        kind=row["kind"],
        subject=row["subject"],
        measured_at=row["measured_at"],
        recorded_at=row["recorded_at"],
        actor=row["actor"],
        cause_id=row["cause_id"],
        body=msgspec.json.decode(row["body"]),
        body_version=row["body_version"],
    )


def read(connection: sqlite3.Connection, *, kind_prefix: str = "", after_id: int = 0) -> Iterator[tuple[int, Event]]:
    """Yield (id, event) in order, of kinds that begin with *kind_prefix*, after *after_id*."""
    rows = connection.execute(
        "SELECT * FROM event WHERE id > ? AND substr(kind, 1, ?) = ? ORDER BY id",
        (after_id, len(kind_prefix), kind_prefix),
    )
    for row in rows.fetchall():
        yield int(row["id"]), from_row(row)


def first_broken_id(connection: sqlite3.Connection) -> int | None:
    """Return the id of the first event whose hash does not follow from its content and forerunner, or None if all do."""
    previous_hash, expected_id = "", 1
    for row in connection.execute("SELECT * FROM event ORDER BY id"):
        digest = _digest(int(row["id"]), from_row(row), row["body"], previous_hash)
        if row["id"] != expected_id or row["previous_hash"] != previous_hash or row["hash"] != digest:
            return int(row["id"])
        previous_hash, expected_id = digest, expected_id + 1
    return None


def newest_hash(connection: sqlite3.Connection) -> str:
    """Return the hash of the newest event: with it the whole ledger is pinned."""
    row = connection.execute("SELECT hash FROM event ORDER BY id DESC LIMIT 1").fetchone()
    return "" if row is None else str(row["hash"])
