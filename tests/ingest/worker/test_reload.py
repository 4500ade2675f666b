"""A changed site file is taken over between two blocks, all or nothing."""

from __future__ import annotations

import sqlite3
from contextlib import closing

import pytest

from ingest.site.problems import SiteFileError
from ingest.worker.worker import Worker
from tests.harness.hatchery import START_US, Bench, payload, site_text

LOW = "salinity_low"


@pytest.fixture
def bench(tmp_path):
    with Bench(tmp_path, site_text(port=1, sensors=1, interval_s=10.0), now_us=START_US) as bench:
        for _ in range(20):
            bench.clock.advance(10)
            bench.read("s0", bench.clock.now_us(), 27.0)
        assert bench.alarm("t0", LOW) == "unacknowledged"
        yield bench


def reload_with(bench, text: str) -> bool:
    bench.site_file.write_text(text, encoding="utf-8")
    return bench.worker.reload()


def old_text(bench) -> str:
    return bench.queries.site_text()[1]


def test_a_renamed_topic_keeps_sensor_and_state(bench):
    state = bench.worker.state
    assert reload_with(bench, old_text(bench).replace("topic: quay/s0", "topic: quay/renamed"))
    assert bench.alarm("t0", LOW) == "unacknowledged"
    assert bench.worker.state.salinity.value.tolist() == state.salinity.value.tolist()
    bench.clock.advance(10)
    bench.send("quay/renamed", payload(bench.clock.now_us(), 27.0))
    assert bench.queries.latest()["s0"].measured_at == bench.clock.now_us()
    assert [event.kind for _, event in bench.queries.events(kind_prefix="alarm.")] == ["alarm.raised"]
    assert bench.queries.site_text()[0] == 2


def test_a_new_tank_appears_and_is_watched(bench):
    assert reload_with(bench, site_text(port=1, sensors=2, interval_s=10.0))
    for _ in range(20):
        bench.clock.advance(10)
        bench.read("s1", bench.clock.now_us(), 27.0)
    assert bench.alarm("t1", LOW) == "unacknowledged"
    assert {cohort.id for cohort in bench.queries.cohorts()} == {"b0", "b1"}
    assert set(bench.queries.latest()) == {"s0", "s1"}


def test_a_new_limit_holds_from_the_next_reading(bench):
    assert reload_with(bench, old_text(bench).replace("salinity: 31.0, temp", "salinity: 27.0, temp"))
    for _ in range(20):
        bench.clock.advance(10)
        bench.read("s0", bench.clock.now_us(), 27.0)
    assert bench.alarm("t0", LOW) == "returned_unacknowledged"


def test_tanks_in_another_order_keep_what_is_theirs(tmp_path):
    text = site_text(port=1, sensors=2, interval_s=10.0)
    with Bench(tmp_path, text, now_us=START_US) as bench:
        for _ in range(20):
            bench.clock.advance(10)
            bench.read("s0", bench.clock.now_us(), 27.0)
            bench.read("s1", bench.clock.now_us(), 31.0)
        head, tanks = text.split("tanks:\n")
        tanks, sensors = tanks.split("sensors:\n")
        first, second = tanks.split("  - id: t1")
        one, two = sensors.split("  - id: s1")
        turned = head + "tanks:\n  - id: t1" + second + first + "sensors:\n  - id: s1" + two + one
        assert reload_with(bench, turned)
        for _ in range(3):
            bench.clock.advance(10)
            bench.read("s0", bench.clock.now_us(), 27.0)
            bench.read("s1", bench.clock.now_us(), 31.0)
        assert (bench.alarm("t0", LOW), bench.alarm("t1", LOW)) == ("unacknowledged", "normal")
        assert len(bench.queries.events(kind_prefix="alarm.")) == 1
        assert bench.queries.counters()["readings"] == 46


@pytest.mark.parametrize(
    "change",
    [
        lambda text: text.replace("tank: t0", "tank: t9"),
        lambda text: text.replace("interval_s", "intervall_s"),
        lambda text: text + "\t",
        lambda text: "",
        lambda text: text.replace("store: {path: store}", "store: {path: elsewhere}"),
        lambda text: text.replace("port: 1,", "port: 2,"),
        lambda text: text.replace("id: quay\n", "id: pier\n"),
    ],
)
def test_a_file_that_cannot_be_taken_over_is_refused_and_the_work_goes_on_with_the_old(bench, change):
    text = old_text(bench)
    plant = bench.worker.plant
    assert change(text) != text
    assert reload_with(bench, change(text)) is False
    assert bench.worker.plant is plant
    assert "the old one stays" in bench.worker.site_problem
    assert bench.queries.site_text() == (1, text)
    bench.clock.advance(10)
    bench.read("s0", bench.clock.now_us(), 27.0)
    assert bench.queries.latest()["s0"].measured_at == bench.clock.now_us()
    assert bench.worker.site_problem, "it stays said after the next commit"
    assert reload_with(bench, text + "# a remark\n")
    assert bench.worker.site_problem == ""


@pytest.mark.parametrize("content", [b"site: \xff\xfe", None])
def test_a_file_that_is_no_text_or_gone_is_refused(bench, content):
    if content is None:
        bench.site_file.unlink()
    else:
        bench.site_file.write_bytes(content)
    assert bench.worker.reload() is False
    assert "the old one stays" in bench.worker.site_problem


def test_what_needs_a_restart_is_named(bench):
    reload_with(bench, old_text(bench).replace("port: 1,", "port: 2,").replace("path: store", "path: other"))
    assert "store.path, broker.port: a change of that needs a restart" in bench.worker.site_problem


def test_the_same_file_again_is_no_new_revision(bench):
    assert bench.worker.reload()
    assert bench.queries.site_text()[0] == 1


def test_a_store_that_is_locked_refuses_the_new_file_and_keeps_the_old(bench):
    bench.worker.store.connection.execute("PRAGMA busy_timeout=20")
    plant = bench.worker.plant
    with closing(sqlite3.connect(bench.worker.store.path, isolation_level=None)) as other:
        other.execute("BEGIN IMMEDIATE")
        assert reload_with(bench, site_text(port=1, sensors=2, interval_s=10.0)) is False
        other.execute("ROLLBACK")
    assert bench.worker.plant is plant
    assert bench.worker.reload()


@pytest.mark.parametrize("content", [b"site: \xff\xfe", b"site: {id: quay}\n"])
def test_a_worker_does_not_start_on_a_broken_file_and_makes_nothing(tmp_path, content):
    file = tmp_path / "site.yaml"
    file.write_bytes(content)
    with pytest.raises(SiteFileError):
        Worker(file, clock=None)  # type: ignore[arg-type]
    assert [path.name for path in tmp_path.iterdir()] == ["site.yaml"]


def test_a_byte_order_mark_is_no_trouble(tmp_path):
    with Bench(tmp_path, "\ufeff" + site_text(port=1)) as bench:
        assert bench.queries.site_text()[0] == 1
        assert bench.worker.reload()
