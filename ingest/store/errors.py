"""What can go wrong with a store."""

from __future__ import annotations

from analysis.errors import EuryhaleError


class StoreError(EuryhaleError):
    """Root of the errors of the store."""


class StoreLockedError(StoreError):
    """Another worker holds this store.

    Parameters
    ----------
    path : str
        The store's folder.
    holder : str
        What the lock file says of its holder.
    """

    def __init__(self, path: str, *, holder: str) -> None:
        self.path = path
        self.holder = holder
        super().__init__(
            f"store {path} is in use by another worker ({holder or 'unknown'}); only one may write a store"
        )


class NewerSchemaError(StoreError):
    """The store was written by a newer euryhale."""

    def __init__(self, path: str, *, found: int, known: int) -> None:
        self.path = path
        self.found = found
        self.known = known
        super().__init__(
            f"{path}: schema {found} is newer than this program knows (up to {known}); "
            "run the newer euryhale, or restore a backup made before the upgrade"
        )


class MissingStoreError(StoreError):
    """There is no store at the place where one was looked for."""

    def __init__(self, path: str) -> None:
        self.path = path
        super().__init__(f"no store at {path}; start the worker once: euryhale watch --site FILE")


class StoreBusyError(StoreError):
    """The file could not be read or written at this moment: locked too long, disk full, no permission."""

    def __init__(self, path: str, *, reason: str) -> None:
        self.path = path
        self.reason = reason
        super().__init__(f"{path} cannot be used at this moment: {reason}")
