"""Who is on duty, on the wall clock of the site."""

from __future__ import annotations

from datetime import UTC, date, datetime
from zoneinfo import ZoneInfo

import pytest

from analysis.alarm.duty import DayKind, DutyCalendar, QuietHours, Shift, StandIn, on_duty, quiet_until_us
from analysis.alarm.rules import Priority
from analysis.errors import InvalidInputError
from tests.analysis.alarm.stories import HOUR

LISBON = ZoneInfo("Europe/Lisbon")
SYDNEY = ZoneInfo("Australia/Sydney")
NIGHT = QuietHours(22 * 60, 6 * 60)


def at(text: str, zone: ZoneInfo = LISBON, *, fold: int = 0) -> int:
    """Return microseconds UTC of a local time."""
    moment = datetime.fromisoformat(text).replace(tzinfo=zone, fold=fold).astimezone(UTC)
    return round(moment.timestamp()) * 1_000_000


def calendar(*shifts: Shift, **more: object) -> DutyCalendar:
    return DutyCalendar(LISBON, shifts, **more)


DAY_AND_NIGHT = (Shift("Ana", 6 * 60, 18 * 60), Shift("Bo", 18 * 60, 6 * 60))


@pytest.mark.parametrize(
    ("text", "who"),
    [
        ("2026-11-20T05:59", "Bo"),
        ("2026-11-20T06:00", "Ana"),
        ("2026-11-20T17:59", "Ana"),
        ("2026-11-20T18:00", "Bo"),
        ("2026-11-21T00:30", "Bo"),
    ],
)
def test_a_night_shift_runs_past_midnight(text: str, who: str) -> None:
    assert on_duty(calendar(*DAY_AND_NIGHT), at(text)) == (who,)


def test_night_in_which_the_clocks_change_is_covered_throughout() -> None:
    """Sydney 2026-04-05 02:30 comes twice (tz database)."""
    site = DutyCalendar(SYDNEY, DAY_AND_NIGHT)
    begin = at("2026-04-04T18:00", SYDNEY)
    assert at("2026-04-05T06:00", SYDNEY) - begin == 13 * HOUR
    assert {on_duty(site, begin + quarter * HOUR // 4) for quarter in range(13 * 4)} == {("Bo",)}


def test_weekdays_are_those_on_which_a_shift_begins() -> None:
    friday_night = calendar(Shift("Bo", 18 * 60, 6 * 60, weekdays=frozenset({4})))
    assert on_duty(friday_night, at("2026-11-21T05:00")) == ("Bo",)  # Saturday morning
    assert on_duty(friday_night, at("2026-11-20T05:00")) == ()  # Friday morning


def test_holidays_have_their_own_shift() -> None:
    shifts = (Shift("Ana", 0, 1440, days=DayKind.WORKDAY), Shift("Cy", 0, 1440, days=DayKind.HOLIDAY))
    site = calendar(*shifts, holidays=frozenset({date(2026, 12, 25)}))
    assert on_duty(site, at("2026-12-24T12:00")) == ("Ana",)
    assert on_duty(site, at("2026-12-25T12:00")) == ("Cy",)


def test_shifts_have_a_first_and_a_last_day() -> None:
    site = calendar(Shift("Ana", 0, 1440, first_day=date(2026, 11, 2), last_day=date(2026, 11, 3)))
    days = [on_duty(site, at(f"2026-11-0{day}T12:00")) for day in range(1, 5)]
    assert days == [(), ("Ana",), ("Ana",), ()]


def test_stand_ins_take_the_place_of_the_absent_even_twice_over() -> None:
    week = (at("2026-11-16T00:00"), at("2026-11-23T00:00"))
    site = calendar(Shift("Ana", 0, 1440), stand_ins=(StandIn("Ana", "Bo", *week), StandIn("Bo", "Cy", *week)))
    assert on_duty(site, at("2026-11-20T12:00")) == ("Cy",)
    assert on_duty(site, week[1]) == ("Ana",)


def test_two_on_duty_come_in_the_order_of_the_shifts_each_once() -> None:
    site = calendar(Shift("Ana", 0, 1440), Shift("Bo", 0, 1440), Shift("Ana", 0, 720))
    assert on_duty(site, at("2026-11-20T10:00")) == ("Ana", "Bo")


def test_quiet_hours_hold_back_until_morning_but_never_the_top_priority() -> None:
    site = calendar(quiet=(NIGHT,))
    night = at("2026-11-20T23:30")
    assert quiet_until_us(site, night, priority=Priority.SOON, is_top=False) == at("2026-11-21T06:00")
    assert quiet_until_us(site, at("2026-11-21T05:59"), priority=Priority.NOTE, is_top=False) == at("2026-11-21T06:00")
    for priority in Priority:
        assert quiet_until_us(site, night, priority=priority, is_top=True) == night
    assert quiet_until_us(site, night, priority=Priority.URGENT, is_top=False) == night
    assert quiet_until_us(site, at("2026-11-21T06:00"), priority=Priority.SOON, is_top=False) == at("2026-11-21T06:00")


def test_quiet_hours_around_the_clock_let_an_alarm_through_after_a_day() -> None:
    site = calendar(quiet=(QuietHours(0, 720), QuietHours(720, 1440)))
    noon = at("2026-11-20T12:00")
    assert quiet_until_us(site, noon, priority=Priority.NOTE, is_top=False) == noon + 24 * HOUR


def test_impossible_shifts_are_refused() -> None:
    with pytest.raises(InvalidInputError):
        Shift("Ana", -1, 60)
