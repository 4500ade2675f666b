"""An alarm's life by way of the worker: raised, told of, answered through the inbox, returned; and tanks nobody watches."""

from __future__ import annotations

import json

import pytest

from ingest.store.inbox import Command, Inbox
from tests.harness.hatchery import START_US, Bench, payload, site_text

SECOND_US = 1_000_000
LOW = "salinity_low"


@pytest.fixture
def bench(tmp_path):
    with Bench(tmp_path, site_text(port=1, sensors=2, interval_s=10.0), now_us=START_US) as bench:
        yield bench


def live(bench, salinity, seconds, *, sensor="s0", every_s=10):
    """Let a sensor read at its pace, at the present time."""
    for _ in range(0, seconds, every_s):
        bench.clock.advance(every_s)
        bench.read(sensor, bench.clock.now_us(), salinity)


def outbox(bench):
    rows = bench.worker.store.connection.execute(
        "SELECT outbox.body, event.kind FROM outbox JOIN event ON event.id = outbox.event_id ORDER BY outbox.id"
    ).fetchall()
    return [(json.loads(row["body"])["condition"], row["kind"]) for row in rows]


def kinds(bench, prefix="alarm."):
    return [event.kind for _, event in bench.queries.events(kind_prefix=prefix)]


def test_raised_acknowledged_returned(bench):
    live(bench, 31.0, 120)
    assert bench.alarm("t0", LOW) == "normal"
    live(bench, 27.0, 30)
    assert bench.alarm("t0", LOW) == "normal", "a moment is no alarm"
    live(bench, 27.0, 90)
    assert bench.alarm("t0", LOW) == "unacknowledged"
    assert kinds(bench) == ["alarm.raised"]
    assert outbox(bench) == [(LOW, "alarm.raised")]
    assert bench.act("alarm.acknowledge", "t0", LOW, expected="1", why="going").outcome == "applied"
    assert bench.alarm("t0", LOW) == "acknowledged"
    live(bench, 31.0, 180)
    assert bench.alarm("t0", LOW) == "normal"
    assert kinds(bench) == ["alarm.raised", "alarm.acknowledged", "alarm.returned"]
    who = {event.kind: event.actor for _, event in bench.queries.events(kind_prefix="alarm.")}
    assert who["alarm.acknowledged"] == "Duty"
    assert bench.alarm("t1", LOW) == "normal"


def test_late_data_neither_raise_nor_clear(bench):
    live(bench, 31.0, 60)
    before_us = START_US - 600 * SECOND_US
    bench.process([bench.received("quay/s0", payload(before_us + index * SECOND_US, 20.0)) for index in range(300)])
    live(bench, 31.0, 60)
    assert kinds(bench) == []
    live(bench, 27.0, 200)
    assert bench.alarm("t0", LOW) == "unacknowledged"
    bench.process([bench.received("quay/s0", payload(before_us + index * SECOND_US + 1, 31.0)) for index in range(300)])
    bench.tick()
    assert bench.alarm("t0", LOW) == "unacknowledged"
    assert kinds(bench) == ["alarm.raised"]


def test_an_alarm_survives_restarts_all_along(bench):
    for step in range(60):
        live(bench, 27.0 if 10 <= step < 35 else 31.0, 10)
        if step % 3 == 0:
            bench.restart()
        if step == 25:
            assert bench.act("alarm.acknowledge", "t0", LOW, expected="1").outcome == "applied"
            bench.restart()
    assert kinds(bench) == ["alarm.raised", "alarm.acknowledged", "alarm.returned"]


def test_a_dry_probe_is_no_fresh_water(bench):
    live(bench, 31.0, 60)
    live(bench, 0.05, 240)
    assert bench.alarm("t0", LOW) == "normal"
    assert bench.alarm("t0", "probe_dry_or_tank_empty") == "unacknowledged"
    live(bench, 31.0, 300)
    assert bench.alarm("t0", "probe_dry_or_tank_empty") in ("returned_unacknowledged", "latched_unacknowledged")


def test_a_tank_that_falls_silent_is_unwatched_after_its_stale_limit_and_seen_again(bench):
    live(bench, 31.0, 60)
    bench.clock.advance(50)
    bench.tick()
    assert bench.alarm("t0", "unwatched") == "normal"
    for _ in range(60):
        bench.clock.advance(10)
        bench.tick()
    assert bench.alarm("t0", "unwatched") == "unacknowledged"
    assert bench.alarm("t1", "unwatched") == "normal", "a sensor that has never spoken is not yet installed"
    assert ("unwatched", "alarm.raised") in outbox(bench)
    for _ in range(12):
        live(bench, 31.0, 10)
        bench.tick()
    assert bench.alarm("t0", "unwatched") in ("returned_unacknowledged", "latched_unacknowledged")


def test_a_worker_that_has_just_started_gives_sensors_their_time(bench):
    live(bench, 31.0, 60)
    bench.clock.advance(3600)
    bench.restart()
    for _ in range(5):
        bench.clock.advance(10)
        bench.tick()
    assert bench.alarm("t0", "unwatched") == "normal", "nobody was there to hear it"
    for _ in range(60):
        bench.clock.advance(10)
        bench.tick()
    assert bench.alarm("t0", "unwatched") == "unacknowledged"


def test_unreadable_readings_watch_nothing(bench):
    live(bench, 31.0, 60)
    for _ in range(60):
        bench.clock.advance(10)
        bench.send("quay/s0", b'{"c": -999, "t": 28, "at": %d}' % bench.clock.now_us())
        bench.tick()
    assert bench.alarm("t0", "unwatched") == "unacknowledged"


def test_each_limit_is_judged_on_the_sensor_nearest_to_it(tmp_path):
    """A fresh top and a salt bottom average to a calm number."""
    with Bench(tmp_path, site_text(port=1, sensors=2, sensors_a_tank=2, interval_s=10.0)) as bench:
        for _ in range(30):
            bench.clock.advance(10)
            bench.read("s0", bench.clock.now_us(), 27.0)
            bench.read("s1", bench.clock.now_us() + 1, 35.0)
        assert bench.alarm("t0", LOW) == "unacknowledged"
        assert bench.alarm("t0", "salinity_high") == "unacknowledged"
        for _ in range(30):
            bench.clock.advance(10)
            bench.read("s0", bench.clock.now_us(), 31.0)
            bench.read("s1", bench.clock.now_us() + 1, 35.0)
        assert bench.alarm("t0", LOW) == "returned_unacknowledged"
        assert bench.alarm("t0", "salinity_high") == "unacknowledged"


@pytest.mark.parametrize(
    ("changes", "outcome", "reason"),
    [
        ({"actor": "Nobody"}, "refused", "unknown_person"),
        ({"role": "viewer"}, "refused", "role_too_weak"),
        ({"role": "god"}, "refused", "role_too_weak"),
        ({"life_s": -1.0}, "expired", "too_late"),
        ({"expected": "7"}, "refused", "other_occurrence"),
        ({"expected": "²"}, "refused", "unusable_details"),
    ],
)
def test_an_order_that_is_not_carried_out_changes_nothing_and_is_answered(bench, changes, outcome, reason):
    live(bench, 27.0, 200)
    found = bench.act("alarm.acknowledge", "t0", LOW, **changes)
    assert (found.outcome, found.reason) == (outcome, reason)
    assert bench.alarm("t0", LOW) == "unacknowledged"
    assert kinds(bench) == ["alarm.raised"]


def test_an_unknown_kind_of_order_is_refused(bench):
    assert bench.act("alarm.destroy", "t0", LOW).reason == "unknown_kind"


def order(bench, identifier, **changes):
    given = {
        "kind": "alarm.acknowledge",
        "subject": "tank/t0",
        "actor": "Duty",
        "role": "manager",
        "submitted_at": bench.clock.now_us(),
        "expires_at": bench.clock.now_us() + 900 * SECOND_US,
        "body": {"condition": LOW},
    }
    return Command(id=identifier, **{**given, **changes})


def test_an_order_waits_while_no_worker_runs(bench):
    live(bench, 27.0, 200)
    bench.worker.close()
    Inbox(bench.store).submit(order(bench, "one"))
    assert bench.queries.outcome("one") is None
    assert not bench.queries.is_worker_running()
    bench.restart()
    bench.worker.take_commands(bench.stop)
    assert bench.queries.outcome("one").outcome == "applied"


def test_an_order_is_carried_out_once_whatever_is_forgotten(bench):
    live(bench, 27.0, 200)
    Inbox(bench.store).submit(order(bench, "one"))
    bench.worker.take_commands(bench.stop)
    bench.worker.store.connection.execute("UPDATE meta SET value = 0 WHERE name = 'inbox_seq'")
    bench.restart()
    bench.worker.take_commands(bench.stop)
    assert kinds(bench) == ["alarm.raised", "alarm.acknowledged"]


def test_a_new_inbox_in_place_of_a_lost_one_is_read_from_its_beginning(bench):
    for index in range(5):
        Inbox(bench.store).submit(order(bench, str(index)))
    bench.worker.take_commands(bench.stop)
    bench.worker.close()
    for path in bench.store.glob("inbox.db*"):
        path.unlink()
    Inbox(bench.store).submit(order(bench, "new"))
    bench.restart()
    bench.worker.take_commands(bench.stop)
    assert bench.queries.outcome("new") is not None


def test_an_order_that_makes_the_desk_fail_is_refused_and_the_next_is_heard(bench, monkeypatch):
    live(bench, 27.0, 200)
    right = type(bench.worker.plant).roles
    calls = []

    def fails_once(self):
        calls.append(self)
        if len(calls) == 1:
            raise ZeroDivisionError("a defect")
        return right.fget(self)

    monkeypatch.setattr(type(bench.worker.plant), "roles", property(fails_once))
    Inbox(bench.store).submit(order(bench, "one"))
    Inbox(bench.store).submit(order(bench, "two"))
    bench.worker.take_commands(bench.stop)
    assert bench.queries.outcome("one").outcome == "refused"
    assert bench.queries.outcome("two").outcome == "applied"
