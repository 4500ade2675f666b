"""The animals in the tanks: their figures as arrays, what they are used to, and what each reading does to them.

A tank's animals are moved on at most once in `EVERY_US` of measured time, by the first reading of each such slice: their own
times are hours, and the rule looks at the readings alone, so the result does not depend on how the stream was cut into blocks.
"""

from __future__ import annotations

from dataclasses import dataclass, fields, replace
from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np

from analysis.animal.fallbacks import resolved
from analysis.animal.osmoregulation import CohortState, StageArrays
from analysis.animal.stage import Certainty
from analysis.animal.stress import BAND_WORDS, DRIVER_WORDS, Band, Driver, Stress, advance
from analysis.animal.tables import load
from analysis.arrays import MICROSECONDS_PER_SECOND

if TYPE_CHECKING:
    from collections.abc import Mapping

    from analysis.alarm.nearest import JudgedRows
    from analysis.animal.stage import Stage
    from analysis.arrays import BoolArray, FloatArray, IntArray
    from analysis.water.properties import WaterKind
    from ingest.site.models import Site

EVERY_US = 10 * MICROSECONDS_PER_SECOND
RECORD_EVERY_US = 60 * MICROSECONDS_PER_SECOND
"""A row of the record is kept for the first step of each such slice of measured time, and for each change of band."""
NO_ANIMALS = -1
_NAN_STRESS = float("nan")

LARVAL_WORDS = frozenset(
    {
        "egg",
        "embryo",
        "nauplius",
        "zoea",
        "mysis",
        "larva",
        "megalopa",
        "phyllosoma",
        "trochophore",
        "veliger",
        "alevin",
    }
)
"""Words in a stage's id that make its animals larvae for the alarm band. Common practice."""


class Stocked(NamedTuple):
    """Which animals are in a tank: the cohort, ``genus-species/stage``, and the salinity they were used to when they came."""

    cohort: str
    animal: str
    used_to_salinity: float


@dataclass(frozen=True, slots=True)
class AnimalRoster:
    """The animals of every tank.

    Attributes
    ----------
    stages : tuple of Stage or None
        One a tank; None where no animals are, or none that a table knows.
    is_larva : ndarray of bool, one a tank
    tolerable_salinity : ndarray of float64, shape (tanks, 2)
        Lowest and highest salinity that a published figure calls tolerable, in the tank's own salinity; NaN where there is none.
        Assumed figures are left out: a limit that nobody has measured wakes nobody.
    tanks : ndarray of int64
        Index of the tank of each row of `figures` and of the cohorts' state.
    row_of : ndarray of int64
        For each tank its row; -1 where there is none.
    cohorts : tuple of str
        Id of the cohort of each row.
    figures : StageArrays
    used_to_mOsm_kg : ndarray of float64
        What each row's animals were used to when they came.
    """

    stages: tuple[Stage | None, ...]
    is_larva: BoolArray
    tolerable_salinity: FloatArray
    tanks: IntArray
    row_of: IntArray
    cohorts: tuple[str, ...]
    figures: StageArrays
    used_to_mOsm_kg: FloatArray


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


def animal_roster(site: Site, kinds: Mapping[str, WaterKind], stocked: Mapping[str, Stocked]) -> AnimalRoster:
    """Return the animals of every tank.

    Parameters
    ----------
    site : Site
    kinds : mapping of str to WaterKind
        Every kind of water that the site names.
    stocked : mapping of str to Stocked
        What is in which tank, by the tank's id.
    """
    known = load()
    stages = tuple(known.get(stocked[tank.id].animal) if tank.id in stocked else None for tank in site.tanks)
    limits = [_tolerable(stage, kinds[tank.water]) for stage, tank in zip(stages, site.tanks, strict=True)]
    tanks = np.array([index for index, stage in enumerate(stages) if stage is not None], dtype=np.int64)
    row_of = np.full(len(site.tanks), NO_ANIMALS, dtype=np.int64)
    row_of[tanks] = np.arange(len(tanks))
    in_rows = [site.tanks[index] for index in tanks]
    return AnimalRoster(
        stages=stages,
        is_larva=np.array([is_larva(stage) for stage in stages], dtype=np.bool_),
        tolerable_salinity=np.array(limits, dtype=np.float64).reshape(-1, 2),
        tanks=tanks,
        row_of=row_of,
        cohorts=tuple(stocked[tank.id].cohort for tank in in_rows),
        figures=StageArrays.from_stages([stage for stage in stages if stage is not None]),
        used_to_mOsm_kg=np.array(
            [float(kinds[tank.water].osmolality_from_salinity(stocked[tank.id].used_to_salinity)) for tank in in_rows],
            dtype=np.float64,
        ),
    )


def is_larva(stage: Stage | None) -> bool:
    """Return whether the animals of *stage* are larvae."""
    return stage is not None and not LARVAL_WORDS.isdisjoint(stage.id.partition("/")[2].split("-"))


def fresh_animals(roster: AnimalRoster) -> AnimalState:
    """Return the state of animals that have lived until now in the water they were used to when they came."""
    return AnimalState(
        cohorts=CohortState.used_to(roster.used_to_mOsm_kg),
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
        After, the tanks whose animals were moved on, and what goes into the record.
    """
    rows = roster.row_of[osmolality.tank]
    due = _due(rows, osmolality, state.cohorts.updated_at_us)
    if not due.size:
        return state, (), []
    state = AnimalState(_copied(state.cohorts), _copied(state.latest), state.recorded_us.copy())
    record: list[StressStep] = []
    # Step by step even where a block holds hours of one tank: a series taken at once is the same to rounding only,
    # and the state must be that of the readings to the last bit, whatever blocks they came in.
    for wave in _waves(rows[due], due):
        _step_wave(roster, state, rows[wave], wave, osmolality, temperature, record)
    return state, tuple(np.unique(osmolality.tank[due]).tolist()), record


def _due(rows: IntArray, osmolality: JudgedRows, updated_at_us: IntArray) -> IntArray:
    """Return the readings that move their animals on: the first of each slice of measured time."""
    has_animals = np.flatnonzero((rows >= 0) & osmolality.is_usable)
    if not has_animals.size:
        return has_animals
    slices = osmolality.at_us[has_animals] // EVERY_US
    row = rows[has_animals]
    fresh = slices > updated_at_us[row] // EVERY_US
    candidates = has_animals[fresh]
    _, first = np.unique(np.stack([row[fresh], slices[fresh]]), axis=1, return_index=True)
    return np.sort(candidates[first])


def _waves(rows: IntArray, due: IntArray) -> list[IntArray]:
    """Return the due readings in waves: the first of each tank, then the second of each, and so on."""
    seen: dict[int, int] = {}
    waves: list[list[int]] = []
    for row, index in zip(rows.tolist(), due.tolist(), strict=True):
        depth = seen.get(row, 0)
        seen[row] = depth + 1
        if depth == len(waves):
            waves.append([])
        waves[depth].append(index)
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
    """Take new states into *state* in place, and what belongs into the record."""
    for index, (row, time_us) in enumerate(zip(rows.tolist(), at_us.tolist(), strict=True)):
        is_due = time_us // RECORD_EVERY_US > state.recorded_us[row]
        has_new_band = stress.band[index] != state.latest.band[row]
        if is_due or has_new_band:
            state.recorded_us[row] = time_us // RECORD_EVERY_US
            values = stress_values(stress, index)
            values["acclimated_mOsm_kg"] = _number(after.acclimated[index])
            record.append(StressStep(int(roster.tanks[row]), time_us, roster.cohorts[row], values))
        for member in fields(Stress):
            getattr(state.latest, member.name)[row] = getattr(stress, member.name)[index]
    for member in fields(CohortState):
        getattr(state.cohorts, member.name)[rows] = getattr(after, member.name)


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


def animal_body(roster: AnimalRoster, state: AnimalState, tank: int) -> dict[str, Any] | None:
    """Return what the chain remembers of the animals of one tank as plain JSON data; None where there are none."""
    row = int(roster.row_of[tank])
    if row == NO_ANIMALS:
        return None
    cohort = state.cohorts.take(np.array([row])).to_dicts()[0]
    latest = {member.name: _number(getattr(state.latest, member.name)[row]) for member in fields(Stress)}
    return {
        "cohort": roster.cohorts[row],
        "state": cohort,
        "latest": latest,
        "recorded_us": int(state.recorded_us[row]),
    }


def restored_animals(roster: AnimalRoster, bodies: Mapping[int, Mapping[str, Any]]) -> AnimalState:
    """Return the state kept with `animal_body`, by the tank's index; a cohort that came since starts fresh."""
    state = fresh_animals(roster)
    for tank, body in bodies.items():
        row = int(roster.row_of[tank])
        if row == NO_ANIMALS or body.get("cohort") != roster.cohorts[row]:
            continue
        cohort = CohortState.from_dicts([body["state"]])
        for member in fields(CohortState):
            getattr(state.cohorts, member.name)[row] = getattr(cohort, member.name)[0]
        for member in fields(Stress):
            value = body["latest"][member.name]
            getattr(state.latest, member.name)[row] = _NAN_STRESS if value is None else value
        state.recorded_us[row] = body["recorded_us"]
    return state


def _farthest(rows: JudgedRows, index: IntArray, acclimated: FloatArray) -> FloatArray:
    low, high = rows.low_value[index], rows.high_value[index]
    return np.where(np.abs(low - acclimated) > np.abs(high - acclimated), low, high)


def _tolerable(stage: Stage | None, kind: WaterKind) -> tuple[float, float]:
    if stage is None:
        return np.nan, np.nan
    figures = resolved(stage).figures
    found = []
    for key in ("tolerable_low", "tolerable_high"):
        figure = figures.get(key)
        is_measured = figure is not None and figure.certainty is not Certainty.ASSUMED
        found.append(float(kind.salinity_from_osmolality(figure.value)) if is_measured and figure else np.nan)
    return found[0], found[1]


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
