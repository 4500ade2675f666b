"""What leaves for the central store: nothing lost in an outage, nothing kept after the server's yes, the rest behind a bound."""

from __future__ import annotations

import threading
from contextlib import closing
from pathlib import Path

import pytest

from ingest.clock import SystemClock
from ingest.forward.central import CentralAccess, CentralUnreachableError, LinesRefusedError, MemoryCentral
from ingest.forward.forwarder import Forwarder
from ingest.forward.influx import InfluxCentral
from ingest.forward.lines import tag, text
from ingest.mqtt import Received
from ingest.store import forwarding
from ingest.store.connection import open_writer, transaction
from ingest.store.store import Store
from ingest.worker.outgoing import Outgoing
from ingest.worker.worker import Worker
from tests.harness.hatchery import payload, site_text
from tests.harness.influx import InfluxServer
from tests.harness.process import wait_until


def queue(store: Store, *batches: list[str]) -> None:
    with store.transaction() as connection:
        for lines in batches:
            forwarding.put(connection, lines, queued_at=1)


def test_tags_and_texts_escape_what_the_protocol_reserves() -> None:
    # InfluxDB line protocol reference: commas, equals signs and spaces in tags, quotes and backslashes in string fields.
    assert tag("north hall, a=1") == r"north\ hall\,\ a\=1"
    assert text('he said "go" \\ now') == r'"he said \"go\" \\ now"'
    assert "\n" not in tag("two\nlines") + text("two\nlines")


def test_lines_leave_in_order_and_the_queue_empties_only_after_the_yes(tmp_path: Path) -> None:
    store, central = Store(tmp_path), MemoryCentral(failure=CentralUnreachableError("away"))
    queue(store, ["a v=1 1"], ["b v=1 2", "c v=1 3"])
    forwarder = Forwarder(store.path, central)
    forwarder.start()
    wait_until(lambda: forwarder.problem == "away", what="the first attempt to fail")
    assert forwarder.confirmed_id == 0
    assert forwarding.backlog(store.connection).entries == 2
    central.failure = None
    wait_until(lambda: forwarder.confirmed_id == 2, what="both entries to arrive")
    assert central.lines == ["a v=1 1", "b v=1 2", "c v=1 3"]
    with store.transaction() as connection:
        forwarding.confirm(connection, forwarder.confirmed_id)
    assert forwarding.backlog(store.connection).entries == 0
    forwarder.stop()
    store.close()


def test_a_refused_line_takes_no_good_line_with_it(tmp_path: Path) -> None:
    class Picky(MemoryCentral):
        def write(self, lines: list[str]) -> None:
            if any("bad" in line for line in lines):
                raise LinesRefusedError("400")
            super().write(lines)

    store, central = Store(tmp_path), Picky()
    queue(store, ["a v=1 1", "bad", "b v=1 2", "c v=1 3"])
    forwarder = Forwarder(store.path, central)
    forwarder.start()
    wait_until(lambda: forwarder.confirmed_id == 1, what="the entry to be done with")
    assert sorted(central.lines) == ["a v=1 1", "b v=1 2", "c v=1 3"]
    assert forwarder.refused_lines == 1
    forwarder.stop()
    store.close()


def test_the_queue_is_bounded_and_lets_its_oldest_go(tmp_path: Path) -> None:
    with closing(open_writer(tmp_path / "x.db")) as connection:
        connection.execute("CREATE TABLE forward_queue (id INTEGER PRIMARY KEY, queued_at INTEGER, lines TEXT)")
        with transaction(connection):
            for number in range(10):
                forwarding.put(connection, [f"line {number} " + "x" * 92], queued_at=number)
            assert forwarding.drop_oldest(connection, keep_bytes=500) == 5
        assert [row["queued_at"] for row in connection.execute("SELECT queued_at FROM forward_queue")] == [
            5,
            6,
            7,
            8,
            9,
        ]


def worker_of(folder: Path) -> Worker:
    folder.mkdir(parents=True, exist_ok=True)
    site_file = folder / "site.yaml"
    site_file.write_text(site_text(port=1, sensors=3, interval_s=10.0))
    return Worker(site_file, clock=SystemClock())


def feed(worker: Worker, readings: int) -> int:
    """Take in readings of three sensors, ten seconds apart, the newest now; return how many."""
    now_us = SystemClock().now_us()
    stop = threading.Event()
    for step in range(readings):
        at_us = now_us - (readings - step) * 10_000_000
        messages = [
            Received(
                f"quay/s{sensor}", payload(at_us + sensor, 31.0 if step < 8 else 25.0), at_us + sensor, False, 0, 0
            )
            for sensor in range(3)
        ]
        assert worker.process(messages, stop)
    return 3 * readings


@pytest.mark.influxdb
def test_readings_stress_and_alarms_arrive_in_a_real_influxdb_through_an_outage(
    influx: InfluxServer, tmp_path: Path
) -> None:
    central = InfluxCentral(CentralAccess(influx.url, "hatchery", timeout_s=5.0))
    worker = worker_of(tmp_path / "site")
    outgoing = Outgoing(worker.plant, central, largest_queue_bytes=10**8, store=worker.store)
    worker.forward_through(outgoing)
    count = feed(worker, 20)
    influx.kill()
    outgoing.forwarder.start()
    wait_until(lambda: outgoing.forwarder.problem != "", what="the outage to be noticed")
    influx.start()
    wait_until(lambda: outgoing.forwarder.sent_lines > 0 and not outgoing.forwarder.problem, what="the lines to arrive")
    outgoing.keep_house()
    wait_until(lambda: (outgoing.keep_house(), outgoing.backlog.entries)[1] == 0, what="the queue to be empty")
    asked = InfluxCentral(CentralAccess(influx.url, "hatchery"))
    (row,) = asked.ask("SELECT count(practical_salinity) AS n FROM reading")
    assert row["n"] == count
    newest = asked.ask("SELECT last(practical_salinity) AS sp FROM reading GROUP BY sensor")
    assert {entry["sensor"]: round(entry["sp"], 2) for entry in newest} == {"s0": 25.0, "s1": 25.0, "s2": 25.0}
    raised = asked.ask("SELECT happening, priority, value FROM alarm WHERE condition = 'salinity_low'")
    assert {entry["happening"] for entry in raised} == {"raised"}
    assert asked.ask("SELECT count(stress) AS n FROM stress")[0]["n"] > 0
    outgoing.forwarder.stop()
    worker.close()


@pytest.mark.influxdb
def test_sending_twice_stores_once(influx: InfluxServer) -> None:
    central = InfluxCentral(CentralAccess(influx.url, "hatchery"))
    lines = ["reading,site=quay,sensor=s0 practical_salinity=31.0,quality=1i 1780000000000000"]
    central.write(lines)
    central.write(lines)
    (row,) = central.ask("SELECT count(practical_salinity) AS n FROM reading")
    assert row["n"] == 1
    central.close()


@pytest.mark.influxdb
def test_lines_that_a_real_server_refuses_are_told_from_an_outage(influx: InfluxServer) -> None:
    central = InfluxCentral(CentralAccess(influx.url, "hatchery"))
    with pytest.raises(LinesRefusedError, match="400"):
        central.write(["this is no line"])
    influx.kill()
    with pytest.raises(CentralUnreachableError):
        central.write(["a v=1 1"])
    central.close()
