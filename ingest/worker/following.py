"""Plans against live readings: each running plan is fed the newest reading of its tank, judged, and the alarm told of it."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from analysis.acclimation.follow import Progress, judged, observed
from analysis.acclimation.task import Water
from analysis.alarm.conditions import truth_block
from analysis.alarm.kinds import ConditionKind
from analysis.alarm.limits import is_usable
from analysis.alarm.state import NEVER_US
from ingest.commands.plans import ending, set_point_of
from ingest.store import plans
from ingest.store.block import Occurrence
from ingest.store.ledger import Event

if TYPE_CHECKING:
    from analysis.acclimation.follow import Followed
    from analysis.alarm.conditions import ObservedBlock
    from ingest.chain.chain import ChainState
    from ingest.store.plans import TankPlan
    from ingest.worker.plant import Plant

SALINITIES = (0.0, 119.0)
TEMPERATURES_DEGC = (-2.0, 45.0)
"""What `analysis.acclimation.task.Water` takes."""
ARRIVED = "the water is at the target"


class Look(NamedTuple):
    """What a look at all plans brought: the plant with the limits that follow, plans to keep, events to write."""

    plant: Plant
    changed: list[TankPlan]
    occurrences: list[Occurrence]


def look(plant: Plant, state: ChainState, *, now_us: int) -> Look:
    """Feed every running plan the newest reading of its tank and judge it; a plan that has led to its target ends.

    A target holds in the place of the site file's set point until the site file says something else than it did then.
    """
    after: dict[str, TankPlan] = {}
    changed: list[TankPlan] = []
    occurrences: list[Occurrence] = []
    for tank, before in plant.plans.items():
        plan = _with_site_heard(before, plant)
        if plan.is_running:
            plan = replace(plan, state=_judged(plan, plant, state, now_us=now_us))
        if plan.is_running and plan.state.progress is Progress.FINISHED:
            event = Event(
                kind=plans.ENDED,
                subject=f"tank/{tank}",
                recorded_at=now_us,
                body=ending(plan, plant.site, reason=ARRIVED),
            )
            plan = plans.projected(plan, event)
            occurrences.append(Occurrence(event))
        if _is_to_keep(before, plan):
            plan = replace(plan, updated_at=now_us)
            changed.append(plan)
        after[tank] = plan
    return Look(plant.after_plans(after, now_us=now_us), changed, occurrences)


def _with_site_heard(plan: TankPlan, plant: Plant) -> TankPlan:
    if np.isnan(plan.target) or plan.set_point == set_point_of(plant.site, plan.tank):
        return plan
    return replace(plan, target=np.nan, set_point=None)


def _is_to_keep(before: TankPlan, after: TankPlan) -> bool:
    """Return whether anything changed that a restart must not forget; the newest reading itself comes again with the tank's."""
    if (before.ended_at, before.set_point) != (after.ended_at, after.set_point):
        return True
    old, new = before.state, after.state
    return old.progress is not new.progress or old.record != new.record or old.seen[:-1] != new.seen[:-1]


def _judged(plan: TankPlan, plant: Plant, state: ChainState, *, now_us: int) -> Followed:
    followed = plan.state
    tank = plant.site.tank_index[plan.tank]
    watchers = plant.tanks.watchers_of[tank]
    count = len(watchers)
    salinity, at_us = state.wet.value[tank, :count], state.wet.judged_at_us[tank, :count]
    believed = is_usable(salinity, quality=state.wet.quality[tank, :count])
    believed = believed & (salinity >= SALINITIES[0]) & (salinity <= SALINITIES[1])
    if believed.any():
        slot = int(np.where(believed, at_us, -NEVER_US).argmax())
        read_at = plan.moment(int(at_us[slot]))
        if followed.last is None or read_at > followed.last.at:
            is_new = believed & (at_us + plant.tanks.stale_after_us[watchers] >= now_us)
            # Of several probes those that differ most stand for top and bottom.
            pair = (salinity[is_new].max(), salinity[is_new].min()) if is_new.sum() > 1 else (np.nan, np.nan)
            water = Water(float(salinity[slot]), _temperature(state, tank, slot))
            followed = observed(
                followed, water, at=read_at, top_salinity=float(pair[0]), bottom_salinity=float(pair[1])
            )
    return judged(followed, at=plan.moment(now_us))


def _temperature(state: ChainState, tank: int, slot: int) -> float:
    latest = state.temperature
    value = float(latest.value[tank, slot])
    is_believed = bool(is_usable(value, quality=latest.quality[tank, slot]))
    return value if is_believed and TEMPERATURES_DEGC[0] <= value <= TEMPERATURES_DEGC[1] else np.nan


def off_plan(plant: Plant, state: ChainState, *, now_us: int) -> ObservedBlock:
    """Observe which tanks have left their plans: the water is outside the plan's band, or the plan is halted.

    A step that is late is no alarm while the water is where it should be. The time of the look is that of the newest reading of
    the tank: looking again at the same reading says nothing new.
    """
    count = len(plant.tanks)
    is_off = np.zeros(count, dtype=np.bool_)
    value, limit = np.full(count, np.nan), np.full(count, np.nan)
    newest = state.wet.judged_at_us.max(axis=1, initial=-NEVER_US)
    at_us = np.where(newest > -NEVER_US, newest, now_us)
    for tank, plan in plant.plans.items():
        last, progress = plan.state.last, plan.state.progress
        if not plan.is_running or progress is Progress.PAUSED:
            continue
        index = plant.site.tank_index[tank]
        is_off[index] = progress is Progress.HALTED
        if last is not None:
            band = plan.band(now_us)
            salinity = value[index] = last.water.salinity
            limit[index] = band.low if salinity < band.expected else band.high
            is_off[index] |= not band.low <= salinity <= band.high
    block = truth_block(ConditionKind.OFF_PLAN, is_off, at_us=at_us, now_us=now_us, value=value)
    return replace(block, limit=limit[None, :])
