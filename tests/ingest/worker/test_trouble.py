"""A store that does not take a block: nothing is acknowledged, nothing is lost, and the worker says what is wrong."""

from __future__ import annotations

import sqlite3
import threading
from contextlib import closing

import pytest

from ingest.worker import worker as worker_room
from tests.harness.hatchery import START_US, Bench, payload, site_text
from tests.harness.process import wait_until

MINUTE_US = 60_000_000


@pytest.fixture
def bench(tmp_path, monkeypatch):
    monkeypatch.setattr(worker_room, "RETRY_S", (0.01, 0.02))
    with Bench(tmp_path, site_text(port=1), now_us=START_US + MINUTE_US) as bench:
        bench.send("quay/s0", payload(START_US, 31.0))
        yield bench


def hand_over(bench, *bodies) -> tuple[threading.Thread, list[bool]]:
    """Hand a block to the worker in a thread of its own, as the loop would."""
    result: list[bool] = []
    thread = threading.Thread(target=lambda: result.append(bench.send("quay/s0", *bodies)))
    thread.start()
    return thread, result


def test_a_locked_store_is_tried_again_until_it_opens(bench):
    bench.worker.store.connection.execute("PRAGMA busy_timeout=20")
    with closing(sqlite3.connect(bench.worker.store.path, isolation_level=None)) as other:
        other.execute("BEGIN IMMEDIATE")
        thread, result = hand_over(bench, payload(START_US + MINUTE_US, 30.0))
        wait_until(lambda: "locked" in bench.worker.last_problem, what="the worker to meet the lock")
        assert result == [], "a block that is not on disk must not be acknowledged"
        other.execute("ROLLBACK")
        thread.join(30)
    assert result == [True]
    assert bench.worker.last_problem == ""
    assert bench.queries.reading_count() == 2


def test_a_full_disk_is_waited_for(bench):
    connection = bench.worker.store.connection
    pages = connection.execute("PRAGMA page_count").fetchone()[0]
    connection.execute(f"PRAGMA max_page_count={pages}")
    bodies = [payload(START_US + MINUTE_US + index, 30.0) for index in range(2000)]
    thread, result = hand_over(bench, *bodies)
    wait_until(lambda: "full" in bench.worker.last_problem, what="the worker to meet the full disk")
    assert result == []
    assert bench.queries.reading_count() == 1, "no part of the block is there"
    with closing(sqlite3.connect(bench.worker.store.path)) as other:
        assert other.execute("PRAGMA integrity_check").fetchone()[0] == "ok"
    connection.execute("PRAGMA max_page_count=1000000")
    thread.join(60)
    assert result == [True]
    assert bench.queries.reading_count() == 2001
    assert bench.queries.counters()["readings"] == 2001


def test_told_to_stop_while_it_cannot_commit_it_stops_and_claims_nothing(bench):
    bench.worker.store.connection.execute("PRAGMA busy_timeout=20")
    with closing(sqlite3.connect(bench.worker.store.path, isolation_level=None)) as other:
        other.execute("BEGIN IMMEDIATE")
        before = bench.worker.state
        thread, result = hand_over(bench, payload(START_US + MINUTE_US, 30.0))
        wait_until(lambda: "locked" in bench.worker.last_problem, what="the worker to meet the lock")
        bench.stop.set()
        thread.join(30)
        other.execute("ROLLBACK")
    assert result == [False]
    assert bench.worker.state is before
    bench.stop.clear()
    # The broker delivers it again, and it is new.
    assert bench.send("quay/s0", payload(START_US + MINUTE_US, 30.0))
    assert bench.queries.counters().get("duplicates", 0) == 0
    assert bench.queries.reading_count() == 2


def test_rollups_wait_for_a_locked_store_and_count_nothing_twice(bench):
    bench.clock.advance(7200)
    bench.send("quay/s0", payload(START_US + 60 * MINUTE_US, 30.0))
    bench.worker.store.connection.execute("PRAGMA busy_timeout=20")
    with closing(sqlite3.connect(bench.worker.store.path, isolation_level=None)) as other:
        other.execute("BEGIN IMMEDIATE")
        assert bench.worker.roll_up() is False
        other.execute("ROLLBACK")
    bench.roll_up()
    assert (
        bench.worker.store.connection.execute("SELECT sum(n) FROM d1").fetchone()[0] == 1
    )  # the newest is behind the lag
    bench.clock.advance(600)
    bench.send("quay/s0", payload(START_US + 69 * MINUTE_US, 30.0))
    bench.roll_up()
    assert bench.worker.store.connection.execute("SELECT sum(n) FROM d1").fetchone()[0] == 2


def test_rolling_up_says_that_more_is_to_do_only_while_there_is(bench):
    for _ in range(3):
        bench.clock.advance(86400)
        bench.send("quay/s0", payload(bench.clock.now_us(), 31.0))
    steps = 0
    while bench.worker.roll_up():
        steps += 1
        assert steps < 20
    assert bench.worker.roll_up() is False


def test_a_sensor_that_is_ahead_does_not_keep_the_rollups_busy(bench):
    bench.send("quay/s0", payload(bench.clock.now_us() + 9 * MINUTE_US, 31.0))
    bench.roll_up()  # comes to an end
    assert bench.worker.roll_up() is False
