from __future__ import annotations

import threading
from collections.abc import Iterator
from contextlib import contextmanager

import pytest

from ingest.broker import Broker, free_port
from ingest.clock import FakeClock
from ingest.mqtt import Access
from ingest.simulator.feed import simulate
from ingest.simulator.live import run_live
from ingest.simulator.publishing import Publisher, PublishingError
from tests.harness.broker import NEEDS_EMBEDDED, NEEDS_MOSQUITTO
from tests.harness.listener import Listener
from tests.harness.process import wait_until
from tests.ingest.simulator.conftest import ANCHOR_US, HOUR_US
from tests.ingest.simulator.examples import one_tank

KINDS = [
    pytest.param("mosquitto", marks=[NEEDS_MOSQUITTO, pytest.mark.mosquitto]),
    pytest.param("embedded", marks=NEEDS_EMBEDDED),
]


def access(broker: Broker, *, is_version_5: bool = False) -> Access:
    return Access(broker.host, broker.port, "sensors", is_version_5=is_version_5)


@pytest.mark.parametrize("protocol", ["3.1.1", "5"])
@pytest.mark.parametrize("kind", KINDS)
def test_everything_handed_over_arrives_in_order_and_is_acknowledged(kind, protocol, tmp_path):
    with (
        Broker(kind, folder=tmp_path, protocol=protocol) as broker,
        Listener(broker, "pond/#", protocol=protocol) as heard,
    ):
        with Publisher(access(broker, is_version_5=protocol == "5"), in_flight=50) as publisher:
            publisher.wait_connected()
            for number in range(2000):
                assert publisher.publish("pond/1", str(number).encode())
                assert publisher.waiting <= 50
            publisher.confirm()
        assert (publisher.acknowledged, publisher.refused, publisher.waiting) == (2000, 0, 0)
        wait_until(lambda: len(heard.payloads) == 2000, what="all messages")
        assert [int(payload) for payload in heard.payloads] == list(range(2000))


@pytest.mark.mosquitto
def test_a_broker_of_version_5_that_takes_few_at_a_time_is_heeded(tmp_path):
    """mosquitto throws a client out that has more in flight than it said it takes."""
    with (
        Broker("mosquitto", folder=tmp_path, protocol="5", lines=["max_inflight_messages 7"]) as broker,
        Publisher(access(broker, is_version_5=True)) as publisher,
    ):
        publisher.wait_connected()
        for number in range(500):
            publisher.publish("pond/1", str(number).encode())
            assert publisher.waiting <= 7
        publisher.confirm()
        assert publisher.acknowledged == 500
        assert "disconnect" not in broker.log_path.read_text(encoding="utf-8").lower()


def test_no_broker_is_said_with_its_place():
    port = free_port()
    refused = pytest.raises(PublishingError, match=f"127.0.0.1:{port} did not answer")
    with Publisher(Access("127.0.0.1", port, "sensors")) as publisher, refused:
        publisher.wait_connected(0.2)


@pytest.mark.mosquitto
def test_a_refused_client_hears_why(tmp_path):
    with (
        Broker("mosquitto", folder=tmp_path, is_anonymous=False) as broker,
        Publisher(access(broker)) as publisher,
        pytest.raises(PublishingError, match=r"refuses the client: .*uthori"),
    ):
        publisher.wait_connected()


@pytest.mark.mosquitto
def test_what_was_in_flight_when_the_broker_fell_is_sent_again(mosquitto: Broker):
    with Publisher(access(mosquitto), in_flight=20) as publisher:
        publisher.wait_connected()
        publisher.publish("pond/1", b"before")
        publisher.confirm()
        mosquitto.kill()
        wait_until(lambda: not publisher.is_connected, what="the loss to be noticed")
        for number in range(20):
            assert publisher.publish("pond/1", str(number).encode())
        assert not publisher.publish("pond/1", b"no place", limit_s=0.1)
        with pytest.raises(PublishingError, match="20 messages are not acknowledged"):
            publisher.confirm(0.1)
        mosquitto.restart()
        publisher.confirm()
    assert publisher.acknowledged == 21


@contextmanager
def living(broker: Broker, **given: object) -> Iterator[threading.Thread]:
    """The live half of a one-tank site in a thread, stopped and ended with the block."""
    stop = threading.Event()
    arguments = {"seed": 4, "stop": stop} | given
    live = threading.Thread(target=run_live, args=(one_tank(), broker.host, broker.port), kwargs=arguments)
    live.start()
    try:
        yield live
    finally:
        stop.set()
        live.join(30)
    assert not live.is_alive()


def test_live_goes_on_where_the_history_ended(tmp_path):
    """A clock that the test moves: the live messages are those that the history of the same scenario would hold."""
    clock = FakeClock(ANCHOR_US + 59_000_000)
    with Broker(folder=tmp_path) as broker, Listener(broker, "sandbank/#") as heard:
        with living(broker, clock=clock, anchor_us=ANCHOR_US, since_us=ANCHOR_US, warm_up_s=6 * 3600):
            for minute in range(1, 6):
                wait_until(lambda: len(heard.payloads) == minute, what=f"reading {minute}")  # noqa: B023
                clock.advance(60)
            wait_until(lambda: len(heard.payloads) == 6, what="the last reading")
        found = list(heard.payloads)
    history = simulate(
        one_tank(),
        start_us=ANCHOR_US - 6 * HOUR_US,
        end_us=ANCHOR_US + HOUR_US // 10,
        step_s=None,
        seed=4,
        anchor_us=ANCHOR_US,
    )
    assert found == [payload for sent_at_us, _, payload in history if sent_at_us >= ANCHOR_US]


def test_after_a_long_sleep_only_the_last_hour_is_sent(tmp_path):
    clock = FakeClock(ANCHOR_US)
    with (
        Broker(folder=tmp_path) as broker,
        Listener(broker, "sandbank/#") as heard,
        living(broker, clock=clock, since_us=ANCHOR_US - 60_000_000, warm_up_s=3600),
    ):
        wait_until(lambda: len(heard.payloads) == 1, what="the reading of the last minute")
        clock.advance(5 * 3600)
        wait_until(lambda: len(heard.payloads) == 61, what="the last hour")
        clock.advance(60)
        wait_until(lambda: len(heard.payloads) == 62, what="the minute after")
