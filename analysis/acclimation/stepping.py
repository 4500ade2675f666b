"""The fastest steps: at each clock time as much as every limit allows, in every scenario.

Why taking the most at once is fastest: every limit bounds where the water may be by where it was within the
window before, and the further it was, the further it may go. So of all schedules on the same clock times the
one that always goes as far as it may is ahead of every other at every moment. That holds for exact litres and
one quantity; rounding and blends for two quantities can cost a little, and the plan says how much it could be.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Final

import numpy as np

from analysis.acclimation.problem import direct_blend, highest_litres, is_reachable
from analysis.acclimation.scenarios import NOMINAL, Amounts, ScenarioTank, exchanged

if TYPE_CHECKING:
    from analysis.acclimation.problem import Problem
    from analysis.acclimation.windows import Windows
    from analysis.arrays import BoolArray, FloatArray, IntArray

PROBES: Final = 40
"""Candidates of one look, shared by all blends: more of them cost little, another look costs much."""
LEAST_PROBES: Final = 4
MOST_DRAINED_SHARE: Final = 0.5
"""Common practice: the animals keep half of their water. [1]"""
SHORTEST_STEP_MIN: Final = 5.0
HORIZON_MIN: Final = 60.0 * 24.0 * 90.0
MOST_STEPS: Final = 400
SMALL_GAIN_H: Final = 1e-9
DRIFT_WEIGHT_K: Final = 1e-4
"""Of blends that gain the same, the one that moves the temperature least; share of the longest window. [1/K]"""
SOURCE_WEIGHT: Final = 0.05
"""Each further source in a step must gain this share of the longest window: a person measures it out. [1]"""
ARRIVED_WEIGHT_H: Final = 1e-3
"""Of candidates that arrive, the one nearest to the target. [h]"""
WATER_WEIGHT: Final = 0.1
"""A blend that needs a whole tank volume more must gain this share of the longest window by it. [1]"""


@dataclass(frozen=True, slots=True)
class Move:
    """One step of a schedule, with the water after it in every scenario.

    Parameters
    ----------
    minute, duration_min : float
        When it begins after the start, and how long it takes. [min]
    drain_L : float
        Of the tank's own water. [L]
    add_L : tuple of float
        Of each source. [L]
    salt_kg : float
        Of the product as weighed. [kg]
    after : ScenarioTank
        The water afterwards.
    """

    minute: float
    duration_min: float
    drain_L: float
    add_L: tuple[float, ...]
    salt_kg: float
    after: ScenarioTank


@dataclass(frozen=True, slots=True)
class Schedule:
    """A run of moves.

    Parameters
    ----------
    moves : tuple of Move
        In order.
    has_arrived : bool
        True where the last move brings the nominal water to the target.
    obstacle : str
        What stands in the way where it has not arrived.
    """

    moves: tuple[Move, ...]
    has_arrived: bool
    obstacle: str = ""

    @property
    def total_h(self) -> float:
        """Hours from the start to the end of the last move; infinite where it does not arrive. [h]"""
        if not self.has_arrived:
            return float("inf")
        return (self.moves[-1].minute + self.moves[-1].duration_min) / 60.0 if self.moves else 0.0


@dataclass(frozen=True, slots=True)
class Pace:
    """How a run places its steps.

    Parameters
    ----------
    spacing_min : float
        Least time from one step to the next. [min]
    unit : float
        Rounding: litres, or kilograms of salt. [L] or [kg]
    least_room : float
        A step waits while less than this share of the limits is free, unless it arrives; with a target
        temperature it waits while it saves less than this share of the longest window. [1]
    """

    spacing_min: float
    unit: float
    least_room: float = 0.0


@dataclass(frozen=True, slots=True)
class Place:
    """Where a run stands: the tank, the windows behind it, and what has been used of each source and salt."""

    tank: ScenarioTank
    windows: Windows
    used_L: FloatArray
    used_kg: float = 0.0

    def moved(self, move: Move) -> Place:
        """Return the place after *move*."""
        return Place(
            move.after,
            self.windows.marked(self.tank, minute=move.minute, duration_min=move.duration_min),
            self.used_L + np.array(move.add_L),
            self.used_kg + move.salt_kg,
        )


def stepped(problem: Problem, pace: Pace) -> Schedule:
    """Return the schedule that takes the most at every clock time, at least `spacing_min` apart."""
    place = Place(problem.tank, problem.windows, np.zeros(len(problem.task.sources)))
    moves: list[Move] = []
    minute = next_working_minute(problem, 0.0)
    while not problem.has_arrived(place.tank):
        if not minute <= HORIZON_MIN or len(moves) >= MOST_STEPS:
            return Schedule(tuple(moves), has_arrived=False, obstacle=f"it takes more than {HORIZON_MIN / 1440:g} days")
        move = best_move(problem, place, pace, minute=minute)
        if move is None:
            later = place.windows.next_release(after=minute)
            if not np.isfinite(later):
                return Schedule(tuple(moves), has_arrived=False, obstacle=obstacle_at(problem, place, pace))
            minute = next_working_minute(problem, later)
            continue
        place = place.moved(move)
        moves.append(move)
        minute = next_working_minute(problem, minute + max(pace.spacing_min, move.duration_min))
    return Schedule(tuple(moves), has_arrived=True)


def next_working_minute(problem: Problem, minute: float) -> float:
    """Return the first minute of the clock grid, at or after *minute*, at which a person may begin a step."""
    clock = problem.task.grid.clock_min
    candidate = max(0.0, np.ceil(minute / clock - 1e-9) * clock)
    for _ in range(int(2 * 24 * 60 / clock) + 1):
        if problem.task.is_working(float(candidate)):
            return float(candidate)
        candidate += clock
    return float("inf")


def best_move(problem: Problem, place: Place, pace: Pace, *, minute: float) -> Move | None:
    """Return the step at *minute* that leaves the least to do; None where no step gains enough."""
    marked = place.windows.marked(place.tank, minute=minute, duration_min=0.0)
    is_short = (
        not problem.has_target_temperature and bool(marked.marks) and marked.room(minute=minute) < pace.least_room
    )
    if is_short and float(problem.remaining_h(place.tank)) > problem.window_h * pace.least_room:
        return None
    blends = _blends_here(problem, place.tank)
    most = _most_units(problem, place, blends, pace.unit)
    units = _most_allowed(problem, place, marked, blends, most, minute=minute, unit=pace.unit)
    trial_blends = np.concatenate([blends, blends])
    trial_units = np.concatenate([units, np.minimum(units + 1, most)])
    trial = amounts_of(problem, trial_blends, trial_units, pace.unit)
    fits = (trial.add_L <= highest_litres(problem, place.tank, place.used_L) + 1e-9).all(axis=1)
    after = _after(problem, place.tank, trial)
    durations = step_durations(problem, trial)
    allowed = marked.allows(after, minute=minute) & (trial_units > 0) & fits
    allowed &= _lands(problem, place.tank, after)
    least_gain = 0.5 * pace.least_room * problem.window_h if problem.has_target_temperature else SMALL_GAIN_H
    if is_short:
        least_gain = float("inf")  # only what arrives is worth a step now
    return _chosen(
        problem, place, after, allowed, trial=trial, durations=durations, minute=minute, least_gain_h=least_gain
    )


def _blends_here(problem: Problem, tank: ScenarioTank) -> FloatArray:
    if len(problem.task.sources) < 2:
        return problem.blends
    straight = direct_blend(problem, tank)
    return problem.blends if straight is None else np.vstack([problem.blends, straight])


def _most_units(problem: Problem, place: Place, blends: FloatArray, unit: float) -> IntArray:
    task, volume = problem.task, place.tank.volume_L
    if problem.doses_salt:
        assert task.salt is not None  # noqa: S101 - said by doses_salt
        most_kg = min(
            task.salt.available_kg - place.used_kg, MOST_DRAINED_SHARE * float(volume.min()) / task.salt.litres_per_kg
        )
        return np.array([max(0, int(np.floor(most_kg / unit + 1e-9)))], dtype=np.int64)
    most = highest_litres(problem, place.tank, place.used_L)
    with np.errstate(divide="ignore", invalid="ignore"):
        by_source = np.where(blends > 0.0, (most + 1e-9) / blends, np.inf).min(axis=1, initial=np.inf)
    if problem.drains:
        by_source = np.minimum(by_source, MOST_DRAINED_SHARE * float(volume.min()))
    else:
        by_source = np.minimum(by_source, task.vessel.max_volume_L - float(volume[NOMINAL]))
    return np.asarray(np.floor(np.maximum(by_source, 0.0) / unit + 1e-9).astype(np.int64))


def amounts_of(problem: Problem, blends: FloatArray, units: IntArray, unit: float) -> Amounts:
    """Return litres and kilograms of each candidate from its blend and its number of rounding units."""
    salt = problem.task.salt
    if problem.doses_salt and salt is not None:
        none = np.zeros(len(units))
        return Amounts(
            none,
            np.zeros((len(units), len(problem.task.sources))),
            np.asarray(units * unit, dtype=np.float64),
            salt.dry_fraction,
        )
    add = rounded_litres(blends, units, unit)
    total = add.sum(axis=1)
    return Amounts(total if problem.drains else np.zeros_like(total), add, np.zeros_like(total))


def rounded_litres(blends: FloatArray, units: IntArray, litres: float) -> FloatArray:
    """Return litres by source, each a multiple of *litres*, that sum to *units* of it (largest remainders)."""
    exact = blends * units[:, np.newaxis]
    whole = np.floor(exact + 1e-9)
    missing = np.rint(units - whole.sum(axis=1)).astype(np.int64)
    order = np.argsort(-(exact - whole), axis=1, kind="stable")
    rank = np.argsort(order, axis=1, kind="stable")
    return np.asarray((whole + (rank < missing[:, np.newaxis])) * litres)


def _after(problem: Problem, tank: ScenarioTank, amounts: Amounts) -> ScenarioTank:
    problem.work.evaluations += int(amounts.drain_L.size) * problem.scenarios.count
    return exchanged(tank, problem.sources, amounts)


def step_durations(problem: Problem, amounts: Amounts) -> FloatArray:
    """Return how long each candidate takes: as long as the slowest source runs, at least five minutes. [min]"""
    flows = np.array([source.max_L_per_h for source in problem.task.sources])
    running = (60.0 * amounts.add_L / flows).max(axis=1, initial=0.0)
    return np.asarray(np.maximum(SHORTEST_STEP_MIN, running))


def _is_past(problem: Problem, tank: ScenarioTank, after: ScenarioTank) -> BoolArray:
    """Return True for candidates whose nominal water has gone beyond the target."""
    target = problem.target
    before = float(tank.salinity[NOMINAL])
    sign = -1.0 if before > target.salinity else 1.0
    slack = (
        max(problem.task.tolerance_salinity - abs(before - target.salinity), 0.0) if _is_near(problem, tank) else 0.0
    )
    past = sign * (after.salinity[:, NOMINAL] - target.salinity) > slack
    if problem.has_target_temperature:
        warm = float(tank.temperature_degC[NOMINAL])
        sign_K = -1.0 if warm > target.temperature_degC else 1.0
        near_K = abs(warm - target.temperature_degC) <= problem.task.tolerance_K
        slack_K = problem.task.tolerance_K if near_K else 0.0
        past |= sign_K * (after.temperature_degC[:, NOMINAL] - target.temperature_degC) > slack_K
    return np.asarray(past)


def _is_near(problem: Problem, tank: ScenarioTank) -> bool:
    return abs(float(tank.salinity[NOMINAL]) - problem.target.salinity) <= problem.task.tolerance_salinity


def _lands(problem: Problem, tank: ScenarioTank, after: ScenarioTank) -> BoolArray:
    """Return True for candidates that are not past the target by more than the tolerance."""
    target, tolerance = problem.target, problem.task.tolerance_salinity
    sign = -1.0 if float(tank.salinity[NOMINAL]) > target.salinity else 1.0
    lands = sign * (after.salinity[:, NOMINAL] - target.salinity) <= tolerance
    if problem.has_target_temperature:
        sign_K = -1.0 if float(tank.temperature_degC[NOMINAL]) > target.temperature_degC else 1.0
        off_K = sign_K * (after.temperature_degC[:, NOMINAL] - target.temperature_degC)
        lands &= off_K <= problem.task.tolerance_K
    return np.asarray(lands)


def _most_allowed(
    problem: Problem,
    place: Place,
    marked: Windows,
    blends: FloatArray,
    most: IntArray,
    *,
    minute: float,
    unit: float,
) -> IntArray:
    """Return for each blend the most units that keep every limit and do not pass the target.

    What a step changes grows with its litres, so the edge is found by dividing the bracket.
    """
    low, high = np.zeros_like(most), most + 1
    count = max(LEAST_PROBES, PROBES // len(blends))
    while (high - low > 1).any():
        width = high - low
        probes = low[:, np.newaxis] + (width[:, np.newaxis] * np.arange(1, count + 1)) // (count + 1)
        probes = np.clip(probes, np.minimum(low + 1, high - 1)[:, np.newaxis], (high - 1)[:, np.newaxis])
        trial = amounts_of(problem, np.repeat(blends, count, axis=0), probes.ravel(), unit)
        after = _after(problem, place.tank, trial)
        good = marked.allows(after, minute=minute)
        good &= ~_is_past(problem, place.tank, after)
        good = good.reshape(probes.shape) | (probes <= low[:, np.newaxis])
        kept = np.logical_and.accumulate(good, axis=1)
        low = np.where(kept.any(axis=1), np.where(kept, probes, low[:, np.newaxis]).max(axis=1), low)
        bad = ~kept
        high = np.where(bad.any(axis=1), np.where(bad, probes, high[:, np.newaxis]).min(axis=1), high)
        high = np.maximum(high, low + 1)
    return low


def _chosen(
    problem: Problem,
    place: Place,
    after: ScenarioTank,
    allowed: BoolArray,
    *,
    trial: Amounts,
    durations: FloatArray,
    minute: float,
    least_gain_h: float,
) -> Move | None:
    off = np.abs(after.salinity[:, NOMINAL] - problem.target.salinity)
    remaining = np.where(problem.is_there(after), ARRIVED_WEIGHT_H * off, problem.remaining_h(after))
    drift = np.abs(after.temperature_degC[:, NOMINAL] - problem.task.start.temperature_degC)
    water = trial.add_L.sum(axis=1) / problem.task.vessel.volume_L
    further = np.maximum((trial.add_L > 0.0).sum(axis=1) - 1, 0)
    cost = problem.window_h * (DRIFT_WEIGHT_K * drift + WATER_WEIGHT * water + SOURCE_WEIGHT * further)
    score = np.where(allowed, remaining + cost, np.inf)
    before = float(problem.remaining_h(place.tank))
    for number in np.argsort(score, kind="stable"):
        if not np.isfinite(score[number]):
            return None
        candidate = after.at(int(number))
        gain = before - remaining[number]
        if gain <= SMALL_GAIN_H or (gain < least_gain_h and not problem.has_arrived(candidate)):
            return None
        if len(problem.task.sources) > 1 and not is_reachable(problem, candidate):
            continue
        return Move(
            minute,
            float(durations[number]),
            float(trial.drain_L[number]),
            tuple(float(value) for value in trial.add_L[number]),
            float(trial.salt_kg[number]),
            candidate,
        )
    return None


def obstacle_at(problem: Problem, place: Place, pace: Pace) -> str:
    """Return which limit, or what else, forbids even the smallest step from here."""
    task, tank = problem.task, place.tank
    if problem.doses_salt:
        if task.salt is not None and task.salt.available_kg - place.used_kg < pace.unit:
            return f"{task.salt.name} has run out after {place.used_kg:g} kg"
    elif not problem.drains and task.vessel.max_volume_L - float(tank.volume_L[NOMINAL]) < pace.unit:
        return f"the vessel is full at {task.vessel.max_volume_L:g} L"
    elif (highest_litres(problem, tank, place.used_L) < pace.unit).all():
        return "the sources are used up" if place.used_L.any() else "no source gives enough for one step"
    trial = amounts_of(problem, problem.blends, np.ones(len(problem.blends), dtype=np.int64), pace.unit)
    after = _after(problem, tank, trial)
    for limit in problem.rolling:
        alone = replace(place.windows, limits=(limit,), marks=()).marked(tank, minute=0.0, duration_min=0.0)
        if not alone.allows(after, minute=0.0).any():
            words = f"{limit.limit.name} ({limit.limit.value}; {limit.limit.source})"
            return f"even one step of {pace.unit:g} breaks the limit {words}"
    return "no step brings the water nearer to the target"
