"""The plan: a schedule with its water, its stress, its limits and its cautions, or the limit that forbids one."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from datetime import datetime
from typing import TYPE_CHECKING, Final

import numpy as np

from analysis.acclimation.ammonia import TimeLeft, packed_time_left
from analysis.acclimation.cautions import cautions_for
from analysis.acclimation.checking import first_obstacle, needed_yes, usable_sources
from analysis.acclimation.journey import (
    JourneyStress,
    Standing,
    standing_at_destination,
    water_kind,
)
from analysis.acclimation.limits import Gate, Limit, Limits, hours_at_the_limit
from analysis.acclimation.scenarios import NOMINAL
from analysis.acclimation.searching import Found, found, hours_without_allowances
from analysis.acclimation.task import Method
from analysis.animal.survival import SurvivalEstimate, survival_of_schedule

if TYPE_CHECKING:
    from analysis.acclimation.stepping import Move
    from analysis.acclimation.task import AcclimationTask
    from analysis.animal.osmoregulation import CohortState
    from analysis.animal.stage import Stage

WATCHED_AFTER_H: Final = 48.0
"""Survival is told for the journey and this long after it. [h]"""
MOVE_FIRST: Final = "move to an aerated acclimation tank first"


@dataclass(frozen=True, slots=True)
class PlannedStep:
    """One step, as a person does it, and the water that follows.

    Parameters
    ----------
    number : int
        From 1.
    minute, duration_min : float
        After the start of the plan; how long it takes. [min]
    start : datetime
        In the site's zone.
    drain_L : float
        Of the tank's own water; with flow-through what runs over. [L]
    add : Mapping of str to float
        Litres of each source. [L]
    salt : Mapping of str to float
        Kilograms as weighed of each salt. [kg]
    dissolve_L : float
        Tank water to draw, dissolve the salt in and pour back. [L]
    flow_L_min : float
        With flow-through; else NaN. [L/min]
    salinity, temperature_degC, osmolality_mOsm_kg, ph, volume_L : float
        Expected afterwards.
    salinity_low, salinity_high : float
        The water may be anywhere between, with the allowed errors of volume and sources.
    stress, journey_stress : float
        Afterwards: of the stress model, and the part the journey makes. NaN: not known. [0-100]
    driver : str
        The largest strain, in words.
    """

    number: int
    minute: float
    duration_min: float
    start: datetime
    drain_L: float
    add: Mapping[str, float]
    salt: Mapping[str, float]
    dissolve_L: float
    flow_L_min: float
    salinity: float
    temperature_degC: float
    osmolality_mOsm_kg: float
    ph: float
    volume_L: float
    salinity_low: float
    salinity_high: float
    stress: float
    journey_stress: float
    driver: str


@dataclass(frozen=True, slots=True)
class Alternative:
    """Another schedule for the same task: fewer steps, more hours."""

    steps: int
    total_hours: float


@dataclass(frozen=True, slots=True)
class Plan:
    """A journey from water to water.

    Parameters
    ----------
    task : AcclimationTask
        What was asked.
    steps : tuple of PlannedStep
        Empty where no plan is feasible, or nothing is to be done.
    is_feasible : bool
        True where every limit is kept.
    reason : str
        Which limit forbids it, with its source; or a remark.
    total_hours : float
        From the start to the end of the last step; NaN where not feasible. [h]
    water_used_L, salt_used_kg : Mapping of str to float
        By source and salt.
    drained_L : float
        [L]
    limits : tuple of Limit
        Kept by the plan, with sources.
    gates : tuple of Gate
        To be confirmed before the start.
    needs_yes : tuple of str
        What a named person must agree to before the start; empty: nothing.
    standing : Standing or None
        The destination's own strain.
    worst_journey_stress : float
        [0-100]
    slowness : float
        Below 1: rates were cut to this share to keep the cap on stress.
    survival : SurvivalEstimate or None
        For the journey and two days after it; None: not known.
    time_left : TimeLeft or None
        Of the packed water, where there is one.
    costs : tuple of str
        What the choices cost, in words.
    alternatives : tuple of Alternative
        With fewer steps.
    cautions : tuple of str
        To be shown with the plan, always.
    evaluations : int
        How often the water of a candidate step was computed.
    """

    task: AcclimationTask
    steps: tuple[PlannedStep, ...]
    is_feasible: bool
    reason: str
    total_hours: float
    water_used_L: Mapping[str, float]
    salt_used_kg: Mapping[str, float]
    drained_L: float
    limits: tuple[Limit, ...]
    gates: tuple[Gate, ...]
    needs_yes: tuple[str, ...]
    standing: Standing | None
    worst_journey_stress: float
    slowness: float
    survival: SurvivalEstimate | None
    time_left: TimeLeft | None
    costs: tuple[str, ...] = ()
    alternatives: tuple[Alternative, ...] = ()
    cautions: tuple[str, ...] = ()
    evaluations: int = 0
    journey: JourneyStress | None = field(default=None, compare=False, repr=False)

    @property
    def ends_at(self) -> datetime:
        """When the last step is done."""
        hours = self.total_hours if np.isfinite(self.total_hours) else 0.0
        return self.task.clock(60.0 * hours)


def planned(
    task: AcclimationTask,
    stage: Stage,
    limits: Limits,
    *,
    state: CohortState | None = None,
    needs_release: bool = False,
) -> Plan:
    """Return the plan of a task.

    Parameters
    ----------
    task : AcclimationTask
        What is asked.
    stage : Stage
        The animals, from `analysis.animal.tables`.
    limits : Limits
        From `analysis.acclimation.limits.default_limits`.
    state : CohortState, optional
        What the animals are used to, shape (1,), where it is followed; default: settled in the task's home water.
    needs_release : bool
        True: a source that nobody has released is left out of the plan; False: it is used and the caution says
        that it must be released before the start.
    """
    kept, left_out = usable_sources(task, needs_release=needs_release)
    if not kept and task.salt is None:
        return _refused(task, limits, " ".join(left_out), left_out=())
    task = replace(task, sources=kept)
    obstacle = first_obstacle(task)
    if obstacle:
        return _refused(task, limits, obstacle, left_out=left_out)
    result = found(task, stage, limits, state=state)
    time_left = _time_left(task)
    plan = _assembled(task, stage, limits, result, time_left=time_left, left_out=left_out)
    if not result.schedule.has_arrived:
        return _infeasible(plan, result.schedule.obstacle)
    if time_left is not None and plan.total_hours > time_left.hours:
        words = (
            f"the schedule takes {plan.total_hours:.1f} h, the {task.vessel.word} serves {time_left.hours:.1f} h "
            f"({time_left.reason}; {time_left.source}): {MOVE_FIRST}"
        )
        return _infeasible(plan, words)
    return plan


def _infeasible(plan: Plan, reason: str) -> Plan:
    return replace(plan, is_feasible=False, reason=reason, total_hours=float("nan"))


def _refused(task: AcclimationTask, limits: Limits, reason: str, *, left_out: tuple[str, ...]) -> Plan:
    return Plan(
        task=task,
        steps=(),
        is_feasible=False,
        reason=reason,
        total_hours=float("nan"),
        water_used_L={},
        salt_used_kg={},
        drained_L=0.0,
        limits=limits.named,
        gates=limits.gates,
        needs_yes=(),
        standing=None,
        worst_journey_stress=float("nan"),
        slowness=1.0,
        survival=None,
        time_left=None,
        cautions=(*left_out, *cautions_for(task)),
    )


def _time_left(task: AcclimationTask) -> TimeLeft | None:
    if task.packed is None:
        return None
    warmest = max(task.start.temperature_degC, *(source.temperature_degC for source in task.sources))
    ph = [source.ph for source in task.sources if np.isfinite(source.ph)]
    return packed_time_left(
        task.packed,
        salinity=task.start.salinity,
        temperature_degC=warmest,
        receiving_ph=max(ph, default=float("nan")),
    )


def _assembled(
    task: AcclimationTask,
    stage: Stage,
    limits: Limits,
    result: Found,
    *,
    time_left: TimeLeft | None,
    left_out: tuple[str, ...],
) -> Plan:
    schedule, journey = result.schedule, result.journey
    steps = tuple(_step(task, number, move, journey) for number, move in enumerate(schedule.moves, start=1))
    warmth = steps[-1].temperature_degC if steps else task.start.temperature_degC
    standing = standing_at_destination(task, stage, journey, temperature_degC=warmth)
    water = {source.name: sum(step.add.get(source.name, 0.0) for step in steps) for source in task.sources}
    salt = {} if task.salt is None else {task.salt.name: sum(sum(step.salt.values()) for step in steps)}
    arrived = schedule.has_arrived
    return Plan(
        task=task,
        steps=steps,
        is_feasible=arrived,
        reason="" if steps else "the water is the target already",
        total_hours=schedule.total_h if arrived else float("nan"),
        water_used_L=water,
        salt_used_kg=salt,
        drained_L=sum(step.drain_L for step in steps),
        limits=limits.named,
        gates=limits.gates,
        needs_yes=needed_yes(task, limits, standing),
        standing=standing,
        worst_journey_stress=journey.worst,
        slowness=result.slowness,
        survival=_survival(task, stage, journey) if arrived else None,
        time_left=time_left,
        costs=_costs(task, limits, result) if arrived else (),
        alternatives=tuple(Alternative(len(other.moves), other.total_h) for other in result.alternatives),
        cautions=(*left_out, *cautions_for(task)),
        evaluations=result.work.evaluations,
        journey=journey,
    )


def _step(task: AcclimationTask, number: int, move: Move, journey: JourneyStress) -> PlannedStep:
    row = journey.step_row[number - 1]
    salinity = move.after.salinity
    salt = {} if task.salt is None or not move.salt_kg else {task.salt.name: move.salt_kg}
    flow = sum(move.add_L) / move.duration_min if task.method is Method.FLOW else float("nan")
    return PlannedStep(
        number=number,
        minute=move.minute,
        duration_min=move.duration_min,
        start=task.clock(move.minute),
        drain_L=_tidy(move.drain_L),
        add={
            source.name: _tidy(litres) for source, litres in zip(task.sources, move.add_L, strict=True) if litres > 0.0
        },
        salt={name: _tidy(kilograms) for name, kilograms in salt.items()},
        dissolve_L=0.0 if task.salt is None else _tidy(np.ceil(move.salt_kg * task.salt.litres_per_kg)),
        flow_L_min=flow,
        salinity=float(salinity[NOMINAL]),
        temperature_degC=float(move.after.temperature_degC[NOMINAL]),
        osmolality_mOsm_kg=float(water_kind(task.water_kind).osmolality_from_salinity(salinity[NOMINAL])),
        ph=float(move.after.ph[NOMINAL]),
        volume_L=float(move.after.volume_L[NOMINAL]),
        salinity_low=float(salinity.min()),
        salinity_high=float(salinity.max()),
        stress=float(journey.stress[row]),
        journey_stress=float(journey.journey[row]),
        driver=journey.driver[row],
    )


def _tidy(amount: float) -> float:
    """Return *amount* without the dust of binary fractions (0.1 + 0.2)."""
    return float(np.round(amount, 6))


def _survival(task: AcclimationTask, stage: Stage, journey: JourneyStress) -> SurvivalEstimate | None:
    if not np.isfinite(journey.osmolality_mOsm_kg).all():
        return None
    hours = np.append(np.diff(journey.minutes) / 60.0, WATCHED_AFTER_H)
    home = float(water_kind(task.water_kind).osmolality_from_salinity(task.home_salinity))
    return survival_of_schedule(
        stage,
        acclimated_mOsm_kg=home,
        hours=hours,
        osmolality_mOsm_kg=journey.osmolality_mOsm_kg,
        temperature_degC=journey.temperature_degC,
    )


def _costs(task: AcclimationTask, limits: Limits, result: Found) -> tuple[str, ...]:
    words = []
    start, target = task.start.salinity, task.target.salinity
    for rolling in limits.rolling:
        if rolling.quantity == "salinity" and rolling.window_min >= 60.0:
            hours = hours_at_the_limit(rolling, from_level=start, to_level=target)
            words.append(f"{rolling.limit.name}: kept to the letter it needs at least {hours:.1f} h")
    for rolling in limits.left_out:
        hours = hours_at_the_limit(rolling, from_level=start, to_level=target)
        limit = rolling.limit
        words.append(f"{limit.name} does not govern here; it ({limit.value}; {limit.source}) would need {hours:.1f} h")
    exact = hours_without_allowances(task, limits, result)
    words.append(
        f"the allowances (volume {100 * task.allowances.volume_share:g} %, source {task.allowances.source_salinity:g}, "
        f"{task.allowances.late_min:g} min late) cost {max(result.schedule.total_h - exact, 0.0):.1f} h"
    )
    if result.slowness < 1.0:
        words.append(f"the cap on stress cut all rates to {100 * result.slowness:.0f} %")
    return tuple(words)
