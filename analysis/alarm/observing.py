"""What an observation does to an alarm: delays on measured time, raising, returning, worsening."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

from analysis.alarm.events import MONITOR, Observation, Verdict
from analysis.alarm.rules import AlarmRules, microseconds
from analysis.alarm.state import AlarmState, Shelving, name_of
from analysis.alarm.transition import Happening, Transition


def observed(
    state: AlarmState, rules: AlarmRules, event: Observation, now_us: int
) -> tuple[AlarmState, tuple[Transition, ...]]:
    """Return the state after an observation and what has to be recorded; see `analysis.alarm.machine.step`.

    An observation older than the last one that counted is late and changes nothing. An unknown one holds the
    state: missing is never normal, and a run of readings is broken by the gap it leaves, not by the failure.
    """
    if event.verdict is Verdict.UNKNOWN or event.measured_at_us < state.judged_at_us:
        return state, ()
    before = state
    if not state.is_active and rules.min_hit_percent < ALL:
        state = _tolerantly_counted(state, rules, event)
    elif event.verdict is (Verdict.FALSE if state.is_active else Verdict.TRUE):
        state = _counted(state, rules, event)
    elif state.has_pending:
        state = _without_run(state, event)
    if _is_run_complete(state, rules, event):
        return (_returned if state.is_active else _raised)(state, rules, event, now_us)
    if event.is_worse and event.verdict is Verdict.TRUE:
        return _worsened(state, event, now_us)
    return (before if state == before else state), ()


ALL = 100
"""Per cent."""


def _reading_us(event: Observation) -> int:
    return event.measured_at_us if event.reading_at_us is None else event.reading_at_us


def _counted(state: AlarmState, rules: AlarmRules, event: Observation) -> AlarmState:
    """Begin or continue the run of readings that speak against the present flag."""
    reading_us = _reading_us(event)
    is_gap = reading_us - state.pending_last_us > microseconds(rules.max_gap_s)
    if not state.has_pending or is_gap:
        return replace(
            state,
            pending_since_us=event.measured_at_us,
            pending_readings=1,
            pending_hits=1,
            pending_last_us=reading_us,
            judged_at_us=event.measured_at_us,
        )
    if reading_us == state.pending_last_us:
        return replace(state, judged_at_us=event.measured_at_us)
    return replace(
        state,
        pending_readings=state.pending_readings + 1,
        pending_hits=state.pending_hits + 1,
        pending_last_us=reading_us,
        judged_at_us=event.measured_at_us,
    )


def _tolerantly_counted(state: AlarmState, rules: AlarmRules, event: Observation) -> AlarmState:
    """Begin, continue or end a run in which some readings may lie inside the limit, but none back by the deadband."""
    reading_us = _reading_us(event)
    if state.has_pending and reading_us == state.pending_last_us:
        return replace(state, judged_at_us=event.measured_at_us)
    is_gap = reading_us - state.pending_last_us > microseconds(rules.max_gap_s)
    is_new = not state.has_pending or is_gap
    window_from_us = reading_us - microseconds(rules.on_delay_s + rules.jitter_s)
    old = () if is_new else state.pending_marks
    # Where the interval is longer than the delay, the last readings count even though they are older than it.
    enough = old[max(len(old) + 1 - rules.min_readings, 0) :]
    recent = tuple(mark for mark in old if mark[0] >= window_from_us)
    marks = (*max(recent, enough, key=len), (reading_us, int(event.verdict)))
    if event.verdict is Verdict.FALSE or all(verdict == Verdict.BETWEEN for _, verdict in marks):
        return _without_run(state, event) if state.has_pending else state
    return replace(
        state,
        pending_since_us=event.measured_at_us if is_new else state.pending_since_us,
        pending_readings=len(marks),
        pending_hits=sum(verdict == Verdict.TRUE for _, verdict in marks),
        pending_last_us=reading_us,
        pending_marks=marks,
        judged_at_us=event.measured_at_us,
    )


def _without_run(state: AlarmState, event: Observation) -> AlarmState:
    return replace(state, **_NO_RUN, judged_at_us=event.measured_at_us)


_NO_RUN: dict[str, Any] = {
    "pending_since_us": 0,
    "pending_readings": 0,
    "pending_hits": 0,
    "pending_last_us": 0,
    "pending_marks": (),
}


def _is_run_complete(state: AlarmState, rules: AlarmRules, event: Observation) -> bool:
    if event.verdict is not (Verdict.FALSE if state.is_active else Verdict.TRUE):
        return False
    delay_s = rules.off_delay_s if state.is_active else rules.on_delay_s
    elapsed_us = event.measured_at_us - state.pending_since_us + microseconds(rules.jitter_s)
    is_long = elapsed_us >= microseconds(delay_s) and state.pending_hits >= rules.min_readings
    return is_long and (state.is_active or state.pending_hits * ALL >= rules.min_hit_percent * state.pending_readings)


def _entry(
    before: AlarmState, after: AlarmState, happening: Happening, event: Observation, now_us: int, *, tell: bool
) -> Transition:
    return Transition(
        happening,
        name_of(before),
        name_of(after),
        now_us,
        MONITOR,
        "",
        after,
        measured_at_us=event.measured_at_us,
        value=event.value,
        limit=event.limit,
        is_announced=tell,
    )


def _raised(
    state: AlarmState, rules: AlarmRules, event: Observation, now_us: int
) -> tuple[AlarmState, tuple[Transition, ...]]:
    """Raise: a new occurrence, unless the present one still waits for a person."""
    changes: dict[str, Any] = {"is_active": True, "rise_count": state.rise_count + 1, "returned_at_us": 0}
    if state.is_acknowledged:
        changes |= {
            "occurrence": state.occurrence + 1,
            "rise_count": 1,
            "re_alarm_count": 0,
            "raised_at_us": event.measured_at_us,
            "raised_value": event.value,
            "raised_limit": event.limit,
        }
    if rules.is_latching:
        changes["is_latched"] = True
    if not state.is_hidden:
        changes |= {
            "is_acknowledged": False,
            "is_silenced": False,
            "announced_at_us": now_us,
            "acknowledged_by": "",
            "acknowledged_at_us": 0,
            "re_alarm_from_us": 0,
        }
    after = replace(state, **_NO_RUN, **changes)
    return after, (_entry(state, after, Happening.RAISED, event, now_us, tell=not state.is_hidden),)


def _returned(
    state: AlarmState, rules: AlarmRules, event: Observation, now_us: int
) -> tuple[AlarmState, tuple[Transition, ...]]:
    """Return to normal: what is unacknowledged stays so unless the alarm asks for no acknowledgement."""
    is_auto = not rules.is_ack_required and not state.is_acknowledged
    after = replace(
        state,
        **_NO_RUN,
        is_active=False,
        is_acknowledged=state.is_acknowledged or is_auto,
        is_silenced=False,
        returned_at_us=event.measured_at_us,
        re_alarm_from_us=0,
    )
    happening = Happening.RETURNED_AUTO_ACKNOWLEDGED if is_auto else Happening.RETURNED
    entries: tuple[Transition, ...] = (_entry(state, after, happening, event, now_us, tell=False),)
    if after.shelving is Shelving.ONCE:
        off_shelf = replace(after, shelving=Shelving.NONE, shelved_until_us=0, shelved_by="")
        entries += (_entry(after, off_shelf, Happening.SHELVING_ENDED, event, now_us, tell=False),)
        after = off_shelf
    return after, entries


def _worsened(state: AlarmState, event: Observation, now_us: int) -> tuple[AlarmState, tuple[Transition, ...]]:
    """An acknowledged alarm whose condition passed its next step is announced anew."""
    if not (state.is_active and state.is_acknowledged) or state.is_hidden:
        return state, ()
    after = replace(
        state,
        is_acknowledged=False,
        is_silenced=False,
        announced_at_us=now_us,
        acknowledged_by="",
        acknowledged_at_us=0,
        re_alarm_from_us=0,
        re_alarm_count=state.re_alarm_count + 1,
    )
    return after, (_entry(state, after, Happening.WORSENED, event, now_us, tell=True),)
