"""Loggers whose clock follows daylight saving.

The dates are of the IANA database: Europe/Lisbon went back at 01:00 UTC on 2026-10-25 and forward at 01:00 UTC on
2026-03-29; Australia/Lord_Howe shifts by half an hour.
"""

from __future__ import annotations

from datetime import UTC, datetime
from zoneinfo import ZoneInfo

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from ingest.clock import to_datetime, to_microseconds
from ingest.tables.local_time import LocalClock

ZONES = ("Europe/Lisbon", "America/New_York", "Australia/Sydney", "Australia/Lord_Howe", "Asia/Kolkata", "UTC")
HOUR_US = 3_600_000_000


def local_us(utc_us: int, zone: ZoneInfo) -> int:
    """Return what a clock in *zone* shows, by the standard library."""
    return to_microseconds(to_datetime(utc_us).astimezone(zone).replace(tzinfo=UTC))


@pytest.mark.parametrize("step_min", [10, 15, 60])
@pytest.mark.parametrize("block", [1, 3, 1000])
@pytest.mark.parametrize("zone_name", ZONES)
def test_a_clock_that_runs_through_the_year_is_followed_to_the_minute(
    zone_name: str, block: int, step_min: int
) -> None:
    zone = ZoneInfo(zone_name)
    for middle in (datetime(2026, 3, 29, 1, tzinfo=UTC), datetime(2026, 10, 25, 1, tzinfo=UTC),
                   datetime(2026, 11, 1, 6, tzinfo=UTC), datetime(2026, 4, 4, 15, 30, tzinfo=UTC)):  # fmt: skip
        start_us = to_microseconds(middle) - 5 * HOUR_US
        utc = np.arange(start_us, start_us + 10 * HOUR_US, step_min * 60_000_000, dtype=np.int64)
        shown = np.array([local_us(int(time_us), zone) for time_us in utc], dtype=np.int64)
        clock = LocalClock(zone)
        parts = [clock.to_utc(shown[at : at + block]) for at in range(0, shown.size, block)]
        np.testing.assert_array_equal(np.concatenate([part[0] for part in parts]), utc)
        assert all(exists.all() for _, exists in parts)


def test_an_hour_that_was_left_out_does_not_exist() -> None:
    clock = LocalClock(ZoneInfo("Europe/Lisbon"))
    shown = np.array([to_microseconds(datetime(2026, 3, 29, 0, 45, tzinfo=UTC)) + i * 900_000_000 for i in range(7)])
    utc_us, exists = clock.to_utc(shown)
    assert exists.tolist() == [True, False, False, False, False, True, True]
    assert utc_us[0] == shown[0]
    assert utc_us[-1] == shown[-1] - HOUR_US


@settings(max_examples=80, deadline=None, derandomize=True)
@given(zone_name=st.sampled_from(ZONES), start_us=st.integers(946_684_800, 1_893_456_000).map(lambda s: s * 1_000_000))
def test_any_time_comes_back_but_for_the_repeated_hour(zone_name: str, start_us: int) -> None:
    zone = ZoneInfo(zone_name)
    found, exists = LocalClock(zone).to_utc(np.array([local_us(start_us, zone)]))
    assert exists.all()
    is_second = to_datetime(start_us).astimezone(zone).fold == 1
    assert found[0] == start_us or is_second
