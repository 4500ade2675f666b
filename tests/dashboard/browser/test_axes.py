"""Ticks of the axes."""

from __future__ import annotations

from datetime import UTC, datetime
from zoneinfo import ZoneInfo

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from dashboard.browser.axes import tick_decimals, time_ticks, value_ticks

LISBON = ZoneInfo("Europe/Lisbon")


@settings(derandomize=True)
@given(
    st.floats(min_value=-1000, max_value=1000),
    st.floats(min_value=0.01, max_value=5000),
    st.integers(min_value=2, max_value=9),
)
def test_ticks_are_round_inside_and_not_too_many(low, span, most):
    ticks = value_ticks(low, low + span, most=most)
    assert len(ticks) <= most + 1
    assert all(low - 1e-6 <= tick <= low + span + 1e-6 for tick in ticks)


def test_ticks_carry_as_many_decimals_as_tell_them_apart():
    assert value_ticks(27.0, 33.4, most=6) == [28.0, 30.0, 32.0]
    assert tick_decimals([28.0, 30.0]) == 0
    assert tick_decimals([28.0, 28.5]) == 1
    assert tick_decimals([0.02, 0.04]) == 2
    assert value_ticks(5.0, 5.0) == []


def stamp(*parts: int) -> float:
    return datetime(*parts, tzinfo=LISBON).timestamp()


def test_a_day_is_ticked_at_whole_hours_of_the_sites_clock_and_names_the_new_day():
    ticks = time_ticks(stamp(2026, 7, 14, 9, 46), stamp(2026, 7, 15, 9, 46), LISBON, most=8)
    assert [text for _, text, _ in ticks] == ["12:00", "15:00", "18:00", "21:00", "Wed 15", "03:00", "06:00", "09:00"]
    assert [text for _, text, is_day in ticks if is_day] == ["Wed 15"]


def test_the_night_of_the_change_to_winter_time_keeps_its_midnights():
    """Lisbon, 25 October 2026: at 02:00 the clocks go back an hour (IANA time zone database)."""
    ticks = time_ticks(stamp(2026, 10, 24, 12), stamp(2026, 10, 27, 0), LISBON, most=4)
    days = [datetime.fromtimestamp(t, tz=UTC).astimezone(LISBON) for t, _, _ in ticks]
    assert all(day.hour % 12 == 0 and day.minute == 0 for day in days)


@pytest.mark.parametrize(("days", "most"), [(0.04, 8), (1, 8), (7, 8), (30, 8), (365, 8), (3650, 8), (365, 3)])
def test_no_span_is_crowded_or_bare(days, most):
    start = stamp(2026, 1, 3, 7, 12)
    ticks = time_ticks(start, start + days * 86_400, LISBON, most=most)
    assert 1 <= len(ticks) <= most + 2


def test_years_are_named_where_they_begin():
    ticks = time_ticks(stamp(2025, 11, 1), stamp(2026, 10, 31), LISBON, most=8)
    assert ("2026", True) in [(text, is_day) for _, text, is_day in ticks]
