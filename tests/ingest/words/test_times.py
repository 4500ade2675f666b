"""Times as people read them, in the site's zone."""

from __future__ import annotations

import math
from datetime import UTC, datetime

import pytest

from ingest.clock import to_microseconds
from ingest.words import times

LISBON = times.zone("Europe/Lisbon")
KOLKATA = times.zone("Asia/Kolkata")
NOW = to_microseconds(datetime(2026, 7, 14, 20, 52, 7, tzinfo=UTC))


def before(seconds: float) -> int:
    return NOW - round(seconds * 1e6)


@pytest.mark.parametrize(
    ("seconds", "text"),
    [
        (0.2, "just now"),
        (6, "6 s ago"),
        (119, "119 s ago"),
        (240, "4 min ago"),
        (3 * 3600, "3 h ago"),
        (49 * 3600, "2 d ago"),
        (-5, "just now"),
        (-600, "clock ahead"),
    ],
)
def test_an_age_is_short_and_never_negative(seconds, text):
    assert times.age(before(seconds), now_us=NOW) == text


def test_nothing_yet_is_never():
    assert times.age(None, now_us=NOW) == "never"
    assert times.moment(None, LISBON, now_us=NOW) == "never"


def test_the_clock_is_that_of_the_site():
    assert times.clock(NOW, LISBON) == "21:52"
    assert times.clock(NOW, KOLKATA, has_seconds=True) == "02:22:07"
    assert times.masthead(NOW, LISBON) == "Tue 21:52"


@pytest.mark.parametrize(
    ("moment", "text"),
    [
        (datetime(2026, 7, 14, 1, 5, tzinfo=UTC), "02:05"),
        (datetime(2026, 7, 13, 1, 5, tzinfo=UTC), "Mon 02:05"),
        (datetime(2026, 5, 2, 12, 0, tzinfo=UTC), "2 May 13:00"),
        (datetime(2025, 12, 2, 12, 0, tzinfo=UTC), "2 Dec 2025 12:00"),
    ],
)
def test_a_moment_is_named_as_shortly_as_is_clear(moment, text):
    assert times.moment(to_microseconds(moment), LISBON, now_us=NOW) == text


@pytest.mark.parametrize(
    ("seconds", "text"),
    [
        (40, "40 s"),
        (660, "11 min"),
        (7500, "2 h 5 min"),
        (7200, "2 h"),
        (3 * 86400 + 4 * 3600, "3 d 4 h"),
        (40 * 86400, "40 d"),
        (math.nan, "–"),
    ],
)
def test_a_duration_has_at_most_two_parts(seconds, text):
    assert times.duration(seconds) == text


def test_time_left_shows_its_range_where_it_is_known():
    assert times.time_left(11, 9, 14) == "about 11 min (9 to 14 min)"
    assert times.time_left(11) == "about 11 min"
    assert times.time_left(0.4) == "less than a minute"
    assert times.time_left(math.nan) == ""
    assert times.time_left(150, 110, 235) == "about 2 h 30 min (90 min to 4 h)"


def test_time_left_is_no_finer_than_its_range():
    assert times.time_left(266.9, 240.4, 299.8) == "about 4 h 30 min (4 h to 5 h)"
    assert times.time_left(33, 25, 51) == "about 35 min (25 to 55 min)"
