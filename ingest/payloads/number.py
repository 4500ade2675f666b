"""Plain numbers on topics of their own."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

from analysis.flags import Flag
from ingest.payloads.decoded import Decoded, Remark, Route
from ingest.payloads.json_object import retained_without_time
from ingest.payloads.reason import PayloadError, shown
from ingest.payloads.values import Value, fillers_of, judged
from ingest.reading import ChannelReading
from ingest.site.sensors import QUANTITIES

if TYPE_CHECKING:
    from ingest.payloads.pairing import Pairing
    from ingest.site.sensors import Sensor

_NUMBER = re.compile(r"[-+]?([0-9]+\.?[0-9]*|\.[0-9]+)([eE][-+]?[0-9]+)?\Z")
_LONGEST = 100


def number_route(sensor: Sensor, *, index: int, name: str, pairing: Pairing) -> Route:
    """Return the decoder of one topic that carries plain numbers.

    Parameters
    ----------
    sensor : Sensor
        Its declaration in the site file.
    index : int
        Its place in the site's list.
    name : str
        The quantity or channel on this topic.
    pairing : Pairing
        Where the quantities of a reading wait for each other.

    Returns
    -------
    callable
        ``(payload, received_at_us, is_retained) -> Decoded``; raises PayloadError and nothing else.
    """
    fillers = fillers_of(sensor)[name]
    is_quantity = name in QUANTITIES

    def decoded(payload: bytes, received_at_us: int, is_retained: bool) -> Decoded:
        if is_retained:
            raise retained_without_time(index)
        value = judged(_number(payload), fillers=fillers)
        remarks = [] if value.reason is None else [Remark(index, value.reason, name, value.found, value.allowed)]
        if not is_quantity:
            _raise_if_unusable(value, name, index)
            flags = int(Flag.TIME_RECEIVED)
            return Decoded([], [ChannelReading(index, name, received_at_us, received_at_us, value.number, flags)])
        readings = pairing.take(sensor.id, name, value.number, flag=value.flag, received_at_us=received_at_us)
        return Decoded(readings, [], remarks)

    return decoded


def _raise_if_unusable(value: Value, name: str, index: int) -> None:
    if value.reason is not None:
        raise PayloadError(value.reason, name, value.found, value.allowed, index)


def _number(payload: bytes) -> object:
    """Return the number that *payload* holds, else its text, of which the judge says what is wrong."""
    if len(payload) > _LONGEST:
        return shown(payload)
    text = payload.decode("utf-8", "replace").strip()
    if not text:
        return None
    return float(text) if _NUMBER.match(text) else text
