"""Following a plan on a tank: where it stands, what is due, and a record of what was done.

A state is frozen plain data (`to_record` and `from_record` bring it to JSON and back); each function takes a
state and returns the next, with the time as an argument. Nothing here reads a clock.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from datetime import datetime, timedelta
from enum import StrEnum
from typing import TYPE_CHECKING, Final

import numpy as np

from analysis.acclimation.journey import along
from analysis.acclimation.limits import Limits
from analysis.acclimation.plan import Plan, PlannedStep, planned
from analysis.acclimation.task import AcclimationTask, Method, Past, Water
from analysis.errors import InvalidInputError

if TYPE_CHECKING:
    from analysis.animal.osmoregulation import CohortState
    from analysis.animal.stage import Stage

LEAST_BAND: Final = 0.3
"""Salinity that a good sensor and a stirred tank may differ from the plan without meaning anything."""
TOP_BOTTOM_AGREEMENT: Final = 0.5
"""Largest difference between top and bottom with which a flow-through plan is followed. Common practice."""
TOP_BOTTOM_MAX_AGE_MIN: Final = 60.0
PAST_KEPT_MIN: Final = 1500.0


class Progress(StrEnum):
    """How a followed plan stands."""

    ON_PLAN = "on plan"
    BEHIND = "behind"
    AHEAD = "ahead"
    HALTED = "halted"
    PAUSED = "paused"
    FINISHED = "finished"


@dataclass(frozen=True, slots=True)
class Done:
    """Something that was done or seen, by whom and when.

    Parameters
    ----------
    at : datetime
        When.
    what : str
        ``started``, ``step``, ``paused``, ``resumed``, ``halted``, ``planned anew``, ``finished``.
    by : str
        Who; "monitor" for what the tool did itself.
    words : str
        Litres, reason.
    """

    at: datetime
    what: str
    by: str
    words: str = ""


@dataclass(frozen=True, slots=True)
class Seen:
    """A reading of the tank while the plan is followed."""

    at: datetime
    water: Water


@dataclass(frozen=True, slots=True)
class Followed:
    """A plan that has been started on a tank.

    Parameters
    ----------
    task : AcclimationTask
        What the running plan was made from.
    steps : tuple of PlannedStep
        Of the running plan.
    next_step : int
        Number of the step that is due next; one more than the last when all are done.
    progress : Progress
        Where it stands.
    why : str
        The reason, where it is not on plan.
    last : Seen or None
        The newest reading.
    seen : tuple of Seen
        Readings of the last day and an hour, thinned: the windows of the limits reach back to them.
    top_bottom : float
        The last difference between a top and a bottom reading; NaN: never read.
    top_bottom_at : datetime or None
        When that was.
    delay_min : float
        How late the last step was done. [min]
    record : tuple of Done
        What was done.
    """

    task: AcclimationTask
    steps: tuple[PlannedStep, ...]
    next_step: int
    progress: Progress
    why: str
    last: Seen | None
    seen: tuple[Seen, ...]
    top_bottom: float
    top_bottom_at: datetime | None
    delay_min: float
    record: tuple[Done, ...]

    @property
    def due(self) -> PlannedStep | None:
        """The step that is due next; None when all are done."""
        return self.steps[self.next_step - 1] if self.next_step <= len(self.steps) else None


@dataclass(frozen=True, slots=True)
class PlanBand:
    """Between which salinities the tank should be now: alarms of a tank under a plan use it.

    Parameters
    ----------
    low, high : float
        With the allowed errors of the plan and the step that is due.
    expected : float
        What the plan says.
    """

    low: float
    high: float
    expected: float


def started(plan: Plan, *, by: str, at: datetime, agreed: tuple[str, ...] = ()) -> Followed:
    """Return the state of a plan that a named person starts.

    Parameters
    ----------
    plan : Plan
        Feasible.
    by : str
        Who starts it.
    at : datetime
        Aware.
    agreed : tuple of str
        What the person has agreed to: all of ``plan.needs_yes``.

    Raises
    ------
    InvalidInputError
        If the plan is not feasible, nobody is named, something was not agreed to, or a source is not released.
    """
    if not plan.is_feasible:
        raise InvalidInputError("plan to start", found=plan.reason, allowed="a feasible plan")
    if not by.strip():
        raise InvalidInputError("start of a plan", found=by, allowed="the name of the person")
    missing = [need for need in plan.needs_yes if need not in agreed]
    if missing:
        raise InvalidInputError(
            "start of a plan", found=f"not agreed to: {'; '.join(missing)}", allowed="a yes to each"
        )
    used = [source for source in plan.task.sources if plan.water_used_L.get(source.name, 0.0) > 0.0]
    closed = [f"{source.name}: {source.obstacle(at)}" for source in used if source.obstacle(at)]
    if closed:
        raise InvalidInputError("source waters", found="; ".join(closed), allowed="each released by a named person")
    words = "; ".join(agreed)
    return Followed(
        task=plan.task,
        steps=plan.steps,
        next_step=1,
        progress=Progress.ON_PLAN,
        why="",
        last=None,
        seen=(),
        top_bottom=math.nan,
        top_bottom_at=None,
        delay_min=0.0,
        record=(Done(at, "started", by, f"agreed: {words}" if words else ""),),
    )


def band_at(state: Followed, *, at: datetime) -> PlanBand:
    """Return the plan-aware alarm band: from the water before the step that is due to the water after it.

    Between steps the band is that of the last step done, with its allowed errors; from the time a step is due
    it reaches over to the water after that step.
    """
    before_low, before_high, before = _water_after(state, state.next_step - 1)
    low, high, expected = before_low, before_high, before
    due = state.due
    if due is not None and at >= due.start:
        after_low, after_high, after = _water_after(state, state.next_step)
        low, high = min(low, after_low), max(high, after_high)
        expected = _during(due, before, after, at)
    return PlanBand(low - LEAST_BAND, high + LEAST_BAND, expected)


def _during(step: PlannedStep, before: float, after: float, at: datetime) -> float:
    share = (at - step.start) / timedelta(minutes=max(step.duration_min, 1.0))
    return before + (after - before) * min(1.0, max(0.0, share))


def _water_after(state: Followed, number: int) -> tuple[float, float, float]:
    if number < 1:
        salinity = state.task.start.salinity
        return salinity, salinity, salinity
    step = state.steps[number - 1]
    return step.salinity_low, step.salinity_high, step.salinity


def observed(
    state: Followed, water: Water, *, at: datetime, top_salinity: float = math.nan, bottom_salinity: float = math.nan
) -> Followed:
    """Return the state after a believable reading.

    Parameters
    ----------
    state : Followed
        Before.
    water : Water
        Salinity, and temperature where it is read.
    at : datetime
        Of the reading.
    top_salinity, bottom_salinity : float
        Where both are read; a flow-through plan is halted when they do not agree.
    """
    if state.last is not None and at < state.last.at:
        return state  # an older reading that came late says nothing about now
    state = replace(state, last=Seen(at, water), seen=_thinned(state.seen, Seen(at, water)))
    if np.isfinite(top_salinity) and np.isfinite(bottom_salinity):
        state = replace(state, top_bottom=abs(top_salinity - bottom_salinity), top_bottom_at=at)
    return judged(state, at=at)


def _thinned(seen: tuple[Seen, ...], new: Seen) -> tuple[Seen, ...]:
    kept = [one for one in seen if (new.at - one.at) <= timedelta(minutes=PAST_KEPT_MIN)]
    if len(kept) >= 2 and new.at - kept[-2].at < timedelta(minutes=5):
        kept = kept[:-1]
    return (*kept, new)


def judged(state: Followed, *, at: datetime) -> Followed:
    """Return the state with its progress judged at *at*: by the water, by the clock, by top and bottom."""
    if state.progress in {Progress.PAUSED, Progress.FINISHED}:
        return state
    why = _halting_reason(state, at)
    if why:
        if state.progress is Progress.HALTED:
            return replace(state, why=why)
        return _noted(replace(state, progress=Progress.HALTED, why=why), at, "halted", "monitor", why)
    if state.due is None and has_arrived(state):
        return _noted(replace(state, progress=Progress.FINISHED, why=""), at, "finished", "monitor")
    progress, why = _progress(state, at)
    return replace(state, progress=progress, why=why)


def _halting_reason(state: Followed, at: datetime) -> str:
    if state.task.method is not Method.FLOW:
        return ""
    if np.isnan(state.top_bottom) or state.top_bottom_at is None:
        return "no reading at the top and at the bottom: a flow-through plan is not followed without"
    if at - state.top_bottom_at > timedelta(minutes=TOP_BOTTOM_MAX_AGE_MIN):
        return f"the last reading at top and bottom is older than {TOP_BOTTOM_MAX_AGE_MIN:g} min"
    if state.top_bottom > TOP_BOTTOM_AGREEMENT:
        return f"top and bottom differ by {state.top_bottom:.1f}: stop the flow, aerate and stir"
    return ""


def has_arrived(state: Followed) -> bool:
    """Return whether the newest reading is at the target, as near as the plan is to come."""
    if state.last is None:
        return False
    target, tolerance = state.task.target.salinity, state.task.tolerance_salinity
    return abs(state.last.water.salinity - target) <= tolerance + LEAST_BAND


def _progress(state: Followed, at: datetime) -> tuple[Progress, str]:
    due = state.due
    late = 0.0 if due is None else (at - due.start) / timedelta(minutes=1) - due.duration_min
    if late > state.task.allowances.late_min:
        return Progress.BEHIND, f"step {state.next_step} is {late:.0f} min late: plan anew before doing it"
    if state.last is None:
        return Progress.ON_PLAN, ""
    band, salinity = band_at(state, at=at), state.last.water.salinity
    if band.low <= salinity <= band.high:
        return Progress.ON_PLAN, ""
    falls = state.task.target.salinity < state.task.start.salinity
    has_gone_further = salinity < band.low if falls else salinity > band.high
    words = f"salinity {salinity:.1f}, the plan expects {band.low:.1f} to {band.high:.1f}"
    return (Progress.AHEAD if has_gone_further else Progress.BEHIND), words


def step_done(state: Followed, *, by: str, at: datetime, words: str = "") -> Followed:
    """Return the state after the step that was due has been done by a named person.

    Raises
    ------
    InvalidInputError
        If no step is due, nobody is named, the plan is halted or paused, or the step is too late to do.
    """
    due = state.due
    if due is None or not by.strip():
        raise InvalidInputError("step done", found=(state.next_step, by), allowed="a step that is due, and a name")
    if state.progress in {Progress.HALTED, Progress.PAUSED, Progress.FINISHED}:
        raise InvalidInputError("step done", found=f"the plan is {state.progress.value}", allowed="resume or plan anew")
    late = (at - due.start) / timedelta(minutes=1) - due.duration_min
    litres = ", ".join(f"{amount:g} L {name}" for name, amount in due.add.items())
    salts = ", ".join(f"{amount:g} kg {name}" for name, amount in due.salt.items())
    told = "; ".join(
        part for part in (f"drained {due.drain_L:g} L" if due.drain_L else "", litres, salts, words) if part
    )
    state = replace(state, next_step=state.next_step + 1, delay_min=max(0.0, late))
    return judged(_noted(state, at, "step", by, f"{due.number}: {told}"), at=at)


def paused(state: Followed, *, by: str, at: datetime, reason: str) -> Followed:
    """Return the state of a plan that a named person has put on hold; nothing is due until it is resumed."""
    if not by.strip() or not reason.strip():
        raise InvalidInputError("pause", found=(by, reason), allowed="a name and a reason")
    return _noted(replace(state, progress=Progress.PAUSED, why=reason), at, "paused", by, reason)


def resumed(state: Followed, plan: Plan, *, by: str, at: datetime) -> Followed:
    """Return the state that goes on with *plan*, made anew from where the water is (see `planned_anew`)."""
    if not plan.is_feasible:
        raise InvalidInputError("plan to go on with", found=plan.reason, allowed="a feasible plan")
    if not by.strip():
        raise InvalidInputError("plan to go on with", found=by, allowed="the name of the person")
    state = replace(
        state, task=plan.task, steps=plan.steps, next_step=1, progress=Progress.ON_PLAN, why="", delay_min=0.0
    )
    return judged(_noted(state, at, "planned anew", by, f"{len(plan.steps)} steps, {plan.total_hours:.1f} h"), at=at)


def planned_anew(
    state: Followed, stage: Stage, limits: Limits, *, at: datetime, cohort: CohortState | None = None
) -> Plan:
    """Return a plan from where the water really is, whose windows know the readings of the last day.

    Parameters
    ----------
    state : Followed
        With a reading.
    stage, limits
        As for the first plan. Limits of a step counted from the water the animals are used to stay as they are.
    at : datetime
        When the new plan begins.
    cohort : CohortState, optional
        What the animals are used to now, shape (1,).

    Raises
    ------
    InvalidInputError
        If there is no reading to start from.
    """
    if state.last is None:
        raise InvalidInputError("plan anew", found="no reading", allowed="a reading of the tank")
    water = state.last.water
    old = state.task
    temperature = water.temperature_degC if np.isfinite(water.temperature_degC) else old.start.temperature_degC
    past = tuple(
        Past((at - seen.at) / timedelta(minutes=1), seen.water) for seen in state.seen if at - seen.at > timedelta(0)
    )
    task = replace(
        old,
        start=Water(water.salinity, temperature, water.ph),
        begins_at=at.astimezone(old.begins_at.tzinfo),
        used_to_salinity=old.home_salinity,
        past=past,
    )
    return planned(task, stage, limits, state=cohort)


@dataclass(frozen=True, slots=True)
class PauseEffect:
    """What a pause does to the animals.

    Parameters
    ----------
    stress_now, stress_after : float
        [0-100]; NaN: not known.
    journey_now, journey_after : float
        The part of the journey. [0-100]
    is_harmless : bool
        True where stress does not rise by more than a point.
    """

    stress_now: float
    stress_after: float
    journey_now: float
    journey_after: float
    is_harmless: bool


def effect_of_pause(
    task: AcclimationTask, stage: Stage, cohort: CohortState, water: Water, *, minutes: float = 60.0
) -> PauseEffect:
    """Return what staying in *water* for *minutes* does to animals in state *cohort*."""
    journey = along(
        task,
        stage,
        minutes=np.array([0.0, minutes]),
        salinity=np.full(2, water.salinity),
        temperature_degC=np.full(2, water.temperature_degC),
        state=cohort,
    )
    now, after = (float(value) for value in journey.stress)
    journey_now, journey_after = (float(value) for value in journey.journey)
    return PauseEffect(now, after, journey_now, journey_after, is_harmless=bool(after <= now + 1.0))


def _noted(state: Followed, at: datetime, what: str, by: str, words: str = "") -> Followed:
    return replace(state, record=(*state.record, Done(at, what, by, words)))
