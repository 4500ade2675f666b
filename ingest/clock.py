"""Where the time comes from. Everything that needs the time is handed a Clock; nothing asks the system itself."""

from __future__ import annotations

import threading
import time
from datetime import UTC, datetime
from typing import Protocol

MICROSECONDS_PER_SECOND = 1_000_000


def to_datetime(time_us: int) -> datetime:
    """Return the aware UTC datetime of *time_us* (microseconds since 1970, UTC)."""
    seconds, microseconds = divmod(int(time_us), MICROSECONDS_PER_SECOND)
    return datetime.fromtimestamp(seconds, tz=UTC).replace(microsecond=microseconds)


def to_microseconds(moment: datetime) -> int:
    """Return microseconds since 1970, UTC, of an aware *moment*."""
    if moment.tzinfo is None:
        raise ValueError(f"{moment!r} has no time zone; an aware datetime is needed")
    delta = moment - datetime(1970, 1, 1, tzinfo=UTC)
    return (delta.days * 86_400 + delta.seconds) * MICROSECONDS_PER_SECOND + delta.microseconds


class Clock(Protocol):
    """A wall clock and a monotonic clock."""

    def now_us(self) -> int:
        """Return the wall time: microseconds since 1970, UTC."""
        ...

    def monotonic_s(self) -> float:
        """Return a time that never steps back. [s]"""
        ...


class SystemClock:
    """The clock of the machine."""

    def now_us(self) -> int:
        """Return the wall time: microseconds since 1970, UTC."""
        return time.time_ns() // 1000

    def monotonic_s(self) -> float:
        """Return the machine's monotonic time. [s]"""
        return time.monotonic()


class ReplayClock:
    """A clock that follows the measured time of what has been replayed: wall time is the newest time seen."""

    def __init__(self, start_us: int = 0) -> None:
        self._now_us = start_us
        self._lock = threading.Lock()

    def now_us(self) -> int:
        """Return the newest measured time seen so far."""
        return self._now_us

    def monotonic_s(self) -> float:
        """Return the machine's monotonic time: waits are real even when the data are old. [s]"""
        return time.monotonic()

    def follow(self, measured_at_us: int) -> None:
        """Move on to *measured_at_us* if it is newer."""
        with self._lock:
            self._now_us = max(self._now_us, measured_at_us)


class FakeClock:
    """A clock that stands still until a test moves it."""

    def __init__(self, now_us: int = 1_700_000_000_000_000) -> None:
        self._now_us = now_us
        self._monotonic_s = 0.0

    def now_us(self) -> int:
        """Return the wall time that the test has set."""
        return self._now_us

    def monotonic_s(self) -> float:
        """Return the monotonic time that the test has set. [s]"""
        return self._monotonic_s

    def advance(self, seconds: float) -> None:
        """Move both clocks on by *seconds*."""
        self._now_us += round(seconds * MICROSECONDS_PER_SECOND)
        self._monotonic_s += seconds

    def step_wall(self, seconds: float) -> None:
        """Step the wall clock alone, as a wrong time server does."""
        self._now_us += round(seconds * MICROSECONDS_PER_SECOND)
