"""Messages leave here: a thread for each address, so that one that hangs holds up no other.

The worker's main loop hands parcels over and takes reports back; it alone writes to the store. What was handed over and
not reported when the program ended is handed over again after the next start: at least once.
"""

from __future__ import annotations

import queue
import threading
from collections import deque
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, NamedTuple, Protocol

import structlog

from ingest.clock import MICROSECONDS_PER_SECOND

if TYPE_CHECKING:
    from ingest.clock import Clock

log = structlog.get_logger(__name__)

SPACING_S = {"mail": 1.0, "sms": 1.0, "push": 0.5, "voice": 2.0, "webhook": 0.2}
"""Mean time between messages to one address, after a burst. Common practice; gateways refuse more."""
BURST = 5
"""So many messages to one address leave without a wait."""
BACK_OFF_S = (5.0, 10.0, 20.0, 40.0, 60.0, 120.0, 300.0)
"""Waits before the next attempt; the last one repeats."""
LEAVE_S = 2.0
"""How long the threads together may take to report what they are at, when told to stop."""


class Parcel(NamedTuple):
    """A message on its way; `delivery` is the store's number, `is_alarm` False for tests."""

    delivery: int
    channel: str
    address: str
    title: str
    body: str
    is_alarm: bool = True


class Posted(NamedTuple):
    """What became of one attempt."""

    is_delivered: bool
    detail: str


class Report(NamedTuple):
    """One attempt at a parcel, with its times. [us UTC]"""

    parcel: Parcel
    begun_at_us: int
    ended_at_us: int
    posted: Posted


class Post(Protocol):
    """Something that tries to deliver a parcel, once, and comes back within a bounded time."""

    def __call__(self, parcel: Parcel) -> Posted:
        """Try once."""
        ...


@dataclass(slots=True)
class _Lane:
    """The parcels of one address and the thread that sends them."""

    waiting: queue.SimpleQueue[Parcel | None]
    thread: threading.Thread
    handed: dict[int, Parcel] = field(default_factory=dict)
    """What was handed over and is not reported yet; touched by the main loop alone."""


class Sender:
    """The sending threads.

    Parameters
    ----------
    post : Post
        Called from the threads.
    clock : Clock
        Times of the attempts.
    spacing_s : dict of str to float
        Mean time between messages to one address after a burst, by kind of channel.
    """

    def __init__(self, post: Post, clock: Clock, *, spacing_s: dict[str, float] | None = None) -> None:
        self._post = post
        self._clock = clock
        self._spacing_s = SPACING_S if spacing_s is None else spacing_s
        self._lanes: dict[str, _Lane] = {}
        self._reports: queue.SimpleQueue[Report] = queue.SimpleQueue()
        self._stop = threading.Event()

    @property
    def in_flight(self) -> frozenset[int]:
        """Return the deliveries that are handed over and not reported."""
        return frozenset(delivery for lane in self._lanes.values() for delivery in lane.handed)

    def hand_over(self, parcel: Parcel) -> None:
        """Put a parcel on its way."""
        lane = self._lanes.get(parcel.address) or self._open(parcel.address)
        lane.handed[parcel.delivery] = parcel
        lane.waiting.put(parcel)

    def reports(self) -> list[Report]:
        """Return the attempts since the last call. A thread that died is told, and its parcels count as failed attempts."""
        found: list[Report] = []
        has_to_live = not self._stop.is_set()
        dead = [address for address, lane in self._lanes.items() if has_to_live and not lane.thread.is_alive()]
        while not self._reports.empty():
            report = self._reports.get_nowait()
            self._lanes[report.parcel.address].handed.pop(report.parcel.delivery, None)
            found.append(report)
        now_us = self._clock.now_us()
        for address in dead:
            lane = self._lanes.pop(address)
            log.error("a sending thread died", address=address, parcels=len(lane.handed))
            failed = Posted(is_delivered=False, detail="the sending thread died")
            found += [Report(parcel, now_us, now_us, failed) for parcel in lane.handed.values()]
        return found

    def stop(self) -> None:
        """Take no more; what is on its way has a moment to be reported, the rest is sent again after the next start."""
        self._stop.set()
        for lane in self._lanes.values():
            lane.waiting.put(None)
        until_s = self._clock.monotonic_s() + LEAVE_S
        for lane in self._lanes.values():
            lane.thread.join(max(0.0, until_s - self._clock.monotonic_s()))

    def _open(self, address: str) -> _Lane:
        waiting: queue.SimpleQueue[Parcel | None] = queue.SimpleQueue()
        thread = threading.Thread(target=self._send_all, args=(waiting,), name=f"notify-{address}", daemon=True)
        lane = self._lanes[address] = _Lane(waiting, thread)
        thread.start()
        return lane

    def _send_all(self, waiting: queue.SimpleQueue[Parcel | None]) -> None:
        sent_at_s: deque[float] = deque(maxlen=BURST)
        while (parcel := waiting.get()) is not None and not self._stop.is_set():
            if len(sent_at_s) == BURST:
                free_at_s = sent_at_s[0] + BURST * self._spacing_s.get(parcel.channel, 1.0)
                if self._stop.wait(max(0.0, free_at_s - self._clock.monotonic_s())):
                    return
            sent_at_s.append(self._clock.monotonic_s())
            begun_us = self._clock.now_us()
            posted = self._post(parcel)
            self._reports.put(Report(parcel, begun_us, self._clock.now_us(), posted))


def next_attempt_us(attempts: int, *, now_us: int) -> int:
    """Return when to try again after so many attempts. [us UTC]"""
    wait_s = BACK_OFF_S[min(max(attempts, 1), len(BACK_OFF_S)) - 1]
    return now_us + round(wait_s * MICROSECONDS_PER_SECOND)
