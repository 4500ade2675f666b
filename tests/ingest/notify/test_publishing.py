"""Tank and alarm state on the broker, for a siren or another system."""

from __future__ import annotations

import json

import pytest

from ingest.broker import Broker
from ingest.mqtt import Access, Intake
from ingest.notify.publishing import Publisher, alarms_topic, tank_topic
from tests.harness.listener import Listener
from tests.harness.process import wait_until
from tests.ingest.notify.scene import CallBench

pytestmark = pytest.mark.mosquitto


@pytest.fixture
def intake(mosquitto: Broker, tmp_path):
    from ingest.clock import SystemClock

    found = Intake(Access(host=mosquitto.host, port=mosquitto.port, client_id="quay"), ["quay/s0"], clock=SystemClock())
    found.start()
    wait_until(lambda: found.is_connected, what="the connection")
    yield found
    found.stop()


def newest(listener: Listener) -> dict[str, dict]:
    return {
        topic: json.loads(body) if body else {} for topic, body in zip(listener.topics, listener.payloads, strict=True)
    }


def test_a_siren_hears_of_an_alarm_and_of_its_end(tmp_path, mosquitto, intake):
    publisher = Publisher()
    (tmp_path / "bench").mkdir()
    with CallBench(tmp_path / "bench", people="", sensors=2) as bench:
        worker = bench.worker

        def publish() -> int:
            return publisher.publish(worker.plant, worker.state, intake)

        bench.minutes(2, {"s0": 31.0, "s1": 31.0})
        assert publish() == 3, "two tanks and the site"
        assert publish() == 0, "nothing new"
        with Listener(mosquitto, "euryhale/#", name="siren") as siren:
            wait_until(lambda: len(siren.topics) == 3, what="the retained state")
            calm = newest(siren)[alarms_topic("quay")]
            assert (calm["worst"], calm["is_sounding"], calm["present"]) == (None, False, 0)
            assert newest(siren)[tank_topic("quay", "t0")]["sensors"][0]["salinity"] == 31.0
            bench.minutes(4, {"s0": 27.0, "s1": 31.0})
            publish()
            wait_until(lambda: newest(siren)[alarms_topic("quay")]["is_sounding"], what="the alarm")
            heard = newest(siren)
            assert heard[alarms_topic("quay")]["worst"] == "urgent"
            assert heard[alarms_topic("quay")]["tanks"] == ["t0"]
            (alarm,) = heard[tank_topic("quay", "t0")]["alarms"]
            assert (alarm["condition"], alarm["state"]) == ("salinity_low", "unacknowledged")
            assert heard[tank_topic("quay", "t1")]["alarms"] == []
            bench.act("alarm.acknowledge", "t0", "salinity_low")
            publish()
            wait_until(lambda: not newest(siren)[alarms_topic("quay")]["is_sounding"], what="quiet")
            assert newest(siren)[alarms_topic("quay")]["present"] == 1
            bench.minutes(6, {"s0": 31.0, "s1": 31.0})
            publish()
            wait_until(lambda: newest(siren)[alarms_topic("quay")]["present"] == 0, what="the end")


def test_values_follow_within_ten_looks(tmp_path, mosquitto, intake):
    publisher = Publisher()
    (tmp_path / "bench").mkdir()
    with CallBench(tmp_path / "bench", people="", sensors=3) as bench:
        worker = bench.worker
        bench.minutes(1, {"s0": 31.0, "s1": 31.0, "s2": 31.0})
        publisher.publish(worker.plant, worker.state, intake)
        bench.minutes(1, {"s0": 31.5, "s1": 31.5, "s2": 31.5})
        assert sum(publisher.publish(worker.plant, worker.state, intake) for _ in range(10)) == 3


def test_nothing_is_kept_for_a_broker_that_is_away(tmp_path, mosquitto, intake):
    publisher = Publisher()
    (tmp_path / "bench").mkdir()
    with CallBench(tmp_path / "bench", people="") as bench:
        assert publisher.publish(bench.worker.plant, bench.worker.state, intake) == 2
        intake.stop()
        wait_until(lambda: not intake.is_connected, what="the end of the connection")
        assert publisher.publish(bench.worker.plant, bench.worker.state, intake) == 0
        intake.start()
        wait_until(lambda: intake.is_connected, what="the connection")
        assert publisher.publish(bench.worker.plant, bench.worker.state, intake) == 2, "everything anew"
