"""A tank off its target now: stop the cause, go back at once to the water the animals are used to, then on slowly."""

from __future__ import annotations

from dataclasses import dataclass, replace
from enum import StrEnum
from typing import TYPE_CHECKING, Any, Final

import numpy as np

from analysis.acclimation.cautions import ALWAYS
from analysis.acclimation.journey import JourneyStress, along, home_state, water_kind
from analysis.acclimation.limits import Limit, Limits
from analysis.acclimation.plan import Plan, planned
from analysis.acclimation.record import to_record
from analysis.acclimation.summary import plan_summary
from analysis.acclimation.task import Allowances, Water

if TYPE_CHECKING:
    from analysis.acclimation.task import AcclimationTask
    from analysis.animal.osmoregulation import CohortState
    from analysis.animal.stage import Stage

IN_DANGER: Final = 70.0
STRAINED: Final = 40.0
AT_ONCE_H: Final = 2.0
TODAY_H: Final = 24.0
LOOK_AHEAD_H: Final = (0.0, 0.25, 0.5, 1.0, 2.0, 4.0, 8.0, 12.0, 24.0, 48.0, 96.0)

FALL_FIRST: Final = (
    "Stop what brings fresh water: rain, river or top-up; check the inlet valve; close the exchange.",
    "All aeration on: regulation costs oxygen. Skim fresh water off the surface, then stir.",
    "Stop feeding until the water is right again.",
    "Read again with a second instrument before adding anything: a fouled cell reads low.",
)
RISE_FIRST: Final = (
    "Stop brine and salt; look for evaporation and a failed top-up.",
    "All aeration on, and stir.",
    "Stop feeding until the water is right again.",
    "Read again with a second instrument before adding anything.",
)
FIRST_SOURCE: Final = "SHRIMPNEWS_RAIN for rain; the rest common practice"
BACK_LIMIT: Final = Limit(
    "salinity on the way back",
    "at once: no rate holds towards the water they are used to",
    "after a short event the acclimated state has hardly moved; holding them away from it for hours does the harm",
    "common practice",
)


class Urgency(StrEnum):
    """How soon something must be done."""

    NOW = "now"
    TODAY = "today"
    NOT_URGENT = "not urgent"
    UNKNOWN = "not known: treat as urgent"


@dataclass(frozen=True, slots=True)
class Correction:
    """What to do with a tank that is off its target.

    Parameters
    ----------
    urgency : Urgency
        And `why` in words.
    why : str
        What the animals meet if nothing is done.
    stress_now : float
        [0-100]; NaN: not known.
    hours_to_danger : float
        Until the stress model says "in danger" if nothing is done; infinite: not within four days. [h]
    acclimated_salinity : float
        What the animals are used to now.
    hours_away : float
        How long the tank has been away from it. [h]
    first : tuple of str
        What is done before any water is moved.
    back : Plan or None
        At once, to the water they are used to; None where they are there or it is not on the way.
    onward : Plan or None
        At the species' rate to the target; None where the way back ends there.
    cautions : tuple of str
        To be shown with it, always.
    """

    urgency: Urgency
    why: str
    stress_now: float
    hours_to_danger: float
    acclimated_salinity: float
    hours_away: float
    first: tuple[str, ...]
    back: Plan | None
    onward: Plan | None
    cautions: tuple[str, ...]

    @property
    def is_feasible(self) -> bool:
        """True where every part that is needed can be done."""
        return all(plan.is_feasible for plan in (self.back, self.onward) if plan is not None)

    @property
    def reason(self) -> str:
        """What forbids a part; empty where nothing does."""
        return "; ".join(plan.reason for plan in (self.back, self.onward) if plan is not None and not plan.is_feasible)


def corrected(
    task: AcclimationTask, stage: Stage, limits: Limits, *, hours_away: float, cohort: CohortState | None = None
) -> Correction:
    """Return what to do with a tank that is off its target.

    Parameters
    ----------
    task : AcclimationTask
        `start` is the water now, `target` the one it should be, `home_salinity` the water the animals are used to.
    stage : Stage
        The animals.
    limits : Limits
        For the way from the water they are used to to the target.
    hours_away : float
        How long the water has been as it is now. [h]
    cohort : CohortState, optional
        The animals as followed, shape (1,); default: used to the home water until *hours_away* ago, since then
        in the water as it is now.
    """
    away = _in_this_water(task, stage, hours_away) if cohort is None else _from_now(task, stage, cohort)
    kind = water_kind(task.water_kind)
    used_to = float(kind.salinity_from_osmolality(away.state.acclimated[0]))
    used_to = task.home_salinity if np.isnan(used_to) else used_to
    ahead = _if_left_alone(task, stage, away.state)
    hours_to_danger = _first_hour_of_danger(ahead)
    urgency, why = _urgency(task, ahead, hours_to_danger)
    back, onward = _ways(task, stage, limits, used_to=used_to, state=away.state)
    return Correction(
        urgency=urgency,
        why=why,
        stress_now=float(ahead.stress[0]),
        hours_to_danger=hours_to_danger,
        acclimated_salinity=used_to,
        hours_away=hours_away,
        first=FALL_FIRST if task.start.salinity < used_to else RISE_FIRST,
        back=back,
        onward=onward,
        cautions=_cautions(back, onward),
    )


def _in_this_water(task: AcclimationTask, stage: Stage, hours_away: float) -> JourneyStress:
    return _steady(task, stage, (0.0, hours_away), home_state(task))


def _from_now(task: AcclimationTask, stage: Stage, cohort: CohortState) -> JourneyStress:
    return _steady(task, stage, (0.0,), cohort)


def _if_left_alone(task: AcclimationTask, stage: Stage, state: CohortState) -> JourneyStress:
    return _steady(task, stage, LOOK_AHEAD_H, state)


def _steady(task: AcclimationTask, stage: Stage, hours: tuple[float, ...], state: CohortState) -> JourneyStress:
    minutes = 60.0 * np.array(hours)
    return along(
        task,
        stage,
        minutes=minutes,
        salinity=np.full(minutes.shape, task.start.salinity),
        temperature_degC=np.full(minutes.shape, task.start.temperature_degC),
        state=state,
    )


def _first_hour_of_danger(ahead: JourneyStress) -> float:
    for hour, stress in zip(LOOK_AHEAD_H, ahead.stress, strict=True):
        if stress >= IN_DANGER:
            return hour
    return float("nan") if np.isnan(ahead.stress).all() else float("inf")


def _urgency(task: AcclimationTask, ahead: JourneyStress, hours: float) -> tuple[Urgency, str]:
    stress = float(ahead.stress[0])
    if np.isnan(hours):
        return Urgency.UNKNOWN, "no stress figure for this stage and water"
    words = f"stress {stress:.0f} ({ahead.driver[0]})"
    if hours <= AT_ONCE_H:
        when = "already in danger" if hours == 0.0 else f"in danger within {hours:g} h"
        return Urgency.NOW, f"{words}; {when} if nothing is done"
    if hours <= TODAY_H:
        return Urgency.TODAY, f"{words}; in danger within {hours:g} h if nothing is done"
    if stress >= STRAINED:
        return Urgency.TODAY, f"{words}; no danger within {TODAY_H:g} h"
    off = abs(task.start.salinity - task.target.salinity)
    return Urgency.NOT_URGENT, f"{words}; {off:.1f} off the target, no danger within {TODAY_H:g} h"


def _ways(
    task: AcclimationTask, stage: Stage, limits: Limits, *, used_to: float, state: CohortState
) -> tuple[Plan | None, Plan | None]:
    now, target, near = task.start.salinity, task.target.salinity, task.tolerance_salinity
    goes_back = (used_to - now) * (target - now) > 0.0 and abs(target - now) > near
    turn = target if abs(target - now) <= abs(used_to - now) else used_to
    back = None
    if goes_back and abs(turn - now) > near:
        back = planned(_way_back(task, turn), stage, _limits_back(limits), state=state)
    if back is not None and (abs(turn - target) <= near or not back.is_feasible):
        return back, None
    start, begins, after = task.start, task.begins_at, state
    if back is not None:
        last = back.steps[-1]
        start = Water(last.salinity, last.temperature_degC, last.ph)
        begins = back.ends_at
        after = back.journey.state if back.journey is not None else state
    if abs(start.salinity - target) <= near and back is None:
        return None, None
    onward = replace(task, start=start, begins_at=begins, used_to_salinity=used_to, past=())
    return back, planned(onward, stage, limits, state=after)


def _way_back(task: AcclimationTask, turn: float) -> AcclimationTask:
    """Return the task of going back at once: nobody waits between its steps, so nobody is late."""
    allowances = Allowances(task.allowances.volume_share, task.allowances.source_salinity, late_min=0.0)
    return replace(
        task,
        target=Water(turn, float("nan")),
        allowances=allowances,
        working_hours=None,
        rests=(),
        past=(),
        packed=None,
    )


def _limits_back(limits: Limits) -> Limits:
    """Return the limits of the way back: temperature and pH as ever, none on salinity."""
    kept = tuple(rolling for rolling in limits.rolling if rolling.quantity != "salinity")
    return replace(limits, rolling=kept, gates=(), left_out=(), stress_cap=float("inf"), stress_limit=BACK_LIMIT)


def _cautions(back: Plan | None, onward: Plan | None) -> tuple[str, ...]:
    plans = [plan for plan in (back, onward) if plan is not None]
    merged = dict.fromkeys(caution for plan in plans for caution in plan.cautions if caution not in ALWAYS)
    return (*merged, *ALWAYS)


def correction_summary(correction: Correction) -> dict[str, Any]:
    """Return the correction with the keys of ``euryhale correct --json``; what does not apply is null."""
    plans = [plan for plan in (correction.back, correction.onward) if plan is not None]
    summaries = [plan_summary(plan) for plan in plans]
    limits = {limit["name"]: limit for summary in summaries for limit in summary["limits"]}
    hours = [float(plan.total_hours) for plan in plans]
    return {
        "urgency": correction.urgency.value,
        "why": correction.why,
        "stress_now": to_record(correction.stress_now),
        "hours_to_danger": to_record(correction.hours_to_danger),
        "acclimated_salinity": correction.acclimated_salinity,
        "hours_away": correction.hours_away,
        "first": list(correction.first),
        "first_source": FIRST_SOURCE,
        "steps": [step for summary in summaries for step in summary["steps"]],
        "total_hours": to_record(sum(hours)),
        "water_used_L": sum(summary["water_used_L"] for summary in summaries),
        "limits": list(limits.values()),
        "survival": summaries[-1]["survival"] if summaries else None,
        "feasible": correction.is_feasible,
        "reason": correction.reason,
        "back": None if correction.back is None else plan_summary(correction.back),
        "onward": None if correction.onward is None else plan_summary(correction.onward),
        "cautions": list(correction.cautions),
    }
