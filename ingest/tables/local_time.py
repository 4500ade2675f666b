"""From local clock time to UTC, through the hours that daylight saving repeats or leaves out."""

from __future__ import annotations

from datetime import UTC, datetime, timedelta
from typing import TYPE_CHECKING

import numpy as np

from ingest.clock import MICROSECONDS_PER_SECOND

if TYPE_CHECKING:
    from zoneinfo import ZoneInfo

    from analysis.arrays import BoolArray, IntArray

_QUARTER_US = 900 * MICROSECONDS_PER_SECOND
_EPOCH = datetime(1970, 1, 1, tzinfo=UTC).replace(tzinfo=None)


class LocalClock:
    """The clock of a logger that is set to local time. Rows come in the order in which they were measured.

    The hour that comes twice in autumn is told by the sequence: it is the first as long as the clock runs on,
    and the second from where it steps back. A logger whose clock was never changed should be declared with a
    fixed zone such as Etc/GMT-1 instead.

    Parameters
    ----------
    zone : ZoneInfo
        The IANA zone of the clock.
    """

    def __init__(self, zone: ZoneInfo) -> None:
        self._zone = zone
        self._latest_us: int | None = None

    def to_utc(self, local_us: IntArray) -> tuple[IntArray, BoolArray]:
        """Return UTC times and, for each, whether its local time exists.

        Parameters
        ----------
        local_us : ndarray of int64
            Microseconds of the local calendar since 1970-01-01 00:00 local time.
        """
        # Offsets change at full quarters of an hour: few differ, and each is looked up once.
        quarters, places = np.unique(local_us // _QUARTER_US, return_inverse=True)
        offsets = np.array([self._offsets_us(int(quarter)) for quarter in quarters], dtype=np.int64).reshape(-1, 2)
        first, second = (local_us - offsets[places, fold] for fold in (0, 1))
        is_twice, exists = second > first, second >= first
        utc_us = np.where(is_twice, first, second)
        if is_twice.any():
            self._resolve(utc_us, second, is_twice)
        if exists.any():
            self._latest_us = int(utc_us[exists][-1])
        return utc_us, exists

    def _offsets_us(self, quarter: int) -> tuple[int, int]:
        """Return the offset from UTC of a quarter of an hour, for its first and its second coming."""
        moment = _EPOCH + timedelta(microseconds=quarter * _QUARTER_US)
        offsets = (self._zone.utcoffset(moment.replace(fold=fold)) or timedelta(0) for fold in (0, 1))
        first, second = (round(offset.total_seconds()) * MICROSECONDS_PER_SECOND for offset in offsets)
        return first, second

    def _resolve(self, utc_us: IntArray, second: IntArray, is_twice: BoolArray) -> None:
        """Take the second coming of a repeated hour from where the clock steps back."""
        for index in np.flatnonzero(is_twice):
            before = int(utc_us[index - 1]) if index else self._latest_us
            if before is not None and before >= utc_us[index] and second[index] >= before:
                utc_us[index] = second[index]
