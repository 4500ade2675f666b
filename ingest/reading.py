"""A reading as it came off the wire, before any science."""

from __future__ import annotations

from typing import NamedTuple


class RawReading(NamedTuple):
    """Decoded values of one sensor at one moment, as sent.

    Attributes
    ----------
    sensor : int
        Index in the site's list of sensors.
    measured_at_us, received_at_us : int
        Microseconds since 1970, UTC.
    conductivity, temperature, pressure : float
        As sent, in the units that the sensor's declaration names; NaN where absent or unusable.
    flags : int
        Words of `analysis.flags.Flag` already known at decoding.
    """

    sensor: int
    measured_at_us: int
    received_at_us: int
    conductivity: float
    temperature: float
    pressure: float
    flags: int


class ChannelReading(NamedTuple):
    """Decoded value of one further channel of a sensor: oxygen, pH, level, flow, mains power.

    Attributes
    ----------
    sensor : int
        Index in the site's list of sensors.
    channel : str
        Name of the channel under the sensor's `channels`.
    measured_at_us, received_at_us : int
        Microseconds since 1970, UTC.
    value : float
        In the unit that the channel's declaration names; NaN where unusable.
    flags : int
        Words of `analysis.flags.Flag` already known at decoding.
    """

    sensor: int
    channel: str
    measured_at_us: int
    received_at_us: int
    value: float
    flags: int
