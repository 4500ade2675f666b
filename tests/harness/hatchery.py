"""Small invented hatcheries for tests: a site file, readings for it, and a worker as a real process."""

from __future__ import annotations

import json
import os
import signal
import subprocess
import sys
import threading
import uuid
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path
from typing import Any, Self

import gsw
import numpy as np

from ingest.clock import FakeClock
from ingest.mqtt import Received
from ingest.store.errors import MissingStoreError
from ingest.store.inbox import Command, Inbox
from ingest.store.lock import is_held
from ingest.store.queries import Outcome, Queries
from ingest.worker.worker import Worker
from tests.harness.process import wait_until

START_US = 1_780_000_000_000_000
"""A moment in 2026 from which test readings count."""


def site_text(
    *,
    port: int,
    sensors: int = 1,
    sensors_a_tank: int = 1,
    interval_s: float = 60.0,
    set_point: float = 31.0,
    protocol: str = "3.1.1",
    extra: str = "",
    animal: str | None = "penaeus-vannamei/pl10",
) -> str:
    """Return the text of a site file with as many tanks and sensors as asked for, one topic a sensor."""
    tanks, entries = [], []
    for index in range(-(-sensors // sensors_a_tank)):
        stock = ""
        if animal is not None:
            stock = (
                f"    first_stock: {{id: b{index}, animal: {animal}, number: 80000,"
                f" used_to_salinity: {set_point}, since: 2026-01-10}}\n"
            )
        tanks.append(
            f"  - id: t{index}\n    name: T{index}\n    volume_L: 1000\n    water: seawater\n"
            f"    set_point: {{salinity: {set_point}, temperature_degC: 28, temperature_band_K: 3}}\n{stock}"
        )
    for index in range(sensors):
        entries.append(
            f"  - id: s{index}\n    tank: t{index // sensors_a_tank}\n    topic: quay/s{index}\n"
            "    fields: {conductivity: c, temperature: t, time: at}\n    time_format: unix_us\n"
            f"    interval_s: {interval_s}\n"
        )
    return (
        "site:\n  id: quay\n  name: Quay House\n  time_zone: Europe/Lisbon\n"
        "  default_actor: {name: Duty, role: manager}\n  horizon: {past_h: 1000000, future_min: 10}\n"
        f"store: {{path: store}}\nbroker: {{host: 127.0.0.1, port: {port}, protocol: '{protocol}'}}\n{extra}"
        "tanks:\n" + "".join(tanks) + "sensors:\n" + "".join(entries)
    )


def conductivity(salinity: float, temperature_degC: float = 28.0) -> float:
    """Return the conductivity of seawater, straight from the reference library. [mS/cm]"""
    return float(gsw.C_from_SP(salinity, temperature_degC, 0.0))


def payload(at_us: int, salinity: float, temperature_degC: float = 28.0) -> bytes:
    """Return one reading as the sensors of `site_text` send it."""
    return json.dumps({"c": conductivity(salinity, temperature_degC), "t": temperature_degC, "at": at_us}).encode()


def steady_readings(
    *, sensors: int, readings: int, step_us: int = 1_000_000, seed: int = 1, start_us: int = START_US
) -> Iterator[tuple[str, bytes]]:
    """Yield (topic, payload) in the order of time: round after round over all sensors, salinity near 31 with noise."""
    random = np.random.default_rng(seed)
    for index in range(readings):
        sensor = index % sensors
        at_us = start_us + (index // sensors) * step_us + sensor
        yield f"quay/s{sensor}", payload(at_us, 31.0 + 0.02 * random.standard_normal())


class Bench:
    """A worker without a broker, on a clock that stands still: messages are handed to it, and it is ticked, by the test."""

    def __init__(self, folder: Path, text: str, *, now_us: int = START_US) -> None:
        self.site_file = folder / "site.yaml"
        self.site_file.write_text(text, encoding="utf-8")
        self.clock = FakeClock(now_us)
        self.stop = threading.Event()
        self.worker = Worker(self.site_file, clock=self.clock)
        self.store = self.worker.store.folder
        self.queries = Queries(self.store)

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *_: object) -> None:
        self.worker.close()

    def restart(self) -> None:
        """Let go of the worker as a kill would, between two commits, and start another on the same store and clock."""
        self.worker.close()
        self.worker = Worker(self.site_file, clock=self.clock)

    def received(self, topic: str, body: bytes, *, at_us: int | None = None, is_retained: bool = False) -> Received:
        """Return a message as the broker would have delivered it now."""
        return Received(topic, body, self.clock.now_us() if at_us is None else at_us, is_retained, 0, 0)

    def send(self, topic: str, *bodies: bytes, is_retained: bool = False) -> bool:
        """Hand messages of one topic to the worker as one block."""
        return self.process([self.received(topic, body, is_retained=is_retained) for body in bodies])

    def process(self, messages: Sequence[Received]) -> bool:
        """Hand messages to the worker as one block."""
        return self.worker.process(messages, self.stop)

    def read(self, sensor: str, at_us: int, salinity: float, temperature_degC: float = 28.0) -> bool:
        """Let one sensor send one reading."""
        return self.send(f"quay/{sensor}", payload(at_us, salinity, temperature_degC))

    def tick(self) -> None:
        """Let everything happen that time alone brings."""
        self.worker.tick(self.stop)

    def roll_up(self) -> None:
        """Roll up all there is."""
        while self.worker.roll_up():
            pass

    def act(
        self,
        kind: str,
        tank: str,
        condition: str,
        *,
        actor: str = "Duty",
        role: str = "manager",
        expected: str | None = None,
        life_s: float = 900.0,
        command_id: str | None = None,
        **body: Any,
    ) -> Outcome:
        """Let a person ask for something by way of the inbox, and return what became of it."""
        command_id = command_id or str(uuid.uuid4())
        now_us = self.clock.now_us()
        Inbox(self.store).submit(
            Command(
                kind=kind,
                subject=f"tank/{tank}",
                actor=actor,
                role=role,
                submitted_at=now_us,
                expires_at=now_us + round(life_s * 1e6),
                body={"condition": condition, **body},
                expected=expected,
                id=command_id,
            )
        )
        self.worker.take_commands(self.stop)
        outcome = self.queries.outcome(command_id)
        assert outcome is not None, "the worker has not decided"
        return outcome

    def alarm(self, tank: str, condition: str) -> str:
        """Return the state of an alarm; normal where it never was anything else."""
        found = {(row.subject, row.condition): row.state for row in self.queries.alarms()}
        return found.get((f"tank/{tank}", condition), "normal")


class WorkerProcess:
    """`euryhale watch` as a process of its own."""

    def __init__(self, site_file: Path, *arguments: str) -> None:
        self.site_file = site_file
        self.store = site_file.parent / "store"
        self._arguments = arguments
        self._log = site_file.parent / "worker.log"
        self.process: subprocess.Popen[bytes] | None = None

    def start(self) -> None:
        """Start it and wait until it holds its store."""
        with self._log.open("ab") as log:
            self.process = subprocess.Popen(
                [
                    sys.executable,
                    "-P",
                    "-m",
                    "dashboard.terminal.command",
                    "watch",
                    "--site",
                    str(self.site_file),
                    "--health-port",
                    "0",
                    *self._arguments,
                ],
                stdout=log,
                stderr=log,
                env={**os.environ, "PYTHONPATH": os.environ.get("PYTHONPATH", str(Path(__file__).parents[2]))},
            )
        wait_until(self._is_up, what=f"the worker to take its store; its log: {self._log}")

    def _is_up(self) -> bool:
        assert self.process is not None
        assert self.process.poll() is None, self._log.read_text()[-3000:]
        try:
            return is_held(self.store) and "alive_at" in Queries(self.store).meta()
        except MissingStoreError:
            return False

    def kill(self) -> None:
        """End it as a power cut would."""
        assert self.process is not None
        self.process.kill()
        self.process.wait()

    def stop(self) -> int:
        """Ask it to end and return its exit status."""
        assert self.process is not None
        self.process.send_signal(signal.SIGTERM)
        return self.process.wait(60)

    def log(self) -> str:
        """Return what it has logged."""
        return self._log.read_text()


@contextmanager
def running_worker(site_file: Path, *arguments: str) -> Iterator[WorkerProcess]:
    """Run a worker for the length of the body; it is ended whatever happens there."""
    worker = WorkerProcess(site_file, *arguments)
    worker.start()
    try:
        yield worker
    finally:
        if worker.process is not None and worker.process.poll() is None:
            worker.kill()
