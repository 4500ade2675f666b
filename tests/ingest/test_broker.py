from __future__ import annotations

import os
import signal
import subprocess
import sys
from pathlib import Path

import paho.mqtt.client as paho
import pytest
from paho.mqtt.enums import CallbackAPIVersion

from ingest.broker import MOSQUITTO_LINES, Broker, BrokerError, available_kind, free_port, has_mosquitto
from tests.harness.broker import NEEDS_EMBEDDED, NEEDS_MOSQUITTO
from tests.harness.listener import Listener
from tests.harness.process import is_gone, wait_until

KINDS = [
    pytest.param("mosquitto", marks=[NEEDS_MOSQUITTO, pytest.mark.mosquitto]),
    pytest.param("embedded", marks=NEEDS_EMBEDDED),
]
STARTER = """
import sys, time
from pathlib import Path
from ingest.broker import Broker
print(Broker(sys.argv[1], folder=Path(sys.argv[2])).start().pid, flush=True)
time.sleep(600)
"""


def publish(broker: Broker, count: int, *, protocol: int = paho.MQTTv311) -> None:
    client = paho.Client(CallbackAPIVersion.VERSION2, client_id="speaker", protocol=protocol)
    client.max_inflight_messages_set(200)
    client.connect(broker.host, broker.port)
    client.loop_start()
    infos = [client.publish("water/level", str(number), qos=1) for number in range(count)]
    for info in infos:
        info.wait_for_publish(60)
    client.disconnect()
    client.loop_stop()


@pytest.mark.parametrize("kind", KINDS)
def test_a_message_goes_through(kind: str, tmp_path: Path) -> None:
    with Broker(kind, folder=tmp_path) as broker:
        listener = Listener(broker, "water/#")
        publish(broker, 50)
        wait_until(lambda: len(listener.payloads) == 50, what="50 messages")
        listener.leave()
        assert [int(payload) for payload in listener.payloads] == list(range(50))


@pytest.mark.parametrize("kind", KINDS)
def test_mqtt_5_is_spoken(kind: str, tmp_path: Path) -> None:
    with Broker(kind, folder=tmp_path, protocol="5") as broker:
        listener = Listener(broker, "water/#", protocol="5")
        publish(broker, 3, protocol=paho.MQTTv5)
        wait_until(lambda: listener.payloads == [b"0", b"1", b"2"], what="the messages")
        listener.leave()


@pytest.mark.parametrize("kind", KINDS)
def test_killed_and_restarted_it_listens_on_the_same_port(kind: str, tmp_path: Path) -> None:
    with Broker(kind, folder=tmp_path) as broker:
        first_pid, port = broker.pid, broker.port
        broker.kill()
        assert not broker.is_alive
        assert broker.pid is None
        assert first_pid is not None
        assert is_gone(first_pid)
        broker.restart()
        assert broker.is_alive
        assert broker.port == port
        assert broker.pid != first_pid
    assert not broker.is_alive


@pytest.mark.parametrize("kind", KINDS)
def test_it_ends_with_the_process_that_started_it(kind: str, tmp_path: Path) -> None:
    starter = subprocess.Popen([sys.executable, "-P", "-c", STARTER, kind, str(tmp_path)], stdout=subprocess.PIPE)
    assert starter.stdout is not None
    pid = int(starter.stdout.readline())
    assert not is_gone(pid)
    os.kill(starter.pid, signal.SIGKILL)
    starter.wait()
    starter.stdout.close()
    wait_until(lambda: is_gone(pid), what="the broker to end after its starter")


@pytest.mark.parametrize("kind", KINDS)
def test_a_port_that_is_taken_is_refused_with_words(kind: str, tmp_path: Path) -> None:
    with Broker(kind, folder=tmp_path / "first") as first:
        second = Broker(kind, port=first.port, folder=tmp_path / "second")
        with pytest.raises(BrokerError, match=f"port {first.port} on 127.0.0.1 is taken"):
            second.start()
        assert not second.is_alive


@pytest.mark.parametrize("kind", KINDS)
def test_only_loopback_is_bound(kind: str, tmp_path: Path) -> None:
    tables = [Path(f"/proc/net/{name}") for name in ("tcp", "tcp6")]
    if not all(table.exists() for table in tables):
        pytest.skip("no /proc/net here; this needs Linux")
    with Broker(kind, folder=tmp_path) as broker:
        suffix = f":{broker.port:04X}"
        rows = [line.split() for table in tables for line in table.read_text().splitlines()[1:]]
        bound = {row[1] for row in rows if row[1].endswith(suffix) and row[3] == "0A"}
    assert bound == {f"0100007F{suffix}"}


@pytest.mark.mosquitto
@pytest.mark.parametrize(("how", "may_be_lost"), [("stop in order", 0), ("power cut", 1000)])
def test_the_queue_of_an_absent_worker_outlives_the_broker(mosquitto: Broker, how: str, may_be_lost: int) -> None:
    Listener(mosquitto, "water/#").leave()
    publish(mosquitto, 3000)  # three times what a broker left to its defaults would keep
    if how == "power cut":
        mosquitto.kill()
    mosquitto.restart()
    listener = Listener(mosquitto, "water/#")
    wait_until(lambda: len(listener.payloads) >= 3000 - may_be_lost, what="the queue")
    listener.leave()
    assert [int(payload) for payload in listener.payloads] == list(range(len(listener.payloads)))


@pytest.mark.mosquitto
def test_its_configuration_holds_every_line_that_keeps_messages(mosquitto: Broker) -> None:
    written = (mosquitto.folder / "mosquitto.conf").read_text(encoding="utf-8").splitlines()
    assert set(MOSQUITTO_LINES) <= set(written)


@pytest.mark.mosquitto
def test_it_can_be_stopped_the_moment_it_listens(tmp_path: Path) -> None:
    """mosquitto forgets a signal that comes between its first listening and its loop: it has to be asked again."""
    for _ in range(20):
        broker = Broker("mosquitto", folder=tmp_path).start()
        pid = broker.pid
        broker.stop()
        assert pid is not None
        assert is_gone(pid)
    assert "terminating" in broker.log_path.read_text(encoding="utf-8")


@pytest.mark.mosquitto
def test_a_wrong_line_is_shown_with_the_end_of_the_log(tmp_path: Path) -> None:
    if not has_mosquitto():
        pytest.skip("mosquitto is not on the path; get it with: apt-get install mosquitto")
    broker = Broker("mosquitto", folder=tmp_path, lines=["no_such_line true"])
    with pytest.raises(BrokerError, match="no_such_line"):
        broker.start()
    assert not broker.is_alive


@NEEDS_EMBEDDED
def test_the_embedded_broker_refuses_lines_meant_for_mosquitto(tmp_path: Path) -> None:
    with pytest.raises(BrokerError, match="for mosquitto"):
        Broker("embedded", folder=tmp_path, lines=["password_file x"]).start()


def test_a_temporary_folder_goes_with_the_broker() -> None:
    broker = Broker().start()
    assert broker.log_path.exists()
    broker.stop()
    broker.stop()
    assert not broker.folder.exists()


def test_the_kind_follows_the_machine() -> None:
    assert available_kind() == ("mosquitto" if has_mosquitto() else "embedded")


def test_free_ports_can_be_bound() -> None:
    assert 0 < free_port() < 65536
