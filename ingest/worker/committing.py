"""From what the chain found to what the store keeps."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from analysis.alarm.state import name_of, state_to_dict
from analysis.alarm.transition import transition_to_dict
from analysis.flags import Flag
from ingest.chain.animals import animal_bodies
from ingest.chain.chain import tank_bodies
from ingest.store.alarms import AlarmRow
from ingest.store.amendments import AmendmentRow
from ingest.store.block import AnimalRow, ChannelRow, Conflict, Occurrence, OutboxRow, StressRow, TankState
from ingest.store.ledger import Event
from ingest.store.readings import ReadingRows

if TYPE_CHECKING:
    from collections.abc import Sequence

    from analysis.alarm.kinds import ConditionKind
    from analysis.alarm.rules import AlarmRules
    from analysis.alarm.state import AlarmState
    from analysis.alarm.transition import Transition
    from analysis.arrays import FlagArray, IntArray
    from ingest.chain.block import RawBlock
    from ingest.chain.chain import ChainOutput, ChainState, Found, Happened
    from ingest.reading import ChannelReading
    from ingest.worker.plant import Plant

DUTY = "duty"
"""The channel of what somebody on duty has to be told; `ingest.notify` finds out who that is."""


def reading_rows(plant: Plant, block: RawBlock, said: Found) -> ReadingRows:
    """Return a block as rows of the store."""
    numbers, water = plant.numbers, said.water
    found = water.properties
    count = len(block)
    return ReadingRows(
        measured_at=block.measured_at_us,
        sensor=numbers.sensor[block.sensor],
        received_at=block.received_at_us,
        declaration=numbers.declaration[block.sensor],
        derivation=np.full(count, numbers.derivation, dtype=np.int64),
        conductivity=block.conductivity,
        temperature=block.temperature,
        pressure=block.pressure,
        conductivity_mS_cm=water.conductivity_mS_cm,
        temperature_degC=water.temperature_degC,
        practical_salinity=found.practical_salinity,
        absolute_salinity_g_kg=found.absolute_salinity_g_kg,
        density_kg_m3=found.density_kg_m3,
        osmolality_mOsm_kg=found.osmolality_mOsm_kg,
        osmolality_in_situ_mOsm_kg=found.osmolality_in_situ_mOsm_kg,
        flags=said.flags,
        quality=said.quality,
        tests=said.tests,
    )


def newest_rows(sensor: IntArray, flags: FlagArray) -> IntArray:
    """Return the index of the newest reading of each sensor in a block in the order of arrival, late ones left out."""
    live = np.flatnonzero((flags & np.uint32(Flag.LATE)) == 0)
    backwards = live[::-1]
    _, first = np.unique(sensor[backwards], return_index=True)
    return backwards[first]


def sensor_states(sensors: IntArray, state: ChainState) -> list[bytes | None]:
    """Return what the quality tests remember of the newest readings of *sensors*."""
    return [state.quality.recent_bytes(sensor) for sensor in sensors.tolist()]


def ring_rows(plant: Plant, said: Found, state: ChainState) -> list[tuple[int, bytes]]:
    """Return the longer memory of the quality tests of the sensors for which it changed."""
    return [
        (int(plant.numbers.sensor[sensor]), state.quality.ring_bytes(sensor)) for sensor in said.ring_changed.tolist()
    ]


def amendment_rows(plant: Plant, said: Found) -> list[AmendmentRow]:
    """Return what the block revealed of earlier readings as rows of the store."""
    lines = said.amendments
    return [
        AmendmentRow(int(plant.numbers.sensor[sensor]), from_us, to_us, test, variable, quality)
        for sensor, from_us, to_us, test, variable, quality in zip(
            lines.sensor.tolist(),
            lines.from_us.tolist(),
            lines.to_us.tolist(),
            lines.test.tolist(),
            lines.variable.tolist(),
            lines.quality.tolist(),
            strict=True,
        )
    ]


def channel_rows(plant: Plant, channels: Sequence[ChannelReading]) -> list[ChannelRow]:
    """Return readings of further quantities as rows of the store."""
    numbers = plant.numbers.sensor
    return [
        ChannelRow(
            reading.measured_at_us,
            int(numbers[reading.sensor]),
            reading.channel,
            reading.received_at_us,
            reading.value,
            reading.flags,
        )
        for reading in channels
    ]


def conflict_rows(plant: Plant, raw: RawBlock, contradictions: Sequence[int]) -> list[Conflict]:
    """Return second, different readings of one moment as rows of the store."""
    return [
        Conflict(
            int(raw.measured_at_us[index]),
            int(plant.numbers.sensor[raw.sensor[index]]),
            int(raw.received_at_us[index]),
            (float(raw.conductivity[index]), float(raw.temperature[index]), float(raw.pressure[index])),
        )
        for index in contradictions
    ]


def tank_states(plant: Plant, state: ChainState, tanks: Sequence[int]) -> list[TankState]:
    """Return what the chain remembers of the readings of *tanks* as rows of the store."""
    newest = state.salinity.judged_at_us.max(axis=1)
    return [
        TankState(int(plant.numbers.tank[tank]), int(newest[tank]), body)
        for tank, body in zip(tanks, tank_bodies(plant.tanks, state, tanks), strict=True)
    ]


def animal_states(plant: Plant, state: ChainState, rows: Sequence[int]) -> list[AnimalRow]:
    """Return what the chain remembers of the animals of *rows* of the roster as rows of the store."""
    tanks = plant.numbers.tank[plant.animals.tanks[np.asarray(rows, dtype=np.int64)]].tolist()
    bodies = animal_bodies(plant.animals, state.animals, rows)
    return [
        AnimalRow(body["cohort"], tank, body["state"]["updated_at_us"], body)
        for body, tank in zip(bodies, tanks, strict=True)
    ]


def stress_rows(plant: Plant, output: ChainOutput) -> list[StressRow]:
    """Return what the animals felt as rows of the store."""
    return [
        StressRow(
            measured_at=item.measured_at_us, tank=int(plant.numbers.tank[item.tank]), cohort=item.cohort, **item.values
        )
        for item in output.felt
    ]


def subject_of(plant: Plant, tank: int) -> str:
    """Return the ledger's word for a tank."""
    return f"tank/{plant.tanks.tanks[tank]}"


def occurrence(plant: Plant, happened: Happened, *, now_us: int, actor: str) -> Occurrence:
    """Return what one transition leaves: its event, where the alarm stands, and who must be told."""
    tank, kind, transition = happened
    subject = subject_of(plant, tank)
    rules = plant.tanks.rules[kind][tank]
    body: dict[str, Any] = {"condition": kind.value, "priority": rules.priority.value, **transition_to_dict(transition)}
    event = Event(
        kind=f"alarm.{transition.happening.value}",
        subject=subject,
        measured_at=transition.measured_at_us or transition.at_us,
        recorded_at=now_us,
        actor=actor,
        body=body,
    )
    outbox: tuple[OutboxRow, ...] = ()
    if transition.is_announced:
        outbox = (OutboxRow(DUTY, {"subject": subject, "condition": kind.value, "occurrence": transition.occurrence}),)
    return Occurrence(event, _alarm_row(subject, kind, rules, transition.after, now_us, transition), outbox)


def pending_rows(plant: Plant, output: ChainOutput, *, now_us: int) -> list[AlarmRow]:
    """Return where alarms stand that changed without a transition."""
    return [
        _alarm_row(subject_of(plant, tank), kind, plant.tanks.rules[kind][tank], state, now_us, None)
        for tank, kind, state in output.pending
    ]


def _alarm_row(
    subject: str,
    kind: ConditionKind,
    rules: AlarmRules,
    state: AlarmState,
    now_us: int,
    transition: Transition | None,
) -> AlarmRow:
    return AlarmRow(
        subject=subject,
        condition=kind.value,
        state=name_of(state).value,
        priority=rules.priority.value,
        is_active=state.is_active,
        occurrence=state.occurrence,
        raised_at=state.raised_at_us or None,
        value=state.raised_value if transition is None or transition.value is None else transition.value,
        limit_value=state.raised_limit if transition is None or transition.limit is None else transition.limit,
        updated_at=now_us,
        body=state_to_dict(state),
    )
