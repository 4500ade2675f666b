"""What holds for every sequence of events, looked for by Hypothesis."""

from __future__ import annotations

import json
from itertools import pairwise

from hypothesis import given
from hypothesis import strategies as st

from analysis.alarm.events import (
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
    event_from_dict,
    event_to_dict,
)
from analysis.alarm.machine import due_at_us, is_identity, step
from analysis.alarm.rules import AlarmRules, rules_from_dict, rules_to_dict
from analysis.alarm.state import HIDDEN_STATES, WAITING_STATES, AlarmState, state_from_dict, state_to_dict
from analysis.alarm.transition import (
    Happening,
    Transition,
    state_after,
    transition_from_dict,
    transition_to_dict,
)
from tests.analysis.alarm.stories import SECOND

who = st.sampled_from(["Ana", "Bo"])
acts = st.one_of(
    st.builds(Acknowledge, who, occurrence=st.none() | st.integers(0, 3)),
    st.builds(Unacknowledge, who),
    st.builds(Silence, who),
    st.builds(Reset, who),
    st.builds(ShelveOnce, who, st.just("x")),
    st.builds(Unshelve, who),
    st.builds(Suppress, st.sampled_from(["a", "b"])),
    st.builds(Unsuppress, st.sampled_from(["a", "b"])),
    st.builds(RemoveFromService, who, st.just("x")),
    st.builds(ReturnToService, who),
    st.sampled_from([Tick(), ReviewDue(), AcknowledgementOverdue(), Recovering()]),
)
verdicts = st.sampled_from([*Verdict, Verdict.TRUE, Verdict.FALSE])
rules = st.builds(
    AlarmRules,
    on_delay_s=st.sampled_from([0, 10, 25]),
    off_delay_s=st.sampled_from([0, 10, 25]),
    min_readings=st.sampled_from([1, 2]),
    max_gap_s=st.sampled_from([15, 1000]),
    min_hit_percent=st.sampled_from([50, 100]),
    is_latching=st.booleans(),
    is_ack_required=st.booleans(),
    re_alarm_s=st.sampled_from([0, 30, 100]),
    max_shelve_s=st.just(60),
)


@st.composite
def stories(draw: st.DrawFn) -> list[tuple[Event, int]]:
    """Events in the order of their times; observations carry the same time as measured time."""
    now_us, story = 100 * SECOND, []
    for _ in range(draw(st.integers(1, 40))):
        now_us += draw(st.integers(0, 12)) * SECOND
        event: Event
        if draw(st.booleans()):
            event = Observation(draw(verdicts), now_us, 1.0, 2.0, is_worse=draw(st.integers(0, 9)) == 0)
        elif draw(st.integers(0, 4)) == 0:
            event = Shelve("Ana", "x", now_us + draw(st.integers(-5, 70)) * SECOND)
        else:
            event = draw(acts)
        story.append((event, now_us))
    return story


def told(story: list[tuple[Event, int]], with_rules: AlarmRules) -> tuple[AlarmState, list[Transition]]:
    state, history = AlarmState(), []
    for event, now_us in story:
        state, entries = step(state, with_rules, event, now_us)
        history.extend(entries)
    return state, history


@given(stories(), rules)
def test_no_sequence_loses_an_unacknowledged_alarm(story: list[tuple[Event, int]], with_rules: AlarmRules) -> None:
    """Once people had to be told, it waits for one of them, through hiding, returning and restoring."""
    state, is_owed = AlarmState(), False
    for event, now_us in story:
        state, history = step(state, with_rules, event, now_us)
        for entry in history:
            is_owed = is_owed or entry.is_announced
            accepted = entry.happening is Happening.ACKNOWLEDGED and not entry.refusal
            if accepted or entry.happening is Happening.RETURNED_AUTO_ACKNOWLEDGED:
                is_owed = False
            assert entry.after.is_acknowledged == (not is_owed)
            assert entry.to_state in (WAITING_STATES if is_owed else set(entry.to_state.__class__)) | HIDDEN_STATES
        assert state.is_acknowledged == (not is_owed)


@given(stories(), rules)
def test_every_rise_is_announced_unless_it_is_hidden(story: list[tuple[Event, int]], with_rules: AlarmRules) -> None:
    state = AlarmState()
    for event, now_us in story:
        before = state
        state, history = step(state, with_rules, event, now_us)
        is_new = state.is_active and not before.is_active
        is_shown = before.is_hidden and not state.is_hidden and state.is_active
        if (is_new and not state.is_hidden) or is_shown:
            assert any(entry.is_announced for entry in history)
            assert not state.is_acknowledged


@given(stories(), rules)
def test_replay_of_stored_events_gives_the_same_state(story: list[tuple[Event, int]], with_rules: AlarmRules) -> None:
    state, history = told(story, with_rules)
    stored = json.loads(json.dumps([(event_to_dict(event), now_us) for event, now_us in story]))
    again, history_again = told([(event_from_dict(body), now_us) for body, now_us in stored], with_rules)
    assert again == state
    assert history_again == history
    assert rules_from_dict(json.loads(json.dumps(rules_to_dict(with_rules)))) == with_rules


@given(stories(), rules)
def test_stored_transitions_rebuild_the_alarm(story: list[tuple[Event, int]], with_rules: AlarmRules) -> None:
    """All but the running delay, which is the chain's state and not history."""
    state, history = told(story, with_rules)
    stored = json.loads(json.dumps([transition_to_dict(entry) for entry in history]))
    rebuilt = state_after(transition_from_dict(body) for body in stored)

    def lasting(given_state: AlarmState) -> dict[str, object]:
        body = state_to_dict(given_state)
        return {key: body[key] for key in body if not key.startswith(("pending", "judged"))}

    assert lasting(rebuilt) == lasting(state)
    for before, entry in pairwise(history):
        assert entry.from_state is before.to_state


@given(stories(), rules)
def test_restoring_fires_nothing(story: list[tuple[Event, int]], with_rules: AlarmRules) -> None:
    state, _ = told(story, with_rules)
    restored = state_from_dict(json.loads(json.dumps(state_to_dict(state))))
    assert restored == state
    assert step(restored, with_rules, Tick(), story[-1][1]) == (state, ())


@given(stories(), rules, st.lists(st.integers(0, 600), max_size=20))
def test_extra_ticks_change_nothing(story: list[tuple[Event, int]], with_rules: AlarmRules, ticks: list[int]) -> None:
    extra: list[tuple[Event, int]] = [(Tick(), tick * SECOND) for tick in ticks]
    # An act at the very time of a tick comes first; sorted keeps that order.
    merged = sorted(story + extra, key=lambda item: item[1])
    end = [(Tick(), 1000 * SECOND)]
    state, history = told(story + end, with_rules)
    ticked, ticked_history = told(merged + end, with_rules)
    assert ticked == state
    assert ticked_history == history


@given(stories(), rules)
def test_identity_is_never_promised_in_vain(story: list[tuple[Event, int]], with_rules: AlarmRules) -> None:
    """The quiet path leaves out what `is_identity` promises; it must be true of every state."""
    state = AlarmState()
    for event, now_us in story:
        state, _ = step(state, with_rules, event, now_us)
        for verdict in Verdict:
            if is_identity(state, verdict) and due_at_us(state, with_rules) > now_us:
                assert step(state, with_rules, Observation(verdict, now_us), now_us) == (state, ())


@given(stories(), rules)
def test_raised_only_on_enough_readings_over_the_whole_delay(
    story: list[tuple[Event, int]], with_rules: AlarmRules
) -> None:
    run: dict[int, bool] = {}
    state = AlarmState()
    for event, now_us in story:
        before = state
        state, _ = step(state, with_rules, event, now_us)
        if not isinstance(event, Observation):
            continue
        is_strict = with_rules.min_hit_percent == 100
        if event.verdict is Verdict.FALSE or (is_strict and event.verdict in {Verdict.BETWEEN, Verdict.NEAR}):
            run.clear()
        elif event.verdict is Verdict.TRUE or (event.verdict is Verdict.NEAR or run):
            run[now_us] = run.get(now_us, False) or event.verdict is Verdict.TRUE
        if state.is_active and not before.is_active:
            assert sum(run.values()) >= with_rules.min_readings
            assert now_us - min(run) >= with_rules.on_delay_s * SECOND
