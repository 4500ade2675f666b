"""A compiled reader of the declared fields of a JSON object: one parse into a typed record, one look at all fields."""

from __future__ import annotations

from datetime import datetime
from operator import attrgetter
from typing import TYPE_CHECKING, Annotated, Any

import msgspec

from ingest.payloads.values import NAN

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence

ABSENT = "absent"
"""Attribute of every record that stands for a field that is not declared; its value is NaN."""

_Moment = Annotated[datetime, msgspec.Meta(tz=True)]


class _Branch(dict[str, "_Branch | str"]):
    """Names of one level of a JSON object: a type at a leaf, another level within."""


def compiled(
    paths: Sequence[str | None], *, moments: Sequence[str] = ()
) -> tuple[Callable[[bytes], Any], Callable[[Any], Any]] | None:
    """Return two functions: from the bytes of a JSON object to a record, and from that to the values at *paths*.

    They are fast and strict: for anything but numbers (and RFC 3339 times where wanted) at the paths they
    raise one of msgspec.MsgspecError, AttributeError or RecursionError, or give None for a missing field, and
    the caller looks again with care. They are two, not one around both, because a call costs a tenth of the whole.

    Parameters
    ----------
    paths : sequence of str or None
        Names of fields, at least two, nested ones joined by dots; None gives NaN.
    moments : sequence of str
        Those of the paths at which a time as text is expected.

    Returns
    -------
    tuple of two callables, or None
        None where one path leads through another, so that no typed record exists.
    """
    root = _Branch()
    for path in paths:
        if path is not None and not _grown(root, path.split("."), "time" if path in moments else "number"):
            return None
    decode = msgspec.json.Decoder(_record(root)).decode
    names = [ABSENT if path is None else _attribute(root, path.split(".")) for path in paths]
    return decode, attrgetter(*names)


def _grown(branch: _Branch, names: list[str], leaf: str) -> bool:
    """Add a path to the tree; False where it would lead through a leaf or end in a branch."""
    for name in names[:-1]:
        inner = branch.setdefault(name, _Branch())
        if not isinstance(inner, _Branch):
            return False
        branch = inner
    return branch.setdefault(names[-1], leaf) == leaf


def _attribute(branch: _Branch, names: list[str]) -> str:
    """Return the dotted attribute under which the value at a path is found."""
    place = f"f{list(branch).index(names[0])}"
    inner = branch[names[0]]
    return f"{place}.{_attribute(inner, names[1:])}" if isinstance(inner, _Branch) else place


def _record(branch: _Branch) -> type[msgspec.Struct]:
    """Return the typed record of one level."""
    fields: list[tuple[str, Any, Any]] = []
    rename: dict[str, str] = {}
    for place, (name, inner) in enumerate(branch.items()):
        rename[f"f{place}"] = name
        kind: Any = float | None
        if isinstance(inner, _Branch):
            kind = _record(inner) | None
        elif inner == "time":
            kind = _Moment | None
        fields.append((f"f{place}", kind, None))
    return msgspec.defstruct("Fields", fields, rename=rename, namespace={ABSENT: NAN}, gc=False)


def looked_up(value: object, path: str) -> object:
    """Return what stands at *path* in a parsed object: the whole name first, then level by level; else None."""
    if not isinstance(value, dict):
        return None
    if path in value:
        return value[path]
    for name in path.split("."):
        if not isinstance(value, dict) or name not in value:
            return None
        value = value[name]
    return value
