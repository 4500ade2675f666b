"""The site lock: whoever holds it is the one writer of a store."""

from __future__ import annotations

import fcntl
import os
from typing import TYPE_CHECKING, TextIO

from ingest.store.errors import StoreLockedError

if TYPE_CHECKING:
    from pathlib import Path


class SiteLock:
    """An advisory lock on `worker.lock` in the store's folder; the kernel frees it when its holder dies, however it dies."""

    def __init__(self, folder: Path) -> None:
        self._path = folder / "worker.lock"
        self._file: TextIO | None = None

    def take(self) -> None:
        """Take the lock.

        Raises
        ------
        StoreLockedError
            If another process holds it.
        """
        file = self._path.open("a+", encoding="utf-8")
        try:
            fcntl.flock(file, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except BlockingIOError as error:
            file.seek(0)
            holder = file.read().strip()
            file.close()
            raise StoreLockedError(str(self._path.parent), holder=holder) from error
        file.seek(0)
        file.truncate()
        file.write(f"process {os.getpid()}")
        file.flush()
        self._file = file

    def free(self) -> None:
        """Give the lock back."""
        if self._file is not None:
            self._file.close()
            self._file = None


def is_held(folder: Path) -> bool:
    """Return whether a worker holds the store in *folder* at this moment."""
    path = folder / "worker.lock"
    if not path.exists():
        return False
    with path.open("a+", encoding="utf-8") as file:
        try:
            fcntl.flock(file, fcntl.LOCK_SH | fcntl.LOCK_NB)
        except BlockingIOError:
            return True
    return False
