"""Two weeks of a simulated hatchery through the worker's own chain: what a new installation would look like after a fortnight."""

from __future__ import annotations

import threading
from typing import TYPE_CHECKING

from analysis.alarm.state import WAITING_STATES, StateName
from ingest.clock import ReplayClock
from ingest.mqtt import Received
from ingest.simulator.feed import simulate
from ingest.store.inbox import DEFAULT_LIFE_US, Command, Inbox
from ingest.worker.worker import Worker

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path

    from ingest.simulator.scenario import Scenario

DAY_US = 86_400_000_000
SLICE_US = 30 * 60 * 1_000_000
"""So much of the history is handed to the worker at once; people answer alarms between two slices."""
STEP_S = 300.0
"""Time between the readings of a sensor in the history."""


def write_history(
    site_file: Path,
    *,
    end_us: int,
    days: float,
    seed: int,
    scenario: Scenario,
    progress: Callable[[float], None],
) -> int:
    """Run a simulated history that ends at *end_us* through the chain, and return how many messages it had.

    Parameters
    ----------
    site_file : Path
        Its store is made.
    end_us : int
        [us UTC]
    days : float
        How long the history is.
    seed : int
        Of the simulation.
    scenario : Scenario
        What happened; its hours count from *end_us*.
    progress : callable
        Told the part that is done, 0 to 1.
    """
    start_us = end_us - round(days * DAY_US)
    clock = ReplayClock(start_us)
    worker = Worker(site_file, clock=clock, least_interval_s=STEP_S)
    stop = threading.Event()
    try:
        messages = simulate(
            worker.plant.site, start_us=start_us, end_us=end_us, step_s=STEP_S, seed=seed, scenario=scenario
        )
        duty = _Duty(worker, Inbox(worker.store.folder))
        count = 0
        until_us = start_us + SLICE_US
        waiting: list[Received] = []
        for sent_at_us, topic, payload in messages:
            if sent_at_us >= until_us:
                _hand_over(worker, waiting, until_us, clock, duty, stop)
                progress((until_us - start_us) / (end_us - start_us))
                waiting = []
                until_us += SLICE_US
            waiting.append(Received(topic, payload, sent_at_us, False, 0, 0))
            count += 1
        _hand_over(worker, waiting, end_us, clock, duty, stop)
        while worker.roll_up():
            pass
        worker.store.checkpoint()
        progress(1.0)
        return count
    finally:
        worker.close()


def _hand_over(
    worker: Worker, waiting: list[Received], until_us: int, clock: ReplayClock, duty: _Duty, stop: threading.Event
) -> None:
    worker.process(waiting, stop)
    clock.follow(until_us)
    worker.tick(stop)
    duty.answer(until_us)
    worker.take_commands(stop)


class _Duty:
    """The person on duty of the history: sees an alarm at the next look and acknowledges it, as people do."""

    def __init__(self, worker: Worker, inbox: Inbox) -> None:
        self._worker = worker
        self._inbox = inbox
        actor = worker.plant.site.identity.default_actor
        self._name, self._role = actor.name, actor.role

    def answer(self, now_us: int) -> None:
        """Acknowledge whatever waits, and release what is latched and over."""
        plant, bank = self._worker.plant, self._worker.state.bank
        for (kind, tank), state in bank.states.items():
            if state.name in WAITING_STATES:
                act, why = "alarm.acknowledge", "seen on the round"
            elif state.name is StateName.LATCHED_ACKNOWLEDGED:
                act, why = "alarm.reset", "looked after; all is well again"
            else:
                continue
            self._inbox.submit(
                Command(
                    kind=act,
                    subject=f"tank/{plant.tanks.tanks[tank]}",
                    actor=self._name,
                    role=self._role,
                    submitted_at=now_us,
                    expires_at=now_us + DEFAULT_LIFE_US,
                    body={"condition": bank.kinds[kind].value, "why": why},
                    expected=str(state.occurrence),
                )
            )
