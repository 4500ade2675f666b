"""What the alarm tests share: short events, readings in a row, and states reached by their own road."""

from __future__ import annotations

from collections.abc import Iterable

from analysis.alarm.events import (
    Acknowledge,
    Event,
    Observation,
    RemoveFromService,
    Shelve,
    Suppress,
    Verdict,
)
from analysis.alarm.machine import step
from analysis.alarm.rules import AlarmRules
from analysis.alarm.state import AlarmState, StateName
from analysis.alarm.transition import Transition

SECOND = 1_000_000
MINUTE = 60 * SECOND
HOUR = 60 * MINUTE

AT_ONCE = AlarmRules(on_delay_s=0, off_delay_s=0, min_readings=1, max_gap_s=1e6, re_alarm_s=900.0)
AT_ONCE_LATCHING = AlarmRules(
    on_delay_s=0, off_delay_s=0, min_readings=1, max_gap_s=1e6, re_alarm_s=900.0, is_latching=True
)


def seen(verdict: Verdict, at_s: float) -> Observation:
    return Observation(verdict, round(at_s * SECOND))


def after(
    state: AlarmState, rules: AlarmRules, events: Iterable[tuple[Event, int]]
) -> tuple[AlarmState, list[Transition]]:
    """Let events happen one after the other, each with its time in microseconds."""
    history: list[Transition] = []
    for event, now_us in events:
        state, entries = step(state, rules, event, now_us)
        history.extend(entries)
    return state, history


def readings(
    state: AlarmState, rules: AlarmRules, story: str, *, start_s: int = 0, interval_s: int = 10
) -> tuple[AlarmState, list[Transition]]:
    """Let readings happen: T beyond the limit, N near it, B in the deadband, F back, U unknown, a dot for none."""
    words = {verdict.name[0]: verdict for verdict in Verdict}
    events: list[tuple[Event, int]] = []
    for position, letter in enumerate(story):
        if letter != ".":
            event = seen(words[letter], start_s + position * interval_s)
            events.append((event, event.measured_at_us))
    return after(state, rules, events)


def reached(name: StateName, *, now_us: int = 100) -> tuple[AlarmState, AlarmRules]:
    """Return a state of this name, reached from a fresh one by events, and the rules it came by."""
    rules = AT_ONCE_LATCHING if "latched" in name else AT_ONCE
    rise = (Observation(Verdict.TRUE, now_us - 30), now_us - 30)
    fall = (Observation(Verdict.FALSE, now_us - 10), now_us - 10)
    acknowledgement = (Acknowledge("Ana"), now_us - 20)
    roads: dict[StateName, list[tuple[Event, int]]] = {
        StateName.NORMAL: [],
        StateName.UNACKNOWLEDGED: [rise],
        StateName.ACKNOWLEDGED: [rise, acknowledgement],
        StateName.RETURNED_UNACKNOWLEDGED: [rise, fall],
        StateName.LATCHED_UNACKNOWLEDGED: [rise, fall],
        StateName.LATCHED_ACKNOWLEDGED: [rise, acknowledgement, fall],
        StateName.SHELVED: [(Shelve("Ana", "cleaning", now_us + HOUR), now_us - 5)],
        StateName.SUPPRESSED_BY_DESIGN: [(Suppress("tank empty"), now_us - 5)],
        StateName.OUT_OF_SERVICE: [(RemoveFromService("Ana", "new probe"), now_us - 5)],
    }
    state, _ = after(AlarmState(), rules, roads[name])
    assert state.name is name
    return state, rules
