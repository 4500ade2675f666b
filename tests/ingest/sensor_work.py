"""Work on the sensors of a small invented hatchery, by way of the inbox."""

from __future__ import annotations

import json
import sqlite3
import uuid
from contextlib import closing
from typing import Any

from analysis.water.potassium_chloride import conductivity_of_labelled_standard
from ingest.store.inbox import Command, Inbox
from ingest.store.queries import Outcome
from tests.harness.hatchery import Bench

MINUTE_US = 60_000_000
HOUR_US = 60 * MINUTE_US
DAY_US = 24 * HOUR_US
LABEL_MS_CM = 50.0


def bottle(expires_on: str | None = "2028-01-31", lot: str = "K7") -> dict[str, Any]:
    """Return a bottle of known conductivity at 25 degC, as a person enters it."""
    return {"kind": "bottle", "value": LABEL_MS_CM, "lot": lot, "expires_on": expires_on}


def true_mS_cm(temperature_degC: float = 25.0) -> float:
    """Return what the bottle conducts at a temperature."""
    return float(conductivity_of_labelled_standard(LABEL_MS_CM, temperature_degC=temperature_degC))


def point(reading: float, temperature_degC: float = 25.0, **more: Any) -> dict[str, Any]:
    """Return one reading in the bottle."""
    return {"standard": bottle(), "reading": reading, "temperature_degC": temperature_degC, **more}


def ask(
    bench: Bench, kind: str, subject: str = "sensor/s0", *, actor: str = "Duty", role: str = "manager", **body: Any
) -> Outcome:
    """Let a person ask for work on a sensor, and return what became of it."""
    command_id = str(uuid.uuid4())
    now_us = bench.clock.now_us()
    Inbox(bench.store).submit(
        Command(
            kind=kind,
            subject=subject,
            actor=actor,
            role=role,
            submitted_at=now_us,
            expires_at=now_us + 900_000_000,
            body=body,
            id=command_id,
        )
    )
    bench.worker.take_commands(bench.stop)
    outcome = bench.queries.outcome(command_id)
    assert outcome is not None
    return outcome


def wait_until_time(bench: Bench, at_us: int) -> None:
    """Let time go on until a moment; a moment that is past changes nothing."""
    bench.clock.advance(max(0, at_us - bench.clock.now_us()) / 1e6)


def send(bench: Bench, at_us: int, conductivity: float, temperature_degC: float = 25.0, *, sensor: str = "s0") -> None:
    """Let a sensor send one reading as it measures it; time goes on until then."""
    wait_until_time(bench, at_us)
    body = json.dumps({"c": conductivity, "t": temperature_degC, "at": at_us}).encode()
    assert bench.send(f"quay/{sensor}", body)


def rederive(bench: Bench) -> int:
    """Let the worker derive again all there is; return the number of slices."""
    count = 0
    while bench.worker.rederive():
        count += 1
    return count


def table(bench: Bench, statement: str) -> list[dict[str, Any]]:
    """Return rows of the store."""
    with closing(sqlite3.connect(bench.store / "store.db")) as connection:
        connection.row_factory = sqlite3.Row
        return [dict(row) for row in connection.execute(statement)]


def seen(bench: Bench) -> list[dict[str, Any]]:
    """Return the readings as they were seen, in the order of time."""
    return table(bench, "SELECT * FROM reading ORDER BY measured_at, sensor")


def corrected(bench: Bench) -> list[dict[str, Any]]:
    """Return the corrected rows, in the order of time and derivation."""
    return table(bench, "SELECT * FROM corrected ORDER BY measured_at, sensor, derivation")
