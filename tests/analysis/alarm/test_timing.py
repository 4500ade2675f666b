"""At which time a reading is judged: a wrong clock is not silent, a late burst is not the present."""

from __future__ import annotations

import json
from itertools import pairwise

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from analysis.alarm.nearest import judged_rows, no_readings_yet, sensor_places
from analysis.alarm.timing import (
    JudgedTimes,
    SensorTimes,
    is_clock_doubted_by_tank,
    is_unwatched,
    judged_times,
    no_times_yet,
    seconds_unseen,
    sensor_times_from_dict,
    sensor_times_to_dict,
    stale_after_s,
)
from tests.analysis.alarm.stories import HOUR, SECOND

INTERVAL = np.full(3, 10 * SECOND)
STALE = np.full(3, 60 * SECOND)
START = 1000 * HOUR


def judge(rows: list[tuple[int, int, int]], times: SensorTimes | None = None) -> tuple[SensorTimes, JudgedTimes]:
    """Rows (sensor, measured second, received second) counted from the start."""
    return judged_times(
        no_times_yet(3) if times is None else times,
        sensor=np.array([row[0] for row in rows], dtype=np.int64),
        measured_at_us=START + np.array([row[1] for row in rows], dtype=np.int64) * SECOND,
        received_at_us=START + np.array([row[2] for row in rows], dtype=np.int64) * SECOND,
        interval_us=INTERVAL,
        stale_after_us=STALE,
    )


def seconds(judged: JudgedTimes) -> list[int]:
    return ((judged.judged_at_us - START) // SECOND).tolist()


def test_ordinary_readings_are_judged_at_their_own_time() -> None:
    _, judged = judge([(0, 0, 1), (0, 10, 12), (0, 20, 40)])
    assert seconds(judged) == [0, 10, 20]
    assert judged.is_judged.all()
    assert not judged.is_clock_doubted.any()


def test_clock_an_hour_behind_is_judged_at_the_time_received_from_the_second_reading_on() -> None:
    _, judged = judge([(0, at - 3600, at) for at in range(0, 60, 10)])
    assert judged.is_judged.tolist() == [False] + [True] * 5
    assert judged.is_clock_doubted.tolist() == [False] + [True] * 5
    assert seconds(judged)[1:] == [10, 20, 30, 40, 50]


def test_clock_an_hour_ahead_is_judged_at_once_and_its_setting_right_silences_nothing() -> None:
    rows = [(0, at + 3600, at) for at in range(0, 40, 10)] + [(0, at, at) for at in range(40, 80, 10)]
    _, judged = judge(rows)
    assert judged.is_judged.all()
    assert judged.is_clock_doubted.tolist() == [True] * 4 + [False] * 4
    assert seconds(judged) == list(range(0, 80, 10))


def test_clock_that_falls_back_in_the_middle_loses_one_reading() -> None:
    rows = [(0, at, at) for at in range(0, 40, 10)] + [(0, at - 3600, at) for at in range(40, 80, 10)]
    _, judged = judge(rows)
    assert judged.is_judged.tolist() == [True] * 4 + [False] + [True] * 3


def test_clock_that_stands_still_is_doubted() -> None:
    _, judged = judge([(0, 0, at) for at in range(0, 100, 10)])
    assert judged.is_judged.tolist() == [True, False, False, True, True, True, True, True, True, True]
    assert judged.is_clock_doubted[3:].all()


def test_of_a_delayed_burst_only_what_is_younger_than_the_stale_limit_is_the_present() -> None:
    burst = [(0, at, 600) for at in range(300, 600, 10)]
    _, judged = judge([(0, 0, 0), *burst])
    assert judged.is_judged.tolist() == [True] + [at >= 540 for at in range(300, 600, 10)]
    assert not judged.is_clock_doubted.any()


def test_a_burst_of_old_readings_only_leaves_nothing_to_judge() -> None:
    _, judged = judge([(0, at, 900) for at in range(300, 600, 10)])
    assert not judged.is_judged.any()
    assert not judged.is_clock_doubted.any()


def test_a_queue_running_empty_at_an_easy_pace_is_no_wrong_clock() -> None:
    _, judged = judge([(0, 10 * row, 3600 + 6 * row) for row in range(100)])
    assert not judged.is_clock_doubted.any()
    assert not judged.is_judged.any()


def test_late_readings_are_stored_only() -> None:
    _, judged = judge([(0, 0, 0), (0, 10, 10), (0, 5, 12), (0, 10, 13), (0, 20, 20)])
    assert judged.is_late.tolist() == [False, False, True, True, False]
    assert judged.is_judged.tolist() == [True, True, False, False, True]


readings = st.tuples(
    st.integers(0, 2),
    st.sampled_from([0, 0, 0, 5, 25, 50, 100, 3600, -15, -3600]),
    st.sampled_from([0, 1, 4, 10, 10, 30]),
)


@given(st.lists(readings, min_size=1, max_size=50), st.lists(st.integers(0, 50), max_size=5))
def test_the_result_does_not_depend_on_how_the_stream_is_cut(given_rows, cuts) -> None:
    rows, now = [], 0
    for sensor, lag, wait in given_rows:
        now += wait
        rows.append((sensor, now - lag, now))
    whole_times, whole = judge(rows)
    times, parts = no_times_yet(3), []
    for start, stop in pairwise([0, *sorted({cut % len(rows) for cut in cuts}), len(rows)]):
        times, part = judge(rows[start:stop], times)
        parts.append(part)
    for index, name in enumerate(JudgedTimes._fields):
        assert np.concatenate([part[index] for part in parts]).tolist() == whole[index].tolist(), name
    assert sensor_times_to_dict(times, ["a", "b", "c"]) == sensor_times_to_dict(whole_times, ["a", "b", "c"])


@given(st.lists(readings, min_size=1, max_size=50))
def test_what_is_judged_moves_forward_and_is_never_stale(given_rows) -> None:
    rows, now = [], 0
    for sensor, lag, wait in given_rows:
        now += wait
        rows.append((sensor, now - lag, now))
    _, judged = judge(rows)
    for sensor in range(3):
        mine = [row for row in range(len(rows)) if rows[row][0] == sensor and judged.is_judged[row]]
        times = judged.judged_at_us[mine]
        assert (np.diff(times) > 0).all()
        assert (START + np.array([rows[row][2] for row in mine]) * SECOND - times <= STALE[0]).all()


def test_times_survive_the_store_by_the_ids_of_their_sensors() -> None:
    times, _ = judge([(0, 0, 0), (2, 3600, 0)])
    body = json.loads(json.dumps(sensor_times_to_dict(times, ["a", "b", "c"])))
    restored = sensor_times_from_dict(body, ["c", "a"])
    assert restored.is_clock_doubted.tolist() == [True, False]
    assert restored.received_at_us.tolist() == [START, START]


def test_tank_is_unwatched_when_its_last_believable_sensor_is_lost() -> None:
    places = sensor_places(np.array([0, 0, 1]), tank_count=3)
    latest, _ = judged_rows(
        no_readings_yet(places),
        places,
        sensor=np.array([0, 1, 2]),
        value=np.array([31.0, np.nan, 31.0]),
        quality=np.array([1, 1, 4], dtype=np.uint8),
        judged_at_us=np.full(3, START),
        stale_after_us=STALE,
    )

    def unwatched(now_s: int, hand_s: int = -1, *, is_kept: bool = True) -> list[bool]:
        return is_unwatched(
            latest,
            places,
            stale_after_us=STALE,
            hand_reading_until_us=np.array([START + hand_s * SECOND if hand_s >= 0 else 0] * 3),
            is_kept=np.full(3, is_kept),
            now_us=START + now_s * SECOND,
        ).tolist()

    assert unwatched(60) == [False, True, True]
    assert unwatched(61) == [True, True, True]
    assert unwatched(61, hand_s=100) == [False, False, False]
    assert unwatched(101, hand_s=100) == [True, True, True]
    assert unwatched(61, is_kept=False) == [False, False, False]
    assert seconds_unseen(latest, now_us=START + 90 * SECOND, since_us=START - 10 * SECOND).tolist() == [90, 100, 100]


def test_stale_limit_is_three_intervals_and_at_least_a_minute() -> None:
    assert stale_after_s(10) == 60
    assert stale_after_s(600) == 1800


def test_a_doubted_clock_is_a_matter_of_its_tank() -> None:
    times, _ = judge([(0, 0, 0), (2, 3600, 0)])
    places = sensor_places(np.array([0, 0, 1]), tank_count=2)
    assert is_clock_doubted_by_tank(times, places).tolist() == [False, True]
