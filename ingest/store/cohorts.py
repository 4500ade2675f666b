"""Cohorts: animals of one species and stage in one tank; a projection of the ledger's stock events."""

from __future__ import annotations

from dataclasses import asdict, dataclass
from typing import TYPE_CHECKING

import msgspec

from ingest.store import ledger

if TYPE_CHECKING:
    import sqlite3


@dataclass(frozen=True, slots=True)
class FirstStock:
    """The animals that were in a tank before the tool was there."""

    cohort: str
    animal: str
    number: int
    used_to_salinity: float
    since: int
    name: str | None = None


def stock_first(
    connection: sqlite3.Connection, stock: FirstStock, *, tank: int, tank_slug: str, actor: str, now_us: int
) -> None:
    """Write the first animals of a tank into the ledger, once: a cohort's id is never used again."""
    if connection.execute("SELECT 1 FROM cohort WHERE id = ?", (stock.cohort,)).fetchone() is not None:
        return
    body = asdict(stock) | {"tank": tank_slug}
    ledger.append(
        connection,
        ledger.Event(
            kind="stock.received",
            subject=f"tank/{tank_slug}",
            measured_at=stock.since,
            recorded_at=now_us,
            actor=actor,
            body=body,
        ),
    )
    connection.execute(
        "INSERT INTO cohort VALUES (?, ?, ?, ?, ?, NULL, ?)",
        (stock.cohort, tank, stock.animal, stock.number, stock.since, msgspec.json.encode(body).decode()),
    )
