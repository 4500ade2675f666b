"""The sending threads: order, independence, and a thread that dies."""

from __future__ import annotations

import threading

import pytest

from ingest.clock import FakeClock, SystemClock
from ingest.notify.sending import BACK_OFF_S, BURST, Parcel, Posted, Sender, next_attempt_us
from tests.harness.process import wait_until


class Slot:
    """A way that keeps what it is handed; the address `stuck` waits until it is let go, `deadly` kills its thread."""

    def __init__(self) -> None:
        self.taken: list[int] = []
        self.go = threading.Event()

    def __call__(self, parcel: Parcel) -> Posted:
        if parcel.address == "stuck":
            self.go.wait(30)
        if parcel.address == "deadly":
            raise SystemExit
        self.taken.append(parcel.delivery)
        return Posted(is_delivered=True, detail="")


def parcel(number: int, address: str = "a") -> Parcel:
    return Parcel(number, "webhook", address, "title", "body")


def sender_of(slot: Slot) -> Sender:
    return Sender(slot, SystemClock(), spacing_s={"webhook": 0.0})


def test_one_address_gets_its_messages_in_order():
    slot = Slot()
    sender = sender_of(slot)
    for number in range(20):
        sender.hand_over(parcel(number))
    wait_until(lambda: len(slot.taken) == 20, what="all parcels")
    assert slot.taken == list(range(20))
    assert sender.in_flight, "not reported yet"
    reports = []
    wait_until(lambda: bool(reports.extend(sender.reports()) or len(reports) == 20), what="all reports")
    assert sender.in_flight == frozenset()
    sender.stop()


def test_an_address_that_hangs_holds_up_no_other():
    slot = Slot()
    sender = sender_of(slot)
    sender.hand_over(parcel(1, "stuck"))
    sender.hand_over(parcel(2))
    wait_until(lambda: slot.taken == [2], what="the free address")
    assert 1 in sender.in_flight
    slot.go.set()
    wait_until(lambda: 1 in slot.taken, what="the stuck one")
    sender.stop()


@pytest.mark.filterwarnings("ignore::pytest.PytestUnhandledThreadExceptionWarning")
def test_a_thread_that_dies_is_a_failed_attempt_and_a_new_one_takes_over():
    slot = Slot()
    sender = sender_of(slot)
    sender.hand_over(parcel(1, "deadly"))
    reports = []
    wait_until(lambda: bool(reports.extend(sender.reports()) or reports), what="the report of the dead")
    assert reports[0].posted == (False, "the sending thread died")
    assert sender.in_flight == frozenset()
    sender.hand_over(parcel(2, "deadly"))
    wait_until(lambda: bool(reports.extend(sender.reports()) or len(reports) == 2), what="another")
    sender.stop()


def test_a_burst_leaves_at_once_and_more_is_spaced():
    slot, clock = Slot(), FakeClock()
    sender = Sender(slot, clock, spacing_s={"webhook": 3600.0})
    for number in range(BURST + 1):
        sender.hand_over(parcel(number))
    wait_until(lambda: len(slot.taken) == BURST, what="the burst")
    assert BURST in sender.in_flight
    sender.stop()
    assert len(sender.reports()) == BURST


def test_threads_have_names():
    sender = sender_of(Slot())
    sender.hand_over(parcel(1, "ana-mail"))
    assert "notify-ana-mail" in {thread.name for thread in threading.enumerate()}
    sender.stop()


def test_waits_grow_and_stop_growing():
    waits = [next_attempt_us(made, now_us=0) / 1e6 for made in range(1, 12)]
    assert waits[: len(BACK_OFF_S)] == list(BACK_OFF_S)
    assert waits == sorted(waits)
    assert waits[-1] == BACK_OFF_S[-1]
