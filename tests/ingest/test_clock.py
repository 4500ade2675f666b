from __future__ import annotations

from datetime import UTC, datetime, timedelta, timezone

import pytest
from hypothesis import given
from hypothesis import strategies as st

from ingest.clock import FakeClock, ReplayClock, SystemClock, to_datetime, to_microseconds

MOMENTS = st.datetimes(datetime(1900, 1, 1), datetime(2200, 1, 1), timezones=st.just(UTC))  # noqa: DTZ001


@given(MOMENTS)
def test_a_moment_comes_back_to_the_microsecond(moment):
    assert to_datetime(to_microseconds(moment)) == moment


@given(st.integers(-(2**51), 2**52))
def test_microseconds_come_back(time_us):
    assert to_microseconds(to_datetime(time_us)) == time_us


def test_the_zone_of_a_moment_does_not_change_it():
    moment = datetime(2026, 7, 1, 14, tzinfo=timezone(timedelta(hours=2)))
    assert to_microseconds(moment) == to_microseconds(datetime(2026, 7, 1, 12, tzinfo=UTC))
    assert to_microseconds(datetime(1970, 1, 1, tzinfo=UTC)) == 0


def test_a_moment_without_a_zone_is_refused():
    with pytest.raises(ValueError, match="no time zone"):
        to_microseconds(datetime(2026, 1, 1))  # noqa: DTZ001


def test_the_system_clock_is_the_machines():
    clock = SystemClock()
    before = to_microseconds(datetime.now(UTC))
    assert before <= clock.now_us() <= to_microseconds(datetime.now(UTC))
    assert clock.monotonic_s() <= clock.monotonic_s()


def test_a_replay_clock_follows_and_never_goes_back():
    clock = ReplayClock(5)
    for seen, expected in ((3, 5), (9, 9), (7, 9)):
        clock.follow(seen)
        assert clock.now_us() == expected


def test_a_fake_clock_stands_still_until_it_is_moved():
    clock = FakeClock(1_000_000)
    assert (clock.now_us(), clock.monotonic_s()) == (1_000_000, 0.0)
    clock.advance(1.5)
    assert (clock.now_us(), clock.monotonic_s()) == (2_500_000, 1.5)
    clock.step_wall(-2)
    assert (clock.now_us(), clock.monotonic_s()) == (500_000, 1.5)
