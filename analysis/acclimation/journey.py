"""What a schedule does to the animals: the stress model run along the planned water."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Final

import numpy as np

from analysis.acclimation.scenarios import NOMINAL
from analysis.acclimation.source import SEAWATER
from analysis.animal.osmoregulation import CohortState, GapRule, StageArrays
from analysis.animal.stress import DRIVER_WORDS, Driver, Stress, advance_series, range_strain
from analysis.arrays import MICROSECONDS_PER_SECOND
from analysis.water.properties import Seawater
from analysis.water.sodium_chloride_water import SodiumChlorideWater

if TYPE_CHECKING:
    from analysis.acclimation.stepping import Schedule
    from analysis.acclimation.task import AcclimationTask
    from analysis.animal.stage import Stage
    from analysis.arrays import FloatArray
    from analysis.water.properties import WaterKind

MICROSECONDS_PER_MINUTE: Final = 60 * MICROSECONDS_PER_SECOND
KNOWN_WATER: Final = GapRule(hold_s=1e12, unknown_after_s=1e12)
"""Between two rows of a plan the water is known: no row is missing."""
SETTLING_H: Final = (1.0, 3.0, 6.0, 12.0, 24.0, 48.0)
"""Hours after arrival in which the shock of a fast journey still tells. [h]"""
TOLERABLE_STRAIN: Final = 0.5
STANDING_HOURS: Final = 96.0
"""How long the destination is looked at: the usual length of a tolerance test. [h]"""


@dataclass(frozen=True, slots=True)
class JourneyStress:
    """Stress along a schedule.

    Parameters
    ----------
    minutes : ndarray, shape (rows,)
        After the start. [min]
    salinity, temperature_degC, osmolality_mOsm_kg : ndarray, shape (rows,)
        Of the nominal water.
    stress : ndarray, shape (rows,)
        Of the stress model, as a board would show it; NaN where not known. [0-100]
    journey : ndarray, shape (rows,)
        The part that the journey makes: change, exposure by the shock of change, and temperature beyond what it
        was at the start. The salinity itself, and exposure by it, are left out: they belong to where the animals
        go, are shown apart, and no other schedule would spare them. [0-100]
    driver : tuple of str
        The largest strain of each row, in words.
    state : CohortState
        The animals after the last row.
    step_row : tuple of int
        The row at the end of each move.
    worst : float
        The highest stress of the journey, also while they settle after it; NaN where not known. [0-100]
    """

    minutes: FloatArray
    salinity: FloatArray
    temperature_degC: FloatArray
    osmolality_mOsm_kg: FloatArray
    stress: FloatArray
    journey: FloatArray
    driver: tuple[str, ...]
    state: CohortState
    step_row: tuple[int, ...]
    worst: float


def water_kind(name: str) -> WaterKind:
    """Return the kind of water behind a task's word: sea water, or sodium chloride."""
    return Seawater() if name == SEAWATER else SodiumChlorideWater()


def home_state(task: AcclimationTask) -> CohortState:
    """Return the state of animals used to the task's home water, at the temperature of the start."""
    home = water_kind(task.water_kind).osmolality_from_salinity(np.array([task.home_salinity]))
    return CohortState.used_to(home, temperature_degC=np.array([task.start.temperature_degC]))


def stress_of_journey(
    task: AcclimationTask, stage: Stage, schedule: Schedule, *, state: CohortState | None = None
) -> JourneyStress:
    """Return the stress along *schedule*.

    Parameters
    ----------
    task, stage
        The journey and the animals.
    schedule : Schedule
        From `analysis.acclimation.stepping` or a sibling.
    state : CohortState, optional
        The animals' state at the start, shape (1,); default: settled in the water they are used to.
    """
    minutes, salinity, temperature = [0.0], [task.start.salinity], [task.start.temperature_degC]
    step_row = []
    for move in schedule.moves:
        minutes += [max(move.minute, minutes[-1]), move.minute + move.duration_min]
        salinity += [salinity[-1], float(move.after.salinity[NOMINAL])]
        temperature += [temperature[-1], float(move.after.temperature_degC[NOMINAL])]
        step_row.append(len(minutes) - 1)
    return along(
        task,
        stage,
        minutes=np.array(minutes),
        salinity=np.array(salinity),
        temperature_degC=np.array(temperature),
        step_row=tuple(step_row),
        state=state,
        settling_h=SETTLING_H,
    )


def along(
    task: AcclimationTask,
    stage: Stage,
    *,
    minutes: FloatArray,
    salinity: FloatArray,
    temperature_degC: FloatArray,
    step_row: tuple[int, ...] = (),
    state: CohortState | None = None,
    settling_h: tuple[float, ...] = (),
) -> JourneyStress:
    """Return the stress along any run of water, given row by row; each row's water lasts until the next.

    Parameters
    ----------
    task, stage
        The journey and the animals.
    minutes, salinity, temperature_degC : ndarray, shape (rows,)
        [min], of the task's kind, [degC]
    step_row : tuple of int
        Rows at the end of the moves.
    state : CohortState, optional
        The animals before the first row; default: settled in the water they are used to.
    settling_h : tuple of float
        Hours after the last row at which the shock of the journey is still looked at. [h]
    """
    kind = water_kind(task.water_kind)
    osmolality = kind.osmolality_from_salinity(salinity)
    figures = StageArrays.from_stages([stage])
    begin = home_state(task) if state is None else replace(state, updated_at_us=np.zeros(1, dtype=np.int64))
    times = np.rint((minutes + 1.0) * MICROSECONDS_PER_MINUTE).astype(np.int64)
    settled = times[-1] + np.rint(60.0 * np.array(settling_h) * MICROSECONDS_PER_MINUTE).astype(np.int64)

    def told_by(figures: StageArrays, *, settles: bool = False) -> tuple[CohortState, Stress]:
        extra = len(settling_h) if settles else 0
        return advance_series(
            figures,
            begin,
            times_us=np.append(times, settled[:extra]),
            osmolality_mOsm_kg=np.append(osmolality, np.repeat(osmolality[-1:], extra)),
            temperature_degC=np.append(temperature_degC, np.repeat(temperature_degC[-1:], extra)),
            gap=KNOWN_WATER,
        )

    after, told = told_by(figures)
    journey = _journey_part(told_by(_without_level(figures), settles=True)[1])
    known = journey[np.isfinite(journey)]
    return JourneyStress(
        minutes=minutes,
        salinity=salinity,
        temperature_degC=temperature_degC,
        osmolality_mOsm_kg=osmolality,
        stress=told.stress,
        journey=journey[: minutes.size],
        driver=tuple(DRIVER_WORDS[Driver(int(code))] for code in told.driver),
        state=after,
        step_row=step_row,
        worst=float(known.max()) if known.size else float("nan"),
    )


def _journey_part(shock: Stress) -> FloatArray:
    """Return the stress that the journey makes, from a run without exposure by the level of the water."""
    osmotic = np.fmax(shock.change_strain, shock.exposure_strain)
    warmer = np.maximum(np.nan_to_num(shock.thermal_strain) - np.nan_to_num(shock.thermal_strain[0]), 0.0)
    return np.asarray(100.0 * (1.0 - (1.0 - osmotic) * (1.0 - warmer)))


def _without_level(figures: StageArrays) -> StageArrays:
    """Return *figures* for which no water adds exposure by its level; the shock of change still does."""
    nowhere = np.full_like(figures.incipient_low, 1e9)
    return replace(figures, incipient_low=-nowhere, incipient_high=nowhere)


@dataclass(frozen=True, slots=True)
class Standing:
    """What the destination itself asks of animals that have arrived.

    Parameters
    ----------
    range_strain : float
        0 in the optimum, 0.5 at the tolerable limit, 1 at the lethal level; NaN where not known.
    stress_after_h, hours : float
        Stress after that many hours at the destination. [0-100], [h]
    needs_yes : bool
        True beyond the tolerable limit, or where it is not known: a named person must agree.
    """

    range_strain: float
    stress_after_h: float
    hours: float
    needs_yes: bool


def standing_at_destination(
    task: AcclimationTask, stage: Stage, arrived: JourneyStress, *, temperature_degC: float
) -> Standing:
    """Return the destination's own standing strain after the journey *arrived*."""
    kind = water_kind(task.water_kind)
    target = kind.osmolality_from_salinity(np.array([task.target.salinity]))
    figures = StageArrays.from_stages([stage])
    strain = range_strain(figures, osmolality_mOsm_kg=target, temperature_degC=np.array([temperature_degC]))
    after = along(
        task,
        stage,
        minutes=np.array([0.0, STANDING_HOURS * 60.0]),
        salinity=np.full(2, task.target.salinity),
        temperature_degC=np.full(2, temperature_degC),
        state=arrived.state,
    )
    known = float(strain[0])
    return Standing(known, float(after.stress[-1]), STANDING_HOURS, not known <= TOLERABLE_STRAIN + 1e-3)
