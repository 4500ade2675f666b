"""Stories of a call-out: until a person acknowledges, and again if nothing gets better."""

from __future__ import annotations

import json
from dataclasses import replace
from zoneinfo import ZoneInfo

import pytest
from hypothesis import given
from hypothesis import strategies as st

from analysis.alarm.call_out import (
    DUTY,
    SECOND_DUTY,
    Acknowledged,
    Call,
    CallEvent,
    CallOut,
    CallPlan,
    CallStep,
    Phase,
    RaisedAgain,
    Reason,
    Returned,
    Stopped,
    TankJoined,
    TimePassed,
    TurningBack,
    Worse,
    begun,
    call_out_from_dict,
    call_out_to_dict,
    step,
)
from analysis.alarm.duty import DutyCalendar, QuietHours, Shift, StandIn
from analysis.alarm.rules import Priority
from analysis.errors import InvalidInputError
from tests.analysis.alarm.stories import HOUR, MINUTE

LISBON = ZoneInfo("Europe/Lisbon")
NOON = 20_000 * 24 * HOUR + 12 * HOUR
NIGHT = 20_000 * 24 * HOUR + 23 * HOUR
CALENDAR = DutyCalendar(LISBON, (Shift("Ana", 0, 1440),), quiet=(QuietHours(22 * 60, 6 * 60),))
STEPS = (
    CallStep(DUTY, ("push",), 300),
    CallStep("Bo", ("voice",), 300),
    CallStep("Cy", ("voice", "sms"), 600),
)
PLAN = CallPlan(STEPS, CALENDAR)
JOINING = TankJoined(Priority.SOON, is_top=False, respond_s=600)


def begin(priority: Priority = Priority.URGENT, *, is_top: bool = False, now_us: int = NOON, plan: CallPlan = PLAN):
    return begun("g1", priority=priority, is_top=is_top, respond_s=600, now_us=now_us, plan=plan)


def told(state: CallOut, *story: tuple[int, CallEvent], start_us: int = NOON) -> tuple[CallOut, list[tuple]]:
    """Let events happen at minutes after the start, with a look every minute; return (minute, who, reason)."""
    calls: list[tuple] = []
    for minute in range(max(at for at, _ in story) + 1):
        now_us = start_us + minute * MINUTE
        for event in (*(event for at, event in story if at == minute), TimePassed()):
            state, made = step(state, event, now_us, PLAN)
            calls.extend((minute, call.who, call.reason.value) for call in made)
    return state, calls


def test_the_list_is_gone_through_and_begins_anew_until_somebody_acknowledges() -> None:
    state, (first,) = begin()
    assert first == Call("g1", "Ana", ("push",), Reason.RAISED, NOON, 1)
    state, calls = told(state, (26, Acknowledged("Cy")), (30, TimePassed()))
    answered = Reason.NOBODY_ANSWERED.value
    assert calls == [(5, "Bo", answered), (10, "Cy", answered), (20, "Ana", answered), (25, "Bo", answered)]
    assert (state.phase, state.acknowledged_by) == (Phase.PAUSED, "Cy")


def test_an_acknowledgement_pauses_for_the_time_to_respond_then_the_next_person_is_called() -> None:
    state, _ = begin()
    _, calls = told(state, (2, Acknowledged("Ana")), (20, TimePassed()))
    assert calls[0] == (12, "Bo", "not_turning_back")


def test_no_acknowledgement_pauses_longer_than_a_quarter_of_an_hour() -> None:
    state, _ = begin()
    state, calls = told(replace(state, respond_s=8 * 3600.0), (0, Acknowledged("Ana")), (15, TimePassed()))
    assert calls == [(15, "Bo", "not_turning_back")]
    assert state.phase is Phase.CALLING


def test_turning_back_earns_one_more_pause_each_time() -> None:
    state, _ = begin()
    _, calls = told(state, (0, Acknowledged("Ana")), (9, TurningBack()), (19, TurningBack()), (31, TimePassed()))
    assert calls == [(30, "Bo", "not_turning_back")]


def test_worse_calls_the_next_person_at_once() -> None:
    state, _ = begin()
    _, calls = told(state, (1, Acknowledged("Ana")), (3, Worse()), (4, TimePassed()))
    assert calls == [(3, "Bo", "worse")]


def test_normal_by_itself_stops_the_waking_but_stays_listed() -> None:
    state, _ = begin()
    state, calls = told(state, (1, Returned()), (60, TimePassed()))
    assert calls == []
    assert state.phase is Phase.LISTED
    state, _ = step(state, Acknowledged("Ana"), NOON + HOUR, PLAN)
    assert state.phase is Phase.OVER


def test_top_priority_goes_on_waking_after_a_return() -> None:
    state, _ = begin(is_top=True)
    state, calls = told(state, (1, Returned()), (10, TimePassed()))
    assert [who for _, who, _ in calls] == ["Bo", "Cy"]
    assert step(state, Acknowledged("Cy"), NOON + HOUR, PLAN)[0].phase is Phase.OVER


def test_back_again_before_anybody_acknowledged_calls_anew() -> None:
    state, _ = begin()
    _, calls = told(state, (1, Returned()), (8, RaisedAgain()), (9, TimePassed()))
    assert calls == [(8, "Ana", "raised")]


def test_normal_while_somebody_is_going_is_the_end() -> None:
    state, _ = begin()
    state, calls = told(state, (1, Acknowledged("Ana")), (5, Returned()), (60, TimePassed()))
    assert (state.phase, calls) == (Phase.OVER, [])


def test_hidden_alarms_call_nobody() -> None:
    state, _ = begin()
    state, calls = told(state, (1, Stopped()), (60, Worse()))
    assert (state.phase, calls) == (Phase.OVER, [])


def test_a_tank_that_joins_sounds_again_with_whoever_is_going_first() -> None:
    state, _ = begin()
    _, calls = told(state, (1, JOINING), (6, Acknowledged("Bo")), (7, JOINING), (12, TimePassed()))
    assert calls == [
        (1, "Ana", "joined"),
        (5, "Bo", "nobody_answered"),
        (7, "Bo", "joined"),
        (12, "Cy", "nobody_answered"),
    ]


def test_quiet_hours_hold_back_what_can_wait_and_never_the_top_priority() -> None:
    state, calls = begin(Priority.SOON, now_us=NIGHT)
    assert calls == ()
    assert state.next_call_us == NIGHT + 6 * HOUR  # Lisbon is an hour ahead of UTC on that day
    _, (call,) = step(state, TimePassed(), state.next_call_us, PLAN)
    assert (call.who, call.reason) == ("Ana", Reason.RAISED)
    assert begin(Priority.NOTE, is_top=True, now_us=NIGHT)[1]
    assert begin(Priority.URGENT, now_us=NIGHT)[1]


def test_a_pressing_tank_that_joins_at_night_ends_the_quiet() -> None:
    state, _ = begin(Priority.SOON, now_us=NIGHT)
    assert step(state, JOINING, NIGHT + MINUTE, PLAN)[1] == ()
    state, (call,) = step(state, TankJoined(Priority.URGENT, is_top=True, respond_s=180), NIGHT + MINUTE, PLAN)
    assert call.who == "Ana"
    assert (state.priority, state.is_top, state.respond_s) == (Priority.URGENT, True, 180)


def test_lines_that_lead_to_nobody_are_skipped_and_an_empty_list_is_said_aloud() -> None:
    nobody = DutyCalendar(LISBON)
    plan = CallPlan((CallStep(DUTY, ("push",), 300), CallStep("Bo", ("voice",), 300)), nobody)
    assert begin(plan=plan)[1][0].who == "Bo"
    state, (call,) = begin(plan=CallPlan(STEPS[:1], nobody))
    assert (call.who, call.reason) == ("", Reason.NOBODY_ON_DUTY)
    assert state.next_call_us == NOON + MINUTE


def test_second_on_duty_and_stand_ins() -> None:
    two = DutyCalendar(
        LISBON, (Shift("Ana", 0, 1440), Shift("Bo", 0, 1440)), stand_ins=(StandIn("Cy", "Di", NOON, NOON + HOUR),)
    )
    assert begin(plan=CallPlan((CallStep(SECOND_DUTY, ("push",), 300),), two))[1][0].who == "Bo"
    assert begin(plan=CallPlan((CallStep("Cy", ("push",), 300),), two))[1][0].who == "Di"


def test_after_a_long_absence_one_person_is_called_not_all_who_were_missed() -> None:
    state, _ = begin()
    state, calls = step(state, TimePassed(), NOON + 10 * HOUR, PLAN)
    assert len(calls) == 1
    assert state.next_call_us == NOON + 10 * HOUR + 5 * MINUTE


@pytest.mark.parametrize("bad", [{"wait_s": 0}, {"by": ()}])
def test_impossible_lists_are_refused(bad: dict) -> None:
    with pytest.raises(InvalidInputError):
        CallStep(**{"who": "Ana", "by": ("push",), "wait_s": 60, **bad})
    with pytest.raises(InvalidInputError):
        CallPlan((), CALENDAR)


events = st.sampled_from(
    [Acknowledged("Ana"), TurningBack(), Worse(), JOINING, Returned(), RaisedAgain(), TimePassed(), TimePassed()]
)


@given(st.lists(st.tuples(events, st.integers(0, 20)), max_size=40), st.booleans())
def test_while_nobody_is_going_a_next_call_is_always_due(story, is_top) -> None:
    """Unless it is normal again, some call is always ahead, and it is the present or the future at every look."""
    state, _ = begin(is_top=is_top)
    now_us, numbers = NOON, [1]
    for event, wait in story:
        now_us += wait * MINUTE
        for happened in (event, TimePassed()):
            state, calls = step(state, happened, now_us, PLAN)
            numbers.extend(call.number for call in calls)
            assert call_out_from_dict(json.loads(json.dumps(call_out_to_dict(state)))) == state
        if state.phase in {Phase.CALLING, Phase.PAUSED}:
            assert now_us < state.next_call_us <= now_us + 24 * HOUR
        if state.phase is Phase.PAUSED:
            assert state.next_call_us <= now_us + 15 * MINUTE
        else:
            assert state.phase is Phase.CALLING or state.is_normal
    assert numbers == list(range(1, len(numbers) + 1))
