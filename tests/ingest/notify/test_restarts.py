"""An end at every point between condition and delivery: delivered at least once, and the store agrees with itself."""

from __future__ import annotations

import sqlite3
import threading
from contextlib import closing

import pytest

from ingest.notify.sending import Parcel, Posted
from ingest.store.ledger import first_broken_id
from tests.ingest.notify.scene import ONE_PERSON, PEOPLE, CallBench


class Hands:
    """Takes parcels as a server would; `fails` says how many attempts go wrong first, `waits` holds them back."""

    def __init__(self, fails: int = 0) -> None:
        self.taken: list[Parcel] = []
        self.fails = fails
        self.go = threading.Event()
        self.go.set()
        self._lock = threading.Lock()

    def __call__(self, parcel: Parcel) -> Posted:
        self.go.wait(30)
        with self._lock:
            if self.fails:
                self.fails -= 1
                return Posted(is_delivered=False, detail="not yet")
            self.taken.append(parcel)
            return Posted(is_delivered=True, detail="")

    def channels(self) -> set[str]:
        return {parcel.channel for parcel in self.taken}


class End(Exception):
    """The program ends here."""


POINTS = (
    ("ingest.store.block", "write"),  # inside the transaction of the event
    ("ingest.notify.desk.CallDesk", "follow"),  # event and outbox row stand, no call yet
    ("ingest.store.calls", "write_call_out"),  # inside the transaction of the call
    ("ingest.store.calls", "add_delivery"),
    ("ingest.notify.desk.CallDesk", "write"),  # call and deliveries stand, no text yet
    ("ingest.store.calls", "write_text"),  # inside the transaction of the text
    ("ingest.notify.sending.Sender", "hand_over"),  # the text stands, nothing is on its way
    ("ingest.notify.desk.CallDesk", "report"),  # sent, not written down
    ("ingest.store.calls", "write_attempt"),  # inside the transaction of the attempt
)


def let_end(monkeypatch: pytest.MonkeyPatch, place: str, name: str, *, after: bool) -> list[int]:
    """Let the program end the first time that a function is called, before or after its work; return its calls."""
    import importlib

    module, _, last = place.rpartition(".")
    owner = getattr(importlib.import_module(module), last) if last[0].isupper() else importlib.import_module(place)
    original = getattr(owner, name)
    calls: list[int] = []

    def ending(*args: object, **kwargs: object) -> object:
        calls.append(1)
        if len(calls) > 1:
            return original(*args, **kwargs)
        if after:
            original(*args, **kwargs)
        raise End

    monkeypatch.setattr(owner, name, ending)
    return calls


def store_agrees(bench: CallBench) -> None:
    with closing(sqlite3.connect(bench.store / "store.db")) as connection:
        connection.row_factory = sqlite3.Row
        assert connection.execute("PRAGMA integrity_check").fetchone()[0] == "ok"
        assert first_broken_id(connection) is None
    assert bench.open_outbox() == 0
    events = {event_id for event_id, _ in bench.queries.events(kind_prefix="alarm.")}
    assert {row["id"] for row in bench.rows("SELECT id FROM call_out")} <= events
    made = bench.rows("SELECT count(*) AS n FROM call_made")[0]["n"]
    assert made == len(bench.queries.events(kind_prefix="call.made"))
    orphans = "SELECT * FROM delivery LEFT JOIN call_made USING (call_out, number) WHERE call_made.at IS NULL"
    assert bench.rows(orphans) == []


@pytest.mark.parametrize("after", [False, True], ids=["before", "after"])
@pytest.mark.parametrize(("place", "name"), POINTS, ids=[f"{place.split('.')[-1]}-{name}" for place, name in POINTS])
def test_an_end_at_any_point_loses_no_message(tmp_path, monkeypatch, place, name, after):
    hands = Hands()
    with CallBench(tmp_path, people=ONE_PERSON, post=hands) as bench:
        bench.minutes(2, {"s0": 31.0})
        calls = let_end(monkeypatch, place, name, after=after)
        ended = 0
        for _ in range(40):
            try:
                if bench.alarm("t0", "salinity_low") == "normal":
                    bench.minutes(1, {"s0": 27.0})
                bench.step()
            except End:
                ended += 1
                bench.restart()
        assert (ended, bool(calls)) == (1, True), "the program ended there once, and was started again"
        bench.step_until(lambda: hands.channels() == {"mail", "push"}, "both channels")
        bench.step_until(lambda: {r["outcome"] for r in bench.deliveries()} == {"delivered"}, "their reports")
        store_agrees(bench)
        assert bench.phases() == ["calling"]
        assert len(bench.deliveries()) == 2, "one call, whatever ended"
        assert len(hands.taken) <= 4, "at most once more than once"


def test_what_was_on_its_way_at_the_end_is_sent_again(tmp_path):
    hands = Hands()
    with CallBench(tmp_path, people=ONE_PERSON, post=hands) as bench:
        hands.go.clear()
        bench.fall("s0")
        bench.step()
        assert bench.worker.calling.condition()["deliveries_on_their_way"] == 2
        bench.restart()
        hands.go.set()
        bench.step_until(lambda: {r["outcome"] for r in bench.deliveries()} == {"delivered"}, "the second sending")
        assert hands.channels() == {"mail", "push"}
        assert {parcel.title for parcel in hands.taken} == {"URGENT: T0 too fresh"}
        store_agrees(bench)


def test_attempts_that_failed_go_on_where_they_were(tmp_path):
    hands = Hands(fails=4)
    with CallBench(tmp_path, people=ONE_PERSON, post=hands) as bench:
        bench.fall("s0")
        bench.step_until(lambda: hands.fails <= 2, "first attempts")
        bench.step_until(lambda: {row["attempts"] for row in bench.deliveries()} == {1}, "their reports")
        bench.restart()
        bench.step(30)
        bench.step_until(lambda: hands.fails == 0, "second attempts")
        bench.step_until(lambda: {row["attempts"] for row in bench.deliveries()} == {2}, "their reports")
        bench.step(60)
        bench.step_until(lambda: {r["outcome"] for r in bench.deliveries()} == {"delivered"}, "delivery")
        assert [row["number"] for row in bench.rows("SELECT number FROM delivery_attempt WHERE delivery = 1")] == [
            1,
            2,
            3,
        ]
        store_agrees(bench)


def test_a_call_out_goes_on_where_it_was(tmp_path):
    hands = Hands()
    with CallBench(tmp_path, people=ONE_PERSON, post=hands) as bench:
        bench.fall("s0")
        bench.step()
        before = bench.rows("SELECT body FROM call_out")
        bench.restart()
        bench.step()
        assert bench.rows("SELECT body FROM call_out") == before
        bench.act("alarm.acknowledge", "t0", "salinity_low")
        bench.restart()
        bench.step()
        assert bench.phases() == ["paused"]
        bench.restart()
        bench.step(901)
        assert bench.phases() == ["calling"]
        assert len({row["number"] for row in bench.deliveries()}) == 2


def test_a_clock_that_is_set_back_delays_no_call_and_no_attempt(tmp_path):
    hands = Hands(fails=2)
    with CallBench(tmp_path, people=PEOPLE, post=hands) as bench:
        bench.fall("s0")
        bench.step_until(lambda: len(bench.rows("SELECT * FROM delivery_attempt")) == 2, "the first attempts")
        bench.clock.step_wall(-7200)
        bench.step_until(lambda: hands.channels() == {"mail", "push"}, "the second attempts")
        bench.step(301)
        bench.step_until(lambda: "voice" in hands.channels(), "the next person")


def changed_site(bench: CallBench, old: str, new: str) -> None:
    text = bench.site_file.read_text()
    assert old in text
    bench.site_file.write_text(text.replace(old, new))
    assert bench.worker.reload(), bench.worker.last_problem


def test_people_declared_while_an_alarm_waits_are_called(tmp_path):
    hands = Hands()
    with CallBench(tmp_path, people="", post=hands) as bench:
        bench.fall("s0")
        bench.step()
        assert (bench.open_outbox(), bench.deliveries()) == (0, [])
        changed_site(bench, "tanks:\n", ONE_PERSON + "tanks:\n")
        bench.step_until(lambda: hands.channels() == {"mail", "push"}, "the call")
        bench.restart()
        bench.step()
        bench.step()
        assert len(bench.deliveries()) == 2, "one call, also after the next start"
        store_agrees(bench)


def test_a_tank_that_leaves_the_site_file_calls_nobody_any_more(tmp_path):
    hands = Hands()
    with CallBench(tmp_path, people=ONE_PERSON, sensors=2, post=hands) as bench:
        bench.fall("s0")
        bench.step()
        assert bench.phases() == ["calling"]
        text = bench.site_file.read_text()
        first, second = text.index("  - id: t0"), text.index("  - id: t1")
        without = text[:first] + text[second:]
        first, second = without.index("  - id: s0"), without.index("  - id: s1")
        bench.site_file.write_text(without[:first] + without[second:])
        assert bench.worker.reload(), bench.worker.last_problem
        bench.step()
        assert bench.phases() == ["over"]
