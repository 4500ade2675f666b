"""Following: where a plan stands, what is recorded, and that planning anew brings a disturbed tank home."""

from __future__ import annotations

import json
import math
from dataclasses import replace
from datetime import datetime, timedelta

import numpy as np
import pytest

from analysis.acclimation.follow import (
    Followed,
    Progress,
    band_at,
    effect_of_pause,
    judged,
    observed,
    paused,
    planned_anew,
    resumed,
    started,
    step_done,
)
from analysis.acclimation.journey import home_state
from analysis.acclimation.plan import Plan
from analysis.acclimation.published import rates
from analysis.acclimation.record import from_record, to_record
from analysis.acclimation.source import Release, SourceWater
from analysis.acclimation.task import AcclimationTask, Method, Water
from analysis.animal import tables
from analysis.errors import InvalidInputError
from analysis.tank import Exchange, Inflow, step, tank_water
from tests.analysis.acclimation.replay import _largest_change, _rate_share
from tests.analysis.acclimation.tasks import EIGHT, LISBON, limits, plan, say, task

SHRIMP = "penaeus-vannamei/pl10"
RELEASED = SourceWater("tap", 0.0, 28.0, release=Release("Ines", EIGHT + timedelta(days=5), chlorine_mg_L=0.0))
SHORT = task(SHRIMP, 20.0, 12.0, (RELEASED,))


def begun(found: Plan, **more: object) -> Followed:
    return started(found, by="Marta", at=EIGHT, agreed=found.needs_yes, **more)  # type: ignore[arg-type]


def at(minutes: float) -> datetime:
    return EIGHT + timedelta(minutes=minutes)


@pytest.fixture(scope="module")
def short() -> Plan:
    return plan(SHORT)


def test_a_start_needs_a_name_a_feasible_plan_each_yes_and_released_water(short: Plan) -> None:
    assert begun(short).record[0].what == "started"
    assert "agreed" in begun(short).record[0].words
    with pytest.raises(InvalidInputError, match="name"):
        started(short, by=" ", at=EIGHT, agreed=short.needs_yes)
    with pytest.raises(InvalidInputError, match="not agreed to"):
        started(short, by="Marta", at=EIGHT)
    with pytest.raises(InvalidInputError, match="feasible"):
        begun(plan(task(SHRIMP, 20.0, 2.0, (SourceWater("pond", 6.0, 28.0),))))
    with pytest.raises(InvalidInputError, match="nobody has released"):
        begun(plan(task(SHRIMP, 20.0, 12.0)))
    with pytest.raises(InvalidInputError, match="ended"):
        started(short, by="Marta", at=EIGHT + timedelta(days=9), agreed=short.needs_yes)


def test_water_inside_the_band_of_the_plan_is_on_plan(short: Plan) -> None:
    state = observed(begun(short), Water(20.0, 28.0), at=at(0))
    assert state.progress is Progress.ON_PLAN
    state = step_done(state, by="Rui", at=at(6))
    first = short.steps[0]
    state = observed(state, Water(first.salinity, 28.0), at=at(8))
    assert state.progress is Progress.ON_PLAN
    assert state.next_step == 2
    assert "drained" in state.record[-1].words


def test_water_that_fell_too_far_is_ahead_and_too_little_is_behind(short: Plan) -> None:
    state = step_done(begun(short), by="Rui", at=at(6))
    assert observed(state, Water(short.steps[0].salinity_low - 1.5, 28.0), at=at(8)).progress is Progress.AHEAD
    stuck = observed(state, Water(20.0, 28.0), at=at(8))
    assert stuck.progress is Progress.BEHIND
    assert "the plan expects" in stuck.why


def test_a_step_later_than_allowed_is_behind_and_asks_to_plan_anew(short: Plan) -> None:
    state = observed(begun(short), Water(20.0, 28.0), at=at(0))
    assert judged(state, at=at(20)).progress is Progress.ON_PLAN
    late = judged(state, at=at(40))
    assert late.progress is Progress.BEHIND
    assert "plan anew" in late.why


def test_the_alarm_band_follows_the_plan(short: Plan) -> None:
    state = begun(short)
    before = band_at(state, at=EIGHT - timedelta(minutes=1))
    assert before.low == pytest.approx(19.7)
    assert before.high == pytest.approx(20.3)
    during = band_at(state, at=at(2))
    assert during.low < short.steps[0].salinity < during.high
    assert during.high == pytest.approx(20.3)
    after = band_at(step_done(state, by="Rui", at=at(5)), at=at(10))
    assert after.high == pytest.approx(short.steps[0].salinity_high + 0.3)


def test_a_flow_through_plan_halts_without_an_agreeing_top_and_bottom() -> None:
    found = plan(task(SHRIMP, 20.0, 16.0, (RELEASED,), method=Method.FLOW))
    state = begun(found)
    assert judged(state, at=at(1)).progress is Progress.HALTED
    agreeing = observed(state, Water(20.0, 28.0), at=at(1), top_salinity=19.9, bottom_salinity=20.1)
    assert agreeing.progress is Progress.ON_PLAN
    layered = observed(agreeing, Water(19.5, 28.0), at=at(5), top_salinity=17.0, bottom_salinity=20.1)
    assert layered.progress is Progress.HALTED
    assert "stir" in layered.why
    assert layered.record[-1].by == "monitor"
    assert judged(agreeing, at=at(90)).progress is Progress.HALTED  # the reading has grown old
    with pytest.raises(InvalidInputError, match="halted"):
        step_done(layered, by="Rui", at=at(6))


def test_a_pause_stops_the_plan_until_it_is_made_anew(short: Plan) -> None:
    state = paused(observed(begun(short), Water(20.0, 28.0), at=at(0)), by="Rui", at=at(1), reason="feeding")
    assert judged(state, at=at(200)).progress is Progress.PAUSED
    with pytest.raises(InvalidInputError, match="paused"):
        step_done(state, by="Rui", at=at(2))
    anew = planned_anew(state, tables.find(SHRIMP), limits(SHORT), at=at(60))
    assert anew.task.begins_at == at(60)
    assert anew.task.home_salinity == 20.0
    going = resumed(state, anew, by="Marta", at=at(60))
    assert going.progress is Progress.ON_PLAN
    assert [done.what for done in going.record] == ["started", "paused", "planned anew"]
    with pytest.raises(InvalidInputError, match="name and a reason"):
        paused(state, by="Rui", at=at(1), reason="")


def test_an_hours_pause_is_harmless_within_tolerance_and_not_where_exposure_grows() -> None:
    stage = tables.find(SHRIMP)
    mild = effect_of_pause(SHORT, stage, home_state(SHORT), Water(18.0, 28.0))
    assert mild.is_harmless
    deadly = effect_of_pause(SHORT, stage, home_state(SHORT), Water(0.5, 28.0), minutes=24 * 60.0)
    assert not deadly.is_harmless
    assert deadly.stress_after > deadly.stress_now


def test_the_new_plan_knows_what_the_last_hour_has_used(short: Plan) -> None:
    state = begun(short)
    for minute, salinity in ((0, 20.0), (10, 17.0), (15, 15.0)):  # a quarter has gone in a quarter of an hour
        state = observed(state, Water(salinity, 28.0), at=at(minute))
    anew = planned_anew(state, tables.find(SHRIMP), limits(SHORT), at=at(20))
    assert anew.is_feasible
    first = anew.steps[0]
    assert at(20) + timedelta(minutes=first.minute) >= at(60)


def test_an_old_reading_that_comes_late_changes_nothing(short: Plan) -> None:
    state = observed(begun(short), Water(20.0, 28.0), at=at(5))
    assert observed(state, Water(3.0, 28.0), at=at(2)) == state


def test_a_followed_plan_survives_the_way_through_json(short: Plan) -> None:
    state = step_done(observed(begun(short), Water(20.0, 28.0), at=at(0)), by="Rui", at=at(6))
    record = json.loads(json.dumps(to_record(state), allow_nan=False))
    again = from_record(Followed, record, zone=LISBON)
    assert to_record(again) == record
    assert to_record(judged(again, at=at(70))) == to_record(judged(state, at=at(70)))


def test_the_last_step_and_the_right_water_finish_it(short: Plan) -> None:
    state = begun(short)
    for planned in short.steps:
        state = step_done(state, by="Rui", at=planned.start + timedelta(minutes=5))
        state = observed(state, Water(planned.salinity, 28.0), at=planned.start + timedelta(minutes=6))
    assert state.progress is Progress.FINISHED
    assert state.due is None


class Hatchery:
    """A simulated tank whose volume and source are not what the plan takes them to be, read by a noisy sensor."""

    def __init__(self, of: AcclimationTask, *, volume_factor: float, source_salinity: float, seed: int) -> None:
        self.water = tank_water(
            of.vessel.volume_L * volume_factor,
            absolute_salinity_g_kg=of.start.salinity * 35.16504 / 35.0,
            temperature_degC=of.start.temperature_degC,
        )
        self.source = source_salinity * 35.16504 / 35.0
        self.chance = np.random.default_rng(seed)
        self.salinity: list[float] = []

    def read(self) -> Water:
        return Water(max(0.0, float(self.water.practical_salinity) + self.chance.normal(0.0, 0.05)), 28.0)

    def minute(self, *, outflow_L: float = 0.0, inflow_L: float = 0.0) -> None:
        exchange = Exchange((Inflow(60.0 * inflow_L, self.source, 28.0),), outflow_L_h=60.0 * outflow_L)
        path = step(self.water, exchange, duration_s=np.arange(1.0, 61.0))
        self.salinity += path.practical_salinity.tolist()
        self.water = step(self.water, exchange, duration_s=60.0)


def driven_home(of: AcclimationTask, hatchery: Hatchery, *, lateness: tuple[float, ...], hours: float) -> Followed:
    """Drive the tank by the plan; plan anew whenever it is ahead or behind."""
    stage, kept = tables.find(of.animal), limits(of)
    state = begun(plan(of))
    lates = iter(lateness * 50)
    late = next(lates)
    doing: list[tuple[float, float]] = []
    for minute in range(int(60 * hours)):
        now = at(minute)
        if doing:
            drain, fill = doing.pop(0)
            hatchery.minute(outflow_L=drain, inflow_L=fill)
            if not doing:
                state = step_done(state, by="Rui", at=now)
        else:
            hatchery.minute()
        state = observed(state, hatchery.read(), at=now + timedelta(seconds=59))
        if state.progress is Progress.FINISHED:
            return state
        if doing:
            continue
        if state.progress in {Progress.AHEAD, Progress.BEHIND} or state.due is None:
            anew = planned_anew(state, stage, kept, at=now + timedelta(minutes=1))
            assert anew.is_feasible, anew.reason
            state = resumed(state, anew, by="Marta", at=now + timedelta(minutes=1))
            late = next(lates)
        due = state.due
        if due is not None and now >= due.start + timedelta(minutes=late):
            litres = sum(due.add.values())
            doing = [(due.drain_L / 2.0, 0.0)] * 2 + [(0.0, litres / 3.0)] * 3
            late = next(lates)
    return state


@pytest.mark.parametrize(
    ("volume_factor", "source_salinity", "lateness"),
    [
        (0.93, 3.0, (0.0, 10.0, 35.0)),
        pytest.param(1.09, 1.0, (20.0, 0.0), marks=pytest.mark.slow),
        pytest.param(0.91, 4.0, (40.0, 5.0), marks=pytest.mark.slow),
    ],
)
def test_planning_anew_brings_a_disturbed_tank_home_inside_the_limits(
    volume_factor: float, source_salinity: float, lateness: tuple[float, ...]
) -> None:
    of = replace(SHORT, target=Water(10.0))
    hatchery = Hatchery(of, volume_factor=volume_factor, source_salinity=source_salinity, seed=11)
    state = driven_home(of, hatchery, lateness=lateness, hours=14.0)
    assert state.progress is Progress.FINISHED, (state.progress, state.why)
    assert abs(float(hatchery.water.practical_salinity) - 10.0) <= 0.7
    track = np.array(hatchery.salinity)
    share = _rate_share(track, rates(SHRIMP, direction="down", per="h"), 3600)
    (allowed,) = [
        limit.down.bands[0].allowed for limit in limits(of).rolling if limit.limit.name == "salinity per step"
    ]
    stepped = _largest_change(track, 600) / allowed
    anew = sum(done.what == "planned anew" for done in state.record)
    say(
        f"volume x{volume_factor}, source {source_salinity}: home in {track.size / 3600:.1f} h, planned anew {anew} times,"
    )
    say(f"  hour used to {share:.3f}, step to {stepped:.3f}")
    assert share <= 1.0
    assert stepped <= 1.0
    assert not math.isnan(share)
