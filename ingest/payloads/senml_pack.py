"""SenML packs on a topic: which record belongs to which quantity of which sensor."""

from __future__ import annotations

from dataclasses import dataclass, field
from math import isfinite
from typing import TYPE_CHECKING

from analysis.flags import Flag
from ingest.clock import MICROSECONDS_PER_SECOND
from ingest.payloads.decoded import Decoded, Promise, Remark, Route
from ingest.payloads.json_object import nothing_usable, retained_without_time
from ingest.payloads.reason import PayloadError, Reason, shown
from ingest.payloads.senml import Resolved, records_from_cbor, records_from_json, resolved
from ingest.payloads.senml_units import Scale, registered_for, scale_to_declared
from ingest.payloads.times import Window, beyond_horizon
from ingest.payloads.values import NAN, Value, fillers_of, judged
from ingest.reading import ChannelReading, RawReading
from ingest.site.sensors import QUANTITIES

if TYPE_CHECKING:
    from collections.abc import Sequence

    from ingest.site.sensors import Sensor

_FAR_S = 1e15
"""Beyond any horizon, and still a whole number of microseconds."""
_MISSING, _TIME_RECEIVED = int(Flag.MISSING), int(Flag.TIME_RECEIVED)


@dataclass(slots=True)
class _Place:
    """Where the records of one SenML name belong."""

    sensor: int
    quantity: str
    is_channel: bool
    declared_unit: str
    fillers: frozenset[float]
    join_us: int
    scales: dict[str, Scale | None] = field(default_factory=dict)

    def scale(self, unit: str) -> Scale | None:
        """Return the way from *unit* to the declared one; few units come, and each is looked up once."""
        if unit not in self.scales:
            scale = scale_to_declared(unit, self.declared_unit)
            if scale is None:
                return None
            self.scales[unit] = scale
        return self.scales[unit]


@dataclass(slots=True)
class _Group:
    """Values of one sensor at one moment."""

    measured_at_us: int
    flags: int
    numbers: dict[str, float] = field(default_factory=dict)


@dataclass(slots=True)
class _Yield:
    """What a pack has given so far."""

    groups: dict[int, list[_Group]] = field(default_factory=dict)
    channels: list[ChannelReading] = field(default_factory=list)
    remarks: list[Remark] = field(default_factory=list)
    promises: dict[int, float] = field(default_factory=dict)
    usable: int = 0


def senml_route(sensors: Sequence[Sensor], *, indices: Sequence[int], window: Window) -> Route:
    """Return the decoder of a topic that carries SenML packs.

    Parameters
    ----------
    sensors : sequence of Sensor
        All sensors of the site.
    indices : sequence of int
        The places of those that send to this topic; their field names are SenML names.
    window : Window
        How far from the time received a measured time may lie.

    Returns
    -------
    callable
        ``(payload, received_at_us, is_retained) -> Decoded``; raises PayloadError and nothing else.
    """
    places = {name: place for index in indices for name, place in _places(sensors[index], index)}
    declared: dict[int, set[str]] = {}
    for place in places.values():
        declared.setdefault(place.sensor, set()).add(place.quantity)
    read = records_from_cbor if sensors[indices[0]].payload == "senml-cbor" else records_from_json
    only = indices[0] if len(indices) == 1 else -1

    def decoded(payload: bytes, received_at_us: int, is_retained: bool) -> Decoded:
        records = resolved(read(payload), now_s=received_at_us / MICROSECONDS_PER_SECOND)
        ours = [(record, place) for record in records if (place := places.get(record.name)) is not None]
        if not ours:
            found = ", ".join(dict.fromkeys(record.name for record in records[:8])) or "no record"
            allowed = f"one of the declared names: {', '.join(list(places)[:8])}"
            raise PayloadError(Reason.NO_KNOWN_NAME, "payload", shown(found), allowed, only)
        if is_retained and not all(record.is_time_own for record, _ in ours):
            raise retained_without_time(only)
        got = _Yield()
        for record, place in ours:
            measured_at_us = round(min(max(record.time_s, -_FAR_S), _FAR_S) * MICROSECONDS_PER_SECOND)
            if window.holds(measured_at_us, received_at_us=received_at_us):
                _take(record, place, got, measured_at_us, received_at_us)
            else:
                error = beyond_horizon(measured_at_us, window=window, where=record.name, sensor=place.sensor)
                got.remarks.append(Remark(place.sensor, error.code, error.where, error.found, error.allowed))
        if not got.usable:
            raise nothing_usable(got.remarks, only)
        promises = [Promise(sensor, within_s) for sensor, within_s in got.promises.items()]
        return Decoded(_readings(got, declared, received_at_us), got.channels, got.remarks, promises)

    return decoded


def _places(sensor: Sensor, index: int) -> list[tuple[str, _Place]]:
    """Return the SenML names of a sensor with the quantity and the unit that each stands for."""
    fillers = fillers_of(sensor)
    units = (sensor.conductivity_unit, sensor.temperature_unit, sensor.pressure_unit)
    # Records of one reading bear the same time, unless the site file gives them a window.
    join_us = 0 if sensor.pair_within_s is None else round(sensor.pair_within_s * MICROSECONDS_PER_SECOND)
    found = [
        (path, _Place(index, quantity, False, unit, fillers[quantity], join_us))
        for quantity, unit in zip(QUANTITIES, units, strict=True)
        if (path := getattr(sensor.fields, quantity)) is not None
    ]
    return found + [
        (channel.field, _Place(index, name, True, channel.unit, fillers[name], join_us))
        for name, channel in sensor.channels.items()
    ]


def _take(record: Resolved, place: _Place, got: _Yield, measured_at_us: int, received_at_us: int) -> None:
    """Add one record to the yield of its pack."""
    number, flags = _number(record, place, got)
    if record.update_s is not None and record.update_s > 0:
        got.promises[place.sensor] = record.update_s
    if not record.is_time_own:
        flags |= _TIME_RECEIVED
    if place.is_channel:
        got.channels.append(ChannelReading(place.sensor, place.quantity, measured_at_us, received_at_us, number, flags))
        return
    groups = got.groups.setdefault(place.sensor, [])
    group = groups[-1] if groups else None
    if group is None or measured_at_us - group.measured_at_us > place.join_us or place.quantity in group.numbers:
        group = _Group(measured_at_us, 0)
        groups.append(group)
    group.numbers[place.quantity] = number
    group.flags |= flags


def _number(record: Resolved, place: _Place, got: _Yield) -> tuple[float, int]:
    """Return the value of a record in the declared unit of its place and its flag, remarking what is wrong."""
    sent = record.value if record.value is not None else record.sum
    scale = place.scale(record.unit)
    if type(sent) is float and scale is not None and isfinite(sent) and sent not in place.fillers:
        sent = sent * scale.factor + scale.offset
        if isfinite(sent):
            got.usable += 1
            return sent, 0
    value = judged(sent, fillers=place.fillers)
    if value.reason is None:
        allowed = registered_for(place.declared_unit)
        value = Value(NAN, _MISSING, Reason.WRONG_UNIT, f"the unit {shown(record.unit)}", allowed)
    reason = value.reason or Reason.WRONG_UNIT
    got.remarks.append(Remark(place.sensor, reason, record.name, value.found, value.allowed))
    return NAN, value.flag


def _readings(got: _Yield, declared: dict[int, set[str]], received_at_us: int) -> list[RawReading]:
    """Return the readings of a pack; a declared quantity without a record at the same time is missing."""
    readings = []
    for sensor, groups in got.groups.items():
        expected = [name for name in QUANTITIES if name in declared[sensor]]
        for group in groups:
            numbers, flags = group.numbers, group.flags
            if len(numbers) < len(expected):
                flags |= _MISSING
            readings.append(
                RawReading(
                    sensor,
                    group.measured_at_us,
                    received_at_us,
                    numbers.get("conductivity", NAN),
                    numbers.get("temperature", NAN),
                    numbers.get("pressure", NAN),
                    flags,
                )
            )
    return readings
