"""Leaving the optimal band is a notice, with a deadband and without guesses."""

from __future__ import annotations

import numpy as np

from analysis.alarm.notices import is_outside_optimal

BAND = {"optimal_low": 20.0, "optimal_high": 30.0, "deadband": 0.5}


def test_outside_from_the_limit_on_and_inside_only_by_the_deadband() -> None:
    was = np.array([False, False, True, True])
    value = np.array([20.1, 19.9, 20.4, 20.6])
    assert is_outside_optimal(was, low_value=value, high_value=value, **BAND).tolist() == [False, True, True, False]


def test_each_side_is_judged_on_its_own_sensor() -> None:
    assert is_outside_optimal(False, low_value=25.0, high_value=30.1, **BAND)


def test_nothing_is_said_where_nobody_can_see_or_no_band_is_known() -> None:
    unseen = is_outside_optimal([True, False], low_value=np.nan, high_value=np.nan, **BAND)
    assert unseen.tolist() == [True, False]
    assert not is_outside_optimal(
        False, low_value=1.0, high_value=1.0, optimal_low=np.nan, optimal_high=np.nan, deadband=0.5
    )
