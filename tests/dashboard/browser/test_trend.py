"""Where the water is heading."""

from __future__ import annotations

import math

import numpy as np
import pytest

from dashboard.browser.trend import STANDING, limits_of, trend_of

MINUTE_US = 60_000_000


def readings(per_h: float, *, minutes: int = 40, start: float = 31.0) -> tuple[np.ndarray, np.ndarray]:
    times = np.arange(minutes) * MINUTE_US
    noise = 0.01 * np.sin(np.arange(minutes) * 2.1)
    return times, start + per_h * np.arange(minutes) / 60 + noise


def test_a_fall_is_told_with_its_next_limit_and_the_time_to_it():
    """Plain arithmetic: 31 falling 6 an hour for 39 min stands at 27.1; 25 is 2.1 away, 21 min at that pace."""
    trend = trend_of(*readings(-6.0), kind="salinity", limits=(29.0, 33.0, 25.0, 40.0))
    assert trend.per_h == pytest.approx(-6, abs=0.1)
    assert trend.next_limit == 25.0
    assert trend.likely_min == pytest.approx(21, abs=1)
    assert trend.soonest_min <= trend.likely_min <= trend.latest_min


def test_standing_water_has_no_trend():
    assert trend_of(*readings(0.0), kind="salinity", limits=(29.0, 33.0)) == STANDING


def test_a_trend_without_a_limit_ahead_has_no_end():
    trend = trend_of(*readings(6.0), kind="salinity", limits=(29.0,))
    assert trend.per_h == pytest.approx(6, abs=0.1)
    assert math.isnan(trend.likely_min)


def test_beyond_half_a_tide_nothing_is_foretold():
    trend = trend_of(*readings(-2.0, minutes=60), kind="salinity", limits=(5.0,))
    assert math.isnan(trend.likely_min)


def test_nothing_is_told_of_nothing():
    assert trend_of(np.array([], dtype=np.int64), np.array([]), kind="salinity", limits=()) == STANDING
    assert limits_of(None, ()) == ()
