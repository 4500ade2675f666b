"""Every row of the published state tables, reached and tried one by one."""

from __future__ import annotations

import csv
from dataclasses import replace
from pathlib import Path

import pytest

from analysis.alarm.events import (
    Acknowledge,
    AcknowledgementOverdue,
    Event,
    Observation,
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
from analysis.alarm.machine import step
from analysis.alarm.rules import AlarmRules
from analysis.alarm.state import AlarmState, StateName
from tests.analysis.alarm.stories import HOUR, after, reached

TABLE = Path(__file__).parents[2] / "reference" / "alarm_transitions.csv"
NOW = 40 * HOUR

LETTERS = {
    "NORM": StateName.NORMAL,
    "UNACK": StateName.UNACKNOWLEDGED,
    "ACKED": StateName.ACKNOWLEDGED,
    "RTNUN": StateName.RETURNED_UNACKNOWLEDGED,
    "LTUNAK": StateName.LATCHED_UNACKNOWLEDGED,
    "LTAKN": StateName.LATCHED_ACKNOWLEDGED,
    "SHLVD": StateName.SHELVED,
    "DSUPR": StateName.SUPPRESSED_BY_DESIGN,
    "OOSRV": StateName.OUT_OF_SERVICE,
}

TRUE = Observation(Verdict.TRUE, NOW)
FALSE = Observation(Verdict.FALSE, NOW)
EVENTS: dict[str, Event] = {
    "ALARM_OCCURS": TRUE,
    "RETURN_TO_NORMAL": FALSE,
    "RETURN_TO_NORMAL_AUTO_ACK": FALSE,
    "RETURN_TO_NORMAL_LATCHING": FALSE,
    "ONE_SHOT_CONDITION_CLEARS": FALSE,
    "ACKNOWLEDGE": Acknowledge("Ana"),
    "UNACKNOWLEDGE": Unacknowledge("Ana", "wrong tank"),
    "ACK_TIMEOUT": AcknowledgementOverdue(),
    "RE_ALARM_TIMER": Tick(),
    "RE_ALARM_CONDITION": Observation(Verdict.TRUE, NOW, is_worse=True),
    "RESET": Reset("Ana"),
    "SILENCE": Silence("Ana"),
    "SHELVE_TIMED": Shelve("Ana", "probe cleaning", NOW + HOUR),
    "SHELVE_ONE_SHOT": ShelveOnce("Ana", "water change"),
    "SUPPRESS_BY_DESIGN": Suppress("tank filling"),
    "REMOVE_FROM_SERVICE": RemoveFromService("Ana", "new probe"),
    "UNSHELVE_WHEN_NORMAL": Unshelve("Ana"),
    "UNSHELVE_WHEN_ABNORMAL": Unshelve("Ana"),
    "SHELF_TIMER_EXPIRES_WHEN_NORMAL": Tick(),
    "SHELF_TIMER_EXPIRES_WHEN_ABNORMAL": Tick(),
    "UNSUPPRESS_WHEN_NORMAL": Unsuppress("tank empty"),
    "UNSUPPRESS_WHEN_ABNORMAL": Unsuppress("tank empty"),
    "RETURN_TO_SERVICE_WHEN_NORMAL": ReturnToService("Ana"),
    "RETURN_TO_SERVICE_WHEN_ABNORMAL": ReturnToService("Ana"),
    "REVIEW_DUE": ReviewDue(),
    "DATA_BAD_OR_STALE": Observation(Verdict.UNKNOWN, NOW),
}
REFUSED = {"reject", "no effect", "reject/idempotent"}


def rows() -> list[dict[str, str]]:
    with TABLE.open(encoding="utf-8") as file:
        return list(csv.DictReader(line for line in file if not line.startswith("#")))


def prepared(row: dict[str, str]) -> tuple[AlarmState, AlarmRules, int]:
    """Return the state before, its rules, and the time at which the event comes."""
    state, rules = reached(LETTERS[row["state"]], now_us=NOW)
    event = row["event"]
    if event == "RETURN_TO_NORMAL_AUTO_ACK":
        rules = replace(rules, is_ack_required=False)
    if event == "RETURN_TO_NORMAL_LATCHING":
        latching = replace(rules, is_latching=True)
        acts = [(Acknowledge("Ana"), NOW - 20)] if row["state"] == "ACKED" else []
        state, _ = after(AlarmState(), latching, [(Observation(Verdict.TRUE, NOW - 30), NOW - 30), *acts])
        rules = latching
    if event == "ONE_SHOT_CONDITION_CLEARS":
        acts = [(ShelveOnce("Ana", "x"), NOW - 30), (Observation(Verdict.TRUE, NOW - 20), NOW - 20)]
        state, _ = after(AlarmState(), rules, acts)
    if event.endswith("_WHEN_ABNORMAL"):
        state, _ = after(state, rules, [(Observation(Verdict.TRUE, NOW - 4), NOW - 4)])
    if row["event"].startswith(("RE_ALARM_TIMER", "SHELF_TIMER")):
        return state, rules, NOW + 2 * HOUR
    return state, rules, NOW


@pytest.mark.parametrize("row", rows(), ids=lambda row: f"{row['state']}-{row['event']}")
def test_row_of_the_published_table(row: dict[str, str]) -> None:
    state, rules, now_us = prepared(row)
    assert state.name is LETTERS[row["state"]]

    result, history = step(state, rules, EVENTS[row["event"]], now_us)

    assert result.name is LETTERS[row["next_state"]], row["action"]
    for entry in history:
        assert entry.who
        assert entry.at_us
        assert entry.after.name is entry.to_state
    if history:
        assert history[0].from_state is state.name
        assert history[-1].to_state is result.name
        assert history[-1].after == result


@pytest.mark.parametrize(
    "row",
    [row for row in rows() if row["action"].split(":")[0] in REFUSED],
    ids=lambda row: f"{row['state']}-{row['event']}",
)
def test_what_the_table_rejects_is_refused_with_a_reason_and_changes_nothing(row: dict[str, str]) -> None:
    state, rules, now_us = prepared(row)
    result, (entry,) = step(state, rules, EVENTS[row["event"]], now_us)
    assert entry.refusal
    assert not entry.is_announced
    assert result == state


@pytest.mark.parametrize("row", rows(), ids=lambda row: f"{row['state']}-{row['event']}")
def test_people_are_told_exactly_when_something_becomes_unacknowledged(row: dict[str, str]) -> None:
    state, rules, now_us = prepared(row)
    result, history = step(state, rules, EVENTS[row["event"]], now_us)
    is_told = any(entry.is_announced for entry in history)
    is_new = result.name is StateName.UNACKNOWLEDGED and state.name is not StateName.UNACKNOWLEDGED
    assert is_told == (is_new or row["event"] == "ACK_TIMEOUT")


def test_every_state_and_most_events_are_in_the_table() -> None:
    assert {LETTERS[row["state"]] for row in rows()} == set(StateName)
    assert {row["event"] for row in rows()} == set(EVENTS)
    assert len(rows()) == 89
