"""Each limit is judged on the believable sensor nearest to it, never on an average."""

from __future__ import annotations

import numpy as np
import pytest

from analysis.alarm.conditions import dry_limit, without_dry
from analysis.alarm.nearest import JudgedRows, judged_rows, nearest_believable, no_readings_yet, sensor_places
from analysis.errors import InvalidInputError
from tests.analysis.alarm.stories import SECOND

TOP_AND_BOTTOM = sensor_places(np.array([0, 0]), tank_count=1)


def rows_of(*readings: tuple[int, float, int, int]) -> JudgedRows:
    """Readings (sensor, value, quality, second) of one tank with a top and a bottom sensor, stale after 60 s."""
    _, rows = judged_rows(
        no_readings_yet(TOP_AND_BOTTOM),
        TOP_AND_BOTTOM,
        sensor=np.array([item[0] for item in readings]),
        value=np.array([item[1] for item in readings]),
        quality=np.array([item[2] for item in readings], dtype=np.uint8),
        judged_at_us=np.array([item[3] * SECOND for item in readings]),
        stale_after_us=np.full(2, 60 * SECOND),
    )
    return rows


def test_fresh_top_and_salt_bottom_are_both_judged() -> None:
    rows = rows_of((0, 25.0, 1, 100), (1, 37.0, 1, 101))
    assert rows.low_value.tolist() == [25.0, 25.0]
    assert rows.high_value.tolist() == [25.0, 37.0]
    assert rows.low_at_us.tolist() == [100 * SECOND] * 2


def test_suspect_counts_fail_does_not() -> None:
    assert rows_of((0, 25.0, 3, 100), (1, 31.0, 1, 101)).low_value.tolist() == [25.0, 25.0]
    assert rows_of((0, 25.0, 4, 100), (1, 31.0, 1, 101)).low_value.tolist()[1] == 31.0


def test_stale_value_is_not_shown_as_fresh() -> None:
    rows = rows_of((0, 25.0, 1, 100), (1, 31.0, 1, 160), (1, 31.0, 1, 161))
    assert rows.low_value.tolist() == [25.0, 25.0, 31.0]


def test_no_believable_sensor_leaves_nothing_to_judge() -> None:
    rows = rows_of((0, np.nan, 9, 100))
    assert np.isnan(rows.low_value[0])
    assert not rows.is_usable[0]


def test_time_of_the_tank_never_falls() -> None:
    rows = rows_of((0, 31.0, 1, 110), (1, 28.0, 1, 105), (0, 31.0, 1, 120))
    assert rows.at_us.tolist() == [110 * SECOND, 110 * SECOND, 120 * SECOND]
    assert rows.low_at_us.tolist() == [110 * SECOND, 105 * SECOND, 105 * SECOND]


def test_lowest_and_highest_with_their_count() -> None:
    picked = nearest_believable(
        np.array([[31.0, 25.0, 40.0], [1.0, 2.0, 3.0]]), is_believable=np.array([[1, 1, 1], [0, 0, 0]], dtype=bool)
    )
    assert (picked.low_value[0], picked.low_slot[0], picked.high_value[0], picked.high_slot[0]) == (25.0, 1, 40.0, 2)
    assert picked.believable_count.tolist() == [3, 0]
    assert np.isnan(picked.low_value[1])


def test_a_sensor_in_no_tank_is_refused() -> None:
    with pytest.raises(InvalidInputError):
        sensor_places(np.array([0, 3]), tank_count=2)


def test_a_dry_probe_says_nothing_about_the_water() -> None:
    limit = dry_limit([31.0, 4.0, 1.0])
    assert limit.tolist()[:2] == [0.5, 0.4]
    assert np.isnan(limit[2])
    rows = rows_of((0, 31.0, 1, 100), (0, 0.01, 1, 110), (0, 31.0, 1, 120))
    assert without_dry(rows, np.array([0.5])).is_usable.tolist() == [True, False, True]
    assert without_dry(rows, np.array([np.nan])) is rows
