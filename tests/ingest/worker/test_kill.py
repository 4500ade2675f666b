"""A worker that is killed at any moment loses nothing and doubles nothing."""

from __future__ import annotations

import random
import sqlite3
import threading
from collections.abc import Iterator
from contextlib import closing
from pathlib import Path

import paho.mqtt.client as paho
import pytest
from paho.mqtt.enums import CallbackAPIVersion

from ingest.broker import Broker
from ingest.store.queries import Queries
from tests.harness.hatchery import WorkerProcess, site_text, steady_readings
from tests.harness.process import wait_until

SENSORS = 40
READINGS = 20_000
SEED = 20261201
PAIRS = """SELECT measured_at, slug, conductivity, temperature, practical_salinity, osmolality_mOsm_kg, flags, quality
           FROM reading JOIN sensor ON sensor.id = reading.sensor ORDER BY 1, 2"""


def publisher(port: int) -> paho.Client:
    client = paho.Client(CallbackAPIVersion.VERSION2, client_id="publisher", protocol=paho.MQTTv311)
    client.max_inflight_messages_set(500)
    client.connect("127.0.0.1", port)
    client.loop_start()
    return client


def publish_all(client: paho.Client, messages: Iterator[tuple[str, bytes]], pause: threading.Event) -> int:
    count = 0
    for topic, body in messages:
        client.publish(topic, body, qos=1)
        count += 1
        if count % 200 == 0:
            # Leave the worker room to be killed in the middle of things, not after all has come.
            pause.wait(0.05)
    return count


def rows(store: Path) -> list[tuple[object, ...]]:
    with closing(sqlite3.connect(store / "store.db")) as connection:
        return [tuple(row) for row in connection.execute(PAIRS)]


def chain_state(store: Path) -> dict[str, list[tuple[object, ...]]]:
    """Return all that the chain remembers; the times of writing are left out."""
    with closing(sqlite3.connect(store / "store.db")) as connection:
        return {
            "tanks": connection.execute(
                "SELECT slug, measured_at, body FROM tank_state JOIN tank ON tank.id = tank_state.tank ORDER BY 1"
            ).fetchall(),
            "animals": connection.execute(
                "SELECT slug, measured_at, body FROM animal_state JOIN tank ON tank.id = animal_state.tank ORDER BY 1"
            ).fetchall(),
            "quality": connection.execute(
                "SELECT slug, state, body FROM sensor JOIN latest ON latest.sensor = sensor.id"
                " LEFT JOIN sensor_ring ON sensor_ring.sensor = sensor.id ORDER BY 1"
            ).fetchall(),
            "alarms": connection.execute(
                "SELECT subject, condition, state, is_active, occurrence, raised_at, body FROM alarm ORDER BY 1, 2"
            ).fetchall(),
            "latest": connection.execute(
                "SELECT slug, measured_at, practical_salinity, flags, quality FROM latest"
                " JOIN sensor ON sensor.id = latest.sensor ORDER BY 1"
            ).fetchall(),
            "stress": connection.execute(
                "SELECT measured_at, slug, stress, acclimated_mOsm_kg FROM stress JOIN tank ON tank.id = stress.tank ORDER BY 1, 2"
            ).fetchall(),
        }


def run_through(folder: Path, broker: Broker, *, kills: int, seed: int) -> WorkerProcess:
    """Let all readings flow through a worker that is killed so often; return the stopped worker."""
    folder.mkdir()
    site_file = folder / "site.yaml"
    # The clock follows the readings, so that nothing in the chain's state depends on when the test ran.
    site_file.write_text(site_text(port=broker.port, sensors=SENSORS, interval_s=1.0))
    worker = WorkerProcess(site_file, "--clock", "replay")
    worker.start()
    dice = random.Random(seed)
    queries = Queries(worker.store)
    wait_until(lambda: queries.meta().get("broker_connected") == 1, what="the worker to reach the broker")
    client = publisher(broker.port)
    messages = steady_readings(sensors=SENSORS, readings=READINGS)
    feeder = threading.Thread(target=publish_all, args=(client, messages, threading.Event()))
    feeder.start()
    try:
        for kill in range(kills):
            target = (kill + 1) * READINGS // (kills + 2)
            wait_until(lambda t=target: queries.reading_count() >= t, what=f"{target} readings, seed {seed}")
            threading.Event().wait(dice.uniform(0.0, 0.1))
            worker.kill()
            worker.start()
        wait_until(lambda: queries.reading_count() >= READINGS, what=f"all readings, seed {seed}", limit_s=120)
        feeder.join()
        assert worker.stop() == 0
    finally:
        client.disconnect()
        client.loop_stop()
        if worker.process is not None and worker.process.poll() is None:
            worker.kill()
    return worker


@pytest.mark.slow
@pytest.mark.mosquitto
def test_killed_at_random_moments_every_reading_is_stored_exactly_once(mosquitto: Broker, tmp_path: Path) -> None:
    killed = run_through(tmp_path / "killed", mosquitto, kills=6, seed=SEED)
    stored = rows(killed.store)
    assert len(stored) == READINGS, f"seed {SEED}"
    assert len({row[:2] for row in stored}) == READINGS
    expected = run_through(tmp_path / "calm", mosquitto, kills=0, seed=SEED)
    assert stored == rows(expected.store), f"seed {SEED}"
    assert chain_state(killed.store) == chain_state(expected.store), f"seed {SEED}"
    with closing(sqlite3.connect(killed.store / "store.db")) as connection:
        assert connection.execute("PRAGMA integrity_check").fetchone()[0] == "ok"
