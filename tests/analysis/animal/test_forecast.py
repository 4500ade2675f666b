"""Time left to a limit."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from analysis.animal.forecast import current_slope, last_change_of_slope, minutes_to_limits, time_left
from analysis.errors import InvalidInputError

MINUTE_US = 60_000_000


def record(minutes, values):
    return (np.asarray(minutes) * MINUTE_US).astype(np.int64) + 10**15, np.asarray(values, dtype=float)


def fall_after_calm(calm_min=50, per_min=-20.0, fall_min=8, every_s=10, noise=0.3, seed=1):
    minutes = np.arange(0, calm_min + fall_min + 1e-9, every_s / 60)
    values = 800.0 + np.minimum(0.0, per_min * (minutes - calm_min)) * (minutes > calm_min)
    return record(minutes, values + np.random.default_rng(seed).normal(0, noise, minutes.size))


def test_an_hour_of_calm_does_not_hide_a_fall():
    # The case of the design: an hour's robust slope alone says 100 minutes where 8 are left.
    times, values = fall_after_calm()
    slope = current_slope(times, values, resolution=0.3)
    (left,) = time_left(slope, value=values[-1], limits={"tolerable low": values[-1] - 160.0})
    assert left.minutes == pytest.approx(8.0, rel=0.1)
    assert left.minutes <= left.likely_min


def test_the_change_of_slope_is_found_where_it_is():
    times, values = fall_after_calm()
    start = last_change_of_slope(times, values, resolution=0.3)
    assert abs((times[start] - times[0]) / MINUTE_US - 50.0) < 1.0


def test_calm_water_has_no_time_left_to_tell():
    times, values = fall_after_calm(per_min=0.0)
    slope = current_slope(times, values, resolution=0.3)
    (left,) = time_left(slope, value=values[-1], limits={"tolerable low": 500.0})
    assert slope is None
    assert np.isnan(left.minutes)


def test_moving_away_beyond_and_unknown():
    times, values = fall_after_calm()
    slope = current_slope(times, values, resolution=0.3)
    found = {
        left.name: left.minutes
        for left in time_left(
            slope,
            value=values[-1],
            limits={"high": 1000.0, "first low": values[-1] + 1, "second low": np.nan, "none low": -np.inf},
        )
    }
    assert found["high"] == np.inf
    assert found["first low"] == 0.0
    assert np.isnan(found["second low"])
    assert np.isnan(found["none low"])


def test_few_readings_say_nothing():
    times, values = record([0, 1, 2, 3], [10, 9, 8, 7])
    assert current_slope(times, values, resolution=0.01) is None
    assert current_slope(times[:0], values[:0], resolution=0.01) is None


def test_the_resolution_must_be_positive():
    with pytest.raises(InvalidInputError, match="resolution"):
        current_slope(*record([0, 1], [1, 1]), resolution=0.0)


@settings(max_examples=30, deadline=None, derandomize=True)
@given(st.floats(-30.0, -1.0), st.integers(0, 10_000))
def test_the_bound_is_cautious_in_most_records(per_min, seed):
    times, values = fall_after_calm(per_min=per_min, noise=0.5, fall_min=10, seed=seed)
    slope = current_slope(times, values, resolution=0.5)
    assert slope is not None
    (left,) = time_left(slope, value=800.0 + per_min * 10, limits={"low": 800.0 + per_min * 30})
    assert left.minutes < 20.0 * 1.1
    assert left.minutes > 20.0 * 0.6


def test_all_rows_at_once_agree_with_one_at_a_time_on_a_steady_fall():
    random = np.random.default_rng(4)
    minutes = np.arange(0, 240, 0.5)
    times, values = record(minutes, 900.0 - 2.0 * minutes + random.normal(0, 0.2, minutes.size))
    low = np.full(values.size, 300.0)
    many = minutes_to_limits(times, values, low=low, high=np.full(values.size, np.inf), resolution=0.2)
    for row in (60, 200, 479):
        slope = current_slope(times[: row + 1], values[: row + 1], resolution=0.2)
        (left,) = time_left(slope, value=values[row], limits={"low": 300.0})
        assert many[row] == pytest.approx(left.minutes, rel=0.05)
    assert np.isnan(many[0])


def test_all_rows_at_once_survive_holes_and_long_records():
    times, values = record(np.arange(9000), np.where(np.arange(9000) % 7 == 0, np.nan, 700.0 - 0.05 * np.arange(9000)))
    many = minutes_to_limits(times, values, low=np.full(9000, 200.0), high=np.full(9000, 2000.0), resolution=0.01)
    assert many[8000] == pytest.approx((values[8000] - 200.0) / 0.05, rel=0.05)
