"""JSON objects with named fields: the fast road for a good message, the careful one for every other."""

from __future__ import annotations

import json
from collections.abc import Callable, Sequence
from operator import contains
from typing import TYPE_CHECKING, Any

import msgspec

from analysis.flags import Flag
from ingest.payloads.decoded import Decoded, Remark, Route
from ingest.payloads.fields import compiled, looked_up
from ingest.payloads.reason import PayloadError, Reason, shown
from ingest.payloads.times import UNIX_FACTORS, Window, beyond_horizon, time_from
from ingest.payloads.values import Value, fillers_of, judged
from ingest.reading import ChannelReading, RawReading
from ingest.site.sensors import QUANTITIES

if TYPE_CHECKING:
    from ingest.site.sensors import Sensor

_ChannelsOf = Callable[[Sequence[Any], int, int, int], tuple[ChannelReading, ...]]

_TIME_RECEIVED = int(Flag.TIME_RECEIVED)
_FALL_BACK = (msgspec.MsgspecError, AttributeError, RecursionError, OverflowError, TypeError, ValueError)
"""What the fast road stumbles over: a wrong type, an absent group (AttributeError on None), a depth, a filler."""


def json_route(sensor: Sensor, *, index: int, window: Window) -> Route:
    """Return the decoder of one sensor's JSON messages.

    Parameters
    ----------
    sensor : Sensor
        Its declaration in the site file.
    index : int
        Its place in the site's list.
    window : Window
        How far from the time received a measured time may lie.

    Returns
    -------
    callable
        ``(payload, received_at_us, is_retained) -> Decoded``; raises PayloadError and nothing else.
    """
    careful = _Careful(sensor, index=index, window=window)
    fast = _fast_route(sensor, index, window, careful.decoded)
    return fast or careful.decoded


def _fast_route(sensor: Sensor, index: int, window: Window, careful: Route) -> Route | None:
    """Return the road for good messages; whatever is unusual is handed to *careful*, which tells why.

    What does not change between messages is bound here, once: the whole road costs about a microsecond.
    """
    time = sensor.fields.time
    is_text_time = sensor.time_format == "iso"
    paths = [*(getattr(sensor.fields, name) for name in QUANTITIES), time]
    paths += [channel.field for channel in sensor.channels.values()]
    compiled_fields = compiled(paths, moments=[time] if time and is_text_time else [])
    if compiled_fields is None:
        return None
    record_from, values_of = compiled_fields
    fillers = fillers_of(sensor)
    bad_conductivity, bad_temperature, bad_pressure = (frozenset({None}) | fillers[name] for name in QUANTITIES)
    has_quantity = any(path is not None for path in paths[:3])
    channels_of = _channels_of(sensor, index, [fillers[name] for name in sensor.channels], may_be_empty=has_quantity)
    past_us, future_us = window.past_us, window.future_us
    factor = 1_000_000 if is_text_time else UNIX_FACTORS[sensor.time_format]
    new = tuple.__new__

    def fast(payload: bytes, received_at_us: int, is_retained: bool) -> Decoded:
        flags, channels = 0, None
        try:
            values = values_of(record_from(payload))
            conductivity, temperature, pressure = values[0], values[1], values[2]
            if time is None:
                measured_at_us, flags = received_at_us, _TIME_RECEIVED
            elif is_text_time:
                measured_at_us = round(values[3].timestamp() * factor)
            else:
                measured_at_us = round(values[3] * factor)
            if channels_of is not None:
                channels = channels_of(values, measured_at_us, received_at_us, flags)
        except _FALL_BACK:
            return careful(payload, received_at_us, is_retained)
        if (
            conductivity in bad_conductivity
            or temperature in bad_temperature
            or pressure in bad_pressure
            or not -past_us <= measured_at_us - received_at_us <= future_us
            or (is_retained and time is None)
        ):
            return careful(payload, received_at_us, is_retained)
        row = (index, measured_at_us, received_at_us, conductivity, temperature, pressure, flags)
        readings = (new(RawReading, row),) if has_quantity else ()
        return Decoded(readings) if channels is None else Decoded(readings, channels)

    return fast


def _channels_of(
    sensor: Sensor, index: int, fillers: list[frozenset[float]], *, may_be_empty: bool
) -> _ChannelsOf | None:
    """Return the part of the fast road that reads further channels; None where the sensor has none."""
    if not sensor.channels:
        return None
    names = tuple(sensor.channels)

    def channels(
        values: Sequence[Any], measured_at_us: int, received_at_us: int, flags: int
    ) -> tuple[ChannelReading, ...]:
        further = values[4:]
        found = tuple(
            ChannelReading(index, name, measured_at_us, received_at_us, value, flags)
            for name, value in zip(names, further, strict=True)
            if value is not None
        )
        if any(map(contains, fillers, further)) or not (found or may_be_empty):
            raise ValueError("a filler, or nothing at all: for the careful road")
        return found

    return channels


class _Careful:
    """The road for messages with anything unusual: each field is judged and each fault named."""

    def __init__(self, sensor: Sensor, *, index: int, window: Window) -> None:
        self.sensor = sensor
        self.index = index
        self.window = window
        self.fillers = fillers_of(sensor)
        fields = {name: getattr(sensor.fields, name) for name in QUANTITIES}
        self.quantities = {name: path for name, path in fields.items() if path is not None}
        self.channels = {name: channel.field for name, channel in sensor.channels.items()}

    def decoded(self, payload: bytes, received_at_us: int, is_retained: bool) -> Decoded:
        """Return what the payload holds; PayloadError where it holds nothing usable."""
        content = self._parsed(payload)
        measured_at_us, flags = self._time(content, received_at_us, is_retained=is_retained)
        paths = self.quantities | self.channels
        values = {name: judged(looked_up(content, path), fillers=self.fillers[name]) for name, path in paths.items()}
        remarks = [
            Remark(self.index, value.reason, paths[name], value.found, value.allowed)
            for name, value in values.items()
            if value.reason is not None
        ]
        if len(remarks) == len(values):
            raise nothing_usable(remarks, self.index)
        # A channel may come in some messages only: its absence is for the watch over its age, not for a remark.
        absent = [name for name in self.channels if values[name].reason is Reason.MISSING]
        remarks = [remark for remark in remarks if remark.where not in [paths[name] for name in absent]]
        return Decoded(
            [self._reading(values, measured_at_us, received_at_us, flags)] if self.quantities else [],
            [
                ChannelReading(
                    self.index, name, measured_at_us, received_at_us, values[name].number, flags | values[name].flag
                )
                for name in self.channels
                if name not in absent
            ],
            remarks,
        )

    def _parsed(self, payload: bytes) -> dict[str, Any]:
        try:
            # The standard library's parser takes NaN, which many loggers write, so that it can be named.
            content = json.loads(payload)
        except (ValueError, RecursionError) as error:
            found = f"{shown(payload)} ({type(error).__name__}: {str(error)[:80]})"
            raise PayloadError(Reason.UNREADABLE, "payload", found, "a JSON object", self.index) from error
        if not isinstance(content, dict):
            raise PayloadError(Reason.WRONG_SHAPE, "payload", shown(content), "a JSON object", self.index)
        return content

    def _time(self, content: dict[str, Any], received_at_us: int, *, is_retained: bool) -> tuple[int, int]:
        path = self.sensor.fields.time
        if path is None:
            if is_retained:
                raise retained_without_time(self.index)
            return received_at_us, _TIME_RECEIVED
        measured_at_us = time_from(
            looked_up(content, path), time_format=self.sensor.time_format, where=path, sensor=self.index
        )
        if not self.window.holds(measured_at_us, received_at_us=received_at_us):
            raise beyond_horizon(measured_at_us, window=self.window, where=path, sensor=self.index)
        return measured_at_us, 0

    def _reading(self, values: dict[str, Value], measured_at_us: int, received_at_us: int, flags: int) -> RawReading:
        undeclared = Value(float("nan"))
        conductivity, temperature, pressure = (values.get(name, undeclared) for name in QUANTITIES)
        return RawReading(
            self.index,
            measured_at_us,
            received_at_us,
            conductivity.number,
            temperature.number,
            pressure.number,
            flags | conductivity.flag | temperature.flag | pressure.flag,
        )


def nothing_usable(remarks: list[Remark], sensor: int) -> PayloadError:
    """Return the error of a payload with no usable value at all."""
    codes = {remark.code for remark in remarks}
    code = codes.pop() if len(codes) == 1 else Reason.NO_USABLE_VALUE
    where = ", ".join(remark.where for remark in remarks[:8])
    found = ", ".join(remark.found for remark in remarks[:8])
    return PayloadError(code, where, found, "at least one usable value", sensor)


def retained_without_time(sensor: int) -> PayloadError:
    """Return the error of a retained message that carries no time."""
    allowed = "a time field, or messages that are not retained"
    return PayloadError(Reason.RETAINED_WITHOUT_TIME, "payload", "a retained message without a time", allowed, sensor)
