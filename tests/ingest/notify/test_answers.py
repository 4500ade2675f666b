"""An answer by a broker outside that the site dials: the code in a message acknowledges as the person it was sent to."""

from __future__ import annotations

import json
import re

import pytest

from ingest.broker import Broker
from ingest.store.inbox import Inbox
from tests.harness.listener import Listener
from tests.harness.process import wait_until
from tests.ingest.notify.scene import PEOPLE, CallBench
from tests.ingest.notify.test_restarts import Hands

TOPIC = "quay/answers"
CODE = re.compile(r"[a-z]+\.[0-9]+\.[0-9]+\.[a-z2-7]{32}")


def people(port: int) -> str:
    return PEOPLE + f"acknowledgements: {{host: 127.0.0.1, port: {port}, topic: {TOPIC}, tls: false}}\n"


def code_of(hands: Hands, place: int = 0) -> str:
    (found,) = CODE.findall(hands.taken[place].body)
    return found


def desk_of(bench: CallBench):
    bench.step()
    return bench.worker.calling._desk


def called(bench: CallBench, hands: Hands) -> str:
    bench.fall("s0")
    bench.step_until(lambda: len(hands.taken) == 2, "the first call")
    return code_of(hands)


def test_a_code_acknowledges_every_alarm_of_its_message_as_its_person(tmp_path):
    hands = Hands()
    with CallBench(tmp_path, people=people(1), sensors=2, post=hands) as bench:
        bench.fall("s0", "s1")
        bench.step_until(lambda: len(hands.taken) == 2, "the first call")
        said = desk_of(bench).answer(f"going! {code_of(hands)}", Inbox(bench.store), now_us=bench.clock.now_us())
        assert said == "ana"
        bench.worker.take_commands(bench.stop)
        assert bench.alarm("t0", "salinity_low") == bench.alarm("t1", "salinity_low") == "acknowledged"
        bench.step()
        assert bench.phases() == ["paused"]
        (answered,) = bench.queries.events(kind_prefix="call.answered")
        assert answered[1].actor == "Ana Reis"
        acknowledged = bench.queries.events(kind_prefix="alarm.acknowledged")
        assert {event.actor for _, event in acknowledged} == {"Ana Reis"}


def test_a_code_is_used_once(tmp_path):
    hands = Hands()
    with CallBench(tmp_path, people=people(1), post=hands) as bench:
        code = called(bench, hands)
        desk, inbox = desk_of(bench), Inbox(bench.store)
        assert desk.answer(code, inbox, now_us=bench.clock.now_us()) == "ana"
        assert desk.answer(code, inbox, now_us=bench.clock.now_us()) == "used"
        bench.restart()
        assert desk_of(bench).answer(code, inbox, now_us=bench.clock.now_us()) == "used"


def test_a_tank_that_joined_later_still_calls(tmp_path):
    hands = Hands()
    with CallBench(tmp_path, people=people(1), sensors=2, post=hands) as bench:
        bench.minutes(2, {"s0": 31.0, "s1": 31.0})
        bench.minutes(4, {"s0": 27.0, "s1": 31.0})
        bench.step_until(lambda: len(hands.taken) == 2, "the first call")
        bench.minutes(4, {"s0": 27.0, "s1": 27.0})
        bench.step()
        assert desk_of(bench).answer(code_of(hands), Inbox(bench.store), now_us=bench.clock.now_us()) == "ana"
        bench.worker.take_commands(bench.stop)
        bench.step()
        assert bench.phases() == ["calling"]
        assert bench.alarm("t0", "salinity_low") == "acknowledged"
        assert bench.alarm("t1", "salinity_low") == "unacknowledged"


@pytest.mark.parametrize(
    ("spoil", "said"),
    [
        (lambda code: code.replace("ana.", "rui."), "wrong_seal"),
        (lambda code: code[:-5] + "aaaaa", "wrong_seal"),
        (lambda _: "hello", "unreadable"),
    ],
)
def test_what_is_not_the_sites_own_code_does_nothing(tmp_path, spoil, said):
    hands = Hands()
    with CallBench(tmp_path, people=people(1), post=hands) as bench:
        code = called(bench, hands)
        assert desk_of(bench).answer(spoil(code), Inbox(bench.store), now_us=bench.clock.now_us()) == said
        bench.worker.take_commands(bench.stop)
        assert bench.alarm("t0", "salinity_low") == "unacknowledged"


def test_a_late_answer_is_too_late(tmp_path):
    hands = Hands()
    with CallBench(tmp_path, people=people(1), post=hands) as bench:
        code = called(bench, hands)
        bench.clock.advance(13 * 3600)
        assert desk_of(bench).answer(code, Inbox(bench.store), now_us=bench.clock.now_us()) == "expired"


@pytest.mark.mosquitto
def test_the_answer_comes_by_a_broker_outside(tmp_path, mosquitto: Broker):
    hands = Hands()
    with CallBench(tmp_path, people=people(mosquitto.port), post=hands) as bench:
        code = called(bench, hands)
        bench.step_until(lambda: bench.worker.calling._answers.is_connected, "the site to dial")
        with Listener(mosquitto, TOPIC) as phone:
            phone._client.publish(TOPIC, json.dumps({"code": code}), qos=1)
            wait_until(lambda: bool(phone.payloads), what="the broker")
            bench.step_until(lambda: bool(bench.queries.events(kind_prefix="call.answered")), "the answer")
        bench.worker.take_commands(bench.stop)
        assert bench.alarm("t0", "salinity_low") == "acknowledged"
        bench.step()
        assert bench.phases() == ["paused"]
        assert bench.rows("SELECT answered_at FROM call_made")[0]["answered_at"] is not None
