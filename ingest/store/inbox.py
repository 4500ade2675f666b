"""The inbox: what people ask for. Anybody writes rows into inbox.db; only the worker acts on them."""

from __future__ import annotations

import sqlite3
import uuid
from contextlib import closing
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import msgspec

from ingest.store.connection import open_writer, transaction
from ingest.store.errors import StoreBusyError
from ingest.store.migrations import INBOX, migrate

DEFAULT_LIFE_US = 15 * 60 * 1_000_000
"""An order that nobody has taken within a quarter of an hour is dropped as expired: the moment it was meant for is over."""


@dataclass(frozen=True, slots=True)
class Command:
    """A row of the inbox.

    Attributes
    ----------
    kind, subject : str
        What is asked for and of what, such as ``alarm.acknowledge`` of ``tank/l3``.
    actor, role : str
        Who asks, and the role under which.
    submitted_at, expires_at : int
        [us UTC]
    body : dict
        JSON-able details.
    expected : str or None
        The alarm occurrence or record revision that the person saw when asking.
    id : str
        The client's UUID: sending the same command twice does it once.
    """

    kind: str
    subject: str
    actor: str
    role: str
    submitted_at: int
    expires_at: int
    body: dict[str, Any] = field(default_factory=dict)
    body_version: int = 1
    expected: str | None = None
    id: str = field(default_factory=lambda: str(uuid.uuid4()))


class Inbox:
    """The folder's inbox.db. Opened for each use: writers are many and short."""

    def __init__(self, folder: Path) -> None:
        self.path = folder / "inbox.db"

    def prepare(self) -> None:
        """Make the file if there is none, and bring its schema up to date."""
        with closing(open_writer(self.path)) as connection:
            migrate(connection, INBOX, path=str(self.path))

    def submit(self, command: Command) -> None:
        """Put *command* into the inbox; a second row with the same id changes nothing.

        Raises
        ------
        StoreBusyError
            If the inbox cannot be written.
        """
        try:
            self._insert(command)
        except (sqlite3.Error, OSError) as error:
            raise StoreBusyError(str(self.path), reason=str(error)) from error

    def _insert(self, command: Command) -> None:
        with closing(open_writer(self.path)) as connection:
            # Every time: a file that is there may have been begun by another and not be finished.
            migrate(connection, INBOX, path=str(self.path))
            with transaction(connection):
                self._insert_row(connection, command)

    def _insert_row(self, connection: sqlite3.Connection, command: Command) -> None:
        connection.execute(
            "INSERT OR IGNORE INTO command (id, kind, subject, body, body_version, actor, role, expected,"
            " submitted_at, expires_at) VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?)",
            (
                command.id,
                command.kind,
                command.subject,
                msgspec.json.encode(command.body).decode(),
                command.body_version,
                command.actor,
                command.role,
                command.expected,
                command.submitted_at,
                command.expires_at,
            ),
        )


class InboxTaker:
    """The worker's end of the inbox: reads on one kept connection, never writes."""

    def __init__(self, inbox: Inbox) -> None:
        inbox.prepare()
        self._connection = open_writer(inbox.path)

    def after(self, seq: int, *, limit: int = 100) -> list[tuple[int, Command]]:
        """Return commands with their sequence numbers, in order, that came after *seq*."""
        rows = self._connection.execute(
            "SELECT * FROM command WHERE seq > ? ORDER BY seq LIMIT ?", (seq, limit)
        ).fetchall()
        return [(int(row["seq"]), _from_row(row)) for row in rows]

    def newest_seq(self) -> int:
        """Return the newest sequence number, 0 before the first."""
        return int(self._connection.execute("SELECT coalesce(max(seq), 0) FROM command").fetchone()[0])

    def close(self) -> None:
        """Close the connection."""
        self._connection.close()


def _from_row(row: sqlite3.Row) -> Command:
    return Command(
        id=row["id"],
        kind=row["kind"],
        subject=row["subject"],
        body=msgspec.json.decode(row["body"]),
        body_version=row["body_version"],
        actor=row["actor"],
        role=row["role"],
        expected=row["expected"],
        submitted_at=row["submitted_at"],
        expires_at=row["expires_at"],
    )
