"""A plan against live readings, on a worker without a broker: bands, alarms, pauses, the end, and a restart in the middle."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest

from analysis.acclimation.follow import LEAST_BAND, Progress
from analysis.acclimation.record import to_record
from analysis.acclimation.task import Method
from tests.harness.hatchery import START_US, Bench
from tests.ingest.plan_work import (
    do,
    follow_down,
    plan,
    record_of,
    start,
    text,
    the_plan,
    water_until,
)

DOWN = plan()


@pytest.fixture
def bench(tmp_path: Path) -> Iterator[Bench]:
    with Bench(tmp_path, text(), now_us=START_US) as bench:
        water_until(bench, 0.0, 20.0)
        yield bench


def band(bench: Bench) -> tuple[float, float]:
    """Return between which salinities the chain holds t0."""
    salinity = bench.worker.plant.tanks.salinity
    return float(salinity.low[0]), float(salinity.high[0])


def raised(bench: Bench) -> set[str]:
    """Return every condition that was ever raised."""
    return {event.body["condition"] for _, event in bench.queries.events(kind_prefix="alarm.raised")}


def test_following_the_plan_down_raises_nothing_and_the_band_goes_along(bench: Bench) -> None:
    assert band(bench) == pytest.approx((19.0, 21.0))
    start(bench, DOWN)
    low, high = band(bench)
    assert high == pytest.approx(20.0 + LEAST_BAND)
    follow_down(bench, DOWN, steps=4)
    assert raised(bench) == set()
    assert the_plan(bench).state.progress is Progress.ON_PLAN
    done = DOWN.steps[3]
    assert done.salinity < 19.0, "beyond the set point's band"
    low, high = band(bench)
    assert low <= done.salinity_low - LEAST_BAND + 1e-9
    assert high >= done.salinity_high + LEAST_BAND - 1e-9


def test_the_same_water_without_a_plan_is_an_alarm(bench: Bench) -> None:
    water_until(bench, 10.0, DOWN.steps[3].salinity)
    assert raised(bench) == {"salinity_low"}


def test_water_that_leaves_the_plan_raises_its_alarm_and_back_on_plan_it_clears(bench: Bench) -> None:
    start(bench, DOWN)
    follow_down(bench, DOWN, steps=2)
    here = DOWN.steps[1].minute + DOWN.steps[1].duration_min
    salinity = DOWN.steps[1].salinity
    water_until(bench, here + 10.0, salinity - 6.0)
    assert bench.alarm("t0", "off_plan") == "unacknowledged"
    assert the_plan(bench).state.progress is Progress.AHEAD
    (_, event) = next(
        e for e in bench.queries.events(kind_prefix="alarm.raised") if e[1].body["condition"] == "off_plan"
    )
    assert event.body["value"] == pytest.approx(salinity - 6.0, abs=1e-6)
    assert event.body["limit"] == pytest.approx(band(bench)[0], abs=0.5)
    water_until(bench, here + 15.0, salinity)
    assert bench.alarm("t0", "off_plan") in {"returned_unacknowledged", "normal"}


def test_a_paused_plan_is_not_behind_and_as_it_was_it_goes_on(bench: Bench) -> None:
    start(bench, DOWN)
    follow_down(bench, DOWN, steps=2)
    step = DOWN.steps[1]
    do(bench, "plan.pause", reason="power cut")
    water_until(bench, step.minute + step.duration_min + 90.0, step.salinity)
    assert the_plan(bench).state.progress is Progress.PAUSED
    do(bench, "plan.resume")
    bench.clock.advance(5)
    bench.tick()
    assert the_plan(bench).state.progress is Progress.BEHIND, "its clock times are past: it asks for another plan"
    assert raised(bench) == set(), "a late step is no alarm while the water is where it should be"


def test_a_plan_that_comes_to_its_target_ends_and_the_tank_is_kept_there(tmp_path: Path) -> None:
    short = plan(20.0, 18.0)
    with Bench(tmp_path, text(), now_us=START_US) as bench:
        water_until(bench, 0.0, 20.0)
        start(bench, short)
        follow_down(bench, short, steps=len(short.steps))
        assert the_plan(bench).ended_at is not None
        assert record_of(bench)[-1] == ("finished", "monitor")
        (_, event) = bench.queries.events(kind_prefix="plan.ended")[0]
        assert (event.actor, event.body["has_arrived"]) == ("worker", True)
        kept = band(bench)
        assert (kept[0] + kept[1]) / 2 == pytest.approx(18.0)
        water_until(bench, 40.0, 18.0)
        bench.restart()
        assert band(bench) == kept
        assert raised(bench) == set()
        # The site file says otherwise, and then the old thing again: the plan has no say any more.
        for set_point, middle in ((15.0, 15.0), (20.0, 20.0)):
            bench.site_file.write_text(text(set_point=set_point), encoding="utf-8")
            bench.worker.reload()
            bench.clock.advance(5)
            bench.tick()
            assert sum(band(bench)) / 2 == pytest.approx(middle)


def test_a_plan_that_is_broken_off_gives_the_set_point_back(bench: Bench) -> None:
    before = band(bench)
    start(bench, DOWN)
    follow_down(bench, DOWN, steps=3)
    assert band(bench) != before
    do(bench, "plan.end", actor="Bea", role="biologist", reason="sold")
    assert band(bench) == before


def test_a_restart_in_the_middle_changes_nothing(bench: Bench) -> None:
    start(bench, DOWN)
    follow_down(bench, DOWN, steps=2)
    bench.tick()
    plant = bench.worker.plant
    bench.restart()
    bench.clock.advance(5)
    bench.tick()
    again = bench.worker.plant
    assert to_record(again.plans["t0"].state) == to_record(plant.plans["t0"].state)
    assert (again.tanks.salinity.low == plant.tanks.salinity.low).all()
    assert (again.tanks.salinity.high == plant.tanks.salinity.high).all()
    rest = DOWN.steps[2]
    water_until(bench, rest.minute + rest.duration_min, DOWN.steps[1].salinity)
    assert do(bench, "plan.step_done", step=3).outcome == "applied"
    assert raised(bench) == set()


def test_an_alarm_of_the_plan_outlives_a_restart(bench: Bench) -> None:
    start(bench, DOWN)
    water_until(bench, 5.0, 14.0)
    assert bench.alarm("t0", "off_plan") == "unacknowledged"
    bench.restart()
    assert bench.act("alarm.acknowledge", "t0", "off_plan").outcome == "applied"
    assert [e.body["condition"] for _, e in bench.queries.events(kind_prefix="alarm.raised")].count("off_plan") == 1


def test_a_flow_through_plan_is_followed_only_while_top_and_bottom_agree(tmp_path: Path) -> None:
    flow = plan(20.0, 15.0, method=Method.FLOW)
    with Bench(tmp_path, text(sensors=2, sensors_a_tank=2), now_us=START_US) as bench:
        water_until(bench, 0.0, 20.0, sensors=("s0", "s1"))
        start(bench, flow)
        water_until(bench, 3.0, 20.0, sensors=("s0", "s1"))
        assert the_plan(bench).state.progress is Progress.ON_PLAN
        for minute in range(4, 10):
            water_until(bench, float(minute), 20.0, sensors=("s0",))
            bench.read("s1", bench.clock.now_us() + 1, 19.0)
            bench.tick()
        assert the_plan(bench).state.progress is Progress.HALTED
        assert bench.alarm("t0", "off_plan") == "unacknowledged"
        refused = do(bench, "plan.step_done", step=1)
        assert (refused.outcome, refused.reason) == ("refused", "plan_is_halted")


def test_no_plan_widens_what_the_animals_tolerate(bench: Bench) -> None:
    """Postlarvae of shrimp have a published low limit; a band that reaches below it ends there, as a set point's does."""
    start(bench, DOWN)
    tanks = bench.worker.plant.tanks
    low = tanks.kept.tolerable[0, 0]
    moved = tanks.under_plans(
        target=tanks.kept.point, low=tanks.kept.point * 0 + low - 1, high=tanks.kept.point * 0 + low + 5
    )
    assert low > 0
    assert moved.salinity.low[0] == low
    assert moved.salinity.is_low_backstop[0]
