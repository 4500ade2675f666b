"""Corrected rows and the jobs that make them, on a bare store."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from ingest.store import corrected
from ingest.store.corrected import JobRow
from ingest.store.queries import Queries
from ingest.store.store import Store
from tests.ingest.store.samples import MINUTE_US, START_US, put, rows, store_with

TIMES = [START_US + minute * MINUTE_US for minute in range(5)]


@pytest.fixture
def store(tmp_path: Path) -> Iterator[Store]:
    held = store_with(tmp_path, sensors=("s0", "s1"))
    put(held, TIMES, sensor=1, salinity=31.0)
    put(held, TIMES, sensor=2, salinity=20.0)
    yield held
    held.close()


def better(store: Store, times: list[int], *, salinity: float, derivation: int, now_us: int) -> None:
    made = rows(times, sensor=1, salinity=salinity)
    made = replace(made, derivation=np.full(len(times), derivation))
    with store.transaction() as connection:
        corrected.insert(connection, made, reason="calibration", now_us=now_us)


def history(store: Store, which: str = "best") -> list[float]:
    found = Queries(store.folder).history("s0", from_us=TIMES[0], to_us=TIMES[-1] + 1, set=which)  # type: ignore[arg-type]
    return found.salinity.tolist()


def test_best_is_the_newest_corrected_row_where_there_is_one(store):
    better(store, TIMES[1:3], salinity=32.0, derivation=2, now_us=10)
    assert history(store) == [31.0, 32.0, 32.0, 31.0, 31.0]
    better(store, TIMES[2:4], salinity=33.0, derivation=3, now_us=20)
    assert history(store) == [31.0, 32.0, 33.0, 33.0, 31.0]
    assert history(store, "seen") == [31.0] * 5
    assert Queries(store.folder).history("s1", from_us=TIMES[0], to_us=TIMES[-1]).salinity.tolist() == [20.0] * 4


def test_a_value_that_was_corrected_away_is_not_filled_from_what_was_seen(store):
    better(store, TIMES[1:2], salinity=np.nan, derivation=2, now_us=10)
    assert np.isnan(history(store)[1])


def test_newest_is_what_was_recorded_last_whatever_its_number(store):
    better(store, TIMES[:1], salinity=33.0, derivation=7, now_us=10)
    better(store, TIMES[:1], salinity=34.0, derivation=2, now_us=20)
    assert history(store)[0] == 34.0


def test_the_same_row_again_changes_nothing(store):
    better(store, TIMES, salinity=32.0, derivation=2, now_us=10)
    before = store.connection.execute("SELECT * FROM corrected").fetchall()
    better(store, TIMES, salinity=99.0, derivation=2, now_us=20)
    assert store.connection.execute("SELECT * FROM corrected").fetchall() == before


def test_readings_come_back_as_they_were_stored(store):
    found = corrected.readings(store.connection, sensor=1, from_us=TIMES[1], to_us=TIMES[4], most=2)
    assert found.measured_at.tolist() == TIMES[1:3]
    assert found.practical_salinity.tolist() == [31.0, 31.0]
    assert np.isnan(found.pressure).all()
    assert (found.flags.dtype, found.quality.dtype, found.tests.dtype) == (np.uint32, np.uint8, np.int64)
    assert len(corrected.readings(store.connection, sensor=9, from_us=TIMES[0], to_us=TIMES[4], most=2)) == 0


def test_jobs_are_done_in_the_order_in_which_they_came(store):
    with store.transaction() as connection:
        corrected.add_jobs(
            connection,
            [JobRow(1, TIMES[0], TIMES[3], "calibration"), JobRow(2, TIMES[0], TIMES[1], "cleaning")],
            event_id=None,
            now_us=5,
        )
    first = corrected.next_job(store.connection)
    assert first is not None
    assert (first.slug, first.next_us) == ("s0", TIMES[0])
    with store.transaction() as connection:
        corrected.advance(connection, first, next_us=TIMES[2], rows=4, finished_at=None)
    again = corrected.next_job(store.connection)
    assert again is not None
    assert (again.id, again.next_us, again.row_count) == (first.id, TIMES[2], 4)
    with store.transaction() as connection:
        corrected.advance(connection, again, next_us=TIMES[3], rows=2, finished_at=9)
    second = corrected.next_job(store.connection)
    assert second is not None
    assert second.slug == "s1"
    states = Queries(store.folder).rederivations()
    assert [(state.sensor, state.row_count, state.finished_at) for state in states] == [("s1", 0, None), ("s0", 6, 9)]


@pytest.mark.parametrize(("most", "minutes"), [(1, 1), (2, 1), (4, 2), (9, 4), (10, 5), (100, 5)])
def test_a_slice_looks_at_so_many_rows_of_all_sensors_and_always_moves(store, most, minutes):
    with store.transaction() as connection:
        corrected.add_jobs(connection, [JobRow(1, TIMES[0], TIMES[-1] + MINUTE_US, "x")], event_id=None, now_us=5)
    job = corrected.next_job(store.connection)
    assert job is not None
    end_us = corrected.slice_end(store.connection, job, most=most)
    assert job.from_us < end_us <= job.to_us
    assert end_us <= TIMES[0] + minutes * MINUTE_US


def test_the_nearest_reading_lies_before_or_after(store):
    def nearest(at_us: int, within_us: int = MINUTE_US) -> int | None:
        row = corrected.nearest(store.connection, sensor=1, at_us=at_us, within_us=within_us)
        return None if row is None else row[0]

    assert nearest(TIMES[2] + 1) == TIMES[2]
    assert nearest(TIMES[2] - 1) == TIMES[2]
    assert nearest(TIMES[-1] + MINUTE_US) == TIMES[-1]
    assert nearest(TIMES[-1] + MINUTE_US + 1) is None
