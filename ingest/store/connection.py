"""Opening SQLite files the way this project needs them: one writer, many short readers."""

from __future__ import annotations

import sqlite3
from contextlib import closing, contextmanager
from typing import TYPE_CHECKING

from ingest.store.errors import MissingStoreError, StoreBusyError

if TYPE_CHECKING:
    from collections.abc import Iterator
    from pathlib import Path

WRITER_TIMEOUT_S = 5.0
READER_TIMEOUT_S = 1.0


def open_writer(path: Path, *, timeout_s: float = WRITER_TIMEOUT_S) -> sqlite3.Connection:
    """Return a read-write connection: WAL, every commit on disk before it is believed (synchronous=FULL)."""
    connection = sqlite3.connect(path, timeout=timeout_s, isolation_level=None, check_same_thread=False)
    connection.row_factory = sqlite3.Row
    for pragma in (
        "journal_mode=WAL",
        "synchronous=FULL",
        "wal_autocheckpoint=4000",
        "foreign_keys=ON",
        "cache_size=-65536",
        "temp_store=MEMORY",
    ):
        connection.execute(f"PRAGMA {pragma}")
    return connection


@contextmanager
def reader(path: Path) -> Iterator[sqlite3.Connection]:
    """Lend a read-only connection for one short query; never keep it, an open reader makes the WAL grow.

    Raises
    ------
    MissingStoreError
        If there is no such file, or nothing in it yet.
    StoreBusyError
        If the file cannot be read at this moment.
    """
    if not path.exists():
        raise MissingStoreError(str(path))
    try:
        with closing(
            sqlite3.connect(f"{path.resolve().as_uri()}?mode=ro", uri=True, timeout=READER_TIMEOUT_S)
        ) as connection:
            connection.row_factory = sqlite3.Row
            if connection.execute("PRAGMA user_version").fetchone()[0] == 0:
                raise MissingStoreError(str(path))  # The worker is just making it.
            yield connection
    except sqlite3.Error as error:
        raise StoreBusyError(str(path), reason=str(error)) from error


@contextmanager
def transaction(connection: sqlite3.Connection) -> Iterator[sqlite3.Connection]:
    """Run the body in one immediate transaction; any exception rolls it back whole."""
    connection.execute("BEGIN IMMEDIATE")
    try:
        yield connection
        connection.execute("COMMIT")
    except BaseException:
        connection.rollback()
        raise
