"""All tanks together: the same result however the stream is cut, and silence costs no steps."""

from __future__ import annotations

import json
from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from analysis.alarm import bank as bank_room
from analysis.alarm.bank import AlarmBank, Outcome, act, alarm_bank, bank_to_dict, observe, states_from_dict, tick
from analysis.alarm.conditions import LimitCondition, ObservedBlock, limit_block, tank_block, truth_block
from analysis.alarm.events import Acknowledge, Observation, Shelve, Verdict
from analysis.alarm.kinds import ConditionKind
from analysis.alarm.machine import step
from analysis.alarm.nearest import judged_rows, no_readings_yet, sensor_places
from analysis.alarm.rules import AlarmRules
from analysis.alarm.state import AlarmState
from analysis.errors import InvalidInputError
from tests.analysis.alarm.stories import MINUTE, SECOND

LOW, HIGH = ConditionKind.SALINITY_LOW, ConditionKind.SALINITY_HIGH
TANKS = 4
QUICK = AlarmRules(on_delay_s=20, off_delay_s=20, max_gap_s=35, re_alarm_s=60, min_hit_percent=50)
CONDITIONS = (
    LimitCondition(LOW, np.array([29.0, 29, np.nan, 10]), np.full(TANKS, 0.4), is_high=False),
    LimitCondition(HIGH, np.array([33.0, 33, 33, np.nan]), np.full(TANKS, 0.4), is_high=True),
)
TWO_SENSORS_EACH = sensor_places(np.array([0, 1, 2, 3, 0, 1]), tank_count=TANKS)
STALE = np.full(6, 60 * SECOND)


def fresh() -> AlarmBank:
    return alarm_bank({LOW: [QUICK] * TANKS, HIGH: [QUICK] * TANKS})


@st.composite
def streams(draw: st.DrawFn) -> list[tuple[int, float, int, int]]:
    """Readings (sensor, value, quality, time), each sensor in the order of its own time."""
    now_us, stream = 1000 * SECOND, []
    last = [0] * 6
    for _ in range(draw(st.integers(1, 40))):
        now_us += draw(st.integers(0, 9)) * SECOND
        sensor = draw(st.integers(0, 5))
        measured = max(now_us - draw(st.integers(0, 4)) * SECOND, last[sensor] + 1)
        last[sensor] = measured
        value = draw(st.sampled_from([31.0, 28.0, 28.0, 29.2, 34.0, 32.8, 5.0, float("nan")]))
        stream.append((sensor, value, draw(st.sampled_from([1, 1, 1, 3, 4])), measured))
    return stream


def run(stream: list[tuple[int, float, int, int]], cuts: list[int]) -> tuple[AlarmBank, list[Outcome]]:
    """Feed a stream in the blocks that the cuts make."""
    bank, latest, outcomes = fresh(), no_readings_yet(TWO_SENSORS_EACH), []
    edges = [0, *sorted({cut % (len(stream) + 1) for cut in cuts}), len(stream)]
    for start, stop in pairwise(edges):
        if start == stop:
            continue
        part = stream[start:stop]
        latest, rows = judged_rows(
            latest,
            TWO_SENSORS_EACH,
            sensor=np.array([row[0] for row in part]),
            value=np.array([row[1] for row in part]),
            quality=np.array([row[2] for row in part], dtype=np.uint8),
            judged_at_us=np.array([row[3] for row in part]),
            stale_after_us=STALE,
        )
        now = np.array([row[3] for row in part])
        bank, more = observe(bank, limit_block(CONDITIONS, [rows, rows], now_us=now))
        outcomes.extend(more)
    return bank, outcomes


@given(streams(), st.lists(st.integers(0, 40), max_size=6))
def test_the_result_does_not_depend_on_how_the_stream_is_cut(stream, cuts) -> None:
    whole, whole_outcomes = run(stream, [])
    cut, cut_outcomes = run(stream, cuts)
    single, single_outcomes = run(stream, list(range(len(stream))))
    assert cut_outcomes == whole_outcomes == single_outcomes
    assert dict(cut.states) == dict(whole.states) == dict(single.states)


def observed_one_by_one(block: ObservedBlock) -> tuple[dict, list]:
    """The plain way: a step for every observation, no quiet path."""
    states: dict[tuple[ConditionKind, int], AlarmState] = {}
    history = []
    for row in range(block.tank.size):
        for column, kind in enumerate(block.kinds):
            key = (kind, int(block.tank[row]))
            event = Observation(
                Verdict(int(block.verdict[column, row])),
                int(block.measured_at_us[row]),
                None if np.isnan(block.value[column, row]) else float(block.value[column, row]),
                None if np.isnan(block.limit[column, row]) else float(block.limit[column, row]),
                int(block.reading_at_us[column, row]),
            )
            states[key], entries = step(states.get(key, AlarmState()), QUICK, event, int(block.now_us[row]))
            history.extend((kind, key[1], entry) for entry in entries)
    return {key: state for key, state in states.items() if state != AlarmState()}, history


@given(st.lists(st.tuples(st.integers(0, 3), st.integers(0, 4), st.integers(0, 4), st.integers(0, 15)), max_size=60))
def test_quiet_path_equals_a_step_for_every_observation(rows) -> None:
    time_us = 1000 * SECOND + np.cumsum([row[3] for row in rows], dtype=np.int64) * SECOND
    block = ObservedBlock(
        kinds=(LOW, HIGH),
        tank=np.array([row[0] for row in rows], dtype=np.int64),
        measured_at_us=time_us,
        now_us=time_us,
        verdict=np.array([[row[1] for row in rows], [row[2] for row in rows]], dtype=np.int8),
        value=np.ones((2, len(rows))),
        limit=np.ones((2, len(rows))),
        reading_at_us=np.vstack([time_us, time_us]),
    )
    bank, outcomes = observe(fresh(), block)
    states, history = observed_one_by_one(block)
    assert [tuple(outcome) for outcome in outcomes] == history
    assert {(bank.kinds[kind], tank): state for (kind, tank), state in bank.states.items()} == states


def test_a_quiet_block_takes_no_step_and_makes_no_new_bank(monkeypatch: pytest.MonkeyPatch) -> None:
    steps: list[object] = []
    monkeypatch.setattr(bank_room, "step", lambda *given: steps.append(given))
    condition = LimitCondition(LOW, np.full(TANKS, 29.0), np.full(TANKS, 0.4), is_high=False)
    block = tank_block(condition, np.full(TANKS, 31.0), usable=np.ones(TANKS, bool), at_us=5, now_us=5)
    bank = fresh()
    after, outcomes = observe(bank, block)
    assert after is bank
    assert not outcomes
    assert not steps


def test_a_standing_alarm_is_quiet_too(monkeypatch: pytest.MonkeyPatch) -> None:
    bank = fresh()
    for at_s in range(0, 40, 10):
        bank, _ = observe(bank, truth_block(LOW, np.ones(TANKS, bool), at_us=at_s * SECOND, now_us=at_s * SECOND))
    assert bank.is_active[0].all()
    steps: list[object] = []
    monkeypatch.setattr(bank_room, "step", lambda *given: steps.append(given))
    assert observe(bank, truth_block(LOW, np.ones(TANKS, bool), at_us=MINUTE, now_us=MINUTE))[0] is bank
    assert not steps


def raised_bank() -> AlarmBank:
    bank = fresh()
    for at_s in range(1, 41, 10):
        block = truth_block(LOW, np.array([True, False, False, True]), at_us=at_s * SECOND, now_us=at_s * SECOND)
        bank, _ = observe(bank, block)
    return bank


def test_the_bank_before_a_failed_commit_is_untouched() -> None:
    bank = raised_bank()
    before = bank_to_dict(bank, "abcd")
    act(bank, LOW, 0, Acknowledge("Ana"), MINUTE)
    tick(bank, 100 * MINUTE)
    observe(bank, truth_block(LOW, np.zeros(TANKS, bool), at_us=MINUTE, now_us=MINUTE))
    assert bank_to_dict(bank, "abcd") == before


def test_acts_and_ticks_reach_the_alarm_they_name() -> None:
    bank, (outcome,) = act(raised_bank(), LOW, 3, Acknowledge("Ana"), MINUTE)
    assert (outcome.kind, outcome.tank, outcome.transition.who) == (LOW, 3, "Ana")
    assert tick(bank, 2 * MINUTE - 1)[0] is bank
    bank, (outcome,) = tick(bank, 2 * MINUTE)
    assert (outcome.tank, outcome.transition.happening.value) == (3, "re_alarmed")


def test_what_is_due_happens_at_a_reading_too() -> None:
    bank, _ = act(raised_bank(), LOW, 0, Shelve("Ana", "x", 2 * MINUTE), MINUTE)
    block = truth_block(LOW, np.ones(TANKS, bool), at_us=3 * MINUTE, now_us=3 * MINUTE)
    _, outcomes = observe(bank, block)
    assert [(item.tank, item.transition.happening.value) for item in outcomes] == [(0, "shelving_ended")]


def test_states_survive_the_store_by_the_ids_of_their_tanks() -> None:
    bank = raised_bank()
    body = json.loads(json.dumps(bank_to_dict(bank, ["a", "b", "c", "d"])))
    # Tank "b" is gone and the order has changed.
    restored = alarm_bank({LOW: [QUICK] * 3}, states_from_dict(body, ["d", "a", "c"]))
    assert restored.state(LOW, 0) == bank.state(LOW, 3)
    assert restored.is_active[0].tolist() == [True, True, False]


def test_a_bank_of_unequal_lengths_or_strange_states_is_refused() -> None:
    with pytest.raises(InvalidInputError):
        alarm_bank({LOW: [QUICK], HIGH: []})
    with pytest.raises(InvalidInputError):
        alarm_bank({LOW: [QUICK]}, {(LOW, 5): AlarmState()})
