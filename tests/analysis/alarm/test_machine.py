"""Stories of one alarm: delays on measured time, shelving, suppression, re-alarm."""

from __future__ import annotations

import pytest

from analysis.alarm.events import (
    Acknowledge,
    Observation,
    Recovering,
    RemoveFromService,
    Reset,
    ReturnToService,
    Shelve,
    ShelveOnce,
    Silence,
    Suppress,
    Tick,
    Unshelve,
    Unsuppress,
    Verdict,
)
from analysis.alarm.machine import due_at_us, step
from analysis.alarm.rules import AlarmRules
from analysis.alarm.state import NEVER_US, AlarmState, StateName
from analysis.alarm.transition import Happening, Refusal
from analysis.errors import InvalidInputError
from tests.analysis.alarm.stories import AT_ONCE, HOUR, MINUTE, SECOND, after, reached, readings, seen

DELAYED = AlarmRules(on_delay_s=60, off_delay_s=30, min_readings=2, max_gap_s=30)


def happenings(history: list) -> list[str]:
    return [entry.happening.value for entry in history]


def test_excursion_of_70_s_is_raised_at_60_s() -> None:
    """ALM03: OPC 10000-9 B.1.5, the limit must be exceeded for the whole on-delay of 60 s."""
    state, history = readings(AlarmState(), DELAYED, "TTTTTTTT")
    assert [entry.measured_at_us for entry in history] == [60 * SECOND]
    assert state.is_active


def test_excursion_of_50_s_is_not_raised() -> None:
    state, history = readings(AlarmState(), DELAYED, "TTTTTTF")
    assert not history
    assert state == AlarmState(judged_at_us=60 * SECOND)


def test_short_return_within_the_off_delay_is_no_new_alarm() -> None:
    """ALM04: OPC 10000-9 B.1.5, off-delay 30 s, back for 20 s, then beyond again."""
    state, history = readings(AlarmState(), DELAYED, "TTTTTTT" + "FFF" + "TTT")
    assert happenings(history) == ["raised"]
    assert state.name is StateName.UNACKNOWLEDGED


def test_return_for_the_whole_off_delay_returns() -> None:
    state, history = readings(AlarmState(), DELAYED, "TTTTTTT" + "FFFF")
    assert happenings(history) == ["raised", "returned"]
    assert state.name is StateName.RETURNED_UNACKNOWLEDGED


def test_deadband_holds_the_alarm_and_starts_none() -> None:
    state, history = readings(AlarmState(), DELAYED, "BBBBBBBBB" + "TTTTTTT" + "BBBBBBBBB")
    assert happenings(history) == ["raised"]
    assert state.is_active


def test_one_reading_never_raises_however_long_the_interval() -> None:
    state, history = readings(AlarmState(), AlarmRules(on_delay_s=0, max_gap_s=1800), "TF", interval_s=600)
    assert not history
    assert not state.is_active


def test_two_readings_raise_where_the_interval_is_longer_than_the_delay() -> None:
    rules = AlarmRules(on_delay_s=60, max_gap_s=1800)
    _, history = readings(AlarmState(), rules, "TT", interval_s=600)
    assert [entry.measured_at_us for entry in history] == [600 * SECOND]


def test_a_reading_a_moment_early_does_not_cost_another_interval() -> None:
    rules = AlarmRules(on_delay_s=60, max_gap_s=30, jitter_s=2.5)
    story = [(seen(Verdict.TRUE, at), round(at * SECOND)) for at in (0.2, 10, 20.1, 30, 40, 50, 59.9)]
    assert after(AlarmState(), rules, story)[0].is_active
    assert not after(AlarmState(), DELAYED, story)[0].is_active


def test_gap_in_the_delay_is_not_still_exceeded() -> None:
    """A reading before and one after a silence prove nothing about the time between."""
    state, history = readings(AlarmState(), DELAYED, "TT" + "......" + "T")
    assert not history
    assert state.pending_since_us == 80 * SECOND


def test_gap_in_the_off_delay_is_not_already_back() -> None:
    state, history = readings(AlarmState(), DELAYED, "TTTTTTT" + "FF" + "......" + "F")
    assert happenings(history) == ["raised"]
    assert state.is_active


def test_unusable_readings_neither_break_nor_feed_a_run() -> None:
    """A sensor that fails every other reading must not hide an alarm."""
    _, history = readings(AlarmState(), DELAYED, "TUTUTUTU")
    assert [entry.measured_at_us for entry in history] == [60 * SECOND]
    state, history = readings(AlarmState(), DELAYED, "TUUUUUUUUU")
    assert not history
    assert state.pending_readings == 1


def test_missing_data_never_return_an_alarm_to_normal() -> None:
    state, history = readings(AlarmState(), DELAYED, "TTTTTTT" + "U" * 50)
    assert happenings(history) == ["raised"]
    assert state.is_active


def test_the_same_reading_seen_twice_counts_once() -> None:
    rules = AlarmRules(on_delay_s=0, min_readings=2, max_gap_s=100)
    twice = [Observation(Verdict.TRUE, at * SECOND, reading_at_us=5 * SECOND) for at in (5, 6, 7)]
    state, history = after(AlarmState(), rules, [(event, 7 * SECOND) for event in twice])
    assert not history
    assert state.pending_hits == 1


def test_late_observations_neither_raise_nor_return() -> None:
    state, _ = readings(AlarmState(), DELAYED, "TTTTTTT")
    late, history = after(state, DELAYED, [(seen(Verdict.FALSE, at), HOUR) for at in (1, 20, 40, 59)])
    assert not history
    assert late == state


TOLERANT = AlarmRules(on_delay_s=60, max_gap_s=30, min_hit_percent=50)


@pytest.mark.parametrize(
    ("story", "raised_at_s"),
    [
        ("TTTTTTTT", 60),  # a step is raised when the on-delay is over
        ("TBTBTBT", 60),  # half of the readings beyond, the others in the deadband
        ("NNNNNTNTTT", 90),  # creeping over the limit: near it for the whole on-delay, half of it beyond
        ("TBBBBTTTT", 80),
    ],
)
def test_noise_on_the_limit_is_tolerated_where_the_rules_say_so(story: str, raised_at_s: int) -> None:
    _, history = readings(AlarmState(), TOLERANT, story)
    assert [entry.measured_at_us for entry in history] == [raised_at_s * SECOND]


@pytest.mark.parametrize(
    "story", ["TTTFTTTFTTTF", "TBBBBBBBBT", "NNNNNNNNNNNN", "BBBBBBTTT", "NBBBBBBBBB", "TT......TT"]
)
def test_tolerance_raises_nothing_without_the_whole_delay_and_half_of_the_readings(story: str) -> None:
    assert not readings(AlarmState(), TOLERANT, story)[1]


@pytest.mark.parametrize("percent", [50, 100])
@pytest.mark.parametrize("interval_s", [1, 7, 10, 60, 90, 600])
@pytest.mark.parametrize("on_delay_s", [0, 20, 60])
def test_whatever_stays_beyond_is_raised_within_the_delay_and_two_readings(
    percent: int, interval_s: int, on_delay_s: int
) -> None:
    rules = AlarmRules(on_delay_s=on_delay_s, max_gap_s=3 * interval_s, min_hit_percent=percent)
    _, (raised,) = readings(AlarmState(), rules, "T" * (100 if interval_s == 1 else 12), interval_s=interval_s)
    wanted = max(-(-on_delay_s // interval_s), 1) * interval_s
    assert raised.measured_at_us == wanted * SECOND


def test_without_tolerance_every_reading_inside_starts_the_delay_anew() -> None:
    assert not readings(AlarmState(), DELAYED, "TBTBTBTNTTTTTT")[1]


def test_a_run_that_only_lingers_in_the_deadband_is_forgotten() -> None:
    assert not readings(AlarmState(), TOLERANT, "TBBBBBBB")[0].has_pending


def test_standing_alarm_is_the_same_object_at_every_further_reading() -> None:
    state, _ = reached(StateName.ACKNOWLEDGED)
    for verdict in (Verdict.TRUE, Verdict.BETWEEN, Verdict.UNKNOWN):
        assert step(state, AT_ONCE, seen(verdict, 5), 5 * SECOND)[0] is state


def test_new_rise_before_the_acknowledgement_is_the_same_occurrence() -> None:
    state, history = readings(AlarmState(), AT_ONCE, "TFTFT")
    assert [entry.occurrence for entry in history] == [1] * 5
    assert state.rise_count == 3
    state, _ = step(state, AT_ONCE, Acknowledge("Ana", occurrence=1), MINUTE)
    assert state.name is StateName.ACKNOWLEDGED


def test_new_rise_after_the_acknowledgement_is_a_new_occurrence() -> None:
    state, _ = reached(StateName.RETURNED_UNACKNOWLEDGED)
    state, _ = after(state, AT_ONCE, [(Acknowledge("Ana"), 0), (seen(Verdict.TRUE, 5), 5 * SECOND)])
    assert state.occurrence == 2
    _, (entry,) = step(state, AT_ONCE, Acknowledge("Ana", occurrence=1), MINUTE)
    assert entry.refusal is Refusal.OTHER_OCCURRENCE


def test_silence_is_not_an_acknowledgement() -> None:
    state, rules = reached(StateName.UNACKNOWLEDGED)
    state, _ = step(state, rules, Silence("Ana"), 0)
    assert state.is_silenced
    assert state.name is StateName.UNACKNOWLEDGED


def test_re_alarm_comes_at_its_time_and_is_counted() -> None:
    state, rules = reached(StateName.ACKNOWLEDGED)
    due_us = due_at_us(state, rules)
    assert step(state, rules, Tick(), due_us - 1)[0] is state
    state, (entry,) = step(state, rules, Tick(), due_us + HOUR)
    assert (entry.happening, entry.at_us, entry.is_announced) == (Happening.RE_ALARMED, due_us, True)
    assert state.re_alarm_count == 1
    assert due_at_us(state, rules) == NEVER_US


def test_turning_back_puts_the_re_alarm_off_once() -> None:
    state, rules = reached(StateName.ACKNOWLEDGED)
    state, _ = step(state, rules, Recovering(why="rising"), 10 * MINUTE)
    assert due_at_us(state, rules) == 25 * MINUTE
    assert step(state, rules, Tick(), 25 * MINUTE)[0].name is StateName.UNACKNOWLEDGED


def test_shelving_ends_by_itself_and_announces_what_is_still_wrong() -> None:
    state, rules = reached(StateName.ACKNOWLEDGED)
    state, _ = step(state, rules, Shelve("Ana", "cleaning", HOUR), MINUTE)
    state, (entry,) = step(state, rules, seen(Verdict.TRUE, 2 * 3600), 2 * HOUR)
    assert (entry.happening, entry.at_us, entry.is_announced) == (Happening.SHELVING_ENDED, HOUR, True)
    assert state.name is StateName.UNACKNOWLEDGED


@pytest.mark.parametrize(
    ("event", "refusal"),
    [
        (Shelve("Ana", "x", 9 * HOUR), Refusal.LONGER_THAN_ALLOWED),
        (Shelve("Ana", "x", -1), Refusal.ENDS_IN_THE_PAST),
        (Shelve("Ana", " ", HOUR), Refusal.WITHOUT_REASON),
    ],
)
def test_shelving_out_of_bounds_is_refused(event: Shelve, refusal: Refusal) -> None:
    state, rules = reached(StateName.UNACKNOWLEDGED)
    result, (entry,) = step(state, rules, event, 0)
    assert entry.refusal is refusal
    assert result == state


def test_top_priority_is_not_shelved_anew_in_silence() -> None:
    top = AlarmRules(is_reshelvable=False, max_shelve_s=900)
    state, _ = step(AlarmState(), top, ShelveOnce("Ana", "x"), 0)
    _, (entry,) = step(state, top, Shelve("Ana", "x", MINUTE), SECOND)
    assert entry.refusal is Refusal.ALREADY_SHELVED
    _, (entry,) = step(AlarmState(), AlarmRules(max_shelve_s=0), ShelveOnce("Ana", "x"), 0)
    assert entry.refusal is Refusal.CANNOT_BE_SHELVED


def test_shelved_once_ends_at_the_longest_time_too() -> None:
    state, _ = step(AlarmState(), AT_ONCE, ShelveOnce("Ana", "x"), 0)
    assert step(state, AT_ONCE, Tick(), 8 * HOUR)[0].name is StateName.NORMAL


@pytest.mark.parametrize(
    ("hide", "show"),
    [
        (Shelve("Ana", "x", HOUR), Unshelve("Ana")),
        (Suppress("tank empty"), Unsuppress("tank empty")),
        (RemoveFromService("Ana", "x"), ReturnToService("Ana")),
    ],
)
def test_what_nobody_had_acknowledged_waits_again_when_it_is_shown(hide, show) -> None:
    """Independent flags (OPC 10000-9, 5.8.2): hiding is no acknowledgement."""
    state, rules = reached(StateName.UNACKNOWLEDGED)
    state, _ = after(state, rules, [(hide, 0), (seen(Verdict.FALSE, 60), MINUTE), (show, 2 * MINUTE)])
    assert state.name is StateName.RETURNED_UNACKNOWLEDGED


def test_two_rules_suppress_until_both_have_ended() -> None:
    state, rules = reached(StateName.NORMAL)
    state, _ = after(state, rules, [(Suppress("a"), 0), (Suppress("b"), 0), (seen(Verdict.TRUE, 1), SECOND)])
    state, (entry,) = step(state, rules, Unsuppress("a"), MINUTE)
    assert (state.name, entry.is_announced) == (StateName.SUPPRESSED_BY_DESIGN, False)
    state, (entry,) = step(state, rules, Unsuppress("b"), MINUTE)
    assert (state.name, entry.is_announced) == (StateName.UNACKNOWLEDGED, True)


def test_latch_is_released_only_by_a_person_and_only_when_back() -> None:
    state, rules = reached(StateName.LATCHED_ACKNOWLEDGED)
    assert step(state, rules, Tick(), 100 * HOUR)[0] is state
    assert step(state, rules, Reset("Ana"), MINUTE)[0].name is StateName.NORMAL


@pytest.mark.parametrize(
    "bad", [{"on_delay_s": -1}, {"max_gap_s": float("nan")}, {"min_readings": 0}, {"min_hit_percent": 0}]
)
def test_impossible_rules_are_refused(bad: dict[str, float]) -> None:
    with pytest.raises(InvalidInputError):
        AlarmRules(**bad)
