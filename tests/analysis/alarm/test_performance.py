"""How well the alarms work, beside the published figures."""

from __future__ import annotations

import csv
from dataclasses import replace
from datetime import date
from pathlib import Path
from zoneinfo import ZoneInfo

import pytest

from analysis.alarm.events import Acknowledge, Tick
from analysis.alarm.kinds import ConditionKind as Kind
from analysis.alarm.performance import (
    FIGURES,
    PERIODS_PER_DAY,
    Annunciation,
    acknowledgement_times_s,
    annunciations,
    calls_per_night,
    chattering,
    floods,
    is_chattering,
    performance,
    priority_split,
    rate_class,
    share_with_action,
    stale,
    top_ten,
    top_ten_share,
)
from analysis.alarm.rules import Priority
from analysis.alarm.state import AlarmState
from tests.analysis.alarm.stories import AT_ONCE, HOUR, MINUTE, SECOND, after, readings

TABLE = Path(__file__).parents[2] / "reference" / "alarm_figures.csv"
LISBON = ZoneInfo("Europe/Lisbon")


def published(row_id: str) -> str:
    with TABLE.open(encoding="utf-8") as file:
        rows = csv.DictReader(line for line in file if not line.startswith("#"))
        return next(row["expected"] for row in rows if row["id"] == row_id)


def alarm(at_us: int, tank: str = "l3", **more: object) -> Annunciation:
    return Annunciation(tank, Kind.SALINITY_LOW, Priority.URGENT, at_us, **more)


def test_published_flood_begin_and_end() -> None:
    """ALM05, ALM06: more than 10 in 10 minutes begins a flood, fewer than 5 ends it."""
    ten = [number * SECOND for number in range(10)]
    assert [bool(floods(ten)), bool(floods([*ten, 11 * SECOND]))] == [False, True]
    assert published("ALM05") == "[false,true]"
    eleven = [number * SECOND for number in range(11)]
    five_more = [10 * MINUTE + number * SECOND for number in range(5)]
    assert floods([*eleven, *five_more[:4]]) == ((0, 10 * MINUTE),)
    assert floods([*eleven, *five_more]) == ((0, 20 * MINUTE),)
    assert published("ALM06") == "[still flood, ended]"


def test_published_chattering() -> None:
    """ALM07: annunciations at 0, 20 and 59 s."""
    assert is_chattering([0, 20 * SECOND, 59 * SECOND])
    assert not is_chattering([0, 20 * SECOND, 61 * SECOND])
    assert chattering([alarm(0), alarm(SECOND), alarm(2 * SECOND, "l4"), alarm(30 * SECOND)]) == (
        ("l3", Kind.SALINITY_LOW),
    )


def test_published_stale() -> None:
    """ALM09: active for 24 h 1 min."""
    assert published("ALM09") == "stale"
    assert stale([alarm(0)], now_us=24 * HOUR + MINUTE)
    assert not stale([alarm(0)], now_us=24 * HOUR)
    assert not stale([alarm(0, returned_at_us=HOUR)], now_us=48 * HOUR)


def test_published_rate_classes() -> None:
    """ALM10: EEMUA 191 long-term averages."""
    classes = [rate_class(rate).replace("_", " ") for rate in (0.9, 1.0, 2.0, 5, 10.1)]
    assert [text.replace("over demanding", "over-demanding") for text in classes] == published("ALM10").strip(
        "[]"
    ).split(",")


def test_published_daily_equivalents() -> None:
    """ALM11: 1 and 2 in 10 minutes."""
    per_day = [int(number) for number in published("ALM11").strip("[]").split(",")]
    assert per_day == [PERIODS_PER_DAY, 2 * PERIODS_PER_DAY]


def test_published_priority_split() -> None:
    """ALM12: 50 high, 150 medium, 800 low are on target."""
    counts = {Priority.URGENT: 50, Priority.SOON: 150, Priority.NOTE: 800}
    alarms = [replace(alarm(0), priority=priority) for priority, count in counts.items() for _ in range(count)]
    assert priority_split(alarms) == {Priority.URGENT: 0.05, Priority.SOON: 0.15, Priority.NOTE: 0.80}
    assert published("ALM12").startswith("80/15/5")


def test_published_top_ten_share() -> None:
    """ALM13: the ten most frequent make 60 of 1000."""
    frequent = [alarm(0, f"a{number}") for number in range(10) for _ in range(6)]
    seldom = [alarm(0, f"b{number}") for number in range(940)]
    assert top_ten_share([*frequent, *seldom]) == pytest.approx(0.06)
    assert published("ALM13").startswith("6 %")
    assert top_ten(frequent)[0] == (("a0", Kind.SALINITY_LOW), 6)


def test_annunciations_are_what_people_were_told_with_return_and_acknowledgement() -> None:
    state, history = readings(AlarmState(), AT_ONCE, "TF", start_s=10)
    state, more = after(state, AT_ONCE, [(Acknowledge("Ana"), MINUTE)])
    _, last = readings(state, AT_ONCE, "T", start_s=100)
    found = annunciations(
        [("l3", Kind.SALINITY_LOW, entry) for entry in (*history, *more, *last)], {Kind.SALINITY_LOW: Priority.URGENT}
    )
    assert [(item.raised_at_us, item.returned_at_us, item.acknowledged_by) for item in found] == [
        (10 * SECOND, 20 * SECOND, "Ana"),
        (100 * SECOND, None, ""),
    ]
    assert acknowledgement_times_s(found) == (50.0,)


def test_a_re_alarm_is_told_again_but_is_no_second_standing_alarm() -> None:
    state, history = readings(AlarmState(), AT_ONCE, "T", start_s=10)
    state, more = after(state, AT_ONCE, [(Acknowledge("Ana"), MINUTE), (Tick(), HOUR), (Acknowledge("Bo"), HOUR)])
    entries = [("l3", Kind.SALINITY_LOW, entry) for entry in (*history, *more)]
    found = annunciations(entries, {Kind.SALINITY_LOW: Priority.URGENT})
    assert [item.is_repeat for item in found] == [False, True]
    assert [item.acknowledged_by for item in found] == ["Ana", "Bo"]
    assert len(stale(found, now_us=48 * HOUR)) == 1


def test_nights_are_those_of_the_wall_clock_and_named_by_their_evening() -> None:
    day = 20_000 * 24 * HOUR  # 2024-10-04, Lisbon is an hour ahead of UTC
    calls = [("Ana", day + 18 * HOUR), ("Ana", day + 19 * HOUR), ("Ana", day + 30 * HOUR), ("Bo", day + 31 * HOUR)]
    assert calls_per_night(calls, LISBON) == {"Ana": {date(2024, 10, 4): 2}}


def test_share_that_led_to_an_action_counts_only_where_it_was_said() -> None:
    said = [alarm(0, has_led_to_action=True), alarm(0, has_led_to_action=False), alarm(0)]
    assert share_with_action(said) == 0.5
    assert share_with_action(said[2:]) is None


def test_report_over_a_time() -> None:
    alarms = [alarm(number * HOUR, returned_at_us=number * HOUR + MINUTE) for number in range(48)]
    report = performance(alarms, [("Ana", 2 * HOUR)], from_us=0, until_us=24 * HOUR, zone=LISBON)
    assert (report.count, report.per_day, report.rate_class) == (24, 24.0, "very_likely_acceptable")
    assert report.share_of_time_in_flood == 0
    assert report.median_acknowledgement_s is None
    assert sum(report.calls_per_night["Ana"].values()) == 1
    empty = performance([], [], from_us=0, until_us=HOUR, zone=LISBON)
    assert (empty.count, empty.top_ten_share, empty.stale) == (0, 0.0, ())


def test_every_figure_names_its_source() -> None:
    assert all(figure.source and figure.target for figure in FIGURES)
