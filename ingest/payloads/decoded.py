"""What comes out of a payload."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import NamedTuple

import msgspec

from ingest.payloads.reason import Reason
from ingest.reading import ChannelReading, RawReading


class Remark(NamedTuple):
    """One value of a payload that could not be used, while the rest of it could.

    The caller keeps it together with the bytes it came in.

    Attributes
    ----------
    sensor : int
        Index in the site's list of sensors.
    code : Reason
        Why.
    where, found, allowed : str
        The field or record, what was there, what would have been right.
    """

    sensor: int
    code: Reason
    where: str
    found: str
    allowed: str


class Promise(NamedTuple):
    """A sensor's own word on when its next reading comes (SenML update time).

    Attributes
    ----------
    sensor : int
        Index in the site's list of sensors.
    within_s : float
        The longest time until the next reading. [s]
    """

    sensor: int
    within_s: float


class Decoded(msgspec.Struct, frozen=True, gc=False):
    """The yield of one payload. Any of them may be empty.

    Attributes
    ----------
    readings : sequence of RawReading
        In the order of measured time for each sensor.
    channels : sequence of ChannelReading
        Further quantities.
    remarks : sequence of Remark
        Values that could not be used.
    promises : sequence of Promise
        When the next readings are due, where the payload says so.
    """

    readings: Sequence[RawReading] = ()
    channels: Sequence[ChannelReading] = ()
    remarks: Sequence[Remark] = ()
    promises: Sequence[Promise] = ()


Route = Callable[[bytes, int, bool], Decoded]
"""The decoder of one topic: (payload, received_at_us, is_retained) -> Decoded, or PayloadError."""
