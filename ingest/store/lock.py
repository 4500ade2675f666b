"""The site lock: whoever holds it is the one writer of a store."""

from __future__ import annotations

import fcntl
import os
import time
from typing import TYPE_CHECKING, TextIO

from ingest.store.errors import StoreLockedError

if TYPE_CHECKING:
    from pathlib import Path


LOOKS = 50
LOOK_AGAIN_S = 0.02
"""Whoever looks at the lock (`is_held`) holds it for a moment too: one refusal does not mean another worker."""


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
        if not _is_taken(file):
            file.seek(0)
            holder = file.read().strip()
            file.close()
            raise StoreLockedError(str(self._path.parent), holder=holder)
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


def _is_taken(file: TextIO) -> bool:
    for look in range(LOOKS):
        if look:
            time.sleep(LOOK_AGAIN_S)
        try:
            fcntl.flock(file, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except BlockingIOError:
            continue
        return True
    return False


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
