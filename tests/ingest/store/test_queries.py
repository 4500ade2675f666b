from __future__ import annotations

import numpy as np
import pytest

from ingest.store import registry, rollups
from ingest.store.block import BlockCommit, StressRow
from ingest.store.errors import MissingStoreError
from ingest.store.queries import MOST_POINTS, Queries
from tests.ingest.store.samples import DAY_US, HOUR_US, MINUTE_US, START_US, put, store_with

QUARTER_US = 15 * MINUTE_US


@pytest.fixture
def store(tmp_path):
    store = store_with(tmp_path, sensors=("s0", "s1"))
    yield store
    store.close()


@pytest.fixture
def queries(store):
    return Queries(store.folder)


def roll_up(store, until_us=START_US + 4000 * DAY_US):
    before = object()
    while before != store.rolled_until:
        before = store.rolled_until
        store.sweep_rollups(until_us=until_us)


def every(step_us, count, *, start=START_US):
    return [start + index * step_us for index in range(count)]


@pytest.mark.parametrize(
    ("span_us", "resolution_us"),
    [
        (HOUR_US, 0),
        (26 * HOUR_US, 0),
        (27 * HOUR_US, QUARTER_US),
        (62 * DAY_US, QUARTER_US),
        (63 * DAY_US, HOUR_US),
        (370 * DAY_US, HOUR_US),
        (371 * DAY_US, DAY_US),
    ],
)
def test_a_chart_is_drawn_from_the_table_that_fits_its_span(store, queries, span_us, resolution_us):
    put(store, every(HOUR_US, 48))
    roll_up(store)
    history = queries.history("s0", from_us=START_US, to_us=START_US + span_us)
    assert history.resolution_us == resolution_us
    lasts_us = min(span_us, 2 * DAY_US)
    assert history.time_us.size == -(-lasts_us // max(resolution_us, HOUR_US))
    assert set(np.unique(history.salinity)) == {31.0}


@pytest.mark.parametrize("days", [1.08, 60, 365, 3000])
def test_no_chart_has_more_points_than_a_screen_can_use(store, queries, days, monkeypatch):
    """A reading a second over a day, a quarter hour over two months, an hour over a year, days for ever."""
    monkeypatch.setattr(rollups, "SWEEP_SPAN_US", 4000 * DAY_US)  # one sweep instead of thousands
    step_us = {1.08: 1_000_000, 60: QUARTER_US, 365: HOUR_US, 3000: DAY_US}[days]
    put(store, every(step_us, int(days * DAY_US // step_us)))
    roll_up(store)
    history = queries.history("s0", from_us=START_US, to_us=START_US + round(days * DAY_US))
    assert 0.3 * MOST_POINTS <= history.time_us.size <= MOST_POINTS
    assert np.all(np.diff(history.time_us) > 0)


def test_a_thinned_day_keeps_its_extremes_and_leaves_failed_readings_out(store, queries):
    count = 3 * MOST_POINTS
    salinity = np.full(count, 31.0)
    salinity[[100, 20_000, 500]] = [20.0, 40.0, 1.0]
    quality = np.ones(count, dtype=int)
    quality[500] = 4
    put(store, every(3_000_000, count), salinity=salinity, quality=quality)
    history = queries.history("s0", from_us=START_US, to_us=START_US + 26 * HOUR_US)
    assert history.resolution_us > 0
    assert (history.salinity_min.min(), history.salinity_max.max()) == (20.0, 40.0)
    assert history.salinity.max() < 40.0


def test_gaps_stay_gaps_at_every_resolution(store, queries):
    times = every(HOUR_US, 24) + every(HOUR_US, 24, start=START_US + 30 * DAY_US)
    put(store, times, salinity=[5.0] * 24 + [np.nan] * 24)
    roll_up(store)
    for span in (5, 40, 300, 800):
        history = queries.history("s0", from_us=START_US, to_us=START_US + span * DAY_US)
        known = history.salinity[~np.isnan(history.salinity)]
        assert set(known) == {5.0}, span
        in_gap = (history.time_us >= START_US + DAY_US) & (history.time_us < START_US + 30 * DAY_US)
        assert not in_gap.any(), span
        if span > 30:
            after = history.time_us >= START_US + 30 * DAY_US
            assert after.any()
            assert np.isnan(history.salinity[after]).all(), "readings without a value are no zeros"
            assert not np.isnan(history.temperature_degC[after]).any()


def test_means_and_extremes_stand_beside_each_other(store, queries):
    put(store, every(MINUTE_US, 30), salinity=[30.0, 32.0] * 15, temperature=[20.0, 24.0] * 15)
    roll_up(store)
    history = queries.history("s0", from_us=START_US, to_us=START_US + 2 * DAY_US)
    assert history.time_us.tolist() == [START_US, START_US + QUARTER_US]
    assert history.salinity == pytest.approx([(8 * 30 + 7 * 32) / 15, (7 * 30 + 8 * 32) / 15])
    assert (history.salinity_min.tolist(), history.salinity_max.tolist()) == ([30.0, 30.0], [32.0, 32.0])
    assert (history.temperature_min.tolist(), history.temperature_max.tolist()) == ([20.0, 20.0], [24.0, 24.0])
    assert history.osmolality_mOsm_kg == pytest.approx(30.0 * history.salinity)


def test_a_bucket_mostly_of_doubted_readings_is_marked(store, queries):
    put(store, every(MINUTE_US, 30), quality=[3] * 10 + [1] * 5 + [3] * 7 + [1] * 8)
    roll_up(store)
    history = queries.history("s0", from_us=START_US, to_us=START_US + 2 * DAY_US)
    assert history.quality.tolist() == [3, 1]


def test_a_sensor_that_nobody_knows_has_an_empty_history(store, queries):
    put(store, [START_US])
    history = queries.history("nobody", from_us=START_US, to_us=START_US + HOUR_US)
    assert history.time_us.size == history.salinity.size == 0


@pytest.mark.parametrize("mark_min", [None, 0, 7, 15, 20, 37, 60])
def test_day_lines_are_the_same_wherever_the_rollups_stand(store, queries, mark_min):
    """The open bucket, half rolled up and half not, is neither halved nor counted twice."""
    put(store, every(MINUTE_US, 50), salinity=list(range(50)))
    put(store, every(MINUTE_US, 50), sensor=2, salinity=[np.nan] * 20 + [7.0] * 30)
    if mark_min is not None:
        store.sweep_rollups(until_us=START_US + mark_min * MINUTE_US)
    put(store, [START_US + 30], salinity=0.0)  # comes late, behind the mark
    lines = queries.day_lines(from_us=START_US, to_us=START_US + DAY_US)
    times, salinity = lines["s0"]
    assert times.tolist() == every(QUARTER_US, 4)
    assert salinity == pytest.approx([sum(range(15)) / 16, sum(range(15, 30)) / 15, sum(range(30, 45)) / 15, 47.0])
    assert np.isnan(lines["s1"][1][0])
    assert lines["s1"][1][1:].tolist() == [7.0, 7.0, 7.0]


def test_stress_over_time_keeps_the_worst_of_each_step(store, queries):
    tank = registry.tank_number(store.connection, "t0")

    def row(index, stress):
        return StressRow(START_US + index * MINUTE_US, tank, "b0", stress, *([None] * 9))

    store.commit(BlockCommit(stress=[row(index, 10.0 + index % 10) for index in range(1000)] + [row(1000, None)]))
    history = queries.stress_history("t0", from_us=START_US, to_us=START_US + 1001 * MINUTE_US, most=100)
    assert 95 <= history.stress.size <= 102
    assert np.all(history.stress[1:-1] == 19.0)
    assert queries.stress_history("t9", from_us=0, to_us=2**62).stress.size == 0


def test_a_store_that_is_not_there_or_only_being_made_is_missing(tmp_path):
    queries = Queries(tmp_path)
    with pytest.raises(MissingStoreError, match="start the worker once"):
        queries.latest()
    (tmp_path / "store.db").touch()
    with pytest.raises(MissingStoreError, match="start the worker once"):
        queries.history("s0", from_us=0, to_us=1)


def test_every_question_can_be_asked_of_a_fresh_store(store, queries):
    assert queries.latest() == {}
    assert queries.day_lines(from_us=0, to_us=2**62) == {}
    assert queries.latest_stress(since_us=0) == {}
    assert queries.alarms() == []
    assert queries.events() == []
    assert queries.cohorts() == []
    assert queries.refused() == []
    assert queries.outcome("x") is None
    assert queries.reading_count() == 0
    assert queries.counters() == {}
    assert queries.meta() == {}
    assert queries.site_text() == (0, "")
    assert queries.is_worker_running()
