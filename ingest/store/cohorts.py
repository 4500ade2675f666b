"""Cohorts: animals of one species and stage in one tank; a projection of the ledger's stock events, and of nothing else."""

from __future__ import annotations

from dataclasses import asdict, dataclass
from typing import TYPE_CHECKING, Any, Final, NamedTuple

import msgspec

from ingest.store import ledger, registry

if TYPE_CHECKING:
    import sqlite3
    from collections.abc import Mapping

    from ingest.store.ledger import Event

PREFIX: Final = "stock."
RECEIVED: Final = "stock.received"
MOVED: Final = "stock.moved"
SPLIT: Final = "stock.split"
JOINED: Final = "stock.joined"
COUNTED: Final = "stock.counted"
DIED: Final = "stock.died"
HARVESTED: Final = "stock.harvested"
STAGE_PROPOSED: Final = "stock.stage_proposed"
STAGE_CONFIRMED: Final = "stock.stage_confirmed"
"""Kinds of the ledger's events. The body of each names `cohort`, and `tank`, `animal` and `number` as they are after it."""


@dataclass(frozen=True, slots=True)
class FirstStock:
    """The animals that were in a tank before the tool was there."""

    cohort: str
    animal: str
    number: int
    used_to_salinity: float
    since: int
    name: str | None = None


_COLUMNS = frozenset({"cohort", "tank", "animal", "number", "since", "states"})
"""What a cohort's body does not repeat: its own columns, and what the animals were used to at the moment of the event."""


class CohortRow(NamedTuple):
    """A cohort as the ledger tells it.

    Attributes
    ----------
    tank : str
        Id of the tank; of a cohort that has ended the last one.
    since, ended_at : int
        When it came to the site or was split off, and when the last animal was gone. [us UTC]
    event_id, changed_at : int
        The newest event that tells of it, and of what moment. [us UTC]
    body : dict
        `used_to_salinity` and what else was noted when it came, `name`, `in_tank_since`, `counted_at`, `hatched_at`, `metamorphosed_at`,
        `proposed` (stage, age_d, developed_d, since), `declined`, `split_from`, `joined_to`.
    """

    id: str
    tank: str
    animal: str
    number: int
    since: int
    ended_at: int | None
    event_id: int
    changed_at: int
    body: dict[str, Any]


def stock_first(
    connection: sqlite3.Connection, stock: FirstStock, *, tank: int, tank_slug: str, actor: str, now_us: int
) -> None:
    """Write the first animals of a tank into the ledger, once: a cohort's id is never used again."""
    if connection.execute("SELECT 1 FROM cohort WHERE id = ?", (stock.cohort,)).fetchone() is not None:
        return
    event = ledger.Event(
        kind=RECEIVED,
        subject=f"cohort/{stock.cohort}",
        measured_at=stock.since,
        recorded_at=now_us,
        actor=actor,
        body=asdict(stock) | {"tank": tank_slug},
    )
    project(connection, event, event_id=ledger.append(connection, event), tanks={tank_slug: tank})


def projected(known: Mapping[str, CohortRow], event: Event, *, event_id: int) -> tuple[CohortRow, ...]:
    """Return the cohorts that *event* changes, as they are after it. Pure: the ledger alone decides.

    Parameters
    ----------
    known : mapping of str to CohortRow
        Cohorts before it, by id; only those that the event names are looked at.
    event : Event
        One of the kinds of this room; others change nothing.
    event_id : int
    """
    body = event.body
    at_us = event.recorded_at if event.measured_at is None else event.measured_at
    if event.kind == RECEIVED:
        kept = {name: value for name, value in body.items() if name not in _COLUMNS}
        row = CohortRow(
            body["cohort"],
            body["tank"],
            body["animal"],
            int(body["number"]),
            body.get("since", at_us),
            None,
            event_id,
            at_us,
            kept | {"in_tank_since": at_us, "counted_at": at_us},
        )
        return (row,)
    if not event.kind.startswith(PREFIX) or body.get("cohort") not in known:
        return ()
    before = known[body["cohort"]]
    number = int(body.get("number", before.number))
    row = before._replace(number=number, event_id=event_id, changed_at=at_us)
    if number == 0:
        row = row._replace(ended_at=at_us)
    if event.kind == MOVED:
        return (row._replace(tank=body["tank"], body=row.body | {"in_tank_since": at_us}),)
    if event.kind == SPLIT:
        notes = row.body | {"split_from": row.id, "in_tank_since": at_us, "name": body.get("new_name")}
        new = row._replace(
            id=body["new_cohort"], tank=body["new_tank"], number=int(body["new_number"]), since=at_us, body=notes
        )
        return row, new
    if event.kind == JOINED:
        other = known[body["other"]]
        gone = other._replace(
            number=0, ended_at=at_us, event_id=event_id, changed_at=at_us, body=other.body | {"joined_to": row.id}
        )
        return row, gone
    if event.kind == STAGE_PROPOSED:
        # A proposal changes nothing that a person may have seen and acts on.
        return (before._replace(body=row.body | {"proposed": body["proposed"]}),)
    if event.kind == STAGE_CONFIRMED:
        dates = {name: body[name] for name in ("hatched_at", "metamorphosed_at") if body.get(name) is not None}
        notes = row.body | dates | {"proposed": None, "declined": body.get("declined")}
        return (row._replace(animal=body["animal"], body=notes),)
    if event.kind in (COUNTED, DIED):
        return (row._replace(body=row.body | {"counted_at": at_us}),)
    return (row,)


def project(
    connection: sqlite3.Connection, event: Event, *, event_id: int, tanks: Mapping[str, int] | None = None
) -> None:
    """Take a stock event up into the table of cohorts, inside the caller's transaction; other events change nothing.

    What the chain remembers of animals that are gone is let go of.
    """
    if not event.kind.startswith(PREFIX):
        return
    named = [event.body[name] for name in ("cohort", "other") if name in event.body]
    known = {row.id: row for row in (read(connection, cohort) for cohort in named) if row is not None}
    for row in projected(known, event, event_id=event_id):
        number = (tanks or {}).get(row.tank) or registry.tank_number(connection, row.tank)
        connection.execute(
            "INSERT OR REPLACE INTO cohort (id, tank, animal, number, since, ended_at, event_id, changed_at, body)"
            " VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?)",
            (
                row.id,
                number,
                row.animal,
                row.number,
                row.since,
                row.ended_at,
                row.event_id,
                row.changed_at,
                msgspec.json.encode(row.body, order="deterministic").decode(),
            ),
        )
        if row.ended_at is not None:
            connection.execute("DELETE FROM animal_state WHERE cohort = ?", (row.id,))


_SELECT = (
    "SELECT cohort.id, slug AS tank, animal, number, since, ended_at, event_id, changed_at, body"
    " FROM cohort JOIN tank ON tank.id = cohort.tank"
)


def read(connection: sqlite3.Connection, cohort: str) -> CohortRow | None:
    """Return one cohort, None if there never was one of this id."""
    row = connection.execute(f"{_SELECT} WHERE cohort.id = ?", (cohort,)).fetchone()
    return None if row is None else _row(row)


def read_all(connection: sqlite3.Connection) -> list[CohortRow]:
    """Return all cohorts in the order in which they came, those that have ended too."""
    return [_row(row) for row in connection.execute(f"{_SELECT} ORDER BY since, cohort.id").fetchall()]


def rebuild(connection: sqlite3.Connection) -> int:
    """Make the table of cohorts anew from the ledger, inside the caller's transaction; return the number of events taken up."""
    connection.execute("DELETE FROM cohort")
    count = 0
    for event_id, event in ledger.read(connection, kind_prefix=PREFIX):
        project(connection, event, event_id=event_id)
        count += 1
    return count


def _row(row: sqlite3.Row) -> CohortRow:
    return CohortRow(**{**dict(row), "body": msgspec.json.decode(row["body"])})
