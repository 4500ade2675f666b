"""Plans and states of following as plain data that JSON can hold, and back.

Not-a-number becomes null; infinite becomes the word "inf"; a moment becomes ISO 8601 with its offset. What is
read back is equal to what was written, but for the name of the time zone, which the reader gives again.
"""

from __future__ import annotations

import math
import types
import typing
from collections.abc import Mapping
from dataclasses import fields, is_dataclass
from datetime import datetime, time, tzinfo
from enum import Enum
from typing import Any

from analysis.errors import InvalidInputError

INFINITE = "inf"


def to_record(value: Any) -> Any:
    """Return *value* (frozen dataclasses, tuples, mappings, numbers, words, moments) as plain data."""
    if is_dataclass(value) and not isinstance(value, type):
        return {member.name: to_record(getattr(value, member.name)) for member in fields(value) if member.compare}
    if isinstance(value, Enum):
        return value.value
    if isinstance(value, Mapping):
        return {str(key): to_record(item) for key, item in value.items()}
    if isinstance(value, (tuple, list)):
        return [to_record(item) for item in value]
    if isinstance(value, (datetime, time)):
        return value.isoformat()
    if isinstance(value, float):
        return _number(value)
    return value


def _number(value: float) -> float | str | None:
    if math.isnan(value):
        return None
    if math.isinf(value):
        return INFINITE if value > 0 else f"-{INFINITE}"
    return float(value)


def from_record(kind: Any, record: Any, *, zone: tzinfo | None = None, where: str = "record") -> Any:
    """Return what `to_record` wrote, as *kind* (a dataclass, or any of the types its members have).

    Parameters
    ----------
    kind : type
        The type of what was written.
    record : object
        Plain data.
    zone : tzinfo, optional
        Moments are brought to this zone; without it they keep their offset.
    where : str
        For the message of an error.

    Raises
    ------
    InvalidInputError
        If a member is missing or is not what it should be.
    """
    origin, arguments = typing.get_origin(kind), typing.get_args(kind)
    if origin in {typing.Union, types.UnionType}:
        others = [argument for argument in arguments if argument is not type(None)]
        return None if record is None else from_record(others[0], record, zone=zone, where=where)
    if origin is tuple:
        return _tuple_from(arguments, record, zone=zone, where=where)
    if origin is not None and isinstance(origin, type) and issubclass(origin, Mapping):
        if not isinstance(record, Mapping):
            raise InvalidInputError(where, found=record, allowed="an object")
        return {key: from_record(arguments[1], item, zone=zone, where=f"{where}.{key}") for key, item in record.items()}
    if origin is typing.Literal or not isinstance(kind, type):
        return record
    return _plain_from(kind, record, zone=zone, where=where)


def _tuple_from(arguments: tuple[Any, ...], record: Any, *, zone: tzinfo | None, where: str) -> tuple[Any, ...]:
    if not isinstance(record, (list, tuple)):
        raise InvalidInputError(where, found=record, allowed="a list")
    kinds = [arguments[0]] * len(record) if arguments[1:] == (Ellipsis,) else list(arguments)
    if len(kinds) != len(record):
        raise InvalidInputError(where, found=record, allowed=f"{len(kinds)} items")
    return tuple(
        from_record(kind, item, zone=zone, where=f"{where}[{n}]")
        for n, (kind, item) in enumerate(zip(kinds, record, strict=True))
    )


def _plain_from(kind: type, record: Any, *, zone: tzinfo | None, where: str) -> Any:
    if is_dataclass(kind):
        return _dataclass_from(kind, record, zone=zone, where=where)
    try:
        if issubclass(kind, Enum):
            return kind(record)
        if issubclass(kind, datetime):
            moment = datetime.fromisoformat(record)
            return moment if zone is None else moment.astimezone(zone)
        if issubclass(kind, time):
            return time.fromisoformat(record)
        if kind is float:
            return math.nan if record is None else float(record)
        return kind(record) if kind in {int, bool, str} else record
    except (TypeError, ValueError) as error:
        raise InvalidInputError(where, found=record, allowed=kind.__name__) from error


def _dataclass_from(kind: Any, record: Any, *, zone: tzinfo | None, where: str) -> Any:
    if not isinstance(record, Mapping):
        raise InvalidInputError(where, found=record, allowed=f"an object, {kind.__name__}")
    hints = typing.get_type_hints(kind, localns=_names(kind))
    members = [member for member in fields(kind) if member.compare]
    missing = [member.name for member in members if member.name not in record]
    if missing:
        raise InvalidInputError(where, found=sorted(record), allowed=f"also {', '.join(missing)}")
    return kind(
        **{
            member.name: from_record(hints[member.name], record[member.name], zone=zone, where=f"{where}.{member.name}")
            for member in members
        }
    )


def _names(kind: Any) -> dict[str, Any]:
    """Return the names that annotations of the acclimation's own dataclasses use only while type checking."""
    from analysis.acclimation.ammonia import TimeLeft
    from analysis.acclimation.journey import JourneyStress, Standing
    from analysis.acclimation.task import AcclimationTask
    from analysis.animal.survival import SurvivalEstimate

    return {
        "AcclimationTask": AcclimationTask,
        "JourneyStress": JourneyStress,
        "Standing": Standing,
        "SurvivalEstimate": SurvivalEstimate,
        "TimeLeft": TimeLeft,
        kind.__name__: kind,
    }
