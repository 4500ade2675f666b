"""What one site file changes against another: shown before it is accepted, and kept with the revision."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, NamedTuple

if TYPE_CHECKING:
    from collections.abc import Iterator

    from ingest.site.models import Site

RESTART_KEYS = ("site.id", "store.path", "broker.client_id")


class Difference(NamedTuple):
    """One thing that is not as it was.

    Attributes
    ----------
    what : str
        Which key, list items by their id: ``tanks (l3).set_point.salinity``.
    before, after : object
        Plain values; None where the key or the item is absent.
    needs_restart : bool
        True if the worker takes it up only when it is started again.
    """

    what: str
    before: Any
    after: Any
    needs_restart: bool


def differences(old: Site, new: Site) -> list[Difference]:
    """Return every difference between two sites; the order of list items is none."""
    before, after = (site.model_dump(mode="json", by_alias=True) for site in (old, new))
    return [Difference(what, left, right, what in RESTART_KEYS) for what, left, right in _compared("", before, after)]


def _compared(what: str, before: Any, after: Any) -> Iterator[tuple[str, Any, Any]]:
    if before == after:
        return
    left, right = _by_name(before), _by_name(after)
    if left is None or right is None:
        yield what, before, after
        return
    is_list = isinstance(before, list)
    for name in [*left, *(name for name in right if name not in left)]:
        at = f"{what} ({name})" if is_list else f"{what}.{name}".lstrip(".")
        yield from _compared(at, left.get(name), right.get(name))


def _by_name(value: Any) -> dict[str, Any] | None:
    """Return the parts of a group or of a list of things with an id by name; None for anything else."""
    if isinstance(value, dict):
        return value
    if isinstance(value, list) and all(isinstance(item, dict) and ("id" in item or "animal" in item) for item in value):
        return {str(item.get("id", item.get("animal"))): item for item in value}
    return None
