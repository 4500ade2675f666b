"""The chain itself: a block of readings goes in, what it means comes out; the state before it is still there if a commit fails."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np

from analysis.alarm import bank as alarm_bank
from analysis.alarm.conditions import limit_block, truth_block, wet_quality
from analysis.alarm.kinds import ConditionKind
from analysis.alarm.nearest import LatestReadings, judged_rows, no_readings_yet
from analysis.alarm.state import NEVER_US
from analysis.alarm.timing import (
    SensorTimes,
    is_clock_doubted_by_tank,
    judged_times,
    no_times_yet,
)
from analysis.flags import Flag, Quality
from analysis.sensor.quality.state import QualityState
from ingest.chain import trust
from ingest.chain.animals import fresh_animals, restored_animals, step
from ingest.chain.water import water

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from analysis.alarm.bank import AlarmBank
    from analysis.alarm.conditions import ObservedBlock
    from analysis.alarm.events import Event
    from analysis.alarm.nearest import JudgedRows
    from analysis.alarm.state import AlarmState
    from analysis.alarm.transition import Transition
    from analysis.arrays import BoolArray, FlagArray, FloatArray, IntArray, QualityArray
    from analysis.sensor.quality.result import Amendments
    from analysis.sensor.quality.thresholds import Thresholds
    from ingest.chain.animal_roster import AnimalRoster
    from ingest.chain.animals import AnimalState, StressStep
    from ingest.chain.block import RawBlock
    from ingest.chain.roster import Roster
    from ingest.chain.tanks import TankRoster
    from ingest.chain.water import Water


@dataclass(frozen=True, slots=True)
class ChainState:
    """All that the chain remembers between blocks, besides what the roster says.

    `salinity` is what the probes say, `wet` the same without probes that are dry.
    """

    quality: QualityState
    times: SensorTimes
    salinity: LatestReadings
    wet: LatestReadings
    temperature: LatestReadings
    osmolality: LatestReadings
    bank: AlarmBank
    animals: AnimalState


@dataclass(frozen=True, slots=True)
class Found:
    """What a block of readings says: arrays of the block's length, but for `ring_changed`.

    Attributes
    ----------
    water : Water
    flags : ndarray of uint32
        Words of `analysis.flags.Flag`, those of the quality tests included.
    quality : ndarray of uint8
        The rolled-up QARTOD flag.
    tests : ndarray of int64
        The flag of each test, packed (`ingest.chain.trust.unpacked`).
    ring_changed : ndarray of int64
        Sensors whose longer memory of the quality tests changed.
    amendments : Amendments
        What this block revealed of earlier readings.
    """

    water: Water
    flags: FlagArray
    quality: QualityArray
    tests: IntArray
    ring_changed: IntArray
    amendments: Amendments


class Happened(NamedTuple):
    """A transition of one alarm of one tank."""

    tank: int
    kind: ConditionKind
    transition: Transition


@dataclass(frozen=True, slots=True)
class ChainOutput:
    """What a block, a tick or an act brought.

    Attributes
    ----------
    state : ChainState
        After it.
    happened : tuple of Happened
        In order.
    pending : tuple of (tank, kind, AlarmState)
        Alarms whose state changed without a transition: an on-delay that runs.
    tanks : tuple of int
        Tanks whose state changed.
    moved : tuple of int
        Rows of the animals (`ingest.chain.animal_roster`) that were moved on.
    felt : tuple of StressStep
        What the animals felt, for the record.
    """

    state: ChainState
    happened: tuple[Happened, ...] = ()
    pending: tuple[tuple[int, ConditionKind, AlarmState], ...] = ()
    tanks: tuple[int, ...] = ()
    moved: tuple[int, ...] = ()
    felt: tuple[StressStep, ...] = ()


def fresh_state(
    tanks: TankRoster,
    animals: AnimalRoster,
    states: Mapping[tuple[ConditionKind, int], AlarmState] | None = None,
) -> ChainState:
    """Return the state before any reading, with the alarms in *states* as they stood."""
    return ChainState(
        quality=QualityState.fresh(len(tanks.watcher_of)),
        times=no_times_yet(len(tanks.watchers)),
        salinity=no_readings_yet(tanks.places),
        wet=no_readings_yet(tanks.places),
        temperature=no_readings_yet(tanks.places),
        osmolality=no_readings_yet(tanks.places),
        bank=alarm_bank.alarm_bank(tanks.rules, states),
        animals=fresh_animals(animals),
    )


def run(
    roster: Roster,
    limits: Thresholds,
    tanks: TankRoster,
    animals: AnimalRoster,
    state: ChainState,
    block: RawBlock,
) -> tuple[Found, ChainOutput]:
    """Let a block of admitted readings happen.

    Parameters
    ----------
    roster, limits, tanks, animals : Roster, Thresholds, TankRoster, AnimalRoster
        The site.
    state : ChainState
        Before the block; not changed.
    block : RawBlock
        Admitted readings in the order of arrival (`ingest.chain.admission`): so what comes out is the same however the
        stream is cut into blocks.

    Returns
    -------
    tuple of (Found, ChainOutput)
        What each reading says, late ones too, and what followed for tanks, animals and alarms.
    """
    saying = water(roster, block)
    memory, tested = trust.judged(limits, state.quality, block, saying)
    times, judged = _judged(tanks, state, block)
    found = Found(
        water=saying,
        flags=_with_clock_doubts(tested.flags, judged),
        quality=tested.quality,
        tests=trust.packed(tested),
        ring_changed=tested.ring_changed,
        amendments=tested.amendments,
    )
    # What is remembered of the times changes with every reading of a tank, judged or not.
    touched = tuple(np.unique(roster.tank[block.sensor[judged.rows]]).tolist())
    live = judged.rows[judged.is_judged]
    if not live.size:
        return found, ChainOutput(replace(state, quality=memory, times=times), tanks=touched)
    watcher = tanks.watcher_of[block.sensor[live]]
    tank = tanks.places.tank[watcher]
    judged_at_us = judged.judged_at_us[judged.is_judged]

    def rows_of(latest: LatestReadings, value: FloatArray, quality: QualityArray) -> tuple[LatestReadings, JudgedRows]:
        return judged_rows(
            latest,
            tanks.places,
            sensor=watcher,
            value=value,
            quality=quality,
            judged_at_us=judged_at_us,
            stale_after_us=tanks.stale_after_us,
        )

    saltiness, warmth = saying.salinity[live], saying.temperature_degC[live]
    quality = trust.quality_for_alarms(saying, tested)[live]
    in_water = wet_quality(saltiness, quality=quality, tank=tank, dry_below=tanks.dry_below)
    # A probe out of the water measures the air.
    has_warmth = np.where(saltiness < tanks.dry_below[tank], np.uint8(Quality.FAIL), np.uint8(Quality.PASS))
    has_warmth[np.isnan(warmth)] = Quality.MISSING
    salinity, salinity_rows = rows_of(state.salinity, saltiness, quality)
    wet, wet_rows = rows_of(state.wet, saltiness, in_water)
    temperature, temperature_rows = rows_of(state.temperature, warmth, has_warmth)
    osmolality, osmolality_rows = rows_of(state.osmolality, saying.properties.osmolality_mOsm_kg[live], in_water)
    rows = (wet_rows, wet_rows, temperature_rows, temperature_rows, salinity_rows)
    bank, outcomes = alarm_bank.observe(
        state.bank, limit_block(tanks.conditions, rows, now_us=block.received_at_us[live])
    )
    creatures, moved, felt = step(animals, state.animals, osmolality=osmolality_rows, temperature=temperature_rows)
    after = ChainState(memory, times, salinity, wet, temperature, osmolality, bank, creatures)
    output = _output(state, after, outcomes, touched)
    return found, replace(output, moved=moved, felt=tuple(felt))


class _Judged(NamedTuple):
    """Which rows of a block belong to tanks, and how their times are judged (`analysis.alarm.timing`)."""

    rows: IntArray
    judged_at_us: IntArray
    is_judged: BoolArray
    is_clock_doubted: BoolArray


def _judged(tanks: TankRoster, state: ChainState, block: RawBlock) -> tuple[SensorTimes, _Judged]:
    rows = np.flatnonzero(tanks.watcher_of[block.sensor] >= 0)
    times, judged = judged_times(
        state.times,
        sensor=tanks.watcher_of[block.sensor[rows]],
        measured_at_us=block.measured_at_us[rows],
        received_at_us=block.received_at_us[rows],
        interval_us=tanks.interval_us,
        stale_after_us=tanks.stale_after_us,
    )
    return times, _Judged(rows, judged.judged_at_us, judged.is_judged, judged.is_clock_doubted)


def _with_clock_doubts(flags: FlagArray, judged: _Judged) -> FlagArray:
    """Say which clocks are doubted. What is judged at the time received is no late reading, whatever its clock says."""
    if not judged.is_clock_doubted.any():
        return flags
    flags = flags.copy()
    doubted = judged.rows[judged.is_clock_doubted]
    flags[doubted] = (flags[doubted] & ~np.uint32(Flag.LATE)) | np.uint32(Flag.CLOCK_DOUBTED)
    return flags


def tick(tanks: TankRoster, state: ChainState, *, now_us: int, watching_since_us: int) -> ChainOutput:
    """Let everything happen that time alone brings: tanks that nobody can see any more, ends of shelving, re-alarms.

    Parameters
    ----------
    tanks : TankRoster
    state : ChainState
        Before; not changed.
    now_us : int
        The present time. [us UTC]
    watching_since_us : int
        Since when readings can come at all: sensors have their stale limit from then on to be heard. [us UTC]
    """
    bank, due = alarm_bank.tick(state.bank, now_us)
    unseen, since_us = _unwatched(tanks, state, now_us, watching_since_us)
    minutes = np.where(since_us > -NEVER_US, (now_us - np.maximum(since_us, 0)) / 60e6, np.nan)
    doubted = is_clock_doubted_by_tank(state.times, tanks.places)
    blocks = (
        truth_block(ConditionKind.UNWATCHED, unseen, at_us=now_us, now_us=now_us, value=np.round(minutes, 1)),
        truth_block(ConditionKind.SENSOR_CLOCK_WRONG, doubted, at_us=now_us, now_us=now_us),
    )
    for block in blocks:
        bank, seen = alarm_bank.observe(bank, block)
        due += seen
    return _output(state, replace(state, bank=bank), due, ())


def told(state: ChainState, block: ObservedBlock) -> ChainOutput:
    """Let observations happen that were made beside the chain, such as where plans stand."""
    bank, outcomes = alarm_bank.observe(state.bank, block)
    return _output(state, replace(state, bank=bank), outcomes, ())


def act(state: ChainState, *, tank: int, kind: ConditionKind, event: Event, now_us: int) -> ChainOutput:
    """Put a person's act to one alarm."""
    bank, outcomes = alarm_bank.act(state.bank, kind, tank, event, now_us)
    return _output(state, replace(state, bank=bank), outcomes, ())


QUANTITIES = ("salinity", "wet", "temperature", "osmolality")


def tank_bodies(tanks: TankRoster, state: ChainState, touched: Sequence[int]) -> list[dict[str, Any]]:
    """Return what the chain remembers of the readings of the tanks *touched*, each as plain JSON data.

    A body holds columns, one entry a sensor. All tanks are taken out of the arrays at once: this runs for every block.
    """
    index = np.asarray(touched, dtype=np.int64)
    # The slots of a tank are its sensors in their order; what lies behind them belongs to no sensor.
    columns = {
        name: [
            getattr(getattr(state, name), member)[index].tolist()
            for member in ("value", "quality", "judged_at_us", "believed_at_us")
        ]
        for name in QUANTITIES
    }
    times = state.times
    kept = [
        times.received_at_us.tolist(),
        times.offset_us.tolist(),
        times.judged_at_us.tolist(),
        times.is_clock_doubted.tolist(),
    ]
    bodies = []
    for place, tank in enumerate(touched):
        sensors, watchers = tanks.sensors_of[tank], tanks.watchers_of[tank].tolist()
        count = len(sensors)
        body: dict[str, Any] = {name: [part[place][:count] for part in parts] for name, parts in columns.items()}
        body["sensors"] = sensors
        body["times"] = [[column[watcher] for watcher in watchers] for column in kept]
        bodies.append(body)
    return bodies


def restored_state(
    tanks: TankRoster,
    animals: AnimalRoster,
    *,
    bodies: Mapping[str, Mapping[str, Any]],
    lives: Mapping[str, Mapping[str, Any]],
    alarms: Mapping[tuple[ConditionKind, int], AlarmState],
) -> ChainState:
    """Return the state that was kept with `tank_bodies`, by the tanks' ids, and `animal_bodies`, by the cohorts', and the alarms.

    Restoring fires nothing. Sensors, tanks and cohorts that are gone are left out; new ones start fresh.
    """
    state = fresh_state(tanks, animals, alarms)
    for tank, tank_id in enumerate(tanks.tanks):
        if tank_id in bodies:
            _restore_tank(tanks, state, tank, bodies[tank_id])
    return replace(state, animals=restored_animals(animals, lives))


def _restore_tank(tanks: TankRoster, state: ChainState, tank: int, body: Mapping[str, Any]) -> None:
    """Put back what `tank_bodies` kept, in place in the arrays of a fresh state."""
    places = {sensor: place for place, sensor in enumerate(body["sensors"])}
    for slot, (watcher, sensor) in enumerate(
        zip(tanks.watchers_of[tank].tolist(), tanks.sensors_of[tank], strict=True)
    ):
        place = places.get(sensor)
        if place is None:
            continue
        received, offset, judged, is_doubted = (column[place] for column in body["times"])
        state.times.received_at_us[watcher] = received
        state.times.offset_us[watcher] = offset
        state.times.judged_at_us[watcher] = judged
        state.times.is_clock_doubted[watcher] = is_doubted
        for name in QUANTITIES:
            latest: LatestReadings = getattr(state, name)
            value, quality, judged_at, believed_at = (column[place] for column in body[name])
            latest.value[tank, slot] = np.nan if value is None else value
            latest.quality[tank, slot] = quality
            latest.judged_at_us[tank, slot] = judged_at
            latest.believed_at_us[tank, slot] = believed_at


def _unwatched(tanks: TankRoster, state: ChainState, now_us: int, watching_since_us: int) -> tuple[BoolArray, IntArray]:
    """Return which tanks no believable sensor watches, and since when (the newest believed reading)."""
    places = tanks.places
    stale = np.zeros((places.tank_count, places.slot_count), dtype=np.int64)
    stale[places.tank, places.slot] = tanks.stale_after_us
    believed = state.salinity.believed_at_us
    # Compared by adding: the time of a sensor that never spoke is near the smallest integer.
    is_seen = (np.maximum(believed, watching_since_us) + stale >= now_us).any(axis=1)
    has_sensor = np.zeros(places.tank_count, dtype=np.bool_)
    has_sensor[places.tank] = True
    has_spoken = (believed > -NEVER_US).any(axis=1)
    # A tank whose sensors have never spoken is not yet installed; `check` tells of it, an alarm would cry for weeks.
    return has_sensor & has_spoken & ~is_seen, believed.max(axis=1)


def _output(
    before: ChainState, after: ChainState, outcomes: tuple[alarm_bank.Outcome, ...], touched: tuple[int, ...]
) -> ChainOutput:
    happened = tuple(Happened(outcome.tank, outcome.kind, outcome.transition) for outcome in outcomes)
    told = {(item.kind, item.tank) for item in happened}
    pending: tuple[tuple[int, ConditionKind, AlarmState], ...] = ()
    if after.bank is not before.bank:
        kinds = after.bank.kinds
        pending = tuple(
            (tank, kinds[kind], alarm)
            for (kind, tank), alarm in after.bank.states.items()
            if before.bank.states.get((kind, tank)) is not alarm and (kinds[kind], tank) not in told
        )
    return ChainOutput(after, happened, pending, touched)
