"""Each reading is counted exactly once in every rollup, in whatever order readings, sweeps and deaths come."""

from __future__ import annotations

import math
import tempfile
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from ingest.store.rollups import LEVELS, SWEEP_SPAN_US
from tests.ingest.store.samples import DAY_US, HOUR_US, MINUTE_US, START_US, put, store_with

QUANTITIES = ("salinity", "temperature", "osmolality")
COLUMNS = (
    "sensor, bucket, n, salinity_n, salinity_sum, salinity_min, salinity_max, temperature_n, temperature_sum,"
    " temperature_min, temperature_max, osmolality_sum, osmolality_min, osmolality_max, suspect_n"
)


def recomputed(readings, bucket_us):
    """Return what a rollup has to hold, from the readings alone; plain Python, no SQL."""
    found = {}
    for at_us, sensor, salinity, temperature, quality in readings:
        found.setdefault((sensor, at_us - at_us % bucket_us), []).append((salinity, temperature, quality))
    table = []
    for (sensor, bucket), items in sorted(found.items()):
        row = [sensor, bucket, len(items)]
        believed = [item for item in items if item[2] < 4]
        salinity = [item[0] for item in believed if not math.isnan(item[0])]
        temperature = [item[1] for item in believed if not math.isnan(item[1])]
        for values in (salinity, temperature):
            row += [len(values), sum(values) if values else None, min(values, default=None), max(values, default=None)]
        osmolality = [30.0 * value for value in salinity]
        row += [sum(osmolality) if osmolality else None, min(osmolality, default=None), max(osmolality, default=None)]
        row.append(sum(1 for item in items if item[2] in (3, 4)))
        table.append(tuple(row))
    return table


def rolled(store, table):
    return [tuple(row) for row in store.connection.execute(f"SELECT {COLUMNS} FROM {table} ORDER BY sensor, bucket")]


def assert_counted_once(store, readings):
    for table, bucket_us in LEVELS.items():
        found, expected = rolled(store, table), recomputed(readings, bucket_us)
        assert [row[:4] for row in found] == [row[:4] for row in expected], table
        for one, other in zip(found, expected, strict=True):
            assert as_numbers(one) == pytest.approx(as_numbers(other), rel=1e-12, nan_ok=True), table


def as_numbers(row):
    return [math.nan if value is None else float(value) for value in row]


def put_readings(store, readings):
    times, sensors, salinity, temperature, quality = zip(*readings, strict=True)
    put(store, times, sensor=sensors, salinity=salinity, temperature=temperature, quality=quality)


VALUES = st.one_of(st.just(math.nan), st.floats(0, 60, allow_nan=False).map(lambda value: round(value, 3)))
READING = st.tuples(
    st.integers(0, 3 * 24 * 60).map(lambda minute: START_US + minute * MINUTE_US),
    st.integers(1, 2),
    VALUES,
    VALUES,
    st.sampled_from([1, 1, 1, 3, 4, 9]),
)
STEP = st.one_of(
    st.integers(1, 6).map(lambda count: ("put", count)),
    st.integers(-6, 80).map(lambda hours: ("sweep", START_US + hours * HOUR_US)),
    st.just(("die", 0)),
)


@settings(max_examples=40)
@given(
    readings=st.lists(READING, min_size=1, max_size=40, unique_by=lambda reading: reading[:2]),
    steps=st.lists(STEP, max_size=25),
)
def test_any_order_of_arrival_sweeps_and_restarts_counts_every_reading_once(readings, steps):
    with tempfile.TemporaryDirectory() as folder:
        store = store_with(Path(folder), sensors=("s0", "s1"))
        waiting, came = list(readings), []
        for act, argument in steps:
            if act == "put" and waiting:
                block, waiting = waiting[:argument], waiting[argument:]
                put_readings(store, block)
                came += block
            elif act == "sweep":
                store.sweep_rollups(until_us=argument)
            elif act == "die":
                store.close()
                store = store_with(Path(folder), sensors=("s0", "s1"))
        if waiting:
            put_readings(store, waiting)
        end = START_US + 4 * DAY_US
        while store.rolled_until is None or store.rolled_until <= max(reading[0] for reading in readings):
            store.sweep_rollups(until_us=end)
        assert_counted_once(store, readings)
        store.close()


@pytest.fixture
def store(tmp_path):
    store = store_with(tmp_path, sensors=("s0", "s1"))
    yield store
    store.close()


def test_a_row_that_comes_behind_a_mark_that_stood_still_is_counted_once(store):
    """Sweeping where nothing new is must not move the mark in memory away from the one in the file."""
    put(store, [START_US])
    store.sweep_rollups(until_us=START_US + HOUR_US)
    store.sweep_rollups(until_us=START_US + 3 * HOUR_US)
    put(store, [START_US + 2 * HOUR_US])
    store.sweep_rollups(until_us=START_US + 4 * HOUR_US)
    assert [row[2] for row in rolled(store, "d1")] == [2]


def test_a_first_sweep_that_has_nothing_to_take_yet_counts_nothing_twice(store):
    put(store, [START_US + 2 * HOUR_US])
    store.sweep_rollups(until_us=START_US)
    put(store, [START_US + HOUR_US])
    store.sweep_rollups(until_us=START_US + 4 * HOUR_US)
    assert [row[2] for row in rolled(store, "d1")] == [2]


def test_a_clock_that_steps_back_does_not_take_the_mark_back(store):
    put(store, [START_US, START_US + 2 * HOUR_US])
    assert store.sweep_rollups(until_us=START_US + 3 * HOUR_US) == START_US + 3 * HOUR_US
    assert store.sweep_rollups(until_us=START_US - DAY_US) == START_US + 3 * HOUR_US
    assert store.rolled_until == START_US + 3 * HOUR_US
    put(store, [START_US + HOUR_US])
    assert [row[2] for row in rolled(store, "d1")] == [3]


def test_a_sweep_is_bounded_and_skips_empty_stretches(store):
    put(store, [START_US, START_US + SWEEP_SPAN_US, START_US + 300 * DAY_US])
    end = START_US + 301 * DAY_US
    marks = [store.sweep_rollups(until_us=end) for _ in range(3)]
    assert marks == [START_US + SWEEP_SPAN_US, START_US + 2 * SWEEP_SPAN_US, START_US + 300 * DAY_US + SWEEP_SPAN_US]


def test_an_empty_store_has_nothing_to_roll_up(store):
    assert store.sweep_rollups(until_us=START_US) is None
    assert store.rolled_until is None


def test_failed_readings_stay_out_of_the_sums_and_are_counted(store):
    put(store, [START_US, START_US + 1, START_US + 2], salinity=[30.0, 0.01, 32.0], quality=[1, 4, 3])
    store.sweep_rollups(until_us=START_US + HOUR_US)
    (row,) = rolled(store, "q15")
    assert row[2:7] == (3, 2, 62.0, 30.0, 32.0)
    assert row[-1] == 2


def test_water_without_a_practical_salinity_is_rolled_up_in_g_kg(store):
    put(store, [START_US], salinity=np.nan, absolute=12.5)
    store.sweep_rollups(until_us=START_US + HOUR_US)
    assert rolled(store, "q15")[0][3:7] == (1, 12.5, 12.5, 12.5)
