"""Acclimation plans on tanks: one is started, its steps are entered as they were done, it is paused, resumed and ended.

The subject is ``tank/<id>``. A plan comes as its record (`analysis.acclimation.record.to_record`), with a named person's yes to
each thing that it asks for. Each command leaves one event in the ledger: who, when, and what was done.
"""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Any

import msgspec

from analysis.acclimation.follow import Progress, has_arrived, judged
from analysis.acclimation.plan import Plan
from analysis.acclimation.record import from_record, to_record
from analysis.errors import InvalidInputError
from ingest.commands.ruling import Ruling
from ingest.store import plans
from ingest.store.block import Occurrence
from ingest.store.ledger import Event

if TYPE_CHECKING:
    from ingest.commands.context import Context
    from ingest.site.models import Site
    from ingest.store.inbox import Command
    from ingest.store.plans import TankPlan

START = "plan.start"
STEP_DONE = "plan.step_done"
PAUSE = "plan.pause"
RESUME = "plan.resume"
END = "plan.end"
NEEDED_ROLE = {START: "biologist", STEP_DONE: "operator", PAUSE: "operator", RESUME: "operator", END: "biologist"}
"""Which plan the animals go through is decided by a biologist; to carry it out, and to stop it, is daily work."""
ROLE_FOR_ANOTHER_PLAN = "biologist"

MOST_LITRES = 1e9
LONGEST_STEP_MIN = 366 * 24 * 60.0


class StartEntry(msgspec.Struct, frozen=True, kw_only=True, forbid_unknown_fields=True):
    """A plan's record, and who agreed to each of its ``needs_yes``."""

    plan: dict[str, Any]
    agreed: dict[str, str] = {}


class StepEntry(msgspec.Struct, frozen=True, kw_only=True, forbid_unknown_fields=True):
    """The step that was done, and the water really moved where it was not as planned. [L]"""

    step: int
    drained_L: float | None = None
    added_L: dict[str, float] | None = None
    note: str = ""


class PauseEntry(msgspec.Struct, frozen=True, kw_only=True, forbid_unknown_fields=True):
    """Why."""

    reason: str


class ResumeEntry(msgspec.Struct, frozen=True, kw_only=True, forbid_unknown_fields=True):
    """Without a plan it goes on as it was."""

    plan: dict[str, Any] | None = None
    agreed: dict[str, str] = {}


class EndEntry(msgspec.Struct, frozen=True, kw_only=True, forbid_unknown_fields=True):
    """Why."""

    reason: str


class _RefusedError(Exception):
    def __init__(self, reason: str) -> None:
        self.reason = reason
        super().__init__(reason)


REASONS = {
    "plan to start": "plan_not_feasible",
    "plan to go on with": "plan_not_feasible",
    "start of a plan": "yes_missing",
    "source waters": "source_not_released",
}
"""What the science complains of, as a reason that the screen has words for."""


def needed_role(command: Command) -> str | None:
    """Return the role that a command on a plan needs; None if it is none."""
    if command.kind == RESUME and command.body.get("plan") is not None:
        return ROLE_FOR_ANOTHER_PLAN
    return NEEDED_ROLE.get(command.kind)


def rule(command: Command, context: Context) -> Ruling:
    """Carry out a command on the plan of one tank."""
    tank = command.subject.removeprefix("tank/")
    if tank not in context.site.tank_index:
        return Ruling.refused("no_such_tank")
    try:
        body = _BODIES[command.kind](tank, command, context)
        event = Event(
            kind=_EVENTS[command.kind],
            subject=f"tank/{tank}",
            recorded_at=context.now_us,
            actor=command.actor,
            body=body,
        )
        context.enter_plan(event)
    except msgspec.ValidationError:
        return Ruling.refused("unusable_details")
    except InvalidInputError as error:
        return Ruling.refused(REASONS.get(error.what, "unusable_details"))
    except _RefusedError as error:
        return Ruling.refused(error.reason)
    return Ruling("applied", occurrences=(Occurrence(event),))


def set_point_of(site: Site, tank: str) -> Any:
    """Return what the site file says of the salinity at which a tank is kept, as plain data."""
    point = site.tank(tank).set_point
    if point is None:
        return None
    return [point.salinity, point.band, None if point.tidal_band is None else list(point.tidal_band)]


def ending(plan: TankPlan, site: Site, *, reason: str) -> dict[str, Any]:
    """Return what the ledger keeps of the end of a plan: whether it has led to its target, and all that was done."""
    return {
        "started_at": plan.started_at,
        "has_arrived": plan.state.progress is Progress.FINISHED or has_arrived(plan.state),
        "target_salinity": plan.state.task.target.salinity,
        "set_point": set_point_of(site, plan.tank),
        "reason": reason,
        "record": to_record(plan.state.record),
    }


def _started(tank: str, command: Command, context: Context) -> dict[str, Any]:
    entry = msgspec.convert(command.body, StartEntry)
    plan = context.plan(tank)
    if plan is not None and plan.is_running:
        raise _RefusedError("another_plan_runs")
    _check(tank, entry.plan, entry.agreed, context)
    return {"plan": entry.plan, "agreed": entry.agreed}


def _check(tank: str, record: dict[str, Any], agreed: dict[str, str], context: Context) -> None:
    """Look whether a plan is one, is for this tank, and has every yes; that its waters are released too."""
    plan: Plan = from_record(Plan, record)
    if plan.task.water_kind != context.site.tank(tank).water:
        raise _RefusedError("plan_for_other_water")
    species = context.species_in(tank)
    if species is not None and species != plan.task.animal.partition("/")[0]:
        raise _RefusedError("plan_for_other_animals")
    people = {context.site.identity.default_actor.name, *(person.name for person in context.site.people)}
    if not people.issuperset(agreed.values()):
        raise _RefusedError("unknown_person")
    moment = plan.task.begins_at
    # The same look as at a start, for a plan that goes on as well; it raises.
    plans.projected(
        None,
        Event(
            kind=plans.STARTED,
            subject=f"tank/{tank}",
            recorded_at=context.now_us,
            actor=next(iter(people)),
            body={"plan": record, "agreed": agreed},
        ),
    )
    if [step.number for step in plan.steps] != list(range(1, len(plan.steps) + 1)) or not plan.steps:
        raise _RefusedError("unusable_details")
    for step in plan.steps:
        is_sound = 0 <= step.salinity_low <= step.salinity <= step.salinity_high < math.inf
        is_sound = is_sound and 0 <= step.duration_min <= LONGEST_STEP_MIN
        if not is_sound or step.start.tzinfo is None or step.start < moment:
            raise _RefusedError("unusable_details")
        moment = step.start


def _running(tank: str, context: Context) -> TankPlan:
    plan = context.plan(tank)
    if plan is None or not plan.is_running:
        raise _RefusedError("no_plan_runs")
    return plan


def _step_done(tank: str, command: Command, context: Context) -> dict[str, Any]:
    entry = msgspec.convert(command.body, StepEntry)
    plan = _running(tank, context)
    state = judged(plan.state, at=plan.moment(context.now_us))
    due = state.due
    if state.progress is Progress.PAUSED:
        raise _RefusedError("plan_is_paused")
    if state.progress is Progress.HALTED:
        raise _RefusedError("plan_is_halted")
    if due is None or entry.step != due.number:
        raise _RefusedError("not_this_step")
    drained_L = due.drain_L if entry.drained_L is None else entry.drained_L
    added_L = dict(due.add) if entry.added_L is None else entry.added_L
    waters = {source.name for source in state.task.sources}
    if not waters.issuperset(added_L) or not all(0 <= one <= MOST_LITRES for one in (drained_L, *added_L.values())):
        raise _RefusedError("unusable_details")
    really = [f"really drained {drained_L:g} L"] if drained_L != due.drain_L else []
    really += [f"really added {litres:g} L {name}" for name, litres in added_L.items() if litres != due.add.get(name)]
    return {
        "started_at": plan.started_at,
        "step": due.number,
        "planned": {"drain_L": due.drain_L, "add_L": dict(due.add), "salt_kg": dict(due.salt)},
        "drained_L": drained_L,
        "added_L": added_L,
        "words": "; ".join([*really, *([entry.note] if entry.note else [])]),
    }


def _paused(tank: str, command: Command, context: Context) -> dict[str, Any]:
    entry = msgspec.convert(command.body, PauseEntry)
    plan = _running(tank, context)
    if plan.state.progress is Progress.PAUSED:
        raise _RefusedError("plan_is_paused")
    return {"started_at": plan.started_at, "reason": _reason(entry.reason)}


def _resumed(tank: str, command: Command, context: Context) -> dict[str, Any]:
    entry = msgspec.convert(command.body, ResumeEntry)
    plan = _running(tank, context)
    if entry.plan is None and plan.state.progress is not Progress.PAUSED:
        raise _RefusedError("plan_not_paused")
    if entry.plan is not None:
        _check(tank, entry.plan, entry.agreed, context)
    return {"started_at": plan.started_at, "plan": entry.plan, "agreed": entry.agreed}


def _ended(tank: str, command: Command, context: Context) -> dict[str, Any]:
    entry = msgspec.convert(command.body, EndEntry)
    return ending(_running(tank, context), context.site, reason=_reason(entry.reason))


def _reason(words: str) -> str:
    if not words.strip():
        raise _RefusedError("without_reason")
    return words.strip()


_BODIES = {START: _started, STEP_DONE: _step_done, PAUSE: _paused, RESUME: _resumed, END: _ended}
_EVENTS = {
    START: plans.STARTED,
    STEP_DONE: plans.STEP_DONE,
    PAUSE: plans.PAUSED,
    RESUME: plans.RESUMED,
    END: plans.ENDED,
}
