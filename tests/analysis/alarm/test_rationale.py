"""Every configured alarm is a valid one: consequence, action, time to respond, priority."""

from __future__ import annotations

import pytest

from analysis.alarm.kinds import KIND_RANK, MONITOR_KINDS, PROCESS_KINDS, ConditionKind, NoticeKind, TaskKind
from analysis.alarm.rationale import MOST_PAUSE_S, RATIONALE, first_rules, with_delays
from analysis.alarm.rules import Priority


def test_every_kind_has_its_record_and_no_notice_or_task_has_one() -> None:
    assert set(RATIONALE) == set(ConditionKind)
    assert not {kind.value for kind in ConditionKind} & {kind.value for kind in (*NoticeKind, *TaskKind)}
    assert not MONITOR_KINDS & PROCESS_KINDS
    assert list(KIND_RANK) == list(ConditionKind)


@pytest.mark.parametrize("kind", ConditionKind)
def test_record_is_complete_and_its_delay_leaves_time_to_act(kind: ConditionKind) -> None:
    """Rationalisation, ANSI/ISA-18.2-2016 as restated: delay must be far smaller than the time to respond."""
    record = RATIONALE[kind]
    assert record.kind is kind
    assert record.consequence.code
    assert record.consequence.sentence.endswith(".")
    assert record.first_action.sentence.endswith(".")
    assert record.on_delay_s < record.time_to_respond_s / 4


def test_one_code_says_one_thing() -> None:
    said: dict[str, str] = {}
    for record in RATIONALE.values():
        for code, sentence in (record.consequence, *record.steps):
            assert said.setdefault(code, sentence) == sentence


@pytest.mark.parametrize("kind", ConditionKind)
def test_first_rules_pause_at_most_a_quarter_of_an_hour(kind: ConditionKind) -> None:
    rules = first_rules(kind, interval_s=10)
    most_s = RATIONALE[kind].time_to_respond_s if rules.priority is Priority.NOTE else MOST_PAUSE_S
    assert 0 < rules.re_alarm_s <= most_s
    assert rules.max_gap_s == 30
    assert rules.is_reshelvable == (not rules.is_top)


def test_tank_and_site_may_have_their_own() -> None:
    rules = first_rules(ConditionKind.UNWATCHED, interval_s=10, priority=Priority.NOTE)
    assert rules.priority is Priority.NOTE
    assert Priority.URGENT.rank < rules.priority.rank
    assert with_delays(rules, on_delay_s=1, off_delay_s=2).off_delay_s == 2
