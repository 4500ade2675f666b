"""The worker as a process: what it imports, says, answers, and how it follows signals."""

from __future__ import annotations

import json
import signal
import subprocess
import sys
from http.client import HTTPConnection
from pathlib import Path

import paho.mqtt.publish as sending
import pytest

from dashboard.terminal.command import main
from ingest.broker import Broker, free_port
from ingest.store.errors import MissingStoreError
from ingest.store.queries import Queries
from tests.harness.hatchery import START_US, WorkerProcess, payload, running_worker, site_text
from tests.harness.process import is_gone, wait_until

HEAVY = ("streamlit", "pandas", "pyarrow", "altair", "tornado", "apprise", "phreeqc")


def test_the_worker_opens_nothing_that_only_screens_need():
    line = (
        "import sys, dashboard.terminal.watch, ingest.worker.worker, ingest.worker.health\n"
        f"print([name for name in {HEAVY!r} if name in sys.modules])"
    )
    found = subprocess.run([sys.executable, "-P", "-c", line], capture_output=True, text=True, check=True)
    assert found.stdout.strip() == "[]"


def ask(port: int, path: str) -> tuple[int, str, str]:
    connection = HTTPConnection("127.0.0.1", port, timeout=10)
    connection.request("GET", path)
    answer = connection.getresponse()
    body = answer.read().decode()
    connection.close()
    return answer.status, answer.getheader("Content-Type", ""), body


def listening_addresses(pid: int) -> set[str]:
    """Return the local addresses, as /proc writes them, on which a process listens."""
    if not Path("/proc/net/tcp").exists():
        pytest.skip("needs /proc of Linux to see who listens where")
    sockets = {
        link.readlink().name.removeprefix("socket:[").removesuffix("]")
        for link in Path(f"/proc/{pid}/fd").iterdir()
        if "socket:" in str(link.readlink())
    }
    found = set()
    for table in ("tcp", "tcp6"):
        for line in Path(f"/proc/{pid}/net/{table}").read_text().splitlines()[1:]:
            columns = line.split()
            if columns[3] == "0A" and columns[9] in sockets:
                found.add(columns[1].split(":")[0])
    return found


@pytest.fixture
def site_file(tmp_path, mosquitto):
    file = tmp_path / "site.yaml"
    file.write_text(site_text(port=mosquitto.port, sensors=2))
    return file


def connected(worker: WorkerProcess) -> bool:
    return Queries(worker.store).meta().get("broker_connected") == 1


def publish(broker: Broker, *messages: tuple[str, bytes]) -> None:
    sending.multiple([(topic, body, 1, False) for topic, body in messages], hostname=broker.host, port=broker.port)


@pytest.mark.slow
@pytest.mark.mosquitto
def test_health_and_metrics_are_answered_on_loopback_alone(site_file, mosquitto):
    port = free_port()
    with running_worker(site_file, "--health-port", str(port)) as worker:
        wait_until(lambda: connected(worker), what="the broker")
        publish(mosquitto, ("quay/s0", payload(START_US, 31.0)), ("quay/s0", b"{"))
        wait_until(lambda: Queries(worker.store).counters().get("messages", 0) == 2, what="both messages")
        status, kind, body = ask(port, "/health")
        assert (status, kind) == (200, "application/json")
        state = json.loads(body)
        assert state["is_well"]
        assert (state["broker_connected"], state["problem"], state["site_revision"]) == (True, "", 1)
        status, kind, body = ask(port, "/metrics")
        assert status == 200
        assert kind.startswith("text/plain; version=0.0.4")
        assert 'euryhale_events_total{kind="readings"} 1' in body.splitlines()
        assert 'euryhale_events_total{kind="refused.unreadable"} 1' in body.splitlines()
        assert "euryhale_broker_connected 1" in body.splitlines()
        assert ask(port, "/")[0] == 404
        assert worker.process is not None
        assert listening_addresses(worker.process.pid) == {"0100007F"}
        mosquitto.stop()
        wait_until(lambda: ask(port, "/health")[0] == 503, what="the loss to be said")
        state = json.loads(ask(port, "/health")[2])
        assert not state["is_well"]
        assert state["problem"]


@pytest.mark.slow
@pytest.mark.mosquitto
def test_a_signal_lets_it_follow_the_changed_file_and_every_line_it_says_is_json(site_file, mosquitto):
    with running_worker(site_file) as worker:
        wait_until(lambda: connected(worker), what="the broker")
        queries = Queries(worker.store)
        assert worker.process is not None
        text = site_file.read_text()
        site_file.write_text(text.replace("topic: quay/s0", "topic: quay/renamed"))
        worker.process.send_signal(signal.SIGHUP)
        wait_until(lambda: queries.site_text()[0] == 2, what="the new revision")
        publish(mosquitto, ("quay/renamed", payload(START_US, 31.0)))
        wait_until(lambda: "s0" in queries.latest(), what="a reading on the new topic")
        site_file.write_text(text.replace("tank: t0", "tank: t9"))
        worker.process.send_signal(signal.SIGHUP)
        wait_until(lambda: "site file refused" in worker.log(), what="the refusal")
        publish(mosquitto, ("quay/renamed", payload(START_US + 1, 31.0)))
        wait_until(lambda: queries.reading_count() == 2, what="work to go on with the old file")
        assert queries.site_text()[0] == 2
        assert worker.stop() == 0
    lines = [json.loads(line) for line in worker.log().splitlines()]
    assert all({"event", "level", "timestamp"} <= set(line) for line in lines)
    (refused,) = [line for line in lines if line["event"] == "site file refused"]
    assert refused["level"] == "error"
    assert "t9" in refused["reason"]
    assert "line" in refused["reason"]


@pytest.mark.slow
@pytest.mark.mosquitto
def test_a_second_worker_of_one_store_is_refused_and_a_killed_one_makes_room(site_file):
    with running_worker(site_file) as worker:
        command = [sys.executable, "-P", "-m", "dashboard.terminal.command", "watch", "--site", str(site_file)]
        second = subprocess.run([*command, "--health-port", "0"], capture_output=True, text=True, timeout=60)
        assert second.returncode == 1
        assert worker.process is not None
        assert f"in use by another worker (process {worker.process.pid})" in second.stderr
        worker.kill()
        assert is_gone(worker.process.pid)
        worker.start()
        assert worker.stop() == 0


@pytest.mark.slow
def test_without_a_broker_it_starts_waits_and_stops(tmp_path):
    site_file = tmp_path / "site.yaml"
    site_file.write_text(site_text(port=free_port()))
    with running_worker(site_file) as worker:
        queries = Queries(worker.store)
        wait_until(lambda: queries.meta().get("broker_problem", "") != "", what="the problem to be noted")
        assert queries.meta()["broker_connected"] == 0
        assert worker.stop() == 0


def test_a_broken_site_file_is_said_line_by_line_and_no_store_is_made(tmp_path, capsys):
    site_file = tmp_path / "site.yaml"
    site_file.write_text(site_text(port=1).replace("tank: t0", "tank: t9"))
    assert main(["watch", "--site", str(site_file)]) == 1
    said = capsys.readouterr().err
    assert "site.yaml" in said
    assert "t9" in said
    with pytest.raises(MissingStoreError):
        Queries(tmp_path / "store").meta()
