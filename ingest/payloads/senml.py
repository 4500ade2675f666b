"""Sensor Measurement Lists: packs of records after RFC 8428, in JSON and CBOR, resolved.

References
----------
RFC 8428, Sensor Measurement Lists (SenML), 2018, sections 4 to 6; RFC 9100, SenML Features and Versions, 2021.
"""

from __future__ import annotations

import base64
import json
from decimal import Decimal
from math import isfinite, nan
from operator import attrgetter
from typing import Any

import cbor2
import msgspec

from ingest.payloads.reason import PayloadError, Reason, shown
from ingest.site.sensors import SENML_NAME

RELATIVE_BELOW_S = 2**28
"""A resolved time below this is relative to now (RFC 8428 section 4.5.3): the sum of base time and time counts."""
VERSION = 10
SECONDARY_UNITS_VERSION = 26
"""10 + 2**4: the version of packs that use secondary units (RFC 9100, feature code 4)."""
KNOWN_VERSIONS = (*range(VERSION + 1), SECONDARY_UNITS_VERSION)
"""Up to 10 (the examples of RFC 8428 bear 5); above it only the feature that this reader knows."""

CBOR_LABELS = {
    -1: "bver", -2: "bn", -3: "bt", -4: "bu", -5: "bv", -6: "bs",
    0: "n", 1: "u", 2: "v", 3: "vs", 4: "vb", 5: "s", 6: "t", 7: "ut", 8: "vd",
}  # fmt: skip
"""RFC 8428 section 6, table 4."""

_CBOR_FAULTS = (
    cbor2.CBORError, ValueError, TypeError, ArithmeticError, LookupError, RecursionError, MemoryError, AttributeError,
)  # fmt: skip


class Record(msgspec.Struct, gc=False):
    """A record as it stands in a pack."""

    bver: int | None = None
    bn: str | None = None
    bt: float | None = None
    bu: str | None = None
    bv: float | None = None
    bs: float | None = None
    n: str | None = None
    u: str | None = None
    v: float | None = None
    vs: str | None = None
    vb: bool | None = None
    vd: Any = None
    s: float | None = None
    t: float | None = None
    ut: float | None = None


class Resolved(msgspec.Struct, frozen=True, gc=False):
    """A record by itself: full name, absolute time, base values added.

    Attributes
    ----------
    name : str
        Base name and name.
    unit : str
        Empty where none is given.
    time_s : float
        Seconds since 1970, UTC.
    is_time_own : bool
        False where the time hangs on the time received: relative, or absent.
    value : float, str, bool, bytes or None
        None where the record has a sum alone.
    sum : float or None
        Integrated value, in unit seconds.
    update_s : float or None
        Longest time until the next record of this name. [s]
    """

    name: str
    unit: str
    time_s: float
    is_time_own: bool
    value: float | str | bool | bytes | None
    sum: float | None
    update_s: float | None


_LABELS: dict[str | int, str] = {name: name for name in Record.__struct_fields__} | CBOR_LABELS
_pack_from_json = msgspec.json.Decoder(list[Record]).decode


def records_from_json(payload: bytes) -> list[Record]:
    """Return the records of a JSON pack.

    Raises
    ------
    PayloadError
        If it is no pack, or holds a label that must be understood and is not.
    """
    # The typed reader skips labels that it does not know. One that ends in "_" forbids use: look again with care.
    if b'_"' not in payload and b"\\u" not in payload:
        try:
            return _pack_from_json(payload)
        except (msgspec.MsgspecError, RecursionError):
            pass
    try:
        pack = json.loads(payload)
    except (ValueError, RecursionError) as error:
        found = f"{shown(payload)} ({type(error).__name__}: {str(error)[:80]})"
        raise PayloadError(Reason.UNREADABLE, "payload", found, "a SenML pack in JSON") from error
    return _records(pack)


def records_from_cbor(payload: bytes) -> list[Record]:
    """Return the records of a CBOR pack.

    Raises
    ------
    PayloadError
        If it is no pack, or holds a label that must be understood and is not.
    """
    try:
        pack = cbor2.loads(payload)
    except _CBOR_FAULTS as error:
        found = f"{shown(payload)} ({type(error).__name__}: {str(error)[:80]})"
        raise PayloadError(Reason.UNREADABLE, "payload", found, "a SenML pack in CBOR") from error
    return _records(pack)


def _records(pack: object) -> list[Record]:
    """Return a parsed pack as records, each value of the right type."""
    if not isinstance(pack, list):
        raise PayloadError(Reason.WRONG_SHAPE, "payload", _kind(pack), "a list of records")
    entries = [_labelled(entry, number) for number, entry in enumerate(pack, 1)]
    try:
        return msgspec.convert(entries, list[Record])
    except (msgspec.ValidationError, ValueError, TypeError, OverflowError) as error:
        found, allowed = str(error)[:120], "values of the types of RFC 8428"
        raise PayloadError(Reason.WRONG_TYPE, "payload", found, allowed) from error


def _labelled(entry: object, number: int) -> dict[str, Any]:
    """Return a record of a parsed pack with the labels of JSON; those that nobody knows are dropped."""
    if not isinstance(entry, dict):
        raise PayloadError(Reason.WRONG_SHAPE, f"record {number}", _kind(entry), "a group of labels")
    known: dict[str, Any] = {}
    for label, value in entry.items():
        name = _LABELS.get(label) if isinstance(label, str | int) else None
        if name is not None:
            known[name] = _float_of_decimal(value) if type(value) is Decimal else value
        elif isinstance(label, str) and label.endswith("_"):
            allowed = "labels that are known, or do not end in _"
            raise PayloadError(Reason.MUST_UNDERSTAND, f"record {number}", shown(label), allowed)
    return known


def _float_of_decimal(value: Decimal) -> float:
    """Return a CBOR decimal fraction (tag 4) as a float; it may leave the range of a float."""
    try:
        return float(value)
    except (ValueError, OverflowError):
        return nan


def _kind(value: object) -> str:
    return shown(value) if isinstance(value, str | int | float | list | dict | bytes) else type(value).__name__


def resolved(records: list[Record], *, now_s: float) -> list[Resolved]:
    """Return the records of a pack by themselves, in chronological order.

    Base fields hold for their own record and all later ones until replaced. Name = base name + name, time =
    base time + time, value = base value + value, sum = base sum + sum; the unit is the record's, else the base
    unit. A sum of times below 2**28 is relative to *now_s*. A record that has base fields alone gives nothing.

    Parameters
    ----------
    records : list of Record
        As they stand in the pack.
    now_s : float
        Time received, seconds since 1970, UTC.

    Raises
    ------
    PayloadError
        If a name, the version, or the number of values in a record breaks RFC 8428.

    References
    ----------
    RFC 8428 sections 4.1 to 4.6.
    """
    base = _Base()
    found: list[Resolved] = []
    names: set[str] = set()
    for number, record in enumerate(records, 1):
        base.follow(record, number)
        value = _value(record, base.value, number)
        total = record.s if base.sum is None else base.sum + (record.s or 0.0)
        name = base.name if record.n is None else base.name + record.n
        if value is None and total is None:
            if not _is_base_alone(record):
                raise PayloadError(Reason.WRONG_SHAPE, f"record {number}", "no value", "one of v, vs, vb, vd, or s")
            continue
        if name not in names:
            if not is_name(name) and _is_base_alone(record):
                continue
            names.add(_checked_name(name, number))
        own_time = base.time if record.t is None else base.time + record.t
        if not isfinite(own_time):
            raise PayloadError(Reason.TIME_UNREADABLE, f"record {number}", shown(own_time), "a finite time")
        is_absolute = own_time >= RELATIVE_BELOW_S
        time_s = own_time if is_absolute else now_s + own_time
        unit = base.unit if record.u is None else record.u
        found.append(Resolved(name, unit, time_s, is_absolute, value, total, record.ut))
    found.sort(key=attrgetter("time_s"))
    return found


class _Base:
    """The base fields in force: each holds until a later record replaces it."""

    __slots__ = ("name", "sum", "time", "unit", "value", "version")

    def __init__(self) -> None:
        self.name, self.unit, self.time = "", "", 0.0
        self.value: float | None = None
        self.sum: float | None = None
        self.version: int | None = None

    def follow(self, record: Record, number: int) -> None:
        """Take over what *record* sets."""
        if record.bn is not None:
            self.name = record.bn
        if record.bt is not None:
            self.time = record.bt
        if record.bu is not None:
            self.unit = record.bu
        if record.bv is not None:
            self.value = record.bv
        if record.bs is not None:
            self.sum = record.bs
        if record.bver is not None:
            self.version = _checked_version(record.bver, self.version, number)


def _value(record: Record, base_value: float | None, number: int) -> float | str | bool | bytes | None:
    """Return the one value of a record, the base value added to a number."""
    others = (record.vs is not None) + (record.vb is not None) + (record.vd is not None)
    number_sent = record.v
    if others and (others > 1 or number_sent is not None):
        raise PayloadError(Reason.WRONG_SHAPE, f"record {number}", "several values", "one of v, vs, vb, vd")
    if number_sent is not None:
        return number_sent if base_value is None else base_value + number_sent
    if not others:
        # A sum may stand alone; without one the base value is the value (RFC 8428 section 4.5.4).
        return None if record.s is not None else base_value
    if record.vs is not None:
        return record.vs
    return record.vb if record.vb is not None else data_value(record.vd or b"", number)


def data_value(value: object, number: int = 1) -> bytes:
    """Return the bytes of a data value: as they are in CBOR, base64url without padding in JSON."""
    if isinstance(value, bytes):
        return value
    if not isinstance(value, str):
        raise PayloadError(Reason.WRONG_TYPE, f"record {number}", _kind(value), "base64url without padding, or bytes")
    try:
        return base64.b64decode(value + "=" * (-len(value) % 4), altchars=b"-_", validate=True)
    except ValueError as error:
        allowed = "base64url without padding"
        raise PayloadError(Reason.WRONG_TYPE, f"record {number}", shown(value), allowed) from error


def _checked_version(new: int, old: int | None, number: int) -> int:
    if new not in KNOWN_VERSIONS or (old is not None and new != old):
        allowed = f"one version throughout, at most {VERSION}, or {SECONDARY_UNITS_VERSION}"
        raise PayloadError(Reason.VERSION_UNKNOWN, f"record {number}", shown(new), allowed)
    return new


def is_name(name: str) -> bool:
    """Return whether *name* keeps to the characters of RFC 8428 section 4.5.1."""
    return SENML_NAME.match(name) is not None


def _checked_name(name: str, number: int) -> str:
    if not is_name(name):
        allowed = "letters, digits and - : . / _, a letter or digit first"
        raise PayloadError(Reason.WRONG_SHAPE, f"name of record {number}", shown(name), allowed)
    return name


def _is_base_alone(record: Record) -> bool:
    """Return whether a record only sets base fields for those that follow."""
    own = (record.n, record.u, record.v, record.vs, record.vb, record.vd, record.s, record.t, record.ut)
    return all(value is None for value in own)
