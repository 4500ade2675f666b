"""Who is called when: `step(state, event, now_us, plan) -> (state, calls)`, until a person acknowledges.

Delivery is no acknowledgement. Acknowledging means "I am going": it pauses the calls for the time to respond, at
most a quarter of an hour; not turning back by then, or worse, the next person is called. A return to normal by
itself stops the waking except at top priority; the entry stays listed.

Calls are made in the present: after a time in which nobody looked (the monitor was down) the next person is called
at once and the waits run from there; missed calls are not made up for.
"""

from __future__ import annotations

from dataclasses import dataclass, fields, replace
from enum import StrEnum
from typing import Any, NamedTuple, TypeAlias

from analysis.alarm.duty import DutyCalendar, on_duty, present, quiet_until_us
from analysis.alarm.rationale import MOST_PAUSE_S
from analysis.alarm.rules import Priority, microseconds
from analysis.alarm.state import NEVER_US
from analysis.errors import InvalidInputError

DUTY = "duty"
"""In a call-out list: whoever is on duty at the time of the call."""
SECOND_DUTY = "second duty"
"""The second of those on duty; the line is skipped where there is only one."""
RETRY_NOBODY_S = 60.0


@dataclass(frozen=True, slots=True)
class CallStep:
    """One line of a call-out list: whom, by which channels, and how long to wait before the next line."""

    who: str
    by: tuple[str, ...]
    wait_s: float

    def __post_init__(self) -> None:
        if not self.wait_s > 0:
            raise InvalidInputError("wait of a call-out line", found=self.wait_s, allowed="above 0 s")
        if not self.by:
            raise InvalidInputError("channels of a call-out line", found=self.by, allowed="at least one channel")


@dataclass(frozen=True, slots=True)
class CallPlan:
    """The call-out list and the duty calendar it is read with."""

    steps: tuple[CallStep, ...]
    calendar: DutyCalendar

    def __post_init__(self) -> None:
        if not self.steps:
            raise InvalidInputError("call-out list", found=self.steps, allowed="at least one line")


class Phase(StrEnum):
    """Where a call-out stands."""

    CALLING = "calling"
    PAUSED = "paused"
    """Somebody is going."""
    LISTED = "listed"
    """Normal again before anybody acknowledged: shown, calls nobody."""
    OVER = "over"


class Reason(StrEnum):
    """Why somebody is called."""

    RAISED = "raised"
    NOBODY_ANSWERED = "nobody_answered"
    NOT_TURNING_BACK = "not_turning_back"
    WORSE = "worse"
    JOINED = "joined"
    NOBODY_ON_DUTY = "nobody_on_duty"


class Call(NamedTuple):
    """Somebody has to be called now. An empty `who`: the list leads to nobody; show it on every screen."""

    subject: str
    who: str
    by: tuple[str, ...]
    reason: Reason
    at_us: int
    number: int
    """How many calls this call-out has made, this one included; makes the call's id unique."""


@dataclass(frozen=True, slots=True)
class CallOut:
    """One call-out: of one alarm, or of a group."""

    subject: str
    priority: Priority
    is_top: bool
    respond_s: float
    phase: Phase = Phase.CALLING
    position: int = -1
    """Line of the list that was called last; -1: none yet."""
    next_call_us: int = NEVER_US
    calls_made: int = 0
    last_called: str = ""
    last_by: tuple[str, ...] = ()
    acknowledged_by: str = ""
    acknowledged_at_us: int = 0
    is_turning_back: bool = False
    is_normal: bool = False


@dataclass(frozen=True, slots=True)
class Acknowledged:
    """A person is going."""

    who: str


@dataclass(frozen=True, slots=True)
class TurningBack:
    """The value moves back towards its band."""


@dataclass(frozen=True, slots=True)
class Worse:
    """The condition has passed its next step, or re-alarmed."""


@dataclass(frozen=True, slots=True)
class TankJoined:
    """One more tank of the same cause, with the priority and the time to respond of its alarm. [s]"""

    priority: Priority
    is_top: bool
    respond_s: float


@dataclass(frozen=True, slots=True)
class Returned:
    """The condition is normal again."""


@dataclass(frozen=True, slots=True)
class RaisedAgain:
    """The condition is back before the call-out was over."""


@dataclass(frozen=True, slots=True)
class Stopped:
    """Shelved, suppressed by design, taken out of service: nobody is called any more."""


@dataclass(frozen=True, slots=True)
class TimePassed:
    """Look whether a call is due."""


CallEvent: TypeAlias = Acknowledged | TurningBack | Worse | TankJoined | Returned | RaisedAgain | Stopped | TimePassed
Result: TypeAlias = tuple[CallOut, tuple[Call, ...]]


def begun(subject: str, *, priority: Priority, is_top: bool, respond_s: float, now_us: int, plan: CallPlan) -> Result:
    """Begin a call-out and make its first call (or wait for the end of quiet hours).

    Parameters
    ----------
    subject : str
        What it is about (the id of a group, or of an alarm's occurrence).
    priority : Priority
        Of the alarm that leads.
    is_top : bool
        Top priority.
    respond_s : float
        Time to respond; the pause after an acknowledgement, at most a quarter of an hour. [s]
    now_us : int
        The present time. [us UTC]
    plan : CallPlan
        The list and the calendar.
    """
    state = CallOut(subject, priority, is_top, respond_s)
    return _call_or_wait(state, Reason.RAISED, now_us, plan)


def step(state: CallOut, event: CallEvent, now_us: int, plan: CallPlan) -> Result:
    """Return the call-out after an event, and the calls to make now.

    Parameters
    ----------
    state : CallOut
        Before.
    event : CallEvent
        What happened.
    now_us : int
        The present time. [us UTC]
    plan : CallPlan
        The list and the calendar as they stand now.
    """
    if state.phase is Phase.OVER and not isinstance(event, RaisedAgain):
        return state, ()
    match event:
        case Acknowledged(who):
            return _acknowledged(state, who, now_us), ()
        case TurningBack():
            return replace(state, is_turning_back=True), ()
        case Worse():
            return _worse(state, now_us, plan)
        case TankJoined():
            return _tank_joined(_with_alarm(state, event), now_us, plan)
        case Returned():
            return _returned(state), ()
        case RaisedAgain():
            return _raised_again(state, now_us, plan)
        case Stopped():
            return replace(state, phase=Phase.OVER, next_call_us=NEVER_US), ()
        case TimePassed():
            return _time_passed(state, now_us, plan)


def pause_us(state: CallOut) -> int:
    """Return how long an acknowledgement pauses the calls. [us]"""
    return microseconds(min(state.respond_s, MOST_PAUSE_S))


def _acknowledged(state: CallOut, who: str, now_us: int) -> CallOut:
    is_over = state.is_normal
    return replace(
        state,
        phase=Phase.OVER if is_over else Phase.PAUSED,
        next_call_us=NEVER_US if is_over else now_us + pause_us(state),
        acknowledged_by=who,
        acknowledged_at_us=now_us,
        is_turning_back=False,
    )


def _worse(state: CallOut, now_us: int, plan: CallPlan) -> Result:
    if state.phase is not Phase.PAUSED:
        return state, ()
    return _call_or_wait(_unacknowledged(state), Reason.WORSE, now_us, plan)


def _unacknowledged(state: CallOut) -> CallOut:
    return replace(state, phase=Phase.CALLING, acknowledged_by="", acknowledged_at_us=0, is_turning_back=False)


def _with_alarm(state: CallOut, joining: TankJoined) -> CallOut:
    """Return the call-out with the more pressing of the two priorities and the shorter time to respond."""
    return replace(
        state,
        priority=min(state.priority, joining.priority, key=lambda priority: priority.rank),
        is_top=state.is_top or joining.is_top,
        respond_s=min(state.respond_s, joining.respond_s),
    )


def _tank_joined(state: CallOut, now_us: int, plan: CallPlan) -> Result:
    """Sound again: whoever is going, or was called last, hears of it first; then the list goes on."""
    if state.phase is Phase.LISTED or not state.last_called:
        return _raised_again(replace(state, phase=Phase.LISTED), now_us, plan)
    if quiet_until_us(plan.calendar, now_us, priority=state.priority, is_top=state.is_top) > now_us:
        return state, ()
    who, by = state.last_called, state.last_by
    if state.phase is Phase.PAUSED:
        who = state.acknowledged_by
        own = (line.by for line in plan.steps if _person(line, plan, now_us) == who)
        by = next(own, state.last_by)
        wait_us = microseconds(plan.steps[state.position % len(plan.steps)].wait_s)
        state = replace(_unacknowledged(state), next_call_us=now_us + wait_us, last_called=who, last_by=by)
    number = state.calls_made + 1
    call = Call(state.subject, who, by, Reason.JOINED, now_us, number)
    return replace(state, calls_made=number), (call,)


def _returned(state: CallOut) -> CallOut:
    if state.phase is Phase.PAUSED:
        return replace(state, phase=Phase.OVER, next_call_us=NEVER_US, is_normal=True)
    if state.is_top:
        return replace(state, is_normal=True)
    return replace(state, phase=Phase.LISTED, next_call_us=NEVER_US, is_normal=True)


def _raised_again(state: CallOut, now_us: int, plan: CallPlan) -> Result:
    if state.phase in {Phase.CALLING, Phase.PAUSED}:
        return replace(state, is_normal=False), ()
    state = replace(_unacknowledged(state), is_normal=False, position=-1)
    return _call_or_wait(state, Reason.RAISED, now_us, plan)


def _time_passed(state: CallOut, now_us: int, plan: CallPlan) -> Result:
    if now_us < state.next_call_us:
        return state, ()
    if state.phase is Phase.PAUSED:
        if state.is_turning_back:
            # One more pause; it has to turn back again to earn the next.
            return replace(state, is_turning_back=False, next_call_us=now_us + pause_us(state)), ()
        return _call_or_wait(_unacknowledged(state), Reason.NOT_TURNING_BACK, now_us, plan)
    reason = Reason.RAISED if state.calls_made == 0 else Reason.NOBODY_ANSWERED
    return _call_or_wait(state, reason, now_us, plan)


def _person(line: CallStep, plan: CallPlan, now_us: int) -> str:
    if line.who not in {DUTY, SECOND_DUTY}:
        return present(plan.calendar, line.who, now_us)
    people = on_duty(plan.calendar, now_us)
    place = 0 if line.who == DUTY else 1
    return people[place] if len(people) > place else ""


def _call_or_wait(state: CallOut, reason: Reason, now_us: int, plan: CallPlan) -> Result:
    """Call the next line that leads to somebody; after the last line the list begins anew."""
    allowed_us = quiet_until_us(plan.calendar, now_us, priority=state.priority, is_top=state.is_top)
    if allowed_us > now_us:
        return replace(state, phase=Phase.CALLING, next_call_us=allowed_us), ()
    number = state.calls_made + 1
    for further in range(1, len(plan.steps) + 1):
        position = (state.position + further) % len(plan.steps)
        line = plan.steps[position]
        who = _person(line, plan, now_us)
        if who:
            called = replace(
                state,
                phase=Phase.CALLING,
                position=position,
                next_call_us=now_us + microseconds(line.wait_s),
                calls_made=number,
                last_called=who,
                last_by=line.by,
            )
            return called, (Call(state.subject, who, line.by, reason, now_us, number),)
    nobody = replace(state, phase=Phase.CALLING, next_call_us=now_us + microseconds(RETRY_NOBODY_S), calls_made=number)
    return nobody, (Call(state.subject, "", (), Reason.NOBODY_ON_DUTY, now_us, number),)


def call_out_to_dict(state: CallOut) -> dict[str, Any]:
    """Return the call-out as plain JSON data."""
    body = {field.name: getattr(state, field.name) for field in fields(state)}
    return {**body, "priority": state.priority.value, "phase": state.phase.value, "last_by": list(state.last_by)}


def call_out_from_dict(body: dict[str, Any]) -> CallOut:
    """Return the call-out that `call_out_to_dict` wrote. Restoring calls nobody."""
    changes = {
        "priority": Priority(body["priority"]),
        "phase": Phase(body["phase"]),
        "last_by": tuple(body["last_by"]),
    }
    return CallOut(**{**body, **changes})
