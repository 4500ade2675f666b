"""Work on the animals of a small invented hatchery, by way of the inbox, and what the store says of them."""

from __future__ import annotations

import json
from typing import Any

import numpy as np

from ingest.chain.animals import animal_bodies
from ingest.store.cohorts import CohortRow, read_all
from ingest.store.inbox import Command, Inbox
from ingest.store.queries import Outcome
from tests.harness.hatchery import Bench
from tests.ingest.sensor_work import HOUR_US, MINUTE_US, table

__all__ = ["HOUR_US", "MINUTE_US", "book", "do", "live", "memory", "read_for", "table"]


def do(
    bench: Bench, kind: str, cohort: str = "b0", *, role: str = "manager", expected: str | None = None, **body: Any
) -> Outcome:
    """Let a person ask for work on a cohort, and return what became of it."""
    now_us = bench.clock.now_us()
    command = Command(
        kind=kind,
        subject=f"cohort/{cohort}",
        actor="Duty",
        role=role,
        submitted_at=now_us,
        expires_at=now_us + MINUTE_US,
        body=body,
        expected=expected,
    )
    Inbox(bench.store).submit(command)
    bench.worker.take_commands(bench.stop)
    outcome = bench.queries.outcome(command.id)
    assert outcome is not None, "the worker has not decided"
    return outcome


def book(bench: Bench) -> dict[str, CohortRow]:
    """Return all cohorts as the store tells them."""
    return {row.id: row for row in read_all(bench.worker.store.connection)}


def live(bench: Bench, cohort: str) -> dict[str, Any]:
    """Return what the running chain remembers of a cohort, and in which tank it has it."""
    animals = bench.worker.plant.animals
    row = animals.row_of[cohort]
    tank = bench.worker.plant.tanks.tanks[animals.tanks[row]]
    [body] = animal_bodies(animals, bench.worker.state.animals, [row])
    return {**body["state"], "tank": tank}


def memory(bench: Bench) -> dict[str, Any]:
    """Return all that the chain remembers of the animals, by cohort."""
    animals, state = bench.worker.plant.animals, bench.worker.state.animals
    bodies = animal_bodies(animals, state, range(len(animals.cohorts)))
    found = {body["cohort"]: body for body in bodies}
    copied: dict[str, Any] = json.loads(json.dumps(found))
    return copied | {"tanks": animals.tanks.tolist()}


def read_for(
    bench: Bench, minutes: float, *, salinity: dict[str, float], step_s: float = 60.0, temperature: float = 28.0
) -> None:
    """Let time go on for so many minutes, while sensors send a reading a step."""
    for _ in np.arange(0.0, minutes * 60.0, step_s):
        bench.clock.advance(step_s)
        for sensor, value in salinity.items():
            bench.read(sensor, bench.clock.now_us(), value, temperature)
