"""What the animals in the tanks are used to, and what each reading does to them: a row for each cohort.

A tank's animals are moved on at most once in `EVERY_US` of measured time, by the first reading of each such slice: their own
times are hours, and the rule looks at the readings alone, so the result does not depend on how the stream was cut into blocks.
"""

from __future__ import annotations

from dataclasses import dataclass, fields, replace
from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np

from analysis.animal.osmoregulation import SPREAD_MOSM_KG, CohortState
from analysis.animal.stress import BAND_WORDS, DRIVER_WORDS, Band, Driver, Stress, advance
from analysis.arrays import MICROSECONDS_PER_SECOND

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from analysis.alarm.nearest import JudgedRows
    from analysis.arrays import FloatArray, IntArray
    from ingest.chain.animal_roster import AnimalRoster

EVERY_US = 10 * MICROSECONDS_PER_SECOND
RECORD_EVERY_US = 60 * MICROSECONDS_PER_SECOND
"""A row of the record is kept for the first step of each such slice of measured time, and for each change of band."""
_NAN_STRESS = float("nan")
_STRESS_NAMES = tuple(member.name for member in fields(Stress))
_COHORT_NAMES = tuple(member.name for member in fields(CohortState))


@dataclass(frozen=True, slots=True)
class AnimalState:
    """What the chain remembers of the animals: one row for each row of the roster.

    `latest` holds the stress at the last step of each row, `recorded_us` the slice of the last row of the record.
    """

    cohorts: CohortState
    latest: Stress
    recorded_us: IntArray


class StressStep(NamedTuple):
    """What the animals of one tank felt at one moment, for the record."""

    tank: int
    measured_at_us: int
    cohort: str
    values: dict[str, Any]


def fresh_animals(roster: AnimalRoster) -> AnimalState:
    """Return the state of animals that have lived until now in the water they were used to when they came."""
    cohorts = CohortState.used_to(roster.used_to_mOsm_kg)
    doubt = np.where(np.isnan(roster.used_to_mOsm_kg), SPREAD_MOSM_KG, cohorts.uncertainty)
    return AnimalState(
        cohorts=replace(cohorts, uncertainty=doubt),
        latest=_unknown_stress(len(roster.tanks)),
        recorded_us=np.full(len(roster.tanks), -1, dtype=np.int64),
    )


def step(
    roster: AnimalRoster, state: AnimalState, *, osmolality: JudgedRows, temperature: JudgedRows
) -> tuple[AnimalState, tuple[int, ...], list[StressStep]]:
    """Let a block of readings work on the animals.

    Of several sensors of a tank the believable one farthest from what the animals are used to counts, never an average.

    Parameters
    ----------
    roster : AnimalRoster
    state : AnimalState
        Before; not changed.
    osmolality, temperature : JudgedRows
        For each reading the values its tank is judged on. [mOsm/kg], [degC]

    Returns
    -------
    tuple of (AnimalState, tuple of int, list of StressStep)
        After, the rows of the roster that were moved on, and what goes into the record.
    """
    due, rows = _due(roster, osmolality, state.cohorts.updated_at_us)
    if not due.size:
        return state, (), []
    state = AnimalState(_copied(state.cohorts), _copied(state.latest), state.recorded_us.copy())
    record: list[StressStep] = []
    # Step by step even where a block holds hours of one tank: a series taken at once is the same to rounding only,
    # and the state must be that of the readings to the last bit, whatever blocks they came in.
    for wave in _waves(rows):
        _step_wave(roster, state, rows[wave], due[wave], osmolality, temperature, record)
    return state, tuple(np.unique(rows).tolist()), record


def _due(roster: AnimalRoster, osmolality: JudgedRows, updated_at_us: IntArray) -> tuple[IntArray, IntArray]:
    """Return which readings move which rows on: of each cohort the first of each slice of measured time."""
    usable = np.flatnonzero(osmolality.is_usable)
    index, row = _with_rows(roster, usable, osmolality.tank[usable])
    if not index.size:
        return index, row
    slices = osmolality.at_us[index] // EVERY_US
    fresh = np.flatnonzero(slices > updated_at_us[row] // EVERY_US)
    _, first = np.unique(np.stack([row[fresh], slices[fresh]]), axis=1, return_index=True)
    pairs = fresh[np.sort(first)]
    return index[pairs], row[pairs]


def _with_rows(roster: AnimalRoster, index: IntArray, tank: IntArray) -> tuple[IntArray, IntArray]:
    """Return each of *index* once for every cohort in its *tank*, and the cohort's row."""
    count = roster.row_count[tank]
    repeated = np.repeat(index, count)
    behind_first = np.arange(repeated.size) - np.repeat(np.cumsum(count) - count, count)
    return repeated, np.repeat(roster.first_row[tank], count) + behind_first


def _waves(rows: IntArray) -> list[IntArray]:
    """Return places in *rows* in waves: the first of each row, then the second of each, and so on."""
    seen: dict[int, int] = {}
    waves: list[list[int]] = []
    for place, row in enumerate(rows.tolist()):
        depth = seen.get(row, 0)
        seen[row] = depth + 1
        if depth == len(waves):
            waves.append([])
        waves[depth].append(place)
    return [np.array(wave, dtype=np.int64) for wave in waves]


def _step_wave(
    roster: AnimalRoster,
    state: AnimalState,
    rows: IntArray,
    wave: IntArray,
    osmolality: JudgedRows,
    temperature: JudgedRows,
    record: list[StressStep],
) -> None:
    cohorts = state.cohorts.take(rows)
    at_us = osmolality.at_us[wave]
    water = _farthest(osmolality, wave, cohorts.acclimated)
    elapsed_s = np.where(cohorts.updated_at_us > 0, (at_us - cohorts.updated_at_us) / MICROSECONDS_PER_SECOND, 0.0)
    warmth = temperature.high_value[wave]
    after, stress = advance(
        roster.figures.take(rows), cohorts, osmolality_mOsm_kg=water, temperature_degC=warmth, elapsed_s=elapsed_s
    )
    after = replace(after, updated_at_us=at_us)
    _keep(roster, state, rows, after, stress, at_us, record)


def _keep(
    roster: AnimalRoster,
    state: AnimalState,
    rows: IntArray,
    after: CohortState,
    stress: Stress,
    at_us: IntArray,
    record: list[StressStep],
) -> None:
    """Take new states into *state* in place, and what belongs into the record; each row stands in a wave once."""
    slices = at_us // RECORD_EVERY_US
    is_told = (slices > state.recorded_us[rows]) | (stress.band != state.latest.band[rows])
    for index in np.flatnonzero(is_told).tolist():
        row = int(rows[index])
        values = stress_values(stress, index)
        values["acclimated_mOsm_kg"] = _number(after.acclimated[index])
        record.append(StressStep(int(roster.tanks[row]), int(at_us[index]), roster.cohorts[row], values))
    state.recorded_us[rows[is_told]] = slices[is_told]
    for name in _STRESS_NAMES:
        getattr(state.latest, name)[rows] = getattr(stress, name)
    for name in _COHORT_NAMES:
        getattr(state.cohorts, name)[rows] = getattr(after, name)


def stress_values(stress: Stress, index: int) -> dict[str, Any]:
    """Return one element of *stress* as plain values, None where not known."""
    return {
        "stress": _number(stress.stress[index]),
        "range_strain": _number(stress.range_strain[index]),
        "change_strain": _number(stress.change_strain[index]),
        "exposure_strain": _number(stress.exposure_strain[index]),
        "thermal_strain": _number(stress.thermal_strain[index]),
        "driver": DRIVER_WORDS[Driver(int(stress.driver[index]))],
        "band": BAND_WORDS[Band(int(stress.band[index]))],
        "internal_mOsm_kg": _number(stress.internal_mOsm_kg[index]),
        "gap_mOsm_kg": _number(stress.gap_mOsm_kg[index]),
    }


def animal_bodies(roster: AnimalRoster, state: AnimalState, rows: Sequence[int]) -> list[dict[str, Any]]:
    """Return what the chain remembers of the animals of *rows*, each as plain JSON data.

    All rows are taken out of the arrays at once: this runs for every block.
    """
    index = np.asarray(rows, dtype=np.int64)
    columns = [getattr(state.latest, name)[index].tolist() for name in _STRESS_NAMES]
    latest = [
        {name: None if value != value else value for name, value in zip(_STRESS_NAMES, values, strict=True)}
        for values in zip(*columns, strict=True)
    ]
    minds = zip(
        index.tolist(), state.cohorts.take(index).to_dicts(), latest, state.recorded_us[index].tolist(), strict=True
    )
    return [
        {"cohort": roster.cohorts[row], "state": own, "latest": felt, "recorded_us": recorded}
        for row, own, felt, recorded in minds
    ]


def restored_animals(roster: AnimalRoster, bodies: Mapping[str, Mapping[str, Any]]) -> AnimalState:
    """Return the state kept with `animal_bodies`, by the cohorts' ids; a cohort that came since starts fresh."""
    state = fresh_animals(roster)
    for row, cohort_id in enumerate(roster.cohorts):
        body = bodies.get(cohort_id)
        if body is None:
            continue
        cohort = CohortState.from_dicts([body["state"]])
        for member in fields(CohortState):
            getattr(state.cohorts, member.name)[row] = getattr(cohort, member.name)[0]
        for member in fields(Stress):
            value = body["latest"][member.name]
            getattr(state.latest, member.name)[row] = _NAN_STRESS if value is None else value
        state.recorded_us[row] = body["recorded_us"]
    return state


def carried_animals(
    before: AnimalRoster, state: AnimalState, roster: AnimalRoster, changed: Mapping[str, CohortState]
) -> AnimalState:
    """Return the state of the animals after the roster has changed: each cohort keeps its own, wherever it is now.

    Parameters
    ----------
    before : AnimalRoster
    state : AnimalState
        Of the rows of *before*; not changed.
    roster : AnimalRoster
        The new one.
    changed : mapping of str to CohortState
        Cohorts whose state is another than before, or that are new: of one element each.
    """
    after = fresh_animals(roster)
    kept = [(row, before.row_of[cohort]) for row, cohort in enumerate(roster.cohorts) if cohort in before.row_of]
    now, then = (np.array([pair[side] for pair in kept], dtype=np.int64) for side in (0, 1))
    for new, old in ((after.cohorts, state.cohorts), (after.latest, state.latest)):
        for member in fields(new):
            getattr(new, member.name)[now] = getattr(old, member.name)[then]
    after.recorded_us[now] = state.recorded_us[then]
    for cohort_id, own in changed.items():
        row = roster.row_of.get(cohort_id)
        if row is None:
            continue
        figures = roster.figures.take(np.array([row]))
        # No time passes: this only says what the water in which they are now is to them.
        _, stress = advance(
            figures, own, osmolality_mOsm_kg=own.osmolality, temperature_degC=own.temperature, elapsed_s=0.0
        )
        for record, values in ((after.cohorts, own), (after.latest, stress)):
            for member in fields(record):
                getattr(record, member.name)[row] = getattr(values, member.name)[0]
    return after


def _farthest(rows: JudgedRows, index: IntArray, acclimated: FloatArray) -> FloatArray:
    low, high = rows.low_value[index], rows.high_value[index]
    return np.where(np.abs(low - acclimated) > np.abs(high - acclimated), low, high)


def _unknown_stress(count: int) -> Stress:
    columns: dict[str, Any] = {member.name: np.full(count, np.nan) for member in fields(Stress)}
    columns["driver"] = np.full(count, Driver.UNKNOWN, dtype=np.int8)
    columns["band"] = np.full(count, Band.UNKNOWN, dtype=np.int8)
    columns["supports"] = np.zeros(count, dtype=np.uint8)
    return Stress(**columns)


def _copied(record: Any) -> Any:
    return replace(record, **{member.name: getattr(record, member.name).copy() for member in fields(record)})


def _number(value: Any) -> float | int | None:
    """Return an array's element as JSON can hold it."""
    plain = value.item()
    return None if plain != plain else plain
