"""The alarm state machine: `step(state, rules, event, now_us) -> (state, transitions)`.

Pure: time is an argument. Delays are comparisons of measured time, not timers (OPC 10000-9 B.1.5); shelving
and re-alarm run on `now_us`. What was due before `now_us` happens first and is dated at its due time, so the
result does not depend on how many ticks came in between.

After ANSI/ISA-18.2-2016, IEC 62682:2022 and the open OPC 10000-9 v1.05. Where a one-state table and
independent flags differ, the flags win: an alarm that nobody had acknowledged when it was shelved, suppressed
or taken out of service still waits for its acknowledgement when it comes back.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import Any, TypeAlias

from analysis.alarm.events import (
    MONITOR,
    Acknowledge,
    AcknowledgementOverdue,
    Event,
    Observation,
    Recovering,
    RemoveFromService,
    Reset,
    ReturnToService,
    ReviewDue,
    Shelve,
    ShelveOnce,
    Silence,
    Suppress,
    Tick,
    Unacknowledge,
    Unshelve,
    Unsuppress,
    Verdict,
)
from analysis.alarm.observing import observed
from analysis.alarm.rules import AlarmRules, microseconds
from analysis.alarm.state import HIDDEN_STATES, NEVER_US, AlarmState, Shelving, StateName, name_of
from analysis.alarm.transition import Happening, Refusal, Transition

Result: TypeAlias = tuple[AlarmState, tuple[Transition, ...]]


def step(state: AlarmState, rules: AlarmRules, event: Event, now_us: int) -> Result:
    """Return the state after one event, and what has to be recorded.

    Parameters
    ----------
    state : AlarmState
        The state before.
    rules : AlarmRules
        The rules of this alarm.
    event : Event
        What happened.
    now_us : int
        The present time; for observations the time received. [us UTC]

    Returns
    -------
    tuple of (AlarmState, tuple of Transition)
        The same state object and an empty tuple when nothing changes. A refused act leaves the state and is
        recorded with its reason in `Transition.refusal`.
    """
    transitions: tuple[Transition, ...] = ()
    if due_at_us(state, rules) <= now_us:
        state, transitions = _happen_what_is_due(state, rules, now_us)
    handler = _HANDLERS[type(event)]
    state, more = handler(state, rules, event, now_us)
    return state, transitions + more


def due_at_us(state: AlarmState, rules: AlarmRules) -> int:
    """Return when time alone will change this alarm next; `NEVER_US` if it will not. [us UTC]"""
    due = state.shelved_until_us if state.shelving is not Shelving.NONE else NEVER_US
    if (
        state.is_active
        and state.is_acknowledged
        and rules.re_alarm_s > 0
        and rules.is_ack_required
        and not state.is_hidden
    ):
        due = min(due, state.re_alarm_from_us + microseconds(rules.re_alarm_s))
    return due


def is_identity(state: AlarmState, verdict: Verdict) -> bool:
    """Return whether an observation with this verdict certainly leaves this state as it is.

    Holds for all observations that are not "worse" and before anything is due; the quiet path of
    `analysis.alarm.bank` relies on it.
    """
    if verdict is Verdict.UNKNOWN:
        return True
    if state.has_pending:
        return False
    return verdict is not Verdict.FALSE if state.is_active else verdict in {Verdict.FALSE, Verdict.BETWEEN}


def _entry(
    before: AlarmState, after: AlarmState, happening: Happening, at_us: int, who: str, why: str, **more: Any
) -> Result:
    return after, (Transition(happening, name_of(before), name_of(after), at_us, who, why, after, **more),)


def _refused(state: AlarmState, happening: Happening, at_us: int, event: Any, refusal: Refusal) -> Result:
    return _entry(state, state, happening, at_us, event.who, event.why, refusal=refusal)


def _happen_what_is_due(state: AlarmState, rules: AlarmRules, now_us: int) -> Result:
    """Let everything happen that was due by `now_us`, each at its own time."""
    transitions: tuple[Transition, ...] = ()
    while (due_us := due_at_us(state, rules)) <= now_us:
        if state.shelving is not Shelving.NONE and state.shelved_until_us <= due_us:
            after = replace(state, shelving=Shelving.NONE, shelved_until_us=0, shelved_by="")
            state, more = _shown_again(state, after, Happening.SHELVING_ENDED, due_us, MONITOR, "time is over")
        else:
            after = _announced(state, due_us, re_alarm_count=state.re_alarm_count + 1)
            state, more = _entry(state, after, Happening.RE_ALARMED, due_us, MONITOR, "still active", is_announced=True)
        transitions += more
    return state, transitions


def _announced(state: AlarmState, at_us: int, **more: Any) -> AlarmState:
    return replace(
        state,
        is_acknowledged=False,
        is_silenced=False,
        announced_at_us=at_us,
        acknowledged_by="",
        acknowledged_at_us=0,
        re_alarm_from_us=0,
        **more,
    )


def _shown_again(before: AlarmState, after: AlarmState, happening: Happening, at_us: int, who: str, why: str) -> Result:
    """Finish the end of a hiding flag: what is abnormal and visible again is announced anew."""
    is_announced = after.is_active and not after.is_hidden
    if is_announced:
        after = _announced(after, at_us)
    return _entry(before, after, happening, at_us, who, why, is_announced=is_announced)


def _tick(state: AlarmState, _rules: AlarmRules, _event: Tick, _now_us: int) -> Result:
    return state, ()


def _acknowledge(state: AlarmState, _rules: AlarmRules, event: Acknowledge, now_us: int) -> Result:
    refusal = _refusal_of_acknowledgement(state, event)
    if refusal:
        return _refused(state, Happening.ACKNOWLEDGED, now_us, event, refusal)
    after = replace(
        state,
        is_acknowledged=True,
        is_silenced=False,
        acknowledged_by=event.who,
        acknowledged_at_us=now_us,
        re_alarm_from_us=now_us,
    )
    return _entry(state, after, Happening.ACKNOWLEDGED, now_us, event.who, event.why)


def _refusal_of_acknowledgement(state: AlarmState, event: Acknowledge) -> Refusal:
    if state.is_hidden:
        return Refusal.NOT_ANNOUNCED
    if state.is_acknowledged:
        known = state.is_active or state.is_latched
        return Refusal.ALREADY_ACKNOWLEDGED if known else Refusal.NOTHING_TO_ACKNOWLEDGE
    if event.occurrence is not None and event.occurrence != state.occurrence:
        return Refusal.OTHER_OCCURRENCE
    return Refusal.NONE


def _unacknowledge(state: AlarmState, _rules: AlarmRules, event: Unacknowledge, now_us: int) -> Result:
    if name_of(state) is not StateName.ACKNOWLEDGED:
        return _refused(state, Happening.UNACKNOWLEDGED, now_us, event, Refusal.NOT_ACKNOWLEDGED)
    after = _announced(state, now_us)
    return _entry(state, after, Happening.UNACKNOWLEDGED, now_us, event.who, event.why, is_announced=True)


def _overdue(state: AlarmState, _rules: AlarmRules, event: AcknowledgementOverdue, now_us: int) -> Result:
    if state.is_acknowledged or state.is_hidden:
        return _refused(state, Happening.ESCALATED, now_us, event, Refusal.NOTHING_TO_ACKNOWLEDGE)
    return _entry(state, state, Happening.ESCALATED, now_us, event.who, event.why, is_announced=True)


def _recovering(state: AlarmState, _rules: AlarmRules, event: Recovering, now_us: int) -> Result:
    if name_of(state) is not StateName.ACKNOWLEDGED:
        return _refused(state, Happening.RECOVERING, now_us, event, Refusal.NOT_ACKNOWLEDGED)
    after = replace(state, re_alarm_from_us=now_us)
    return _entry(state, after, Happening.RECOVERING, now_us, event.who, event.why)


def _silence(state: AlarmState, _rules: AlarmRules, event: Silence, now_us: int) -> Result:
    if state.is_acknowledged or state.is_hidden:
        return _refused(state, Happening.SILENCED, now_us, event, Refusal.NOTHING_TO_SILENCE)
    after = replace(state, is_silenced=True)
    return _entry(state, after, Happening.SILENCED, now_us, event.who, event.why)


def _reset(state: AlarmState, _rules: AlarmRules, event: Reset, now_us: int) -> Result:
    if state.is_active:
        return _refused(state, Happening.RESET, now_us, event, Refusal.STILL_ACTIVE)
    if not state.is_latched:
        return _refused(state, Happening.RESET, now_us, event, Refusal.NOTHING_TO_RESET)
    if state.is_hidden:
        return _refused(state, Happening.RESET, now_us, event, Refusal.NOT_ANNOUNCED)
    after = replace(state, is_latched=False)
    return _entry(state, after, Happening.RESET, now_us, event.who, event.why)


def _refusal_of_shelving(
    state: AlarmState, rules: AlarmRules, event: Shelve | ShelveOnce, until_us: int, now_us: int
) -> Refusal:
    if state.is_out_of_service or state.suppressed_by:
        return Refusal.HIDDEN_OTHERWISE
    if rules.max_shelve_s == 0:
        return Refusal.CANNOT_BE_SHELVED
    if not event.why.strip():
        return Refusal.WITHOUT_REASON
    if state.shelving is not Shelving.NONE and not rules.is_reshelvable:
        return Refusal.ALREADY_SHELVED
    if until_us <= now_us:
        return Refusal.ENDS_IN_THE_PAST
    if until_us > now_us + microseconds(rules.max_shelve_s):
        return Refusal.LONGER_THAN_ALLOWED
    return Refusal.NONE


def _shelve(state: AlarmState, rules: AlarmRules, event: Shelve | ShelveOnce, now_us: int) -> Result:
    is_timed = isinstance(event, Shelve)
    until_us = event.until_us if isinstance(event, Shelve) else now_us + microseconds(rules.max_shelve_s)
    happening = Happening.SHELVED if is_timed else Happening.SHELVED_ONCE
    refusal = _refusal_of_shelving(state, rules, event, until_us, now_us)
    if refusal:
        return _refused(state, happening, now_us, event, refusal)
    shelving = Shelving.TIMED if is_timed else Shelving.ONCE
    after = replace(state, shelving=shelving, shelved_until_us=until_us, shelved_by=event.who)
    return _entry(state, after, happening, now_us, event.who, event.why)


def _unshelve(state: AlarmState, _rules: AlarmRules, event: Unshelve, now_us: int) -> Result:
    if state.shelving is Shelving.NONE:
        return _refused(state, Happening.UNSHELVED, now_us, event, Refusal.NOT_SHELVED)
    after = replace(state, shelving=Shelving.NONE, shelved_until_us=0, shelved_by="")
    return _shown_again(state, after, Happening.UNSHELVED, now_us, event.who, event.why)


def _suppress(state: AlarmState, _rules: AlarmRules, event: Suppress, now_us: int) -> Result:
    if event.rule in state.suppressed_by:
        return state, ()
    after = replace(state, suppressed_by=tuple(sorted({*state.suppressed_by, event.rule})))
    return _entry(state, after, Happening.SUPPRESSED, now_us, event.who, event.why or event.rule)


def _unsuppress(state: AlarmState, _rules: AlarmRules, event: Unsuppress, now_us: int) -> Result:
    if event.rule not in state.suppressed_by:
        return _refused(state, Happening.UNSUPPRESSED, now_us, event, Refusal.NOT_SUPPRESSED_BY_THIS)
    after = replace(state, suppressed_by=tuple(rule for rule in state.suppressed_by if rule != event.rule))
    return _shown_again(state, after, Happening.UNSUPPRESSED, now_us, event.who, event.why or event.rule)


def _remove(state: AlarmState, _rules: AlarmRules, event: RemoveFromService, now_us: int) -> Result:
    happening = Happening.REMOVED_FROM_SERVICE
    if state.is_out_of_service:
        return _refused(state, happening, now_us, event, Refusal.ALREADY_OUT_OF_SERVICE)
    if not event.why.strip():
        return _refused(state, happening, now_us, event, Refusal.WITHOUT_REASON)
    after = replace(state, is_out_of_service=True, expected_return_us=event.expected_return_us)
    return _entry(state, after, happening, now_us, event.who, event.why)


def _return(state: AlarmState, _rules: AlarmRules, event: ReturnToService, now_us: int) -> Result:
    happening = Happening.RETURNED_TO_SERVICE
    if not state.is_out_of_service:
        return _refused(state, happening, now_us, event, Refusal.NOT_OUT_OF_SERVICE)
    after = replace(state, is_out_of_service=False, expected_return_us=0)
    return _shown_again(state, after, happening, now_us, event.who, event.why)


def _review(state: AlarmState, _rules: AlarmRules, event: ReviewDue, now_us: int) -> Result:
    if name_of(state) not in HIDDEN_STATES:
        return _refused(state, Happening.REVIEW_DUE, now_us, event, Refusal.NOTHING_HIDDEN)
    return _entry(state, state, Happening.REVIEW_DUE, now_us, event.who, event.why)


_HANDLERS: dict[type[Any], Callable[[AlarmState, AlarmRules, Any, int], Result]] = {
    Observation: observed,
    Tick: _tick,
    Acknowledge: _acknowledge,
    Unacknowledge: _unacknowledge,
    AcknowledgementOverdue: _overdue,
    Recovering: _recovering,
    Silence: _silence,
    Reset: _reset,
    Shelve: _shelve,
    ShelveOnce: _shelve,
    Unshelve: _unshelve,
    Suppress: _suppress,
    Unsuppress: _unsuppress,
    RemoveFromService: _remove,
    ReturnToService: _return,
    ReviewDue: _review,
}
