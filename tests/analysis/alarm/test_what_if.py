"""Past data against proposed limits: the same machine as live."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from analysis.alarm.events import Observation, Verdict
from analysis.alarm.excursions import excursions
from analysis.alarm.limits import is_usable, low_verdict
from analysis.alarm.machine import step
from analysis.alarm.rules import AlarmRules
from analysis.alarm.state import AlarmState
from analysis.alarm.what_if import ProposedLimit, WhatIf, replayed
from analysis.errors import InvalidInputError
from tests.analysis.alarm.stories import SECOND

RULES = AlarmRules(on_delay_s=30, off_delay_s=30, max_gap_s=35)


def replay(values: list[float], limit: float = 29.0, *, reference: float = 29.0, least_s: float = 0.0) -> WhatIf:
    return replayed(
        np.array(values),
        measured_at_us=1000 * SECOND + np.arange(len(values)) * 10 * SECOND,
        quality=np.ones(len(values), dtype=np.uint8),
        proposed=ProposedLimit(limit, 0.4, is_high=False, rules=RULES),
        reference_limit=reference,
        reference_min_duration_s=least_s,
    )


def test_alarms_with_time_length_and_worst_value() -> None:
    found = replay([31.0] * 3 + [28.0, 27.0, 26.5, 27.0, 28.0] + [31.0] * 5)
    (alarm,) = found.alarms
    assert (alarm.raised_at_us, alarm.returned_at_us, alarm.worst) == (1060 * SECOND, 1110 * SECOND, 26.5)
    assert (found.total_s, found.longest_s, found.is_chattering) == (50.0, 50.0, False)
    assert found.missed == ()
    assert [lead for _, lead in found.warned] == [-30.0]


def test_what_a_lower_limit_would_have_missed_and_how_early_a_higher_one_warns() -> None:
    past = [31.0] * 3 + [30.0, 29.5, 29.2, 28.9, 28.5, 28.4, 28.5, 28.6, 28.9] + [31.0] * 5
    assert len(replay(past, 28.0).missed) == 1
    assert replay(past, 28.0).count == 0
    higher = replay(past, 30.5)
    assert higher.missed == ()
    assert higher.warned[0][1] == 0.0


def test_an_alarm_that_still_holds_at_the_end() -> None:
    found = replay([31.0] + [20.0] * 6)
    assert found.alarms[0].returned_at_us is None
    assert found.total_s == 20.0


def test_excursions_end_at_gaps_and_ignore_what_is_unusable() -> None:
    values = np.array([31.0, 28, 27, np.nan, 28, 31, 28, 28])
    times = np.array([0, 10, 20, 30, 40, 50, 60, 200]) * SECOND
    found = excursions(values, measured_at_us=times, usable=~np.isnan(values), limit=29.0, is_high=False, max_gap_s=35)
    assert [(item.begun_at_us // SECOND, item.ended_at_us // SECOND, item.readings) for item in found] == [
        (10, 40, 3),
        (60, 60, 1),
        (200, 200, 1),
    ]
    assert found[0].worst == 27.0
    high = excursions(-values, measured_at_us=times, usable=~np.isnan(values), limit=-29.0, is_high=True, max_gap_s=35)
    assert [item.worst for item in high] == [-27.0, -28.0, -28.0]
    assert (
        excursions(values[:0], measured_at_us=times[:0], usable=values[:0] > 0, limit=1, is_high=True, max_gap_s=1)
        == ()
    )


@given(
    st.lists(st.sampled_from([31.0, 28.0, 28.0, 29.2, 29.05, float("nan")]), min_size=1, max_size=80),
    st.lists(st.sampled_from([10, 10, 10, 40]), min_size=80, max_size=80),
    st.sampled_from([50, 100]),
)
def test_leaping_gives_what_a_step_for_every_reading_gives(values: list[float], waits: list[int], percent: int) -> None:
    value = np.array(values)
    times = 1000 * SECOND + np.cumsum(waits[: value.size]) * SECOND
    quality = np.ones(value.size, dtype=np.uint8)
    rules = replace(RULES, min_hit_percent=percent)
    proposed = ProposedLimit(29.0, 0.4, is_high=False, rules=rules)
    found = replayed(value, measured_at_us=times, quality=quality, proposed=proposed, reference_limit=29.0)
    verdicts = low_verdict(value, limit=29.0, deadband=0.4, usable=is_usable(value, quality=quality))
    state, raised, returned = AlarmState(), [], []
    for verdict, at_us in zip(verdicts.tolist(), times.tolist(), strict=True):
        state, entries = step(state, rules, Observation(Verdict(verdict), at_us), at_us)
        for entry in entries:
            (raised if entry.is_announced else returned).append(at_us)
    assert [alarm.raised_at_us for alarm in found.alarms] == raised
    assert [alarm.returned_at_us for alarm in found.alarms if alarm.returned_at_us] == returned


def test_times_that_fall_are_refused() -> None:
    with pytest.raises(InvalidInputError, match="row 1"):
        replayed(
            np.ones(2),
            measured_at_us=np.array([2, 1]),
            quality=np.ones(2, dtype=np.uint8),
            proposed=ProposedLimit(1.0, 0.1, is_high=True, rules=RULES),
            reference_limit=1.0,
        )
