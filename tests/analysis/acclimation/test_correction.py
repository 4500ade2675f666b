"""Correcting a tank that is off its target: back at once to what they are used to, then at the species' rate."""

from __future__ import annotations

import json
import math

import numpy as np
import pytest

from analysis.acclimation.cautions import ALWAYS
from analysis.acclimation.correction import Correction, Urgency, corrected, correction_summary
from analysis.acclimation.follow import effect_of_pause
from analysis.acclimation.limits import default_limits
from analysis.acclimation.source import SourceWater
from analysis.animal import tables
from analysis.animal.osmoregulation import CohortState
from analysis.water.properties import Seawater
from tests.analysis.acclimation.tasks import SEA, TAP, task

SHRIMP = "penaeus-vannamei/pl10"


def correct(
    now: float, target: float, used_to: float, hours: float, *, animal: str = SHRIMP, **more: object
) -> Correction:
    of = task(animal, now, target, (TAP, SEA), used_to_salinity=used_to, **more)
    stage = tables.find(animal)
    limits = default_limits(stage, from_salinity=used_to, to_salinity=target, used_to_salinity=used_to)
    return corrected(of, stage, limits, hours_away=hours)


def test_after_a_short_fall_the_water_goes_back_at_once() -> None:
    found = correct(8.0, 31.0, 31.0, 0.5)
    assert found.back is not None
    assert found.is_feasible
    assert found.back.total_hours < 1.0
    assert found.acclimated_salinity == pytest.approx(31.0, abs=1.0)
    assert found.back.steps[-1].salinity == pytest.approx(found.acclimated_salinity, abs=0.5)
    assert "close the exchange" in found.first[0]


def test_after_a_day_away_the_way_back_is_short_and_the_rest_is_slow() -> None:
    short, long = correct(8.0, 31.0, 31.0, 1.0), correct(8.0, 31.0, 31.0, 30.0)
    assert long.acclimated_salinity < short.acclimated_salinity - 10.0
    assert long.back is not None
    assert long.onward is not None
    assert long.back.steps[-1].salinity == pytest.approx(long.acclimated_salinity, abs=0.5)
    assert long.onward.total_hours > 15.0  # 1 an hour, the general rule
    assert long.onward.steps[-1].salinity == pytest.approx(31.0, abs=0.25)
    assert long.onward.task.begins_at == long.back.ends_at


def test_the_way_back_keeps_the_limit_on_temperature() -> None:
    found = correct(8.0, 31.0, 31.0, 0.5, degC=22.0)  # the sea has 28 degC
    assert found.back is not None
    warmth = [22.0, *(step.temperature_degC for step in found.back.steps)]
    assert max(np.diff(warmth)) <= 1.0 + 1e-9


def test_where_the_target_lies_on_the_way_back_it_is_the_end() -> None:
    found = correct(15.0, 20.0, 31.0, 2.0)
    assert found.back is not None
    assert found.onward is None
    assert found.back.steps[-1].salinity == pytest.approx(20.0, abs=0.25)


def test_a_target_on_the_far_side_is_reached_at_the_species_rate_only() -> None:
    found = correct(26.0, 18.0, 31.0, 2.0)
    assert found.back is None
    assert found.onward is not None
    assert found.onward.limits[0].name == "salinity per hour"


def test_within_tolerance_nothing_is_moved() -> None:
    found = correct(30.9, 31.0, 31.0, 1.0)
    assert (found.back, found.onward) == (None, None)
    assert found.is_feasible
    assert found.urgency is Urgency.NOT_URGENT


def test_urgency_grows_with_the_fall() -> None:
    urgent = correct(0.5, 31.0, 31.0, 1.0)
    assert urgent.urgency is Urgency.NOW
    assert urgent.hours_to_danger <= 2.0
    mild = correct(29.0, 31.0, 31.0, 1.0)
    assert mild.urgency is Urgency.NOT_URGENT
    assert math.isinf(mild.hours_to_danger)
    assert not math.isnan(mild.stress_now)


def test_a_rise_asks_for_other_first_steps() -> None:
    assert "brine" in correct(38.0, 31.0, 31.0, 1.0).first[0]


def test_a_part_that_cannot_be_done_says_why() -> None:
    of = task(SHRIMP, 8.0, 31.0, (SourceWater("pond", 12.0, 28.0),), used_to_salinity=31.0)
    stage = tables.find(SHRIMP)
    found = corrected(of, stage, default_limits(stage, from_salinity=31.0, to_salinity=31.0), hours_away=1.0)
    assert not found.is_feasible
    assert "no source is salty enough" in found.reason


def test_a_followed_cohort_replaces_the_guess_from_hours_away() -> None:
    of = task(SHRIMP, 8.0, 31.0, (SEA,), used_to_salinity=31.0)
    stage = tables.find(SHRIMP)
    half = Seawater().osmolality_from_salinity(np.array([20.0]))
    cohort = CohortState.used_to(half, temperature_degC=np.array([28.0]))
    limits = default_limits(stage, from_salinity=31.0, to_salinity=31.0)
    found = corrected(of, stage, limits, hours_away=1.0, cohort=cohort)
    assert found.acclimated_salinity == pytest.approx(20.0, abs=0.01)


def test_holding_them_away_for_hours_does_not_help() -> None:
    """The reason to go back at once: what a pause in low water does is never better than the water they are used to."""
    of = task(SHRIMP, 1.0, 31.0, (SEA,), used_to_salinity=31.0)
    stage = tables.find(SHRIMP)
    home = CohortState.used_to(Seawater().osmolality_from_salinity(np.array([31.0])), temperature_degC=np.array([28.0]))
    low = effect_of_pause(of, stage, home, of.start, minutes=720.0)
    right = effect_of_pause(of, stage, home, of.target.__class__(31.0, 28.0), minutes=720.0)
    assert low.stress_after > right.stress_after + 20.0


def test_the_summary_is_json_and_carries_the_card() -> None:
    summary = json.loads(json.dumps(correction_summary(correct(8.0, 31.0, 31.0, 2.0)), allow_nan=False))
    assert {"steps", "total_hours", "water_used_L", "limits", "survival", "feasible", "reason"} <= set(summary)
    assert summary["hours_away"] == 2.0
    assert summary["acclimated_salinity"] == pytest.approx(28.6, abs=1.5)
    assert set(ALWAYS) <= set(summary["cautions"])
    starts = [step["start"] for step in summary["steps"]]
    assert starts == sorted(starts)
