"""What the laboratory and the bench say of animals: values of body fluid, stress tests of postlarvae; projected from the ledger."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, Final, NamedTuple

import msgspec

from ingest.store import ledger

if TYPE_CHECKING:
    import sqlite3

    from ingest.store.ledger import Event

PREFIX: Final = "sample."
BLOOD: Final = "sample.blood_measured"
POSTLARVAE: Final = "sample.postlarvae_tested"
"""Kinds of the ledger's events; the body of each names `cohort`."""


class AnimalSample(NamedTuple):
    """A sample of one cohort. `kind` is that of its event; `body` what was entered and what follows from it."""

    cohort: str
    taken_at: int
    event_id: int
    kind: str
    actor: str
    body: dict[str, Any]


def project(connection: sqlite3.Connection, event: Event, *, event_id: int) -> None:
    """Take the event of a sample up into its table, inside the caller's transaction; other events change nothing."""
    if not event.kind.startswith(PREFIX):
        return
    taken_at = event.recorded_at if event.measured_at is None else event.measured_at
    connection.execute(
        "INSERT INTO animal_sample (cohort, taken_at, event_id, kind, actor, body) VALUES (?, ?, ?, ?, ?, ?)",
        (
            event.body["cohort"],
            taken_at,
            event_id,
            event.kind,
            event.actor,
            msgspec.json.encode(event.body, order="deterministic").decode(),
        ),
    )


def rebuild(connection: sqlite3.Connection) -> int:
    """Make the table anew from the ledger, inside the caller's transaction; return the number of samples."""
    connection.execute("DELETE FROM animal_sample")
    count = 0
    for event_id, event in ledger.read(connection, kind_prefix=PREFIX):
        project(connection, event, event_id=event_id)
        count += 1
    return count


def read(
    connection: sqlite3.Connection, *, cohort: str | None = None, kind: str | None = None, since_us: int = 0
) -> list[AnimalSample]:
    """Return samples of one cohort or of all, of one kind or of all, oldest first."""
    rows = connection.execute(
        "SELECT * FROM animal_sample WHERE (? IS NULL OR cohort = ?) AND (? IS NULL OR kind = ?) AND taken_at >= ?"
        " ORDER BY taken_at, event_id",
        (cohort, cohort, kind, kind, since_us),
    ).fetchall()
    return [AnimalSample(**{**dict(row), "body": msgspec.json.decode(row["body"])}) for row in rows]
