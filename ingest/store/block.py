"""What one block leaves in the store, all in one transaction."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any, NamedTuple

import msgspec

from ingest.store import (
    alarms,
    amendments,
    calibrations,
    cohorts,
    corrected,
    forwarding,
    ledger,
    plans,
    readings,
    refused,
    registry,
    rollups,
    samples,
)

if TYPE_CHECKING:
    import sqlite3

    from analysis.arrays import IntArray
    from ingest.store.alarms import AlarmRow
    from ingest.store.amendments import AmendmentRow
    from ingest.store.calibrations import PeriodRow, SampleRow, ServiceRow
    from ingest.store.corrected import JobRow
    from ingest.store.ledger import Event
    from ingest.store.plans import TankPlan
    from ingest.store.readings import ReadingRows
    from ingest.store.refused import Refusal


class OutboxRow(NamedTuple):
    """A message that has to leave: to which channel, with which content."""

    channel: str
    body: dict[str, Any]


class Occurrence(NamedTuple):
    """An event with what hangs on it: where the alarm stands since, and the messages that must leave."""

    event: Event
    alarm: AlarmRow | None = None
    outbox: tuple[OutboxRow, ...] = ()


class Conflict(NamedTuple):
    """A second reading of one moment and sensor with other values."""

    measured_at: int
    sensor: int
    received_at: int
    values: tuple[float, float, float]


class ChannelRow(NamedTuple):
    """A reading of a further quantity: oxygen, pH, level. `sensor` is the store's number."""

    measured_at: int
    sensor: int
    channel: str
    received_at: int
    value: float | None
    flags: int


class StressRow(NamedTuple):
    """What one cohort in a tank feels at one moment; None is "not known"."""

    measured_at: int
    tank: int
    cohort: str
    stress: float | None
    range_strain: float | None
    change_strain: float | None
    exposure_strain: float | None
    thermal_strain: float | None
    driver: str | None
    band: str | None
    acclimated_mOsm_kg: float | None
    internal_mOsm_kg: float | None
    gap_mOsm_kg: float | None


class TankState(NamedTuple):
    """What the chain remembers of the readings of one tank."""

    tank: int
    measured_at: int | None
    body: dict[str, Any]


class AnimalRow(NamedTuple):
    """What the chain remembers of one cohort, and in which tank it is."""

    cohort: str
    tank: int
    measured_at: int | None
    body: dict[str, Any]


class OutcomeRow(NamedTuple):
    """What became of a command."""

    id: str
    kind: str
    subject: str
    actor: str
    outcome: str
    reason: str
    decided_at: int


class SensorWork(NamedTuple):
    """What a person's work on a sensor leaves, besides the event that tells of it.

    `derives_as` names code version and revision of the site file under which readings are derived from now on: services
    change the derivation.
    """

    services: tuple[ServiceRow, ...] = ()
    periods: tuple[PeriodRow, ...] = ()
    samples: tuple[SampleRow, ...] = ()
    derives_as: tuple[str, int] | None = None


@dataclass(slots=True)
class BlockCommit:
    """All that a block leaves. Empty parts cost nothing."""

    readings: ReadingRows | None = None
    latest: IntArray | None = None
    sensor_states: list[bytes | None] = field(default_factory=list)
    newest_at: list[int] = field(default_factory=list)
    rings: list[tuple[int, bytes]] = field(default_factory=list)
    amendments: list[AmendmentRow] = field(default_factory=list)
    channels: list[ChannelRow] = field(default_factory=list)
    conflicts: list[Conflict] = field(default_factory=list)
    refusals: list[Refusal] = field(default_factory=list)
    counts: dict[str, int] = field(default_factory=dict)
    stress: list[StressRow] = field(default_factory=list)
    tank_states: list[TankState] = field(default_factory=list)
    animal_states: list[AnimalRow] = field(default_factory=list)
    pending_alarms: list[AlarmRow] = field(default_factory=list)
    occurrences: list[Occurrence] = field(default_factory=list)
    plans: list[TankPlan] = field(default_factory=list)
    outcomes: list[OutcomeRow] = field(default_factory=list)
    forward: list[str] = field(default_factory=list)
    queued_at: int = 0
    work: SensorWork | None = None
    jobs: list[JobRow] = field(default_factory=list)
    now_us: int = 0
    meta: dict[str, str | int] = field(default_factory=dict)


def write(connection: sqlite3.Connection, block: BlockCommit, *, rolled_until: int | None) -> list[int]:
    """Write *block* inside the caller's transaction and return the ids of its events, in order."""
    if block.readings is not None and len(block.readings):
        readings.insert(connection, block.readings)
        rollups.add_behind_mark(connection, block.readings.measured_at, block.readings.sensor, rolled_until)
        if block.latest is not None and len(block.latest):
            readings.upsert_latest(connection, block.readings, block.latest, block.sensor_states, block.newest_at)
    connection.executemany("INSERT OR IGNORE INTO channel_reading VALUES (?, ?, ?, ?, ?, ?)", block.channels)
    connection.executemany("INSERT OR REPLACE INTO sensor_ring VALUES (?, ?)", block.rings)
    for conflict in block.conflicts:
        readings.record_conflict(
            connection,
            measured_at=conflict.measured_at,
            sensor=conflict.sensor,
            received_at=conflict.received_at,
            values=conflict.values,
            reason="another reading of the same moment came first",
        )
    refused.insert(connection, block.refusals)
    refused.count(connection, block.counts)
    connection.executemany(f"INSERT OR REPLACE INTO stress VALUES ({', '.join('?' * 13)})", block.stress)
    connection.executemany(
        "INSERT OR REPLACE INTO tank_state VALUES (?, ?, ?)",
        [(state.tank, state.measured_at, msgspec.json.encode(state.body).decode()) for state in block.tank_states],
    )
    connection.executemany(
        "INSERT OR REPLACE INTO animal_state VALUES (?, ?, ?, ?)",
        [(*state[:-1], msgspec.json.encode(state.body).decode()) for state in block.animal_states],
    )
    amendments.insert(connection, block.amendments)
    forwarding.put(connection, block.forward, queued_at=block.queued_at)
    for row in block.pending_alarms:
        alarms.upsert(connection, row, event_id=None)
    event_ids = [_write_occurrence(connection, occurrence) for occurrence in block.occurrences]
    plans.upsert(connection, block.plans)
    connection.executemany(
        "INSERT INTO command_outcome (id, kind, subject, actor, outcome, reason, decided_at, event_id)"
        " VALUES (?, ?, ?, ?, ?, ?, ?, ?)",
        [(*row, event_ids[0] if event_ids else None) for row in block.outcomes],
    )
    if block.work is not None:
        _write_work(connection, block.work, event_id=event_ids[0])
    corrected.add_jobs(
        connection, block.jobs, event_id=event_ids[0] if block.work is not None else None, now_us=block.now_us
    )
    connection.executemany(
        "INSERT INTO meta VALUES (?, ?) ON CONFLICT (name) DO UPDATE SET value = excluded.value",
        list(block.meta.items()),
    )
    return event_ids


def _write_work(connection: sqlite3.Connection, work: SensorWork, *, event_id: int) -> None:
    calibrations.insert(connection, work.services, event_id=event_id)
    calibrations.replace_periods(connection, work.periods)
    calibrations.insert_samples(connection, work.samples, event_id=event_id)
    if work.derives_as is not None:
        code_version, revision = work.derives_as
        registry.derivation_number(
            connection,
            code_version=code_version,
            revision=revision,
            calibration_set=calibrations.calibration_set(connection),
        )


def _write_occurrence(connection: sqlite3.Connection, occurrence: Occurrence) -> int:
    event_id = ledger.append(connection, occurrence.event)
    cohorts.project(connection, occurrence.event, event_id=event_id)
    samples.project(connection, occurrence.event, event_id=event_id)
    if occurrence.alarm is not None:
        alarms.upsert(connection, occurrence.alarm, event_id=event_id)
    for message in occurrence.outbox:
        connection.execute(
            "INSERT INTO outbox (event_id, channel, body, created_at, next_attempt_at) VALUES (?, ?, ?, ?, ?)",
            (
                event_id,
                message.channel,
                msgspec.json.encode(message.body).decode(),
                occurrence.event.recorded_at,
                occurrence.event.recorded_at,
            ),
        )
    return event_id
