"""From the wire to the committed row: how near the worker comes to a client that does nothing but acknowledge."""

from __future__ import annotations

import os
import statistics
import subprocess
import sys
import threading
import time
from collections import deque
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import paho.mqtt.client as paho
from paho.mqtt.enums import CallbackAPIVersion

from ingest.broker import Broker
from ingest.clock import SystemClock
from ingest.mqtt import Received
from ingest.worker.worker import Worker
from tests.harness.hatchery import payload, site_text


def now_us() -> int:
    return time.time_ns() // 1000


def recorded(readings: int, *, sensors: int, start_us: int | None = None) -> list[tuple[str, bytes]]:
    """Return readings in the order of time, a millisecond apart, ending now: made before anything is measured."""
    begin = now_us() - readings * 1000 if start_us is None else start_us
    bodies = [payload(0, 31.0 + 0.001 * step).decode() for step in range(50)]
    return [
        (f"quay/s{index % sensors}", bodies[index % 50].replace('"at": 0', f'"at": {begin + index * 1000}').encode())
        for index in range(readings)
    ]


def durable(client_id: str, port: int) -> paho.Client:
    client = paho.Client(
        CallbackAPIVersion.VERSION2, client_id=client_id, protocol=paho.MQTTv311, clean_session=False, manual_ack=True
    )
    client.connect("127.0.0.1", port)
    return client


def leave_subscription(client_id: str, port: int, topics: Sequence[str]) -> None:
    """Make a durable session and go away: from now on the broker keeps what comes."""
    client = durable(client_id, port)
    done = threading.Event()
    client.on_subscribe = lambda *_: done.set()
    client.loop_start()
    for start in range(0, len(topics), 200):
        done.clear()
        client.subscribe([(topic, 1) for topic in topics[start : start + 200]])
        assert done.wait(30)
    client.disconnect()
    client.loop_stop()


def publish(port: int, messages: Sequence[tuple[str, bytes]]) -> None:
    client = paho.Client(CallbackAPIVersion.VERSION2, client_id="feeder", protocol=paho.MQTTv311)
    client.max_inflight_messages_set(1000)
    client.connect("127.0.0.1", port)
    client.loop_start()
    last = None
    for topic, body in messages:
        last = client.publish(topic, body, qos=1)
    assert last is not None
    last.wait_for_publish(120)
    client.disconnect()
    client.loop_stop()


def bare_rate(port: int, count: int) -> float:
    """Return messages a second of a paho loop that takes them from the broker's queue and only acknowledges."""
    client = paho.Client(
        CallbackAPIVersion.VERSION2, client_id="bare", protocol=paho.MQTTv311, clean_session=False, manual_ack=True
    )
    seen = 0
    begin = end = 0.0
    done = threading.Event()

    def on_message(owner: paho.Client, _data: object, message: paho.MQTTMessage) -> None:
        nonlocal seen, begin, end
        if not seen:
            begin = time.perf_counter()
        seen += 1
        owner.ack(message.mid, 1)
        if seen == count:
            end = time.perf_counter()
            done.set()

    client.on_message = on_message
    client.connect("127.0.0.1", port)
    client.loop_start()
    assert done.wait(300), f"{seen} of {count}"
    client.disconnect()
    client.loop_stop()
    return count / (end - begin)


class MeasuredWorker(Worker):
    """A worker that notes when it began, when it had committed so many readings, and how late each was."""

    def __init__(self, site_file: Path, *, expect: int, is_timing_each: bool = False) -> None:
        super().__init__(site_file, clock=SystemClock())
        self.expect = expect
        self.began_s = self.ended_s = 0.0
        self.done = threading.Event()
        self.lateness_us: deque[int] = deque()
        self._is_timing_each = is_timing_each
        self._taken = 0

    def process(self, messages: Sequence[Received], stop: threading.Event) -> bool:
        if not self.began_s:
            self.began_s = time.perf_counter()
        is_stored = super().process(messages, stop)
        self._taken += len(messages)
        if self._is_timing_each:
            committed = now_us()
            for message in messages:
                at = int(message.payload.rpartition(b" ")[2].rstrip(b"}"))
                self.lateness_us.append(committed - at)
        if self._taken >= self.expect:
            self.ended_s = time.perf_counter()
            self.done.set()
        return is_stored


@dataclass(frozen=True)
class Road:
    """Rates in readings a second, and the worker's time by step in seconds."""

    bare: float
    worker: float
    steps: dict[str, float]

    @property
    def ratio(self) -> float:
        return self.worker / self.bare


def road(folder: Path, *, readings: int, sensors: int) -> Road:
    """Measure both, one after the other, each taking the same messages from the broker's own queue."""
    topics = [f"quay/s{index}" for index in range(sensors)]
    messages = recorded(readings, sensors=sensors)
    with Broker("mosquitto", folder=folder / "broker") as broker:
        leave_subscription("bare", broker.port, topics)
        publish(broker.port, messages)
        bare = bare_rate(broker.port, readings)
        leave_subscription("euryhale-quay", broker.port, topics)
        publish(broker.port, messages)
        folder_of_worker = folder / "worker"
        folder_of_worker.mkdir(parents=True)
        site_file = folder_of_worker / "site.yaml"
        site_file.write_text(site_text(port=broker.port, sensors=sensors, interval_s=1.0))
        worker = MeasuredWorker(site_file, expect=readings)
        stop = threading.Event()
        thread = threading.Thread(target=worker.run, args=(stop,))
        thread.start()
        try:
            assert worker.done.wait(300)
        finally:
            stop.set()
            thread.join()
        return Road(bare, readings / (worker.ended_s - worker.began_s), dict(worker.stopwatch.spent_s))


def lateness(folder: Path, *, sensors: int, seconds: int) -> tuple[float, float, float]:
    """Return median, 99th percentile and worst time from publish to committed row at one reading a second each. [s]"""
    with Broker("mosquitto", folder=folder / "broker") as broker:
        site_folder = folder / "worker"
        site_folder.mkdir(parents=True)
        site_file = site_folder / "site.yaml"
        site_file.write_text(site_text(port=broker.port, sensors=sensors, interval_s=1.0))
        worker = MeasuredWorker(site_file, expect=sensors * seconds, is_timing_each=True)
        stop = threading.Event()
        thread = threading.Thread(target=worker.run, args=(stop,))
        thread.start()
        while not worker.intake.is_connected:
            time.sleep(0.01)
        feeder = subprocess.Popen(
            [sys.executable, "-P", "-m", "tests.bench.feeder", str(broker.port), str(sensors), str(seconds)],
            env={**os.environ, "PYTHONPATH": str(Path(__file__).parents[2])},
        )
        try:
            assert worker.done.wait(seconds + 120)
        finally:
            feeder.wait()
            stop.set()
            thread.join()
        late = sorted(worker.lateness_us)
        return statistics.median(late) / 1e6, late[int(len(late) * 0.99)] / 1e6, late[-1] / 1e6


def resident_MB() -> float:
    for line in Path("/proc/self/status").read_text().splitlines():
        if line.startswith("VmRSS"):
            return int(line.split()[1]) / 1024
    return float("nan")


def memory(folder: Path, *, sensors: int, seconds: int, marks: Sequence[int]) -> dict[int, float]:
    """Return the worker's resident memory after so many seconds' worth of readings, taken in without a broker. [MB]"""
    site_folder = folder / "memory"
    site_folder.mkdir(parents=True)
    site_file = site_folder / "site.yaml"
    site_file.write_text(site_text(port=1, sensors=sensors, interval_s=1.0))
    worker = MeasuredWorker(site_file, expect=sensors * seconds + 1)
    stop = threading.Event()
    start_us = now_us() - seconds * 1_000_000
    bodies = [payload(0, 31.0 + 0.001 * step).decode() for step in range(50)]
    found = {}
    for second in range(seconds):
        at_us = start_us + second * 1_000_000
        messages = [
            Received(
                f"quay/s{sensor}",
                bodies[(sensor + second) % 50].replace('"at": 0', f'"at": {at_us + sensor}').encode(),
                at_us + sensor,
                False,
                0,
                0,
            )
            for sensor in range(sensors)
        ]
        worker.process(messages, stop)
        if second % 20 == 0:
            worker.roll_up()
        if second % 60 == 0:
            worker.store.checkpoint()
        if second + 1 in marks:
            found[second + 1] = resident_MB()
    worker.store.close()
    return found
