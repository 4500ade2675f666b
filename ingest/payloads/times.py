"""When a reading was measured: the formats that sensors send, and how far off a time may be."""

from __future__ import annotations

import math
import re
from datetime import datetime
from typing import TYPE_CHECKING, NamedTuple

from ingest.clock import MICROSECONDS_PER_SECOND, to_datetime, to_microseconds
from ingest.payloads.reason import PayloadError, Reason, shown

if TYPE_CHECKING:
    from ingest.site.identity import Horizon
    from ingest.site.sensors import TimeFormat

UNIX_FACTORS = {"unix_s": 1_000_000, "unix_ms": 1_000, "unix_us": 1}
ALLOWED_TIMES = {
    "iso": "a time after ISO 8601 with its offset or Z, such as 2026-01-31T06:30:00Z",
    "unix_s": "seconds since 1970, UTC",
    "unix_ms": "milliseconds since 1970, UTC",
    "unix_us": "microseconds since 1970, UTC",
}
LARGEST_US = 253_402_300_799_000_000
"""The end of the year 9999: later times have no calendar date."""

_LEAP_SECOND = re.compile(r"(T|\s)(\d\d):?(\d\d):?60")


class Window(NamedTuple):
    """How far from the time received a measured time may lie.

    Attributes
    ----------
    past_us, future_us : int
        Microseconds.
    """

    past_us: int
    future_us: int

    @classmethod
    def of(cls, horizon: Horizon) -> Window:
        """Return the window of a site's intake horizon."""
        past_us = round(horizon.past_h * 3600 * MICROSECONDS_PER_SECOND)
        return cls(past_us, round(horizon.future_min * 60 * MICROSECONDS_PER_SECOND))

    def holds(self, measured_at_us: int, *, received_at_us: int) -> bool:
        """Return whether a measured time lies within the window."""
        return -self.past_us <= measured_at_us - received_at_us <= self.future_us

    def words(self) -> str:
        """Return the window in words."""
        past_h, future_min = self.past_us / 3.6e9, self.future_us / 6e7
        return f"at most {past_h:g} h before and {future_min:g} min after the time received"


def time_from(value: object, *, time_format: TimeFormat, where: str, sensor: int) -> int:
    """Return microseconds since 1970, UTC, from the time field of a payload.

    Parameters
    ----------
    value : object
        What stood in the field.
    time_format : str
        iso, unix_s, unix_ms or unix_us.
    where : str
        Name of the field, for the error.
    sensor : int
        Index of the sensor, for the error.

    Raises
    ------
    PayloadError
        `time_missing` or `time_unreadable`. A leap second (:60) counts as the second that follows it.
    """
    allowed = ALLOWED_TIMES[time_format]
    if value is None:
        raise PayloadError(Reason.TIME_MISSING, where, "nothing", allowed, sensor)
    time_us = _from_text(value) if time_format == "iso" else _from_number(value, UNIX_FACTORS[time_format])
    if time_us is None:
        raise PayloadError(Reason.TIME_UNREADABLE, where, shown(value), allowed, sensor)
    return time_us


def beyond_horizon(measured_at_us: int, *, window: Window, where: str, sensor: int) -> PayloadError:
    """Return the error of a measured time outside *window*."""
    is_dated = 0 <= measured_at_us <= LARGEST_US
    found = to_datetime(measured_at_us).isoformat() if is_dated else shown(measured_at_us)
    return PayloadError(Reason.TIME_BEYOND_HORIZON, where, found, window.words(), sensor)


def _from_text(value: object) -> int | None:
    if not isinstance(value, str):
        return None
    text, leap_us = value.strip(), 0
    if _LEAP_SECOND.search(text):
        text = _LEAP_SECOND.sub(lambda match: match[0][:-2] + "59", text)
        leap_us = MICROSECONDS_PER_SECOND
    try:
        moment = datetime.fromisoformat(text)
        return None if moment.tzinfo is None else to_microseconds(moment) + leap_us
    except (ValueError, OverflowError):
        return None


def _from_number(value: object, factor: int) -> int | None:
    if isinstance(value, bool) or not isinstance(value, int | float):
        return None
    if isinstance(value, float) and not math.isfinite(value):
        return None
    time_us = value * factor
    return round(time_us) if abs(time_us) <= LARGEST_US else None
