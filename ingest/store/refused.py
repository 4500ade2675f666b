"""Payloads that could not be read, wholly or in part: kept with their bytes and the reason."""

from __future__ import annotations

from typing import TYPE_CHECKING, NamedTuple

if TYPE_CHECKING:
    import sqlite3
    from collections.abc import Iterable

KEEP_ROWS = 20_000
"""Refused payloads are diagnostics: the newest are kept, the counters go on for ever."""
KEEP_BYTES = 4096
"""So much of each payload is kept."""


class Refusal(NamedTuple):
    """A payload that was refused, or of which a part was refused."""

    topic: str
    received_at: int
    payload: bytes
    code: str
    place: str
    found: str
    allowed: str
    is_partly_kept: bool


def insert(connection: sqlite3.Connection, refusals: Iterable[Refusal]) -> None:
    """Keep *refusals*, inside the caller's transaction, and let the oldest go beyond the bound."""
    newest = 0
    for refusal in refusals:
        cursor = connection.execute(
            "INSERT INTO refused (topic, received_at, payload, code, place, found, allowed, is_partly_kept)"
            " VALUES (?, ?, ?, ?, ?, ?, ?, ?)",
            refusal._replace(payload=refusal.payload[:KEEP_BYTES], found=refusal.found[:500]),
        )
        newest = int(cursor.lastrowid or 0)
    if newest > KEEP_ROWS:
        connection.execute("DELETE FROM refused WHERE id <= ?", (newest - KEEP_ROWS,))


def count(connection: sqlite3.Connection, additions: dict[str, int]) -> None:
    """Add to the named counters."""
    connection.executemany(
        "INSERT INTO counter VALUES (?, ?) ON CONFLICT (name) DO UPDATE SET value = value + excluded.value",
        [(name, number) for name, number in additions.items() if number],
    )
