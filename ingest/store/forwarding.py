"""The queue to the central store: lines written in the transaction of the block they come from, gone only after the server's yes."""

from __future__ import annotations

from typing import TYPE_CHECKING, NamedTuple

if TYPE_CHECKING:
    import sqlite3


class Waiting(NamedTuple):
    """One entry of the queue: the lines of one block."""

    id: int
    lines: str


class Backlog(NamedTuple):
    """How much waits."""

    entries: int
    size_bytes: int
    oldest_at: int | None


def put(connection: sqlite3.Connection, lines: list[str], *, queued_at: int) -> None:
    """Put the lines of one block into the queue, inside the caller's transaction."""
    if lines:
        body = "\n".join(lines)
        connection.execute("INSERT INTO forward_queue (queued_at, lines) VALUES (?, ?)", (queued_at, body))


def oldest(connection: sqlite3.Connection, *, after_id: int, most_lines: int) -> list[Waiting]:
    """Return the oldest entries after *after_id*, of about *most_lines* lines together, at least one if there is one."""
    found: list[Waiting] = []
    lines = 0
    cursor = connection.execute("SELECT id, lines FROM forward_queue WHERE id > ? ORDER BY id LIMIT 500", (after_id,))
    for row in cursor:
        count = row["lines"].count("\n") + 1
        if found and lines + count > most_lines:
            break
        found.append(Waiting(int(row["id"]), row["lines"]))
        lines += count
    cursor.close()
    return found


def confirm(connection: sqlite3.Connection, up_to_id: int) -> None:
    """Let go of the entries that the server has taken, inside the caller's transaction."""
    connection.execute("DELETE FROM forward_queue WHERE id <= ?", (up_to_id,))


def backlog(connection: sqlite3.Connection) -> Backlog:
    """Return how much waits."""
    row = connection.execute(
        "SELECT count(*) AS entries, coalesce(sum(length(lines)), 0) AS size, min(queued_at) AS oldest FROM forward_queue"
    ).fetchone()
    return Backlog(int(row["entries"]), int(row["size"]), row["oldest"])


def drop_oldest(connection: sqlite3.Connection, *, keep_bytes: int) -> int:
    """Keep the queue within its bound by letting its oldest entries go; return how many. The readings themselves stay in the store."""
    size = backlog(connection).size_bytes
    dropped = 0
    for row in connection.execute("SELECT id, length(lines) AS size FROM forward_queue ORDER BY id").fetchall():
        if size <= keep_bytes:
            break
        connection.execute("DELETE FROM forward_queue WHERE id = ?", (row["id"],))
        size -= int(row["size"])
        dropped += 1
    return dropped
