"""The door to the stores."""

from __future__ import annotations

import math
from dataclasses import replace
from pathlib import Path

import pytest

from dashboard.browser import orders
from dashboard.browser.access import Access, midnight_us
from dashboard.browser.sighting import shown_sensor
from dashboard.browser.sights import Band, SensorSight
from dashboard.browser.visit import Order
from ingest.clock import FakeClock
from ingest.store.errors import StoreBusyError
from ingest.store.inbox import Inbox, InboxTaker
from ingest.words import times
from tests.dashboard.browser.conftest import NOW_US
from tests.dashboard.browser.scene import Scene, make_scene
from tests.harness.hatchery import START_US, Bench
from tests.ingest import plan_work


def sensor(name: str = "a", **changes) -> SensorSight:
    plain = SensorSight(name, name, "l3", None, 60, 180, NOW_US - 1_000_000, NOW_US, salinity=31.0, quality=1)
    return replace(plain, **changes)


def test_a_snapshot_holds_the_whole_site(access: Access, scene: Scene):
    snapshot = access.snapshot()
    assert snapshot.is_watching
    assert [tank.id for tank in snapshot.tanks] == [water.id for water in scene.waters]
    l3 = snapshot.tank("l3")
    assert l3.hall_name == "Larval hall"
    assert l3.shown.salinity == pytest.approx(27.5, abs=0.3)
    assert l3.salinity.limits == (29.0, 33.0)
    assert l3.priority == "urgent"
    assert l3.stress.stress == pytest.approx(55)
    assert l3.animals.name == "Pacific whiteleg shrimp, PL10"
    assert len(l3.day.times_s) > 90


def test_the_worst_alarm_stands_first(access: Access):
    assert [(a.subject, a.priority) for a in access.snapshot().alarms] == [
        ("tank/o1", "urgent"),
        ("tank/l3", "urgent"),
        ("tank/n1", "soon"),
    ]


def test_a_silent_tank_is_unwatched_and_its_last_value_is_no_reading_of_now(access: Access):
    o1 = access.snapshot().tank("o1")
    assert o1.is_unwatched
    assert o1.needs_somebody
    assert not o1.shown.is_fresh(NOW_US)


def test_the_blood_value_is_that_of_the_chain_else_modelled_else_unknown(access: Access):
    snapshot = access.snapshot()
    assert snapshot.tank("l3").animals.blood_mOsm_kg == pytest.approx(758)
    n2 = snapshot.tank("n2").animals
    assert 300 < n2.blood_mOsm_kg < 400
    assert snapshot.tank("n3").animals.blood_mOsm_kg is None
    assert snapshot.tank("r1").animals is None


def test_one_look_serves_all_screens_for_a_moment(access: Access, clock: FakeClock):
    first = access.snapshot()
    assert access.snapshot() is first
    clock.advance(1.0)
    assert access.snapshot() is not first


def test_while_the_store_is_busy_the_last_look_stays(access: Access, clock: FakeClock, monkeypatch: pytest.MonkeyPatch):
    first = access.snapshot()

    def busy() -> None:
        raise StoreBusyError("store.db", reason="locked")

    monkeypatch.setattr(access, "_look_at_store", busy)
    clock.advance(5)
    assert access.snapshot() is first


def test_without_a_store_the_site_file_is_shown_and_nobody_watches(bare_access: Access):
    snapshot = bare_access.snapshot()
    assert not snapshot.has_store
    assert not snapshot.is_watching
    assert len(snapshot.tanks) == 10
    assert snapshot.tank("l3").animals.name == "Pacific whiteleg shrimp, PL10"
    assert snapshot.tank("l3").is_unwatched


def test_a_worker_that_ends_is_seen(tmp_path: Path, clock: FakeClock):
    scene = make_scene(tmp_path, now_us=NOW_US, days=0.05, has_alarms=False)
    access = Access(scene.site_file, clock=clock)
    assert access.snapshot().is_worker_running
    scene.stop_worker()
    clock.advance(1)
    assert not access.snapshot().is_worker_running
    assert access.snapshot().has_store


def test_of_two_probes_the_believable_one_nearest_to_a_limit_stands_for_the_tank():
    band = Band(31, 2, 29, 33)
    calm, near = sensor("calm", salinity=31.1), sensor("near", salinity=29.2)
    assert shown_sensor((calm, near), band, NOW_US) is near
    assert shown_sensor((calm, replace(near, quality=4)), band, NOW_US) is calm
    assert shown_sensor((calm, replace(near, measured_at_us=NOW_US - 10**9)), band, NOW_US) is calm


def test_without_a_believable_probe_the_one_heard_last_is_shown_with_its_age():
    old, older = sensor("old", measured_at_us=NOW_US - 10**9), sensor("older", measured_at_us=NOW_US - 10**10)
    assert shown_sensor((older, old), Band(), NOW_US) is old
    assert shown_sensor((), Band(), NOW_US) is None
    assert shown_sensor((sensor("never", measured_at_us=None),), Band(), NOW_US).id == "never"


def test_a_tank_without_any_band_shows_its_first_believable_probe():
    assert math.isfinite(shown_sensor((sensor("a"), sensor("b")), Band(), NOW_US).salinity)


ACT = {
    "do": "going",
    "subject": "tank/l3",
    "condition": "salinity_low",
    "occurrence": "1",
    "command": "0b7d6f0e-1d7e-4d33-9d1e-0a4b5d0f3a11",
}


def test_i_am_going_is_a_row_in_the_inbox_and_pressing_twice_is_one(access: Access, scene: Scene):
    first, second = orders.take(access, ACT), orders.take(access, ACT)
    assert first == second
    taker = InboxTaker(Inbox(scene.folder))
    commands = [command for _, command in taker.after(0)]
    taker.close()
    assert len(commands) == 1
    assert commands[0].kind == "alarm.acknowledge"
    assert commands[0].subject == "tank/l3"
    assert commands[0].body["condition"] == "salinity_low"
    assert commands[0].expected == "1"
    assert commands[0].actor == "Duty 1"
    assert commands[0].id == ACT["command"]


def test_an_order_waits_until_the_worker_has_decided(access: Access, scene: Scene):
    order = Order("c-1", "tank/l3", "salinity_low", 1)
    assert orders.followed(access, (order,))[0].state == "waiting"
    with scene.store.transaction() as connection:
        connection.execute(
            "INSERT INTO command_outcome VALUES ('c-1', 'alarm.acknowledge', 'tank/l3', 'Duty 1', 'refused', 'role_too_weak', NULL, ?)",
            (NOW_US,),
        )
    followed = orders.followed(access, (order,))[0]
    assert (followed.state, followed.reason) == ("refused", "role_too_weak")


def test_an_order_that_can_not_be_written_is_not_lost_in_silence(access: Access, monkeypatch: pytest.MonkeyPatch):
    def full(*_args: object, **_kwargs: object) -> None:
        raise StoreBusyError("inbox.db", reason="disk is full")

    monkeypatch.setattr(access, "submit", full)
    assert orders.take(access, ACT).state == "unsent"


def test_the_day_begins_at_the_sites_midnight(access: Access):
    start = midnight_us(NOW_US, access.site)
    assert times.clock(start, access.site.zone, has_seconds=True) == "00:00:00"
    assert 0 <= NOW_US - start < 25 * 3600 * 10**6


def test_a_tank_under_a_plan_shows_the_band_that_the_alarms_judge(tmp_path: Path) -> None:
    with Bench(tmp_path, plan_work.text(), now_us=START_US) as bench:
        plan_work.water_until(bench, 0.0, 20.0)
        down = plan_work.plan()
        plan_work.start(bench, down)
        plan_work.follow_down(bench, down, steps=4)
        judged = bench.worker.plant.tanks.salinity
        clock = FakeClock(bench.clock.now_us())
        (tank,) = (sight for sight in Access(bench.site_file, clock=clock).snapshot().tanks if sight.id == "t0")
        assert tank.salinity.limits == pytest.approx((float(judged.low[0]), float(judged.high[0])))
        assert tank.salinity.limits[0] < 19.0, "below the band of the site file's set point"
