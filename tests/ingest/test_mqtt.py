"""What a broker and a client do behind one's back, each met with a real mosquitto."""

from __future__ import annotations

import json
import shutil
import subprocess
import threading
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path

import paho.mqtt.client as paho
import pytest
from paho.mqtt.enums import CallbackAPIVersion

from ingest.broker import Broker, free_port
from ingest.clock import FakeClock, SystemClock
from ingest.mqtt import Access, Intake, Received
from tests.harness.hatchery import running_worker, site_text
from tests.harness.listener import Listener
from tests.harness.process import wait_until

pytestmark = pytest.mark.mosquitto

TOPICS = ("quay/s0", "quay/s1")


def access(broker: Broker, **changes) -> Access:
    given = {"host": broker.host, "port": broker.port, "client_id": "euryhale-quay", "status_topic": "quay/status"}
    return Access(**{**given, **changes})


@contextmanager
def listening(access: Access, *, topics: Sequence[str] = TOPICS, clock=None, **options) -> Iterator[Intake]:
    intake = Intake(access, topics, clock=clock or SystemClock(), **options)
    intake.start()
    try:
        yield intake
    finally:
        intake.stop()


def wait_connected(intake: Intake) -> None:
    wait_until(lambda: intake.is_connected, what=f"a connection; the last problem: {intake.last_problem}")


def subscribed(broker: Broker, **changes) -> None:
    """Let the session be known to the broker, then leave."""
    with (
        listening(access(broker, **changes)) as intake,
        Listener(broker, "$SYS/broker/subscriptions/count", name="look"),
    ):
        wait_connected(intake)
        # The broker answers in order: once a later subscription of the same client is confirmed, the first are there.
        done = threading.Event()
        intake._client.on_subscribe = lambda *_: done.set()
        intake.resubscribe(TOPICS)
        assert done.wait(30)


def publish(broker: Broker, bodies: Sequence[bytes], *, topic: str = "quay/s0", retain: bool = False, **login) -> None:
    client = paho.Client(CallbackAPIVersion.VERSION2, client_id="sensor")
    if login:
        client.username_pw_set(login["user"], login["password"])
    client.connect(broker.host, broker.port)
    client.loop_start()
    try:
        sent = [client.publish(topic, body, qos=1, retain=retain) for body in bodies]
        for item in sent:
            item.wait_for_publish(60)
            assert item.is_published()
    finally:
        client.disconnect()
        client.loop_stop()


def bodies(count: int, start: int = 0) -> list[bytes]:
    return [b"%d" % index for index in range(start, start + count)]


def collect(intake: Intake, count: int, *, has_to_acknowledge: bool = True, most: int = 1000) -> list[Received]:
    """Take messages as the worker does until there are *count* different ones."""
    taken: list[Received] = []

    def enough() -> bool:
        messages = intake.take(most)
        if has_to_acknowledge:
            intake.acknowledge(messages)
        taken.extend(messages)
        return len({message.payload for message in taken}) >= count

    wait_until(enough, what=f"{count} messages")
    return taken


def payloads(messages: Sequence[Received]) -> list[bytes]:
    return [message.payload for message in messages]


def assert_nothing_is_left(broker: Broker, **changes) -> None:
    """A client of the same session, after a marker that was published last, has heard the marker alone."""
    publish(broker, [b"marker"])
    with listening(access(broker, **changes)) as intake:
        assert payloads(collect(intake, 1)) == [b"marker"]


class BrokenOnce(FakeClock):
    """A clock that fails once when it is told to."""

    has_to_fail = False

    def now_us(self) -> int:
        if self.has_to_fail:
            self.has_to_fail = False
            raise OSError("no time")
        return super().now_us()


def test_an_exception_in_the_callback_does_not_end_the_network_thread(mosquitto):
    clock = BrokenOnce()
    with listening(access(mosquitto), clock=clock) as intake:
        wait_connected(intake)
        publish(mosquitto, [b"before"])
        collect(intake, 1)
        clock.has_to_fail = True
        publish(mosquitto, bodies(50))
        assert payloads(collect(intake, 49, has_to_acknowledge=False)) == bodies(49, 1)
        assert "could not be taken in" in intake.last_problem
        mosquitto.restart()
        # What was not acknowledged comes again, the one that was not taken in too.
        assert set(payloads(collect(intake, 50))) >= set(bodies(50))


def test_a_broker_that_is_down_at_the_start_is_waited_for(tmp_path):
    broker = Broker("mosquitto", folder=tmp_path, port=free_port())
    with listening(access(broker)) as intake:
        wait_until(lambda: intake.last_problem != "", what="the worker to notice")
        assert "cannot be reached" in intake.last_problem
        assert not intake.is_connected
        with broker:
            wait_connected(intake)
            assert intake.last_problem == ""
            publish(broker, bodies(10))
            assert payloads(collect(intake, 10)) == bodies(10)


@pytest.mark.parametrize("is_version_5", [False, True])
def test_after_a_restart_of_the_broker_subscriptions_are_back_and_nothing_is_lost(mosquitto, is_version_5):
    with listening(access(mosquitto, is_version_5=is_version_5)) as intake:
        wait_connected(intake)
        publish(mosquitto, bodies(100))
        taken = collect(intake, 100, has_to_acknowledge=False)
        intake.acknowledge(taken[:60])
        mosquitto.restart()
        publish(mosquitto, bodies(100, 100))
        again: list[bytes] = []

        def is_complete() -> bool:
            messages = intake.take(1000)
            intake.acknowledge(messages)
            again.extend(payloads(messages))
            return set(again) >= set(bodies(140, 60))

        # Acknowledgements that the broker has not seen before its end are in vain: some more may come twice.
        wait_until(is_complete, what="what was not acknowledged, and what came after the restart")
        assert intake.connects >= 2
        assert [body for body in again if int(body) >= 100] == bodies(100, 100), "in order"


@pytest.mark.parametrize("is_version_5", [False, True])
def test_five_thousand_messages_wait_for_a_worker_that_is_away(mosquitto, is_version_5):
    subscribed(mosquitto, is_version_5=is_version_5)
    publish(mosquitto, bodies(5000))
    with listening(access(mosquitto, is_version_5=is_version_5)) as intake:
        assert payloads(collect(intake, 5000)) == bodies(5000)
    assert_nothing_is_left(mosquitto, is_version_5=is_version_5)


@pytest.mark.parametrize(("is_version_5", "letter"), [(False, "p2"), (True, "p5")])
def test_the_version_is_that_of_the_setting(mosquitto, is_version_5, letter):
    """mosquitto says the version of each connection in its log: p2 is 3.1.1, p5 is 5."""
    with listening(access(mosquitto, is_version_5=is_version_5)) as intake:
        wait_connected(intake)
        wait_until(
            lambda: f"as euryhale-quay ({letter}, c0" in mosquitto.log_path.read_text(),
            what="the version in the broker's log",
        )


def test_what_is_not_acknowledged_comes_again_and_what_is_does_not(mosquitto):
    subscribed(mosquitto)
    publish(mosquitto, bodies(200))
    with listening(access(mosquitto)) as intake:
        taken = collect(intake, 200, has_to_acknowledge=False)
        intake.acknowledge(taken[:80])
    with listening(access(mosquitto)) as intake:
        assert payloads(collect(intake, 120)) == bodies(120, 80)
    assert_nothing_is_left(mosquitto)


def test_acknowledgements_of_an_earlier_connection_are_dropped(mosquitto):
    with listening(access(mosquitto)) as intake:
        wait_connected(intake)
        publish(mosquitto, bodies(20))
        stale = collect(intake, 20, has_to_acknowledge=False)
        mosquitto.restart()
        fresh = collect(intake, 20, has_to_acknowledge=False)
        assert {message.connection for message in stale}.isdisjoint({message.connection for message in fresh})
        sent = []
        right, intake._client.ack = intake._client.ack, lambda *given: sent.append(given)
        intake.acknowledge(stale)
        assert sent == []
        intake.acknowledge(fresh)
        assert len(sent) == 20
        intake._client.ack = right
    with listening(access(mosquitto)) as intake:
        assert set(payloads(collect(intake, 20))) == set(bodies(20)), "none of them was acknowledged by mistake"


def test_acknowledgements_between_two_connections_are_stale_already(mosquitto):
    """A packet id that is acknowledged on the next connection may mean another message there."""
    with listening(access(mosquitto)) as intake:
        wait_connected(intake)
        publish(mosquitto, bodies(5))
        stale = collect(intake, 5, has_to_acknowledge=False)
        mosquitto.kill()
        wait_until(lambda: not intake.is_connected, what="the loss to be noticed")
        sent = []
        intake._client.ack = lambda *given: sent.append(given)
        intake.acknowledge(stale)
        assert sent == []


def test_a_full_queue_holds_the_broker_back_and_loses_nothing(mosquitto):
    subscribed(mosquitto)
    publish(mosquitto, bodies(3000))
    with listening(access(mosquitto), queue_limit=10) as intake:
        most = 0
        taken: list[Received] = []

        def enough() -> bool:
            nonlocal most
            most = max(most, intake.waiting)
            messages = intake.take(7)
            intake.acknowledge(messages)
            taken.extend(messages)
            return len(taken) >= 3000

        wait_until(lambda: intake.waiting == 10, what="the queue to be full")
        wait_until(enough, what="3,000 messages")
        assert most <= 10
        assert payloads(taken) == bodies(3000)
    assert_nothing_is_left(mosquitto)


def test_a_worker_that_stops_with_a_full_queue_does_stop(mosquitto):
    subscribed(mosquitto)
    publish(mosquitto, bodies(100))
    with listening(access(mosquitto), queue_limit=10) as intake:
        wait_until(lambda: intake.waiting == 10, what="the queue to be full")
    with listening(access(mosquitto)) as intake:
        assert payloads(collect(intake, 100)) == bodies(100)


def test_a_retained_message_says_so(mosquitto):
    publish(mosquitto, [b"old"], retain=True)
    with listening(access(mosquitto)) as intake:
        (old,) = collect(intake, 1)
        assert (old.payload, old.is_retained) == (b"old", True)
        publish(mosquitto, [b"new"], retain=True)
        (new,) = collect(intake, 1)
        assert (new.payload, new.is_retained) == (b"new", False)


def test_following_a_changed_site_leaves_old_topics_and_hears_new_ones(mosquitto):
    with listening(access(mosquitto)) as intake:
        wait_connected(intake)
        intake.resubscribe(["quay/s1", "quay/s2"])
        publish(mosquitto, [b"first"], topic="quay/s2")
        collect(intake, 1)
        publish(mosquitto, [b"gone"], topic="quay/s0")
        publish(mosquitto, [b"kept"], topic="quay/s1")
        publish(mosquitto, [b"new"], topic="quay/s2")
        assert payloads(collect(intake, 2)) == [b"kept", b"new"]
        mosquitto.restart()
        publish(mosquitto, [b"gone"], topic="quay/s0")
        publish(mosquitto, [b"again"], topic="quay/s2")
        assert payloads(collect(intake, 1)) == [b"again"]


def test_more_topics_than_one_packet_holds_are_all_heard(mosquitto):
    topics = [f"quay/s{index}" for index in range(450)]
    with listening(access(mosquitto), topics=topics) as intake:
        wait_connected(intake)
        publish(mosquitto, [b"x"], topic="quay/s0")
        collect(intake, 1)
        publish(mosquitto, [b"last"], topic="quay/s449")
        assert collect(intake, 1)[0].topic == "quay/s449"


def test_what_the_broker_has_dropped_is_known(mosquitto):
    with listening(access(mosquitto)) as intake:
        wait_connected(intake)
        for payload, expected in ((b"17", 17), (b"many", 17), (b"\xff", 17), (b"18", 18)):
            message = paho.MQTTMessage(topic=b"$SYS/broker/publish/messages/dropped")
            message.payload = payload
            intake._on_message(intake._client, None, message)
            assert intake.dropped_by_broker == expected
        assert intake.waiting == 0


def passwords(folder: Path) -> list[str]:
    program = shutil.which("mosquitto_passwd")
    if program is None:
        pytest.skip("mosquitto_passwd is not on the path; get it with: apt-get install mosquitto")
    folder.mkdir(exist_ok=True)
    file = folder / "passwords"
    subprocess.run([program, "-b", "-c", str(file), "worker", "right"], check=True, capture_output=True)
    return [f"password_file {file}"]


def test_a_wrong_password_is_refused_and_said_and_the_right_one_works(tmp_path):
    lines = passwords(tmp_path / "broker")
    with Broker("mosquitto", folder=tmp_path / "broker", lines=lines, is_anonymous=False) as broker:
        for wrong in ({}, {"user": "worker", "password": "wrong"}, {"user": "nobody", "password": "right"}):
            with listening(access(broker, **wrong)) as intake:
                wait_until(lambda: "refused" in intake.last_problem, what="the refusal")
                assert not intake.is_connected
                assert "uthori" in intake.last_problem
        with listening(access(broker, user="worker", password="right")) as intake:
            wait_connected(intake)
            publish(broker, bodies(3), user="worker", password="right")
            assert payloads(collect(intake, 3)) == bodies(3)


def test_a_password_is_not_shown_with_the_access():
    assert "right" not in repr(Access("h", 1, "c", user="worker", password="right"))


def certificates(folder: Path) -> tuple[Path, list[str]]:
    """Return an authority's certificate, and mosquitto's lines for a listener that it vouches for."""
    if shutil.which("openssl") is None:
        pytest.skip("openssl is not on the path; get it with: apt-get install openssl")
    folder.mkdir(parents=True, exist_ok=True)

    def run(*words: str) -> None:
        subprocess.run(["openssl", *words], check=True, capture_output=True, cwd=folder)

    run("req", "-x509", "-newkey", "rsa:2048", "-nodes", "-keyout", "ca.key", "-out", "ca.crt", "-days", "2",
        "-subj", "/CN=Test authority", "-addext", "basicConstraints=critical,CA:TRUE",
        "-addext", "keyUsage=critical,keyCertSign,cRLSign")  # fmt: skip
    run("req", "-newkey", "rsa:2048", "-nodes", "-keyout", "server.key", "-out", "server.csr", "-subj", "/CN=127.0.0.1")
    (folder / "names").write_text("subjectAltName=IP:127.0.0.1\nauthorityKeyIdentifier=keyid\n")
    run("x509", "-req", "-in", "server.csr", "-CA", "ca.crt", "-CAkey", "ca.key", "-CAcreateserial", "-days", "2",
        "-out", "server.crt", "-extfile", "names")  # fmt: skip
    return folder / "ca.crt", [f"certfile {folder / 'server.crt'}", f"keyfile {folder / 'server.key'}"]


def test_tls_with_the_sites_own_authority_works_and_another_is_not_believed(tmp_path):
    authority, lines = certificates(tmp_path / "keys")
    other, _ = certificates(tmp_path / "others")
    with Broker("mosquitto", folder=tmp_path / "broker", lines=lines) as broker:
        with listening(access(broker, is_tls=True, ca_file=authority)) as intake:
            wait_connected(intake)
        for options in ({"is_tls": True, "ca_file": other}, {"is_tls": True}):
            with listening(access(broker, **options)) as intake:
                wait_until(lambda: intake.last_problem != "", what="the refusal")
                assert "certificate" in intake.last_problem.lower()
                assert not intake.is_connected


def states(listener: Listener) -> list[str]:
    return [json.loads(body)["state"] for body in listener.payloads]


@pytest.mark.slow
def test_others_see_whether_the_worker_runs_has_stopped_or_was_lost(mosquitto, tmp_path):
    site_file = tmp_path / "site.yaml"
    site_file.write_text(site_text(port=mosquitto.port))
    topic = "euryhale/quay/worker/status"
    with Listener(mosquitto, topic, name="watch") as watch, running_worker(site_file) as worker:
        wait_until(lambda: states(watch)[-1:] == ["running"], what="the worker to say that it runs")
        worker.kill()
        wait_until(lambda: states(watch)[-1:] == ["lost"], what="the broker to say that it is lost")
        worker.start()
        wait_until(lambda: states(watch)[-1:] == ["running"], what="the worker to be back")
        assert worker.stop() == 0
        wait_until(lambda: states(watch)[-1:] == ["stopped"], what="the worker's farewell")
    with Listener(mosquitto, topic, name="later") as later:
        wait_until(lambda: states(later) == ["stopped"], what="the state that is kept for who comes later")
    assert later.topics == [topic]
