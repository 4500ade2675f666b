"""The embedded store as its one writer sees it."""

from __future__ import annotations

import sqlite3
from contextlib import contextmanager
from typing import TYPE_CHECKING

from ingest.store import block as block_room
from ingest.store import rollups
from ingest.store.connection import open_writer, transaction
from ingest.store.lock import SiteLock
from ingest.store.migrations import STORE, migrate

if TYPE_CHECKING:
    from collections.abc import Iterator
    from pathlib import Path

    from ingest.store.block import BlockCommit

CHECKPOINT_TIMEOUT_MS = 200


class Store:
    """The store in a folder, held by its lock until closed.

    Parameters
    ----------
    folder : Path
        Made if it is not there.

    Raises
    ------
    StoreLockedError
        If another worker holds it.
    NewerSchemaError
        If a newer program wrote it.
    """

    def __init__(self, folder: Path) -> None:
        folder.mkdir(parents=True, exist_ok=True)
        self.folder = folder
        self.path = store_path(folder)
        self._lock = SiteLock(folder)
        self._lock.take()
        try:
            self.connection = open_writer(self.path)
            self.schema = migrate(self.connection, STORE, path=str(self.path))
            self._rolled_until = rollups.rolled_until(self.connection)
        except BaseException:
            self._lock.free()
            raise

    @property
    def rolled_until(self) -> int | None:
        """How far the rollups reach; None before the first sweep. [us UTC]"""
        return self._rolled_until

    @contextmanager
    def transaction(self) -> Iterator[sqlite3.Connection]:
        """Run the body in one transaction."""
        with transaction(self.connection) as connection:
            yield connection

    def commit(self, block: BlockCommit) -> list[int]:
        """Write a block in one transaction and return the ids of its events."""
        with transaction(self.connection) as connection:
            return block_room.write(connection, block, rolled_until=self._rolled_until)

    def sweep_rollups(self, *, until_us: int) -> int | None:
        """Take one bounded step of the rollups towards *until_us*; return how far they now reach."""
        with transaction(self.connection) as connection:
            mark = rollups.sweep(connection, until_us=until_us)
        self._rolled_until = mark
        return mark

    def checkpoint(self) -> None:
        """Move the write-ahead log into the file if no reader is in the way; never wait long for one."""
        self.connection.execute(f"PRAGMA busy_timeout={CHECKPOINT_TIMEOUT_MS}")
        try:
            self.connection.execute("PRAGMA wal_checkpoint(TRUNCATE)").fetchone()
        except sqlite3.OperationalError:
            return  # A reader was in the way; the next minute's attempt will do.
        finally:
            self.connection.execute("PRAGMA busy_timeout=5000")

    def close(self) -> None:
        """Close the file and give the lock back."""
        self.connection.close()
        self._lock.free()


def store_path(folder: Path) -> Path:
    """Return the path of store.db in a store's folder."""
    return folder / "store.db"
