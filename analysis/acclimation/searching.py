"""From a task to its schedule: try the roundings and paces worth trying, then keep the stress of the journey."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Final

import numpy as np

from analysis.acclimation.flowing import flowing
from analysis.acclimation.journey import JourneyStress, stress_of_journey
from analysis.acclimation.problem import Problem, Work, problem_of
from analysis.acclimation.stepping import Pace, Schedule, stepped
from analysis.acclimation.task import Allowances, Method, nice_step

if TYPE_CHECKING:
    from analysis.acclimation.limits import Limits
    from analysis.acclimation.task import AcclimationTask
    from analysis.animal.osmoregulation import CohortState
    from analysis.animal.stage import Stage

STRESS_SLACK: Final = 0.5
"""A score is shown without decimals; half a point is no difference."""
WORTH_HOURS_SHARE: Final = 0.005
"""A schedule this much longer than the fastest is preferred when it has fewer steps or rounder litres."""
SATURATED: Final = 99.0
"""A score at its end does not show that slower was better. [0-100]"""
LADDER: Final = (0.7, 0.5, 0.35, 0.25, 0.15, 0.1, 0.05)
"""Shares of the rates to try, one after the other, until the stress of the journey is below its cap."""
HALVINGS: Final = 3
EXACT: Final = Allowances(volume_share=0.0, source_salinity=0.0, late_min=0.0)


@dataclass(frozen=True, slots=True)
class Found:
    """The schedule that was chosen, and how.

    Parameters
    ----------
    schedule : Schedule
        Empty of an arrival where there is none.
    journey : JourneyStress
        Stress along it.
    slowness : float
        1, or the share of the salinity limits' caps that keeps the stress of the journey under its cap.
    pace : Pace
        Rounding and spacing of the steps.
    alternatives : tuple of Schedule
        Others that arrive with fewer steps, fastest first.
    work : Work
        How much was computed.
    """

    schedule: Schedule
    journey: JourneyStress
    slowness: float
    pace: Pace
    alternatives: tuple[Schedule, ...]
    work: Work


def found(task: AcclimationTask, stage: Stage, limits: Limits, *, state: CohortState | None = None) -> Found:
    """Return the fastest schedule that keeps every limit and the cap on the stress of the journey."""
    work = Work()
    runs = _runs(task, limits, work)
    pace, schedule = _preferred(runs)
    journey = stress_of_journey(task, stage, schedule, state=state)
    slowness = 1.0
    if schedule.has_arrived and _is_too_much(journey, limits):
        schedule, journey, slowness = _slowed(task, stage, limits, pace, work, before=journey.worst, state=state)
    alternatives = _alternatives(runs, schedule) if slowness == 1.0 else ()
    return Found(schedule, journey, slowness, pace, alternatives, work)


def _is_too_much(journey: JourneyStress, limits: Limits) -> bool:
    """Return True where the journey breaks its cap; animals that begin above it may at least not get worse.

    Not known counts as not too much: it is said elsewhere.
    """
    highest = np.fmax(limits.stress_cap, journey.journey[0])
    return bool(journey.worst > highest + STRESS_SLACK)


def run(
    task: AcclimationTask, limits: Limits, pace: Pace, *, slowness: float = 1.0, work: Work | None = None
) -> Schedule:
    """Return the schedule of one pace."""
    problem = problem_of(task, limits, slowness=slowness, work=work)
    return _run(problem, pace)


def _run(problem: Problem, pace: Pace) -> Schedule:
    return flowing(problem) if problem.task.method is Method.FLOW else stepped(problem, pace)


def roundings(task: AcclimationTask) -> tuple[float, ...]:
    """Return the roundings to try, roundest first: litres, or kilograms of salt; one, where the task sets it."""
    if np.isfinite(task.grid.litres):
        return (task.grid.litres,)
    whole = task.vessel.volume_L
    if task.method is Method.DOSE and task.salt is not None:
        return tuple(nice_step(whole * share / 1000.0) for share in (0.5, 0.1, 0.02))
    return tuple(nice_step(whole / parts) for parts in (200.0, 500.0, 1000.0))


def _runs(task: AcclimationTask, limits: Limits, work: Work) -> list[tuple[Pace, Schedule]]:
    clock = task.grid.clock_min
    if task.method is Method.FLOW:
        pace = Pace(clock, 0.0)
        return [(pace, run(task, limits, pace, work=work))]
    blends = bool(np.isfinite(task.target.temperature_degC)) and len(task.sources) > 1
    units = roundings(task)[::2] if blends else roundings(task)  # each run with blends costs several plain ones
    runs = [(pace, run(task, limits, pace, work=work)) for pace in (Pace(clock, unit, 0.1) for unit in units)]
    unit = _preferred(runs)[0].unit
    rooms = (0.25,) if limits.governs == "day" or blends else (0.0, 0.25)
    spread = max(
        clock, min(limit.window_min for limit in limits.rolling if limit.window_min >= 60.0) + task.allowances.late_min
    )
    paces = [*(Pace(clock, unit, room) for room in rooms), Pace(spread, unit, 0.1)]
    return runs + [(pace, run(task, limits, pace, work=work)) for pace in paces]


def _preferred(runs: list[tuple[Pace, Schedule]]) -> tuple[Pace, Schedule]:
    fastest = min(schedule.total_h for _, schedule in runs)
    if not np.isfinite(fastest):
        return runs[-1] if len(runs) == 1 else max(runs, key=lambda run: len(run[1].moves))
    good = [run for run in runs if run[1].total_h <= fastest * (1.0 + WORTH_HOURS_SHARE)]
    return min(good, key=lambda run: (len(run[1].moves), -run[0].unit))


def _alternatives(runs: list[tuple[Pace, Schedule]], chosen: Schedule) -> tuple[Schedule, ...]:
    kept: list[Schedule] = []
    for _, schedule in sorted(runs, key=lambda run: run[1].total_h):
        fewest = min([len(chosen.moves), *(len(other.moves) for other in kept)])
        if schedule.has_arrived and len(schedule.moves) < fewest:
            kept.append(schedule)
    return tuple(kept)


def _slowed(
    task: AcclimationTask,
    stage: Stage,
    limits: Limits,
    pace: Pace,
    work: Work,
    *,
    before: float,
    state: CohortState | None,
) -> tuple[Schedule, JourneyStress, float]:
    """Return the fastest schedule of one pace whose journey keeps the cap on stress, by halving the slowness."""

    def tried(slowness: float) -> tuple[Schedule, JourneyStress, float]:
        schedule = run(task, limits, pace, slowness=slowness, work=work)
        return schedule, stress_of_journey(task, stage, schedule, state=state), slowness

    high, best = 1.0, None
    for low in LADDER:
        attempt = tried(low)
        if not attempt[0].has_arrived:
            break
        if not _is_too_much(attempt[1], limits):
            best = attempt
            break
        if SATURATED > attempt[1].worst > before - STRESS_SLACK:
            break  # slower does not help: it is not the journey's pace that makes the stress
        high, before = low, attempt[1].worst
    if best is None:
        told = f"{attempt[1].worst:.0f} even at {100 * attempt[2]:.0f} % of the rates"
        words = f"{limits.stress_limit.name} ({limits.stress_limit.value}): {told}"
        return replace(attempt[0], has_arrived=False, obstacle=words), attempt[1], attempt[2]
    low = best[2]
    for _ in range(HALVINGS):
        middle = float(np.sqrt(low * high))
        attempt = tried(middle)
        if attempt[0].has_arrived and not _is_too_much(attempt[1], limits):
            low, best = middle, attempt
        else:
            high = middle
    return best


def hours_without_allowances(task: AcclimationTask, limits: Limits, found: Found) -> float:
    """Return the hours that the same pace would take if nothing could go wrong: what the allowances cost. [h]"""
    exact = replace(task, allowances=EXACT)
    return run(exact, limits, found.pace, slowness=found.slowness, work=found.work).total_h
