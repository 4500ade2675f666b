"""The five published tasks with default limits, and plans done in the simulated tank with everything that may be wrong."""

from __future__ import annotations

import csv
from itertools import product

import numpy as np
import pytest

from analysis.acclimation.limits import Override
from analysis.acclimation.plan import Plan
from analysis.acclimation.published import rates
from analysis.acclimation.source import SourceWater
from analysis.acclimation.task import AcclimationTask, Allowances, Method, Vessel
from analysis.tank import Exchange, Inflow, step, tank_water
from tests.analysis.acclimation.replay import Wrong, replayed, worst_share
from tests.analysis.acclimation.tasks import SEA, TAP, limits, plan, say, task
from tests.reference.published import FOLDER

ROUNDING = 1.0005
"""The replay integrates the published rates numerically and takes whole seconds."""


def published() -> list[dict[str, str]]:
    lines = (FOLDER / "acclimation_published_times.csv").read_text(encoding="utf-8").splitlines()
    return list(csv.DictReader(line for line in lines if not line.startswith("#")))


def published_task(row: dict[str, str]) -> AcclimationTask:
    degC = float(row["temperature_degC"])
    source = SourceWater("source", float(row["source_salinity"]), degC)
    return task(row["animal"], float(row["from_salinity"]), float(row["to_salinity"]), (source,), degC=degC)


@pytest.mark.parametrize("row", published(), ids=lambda row: row["task"])
def test_published_tasks_take_half_to_twice_the_published_time_and_bounded_work(row: dict[str, str]) -> None:
    found = plan(published_task(row))
    share = found.total_hours / float(row["hours"])
    say(
        f"{row['task']}: {found.total_hours:.1f} h, published {row['hours']} h, {share:.2f} times, {len(found.steps)} steps"
    )
    assert found.is_feasible, found.reason
    assert 0.5 <= share <= 2.0
    assert found.worst_journey_stress <= 60.5 or np.isnan(found.worst_journey_stress)
    assert found.evaluations < 250_000


PLANS = {
    "postlarvae in steps": task("penaeus-vannamei/pl10", 23.0, 4.0),
    "postlarvae below 2": task("penaeus-vannamei/pl15-pl20", 5.0, 0.8, tolerance_salinity=0.1),
    "postlarvae by flow": task("penaeus-vannamei/pl10", 23.0, 4.0, method=Method.FLOW),
    "postlarvae by flow below 2": task("penaeus-vannamei/pl15-pl20", 6.0, 1.0, method=Method.FLOW),
    "postlarvae in a bag": task(
        "penaeus-vannamei/pl10", 30.0, 12.0, (SourceWater("pond", 4.0, 29.0),), degC=26.0,
        vessel=Vessel(10.0, 60.0, "bag"), method=Method.ADD,
    ),
    "prawns": task("macrobrachium-rosenbergii/postlarva", 12.0, 4.0),
    "up with a slow pump": task(
        "penaeus-vannamei/pl10", 10.0, 15.0, (SourceWater("sea", 34.0, 27.0, max_L_per_h=150.0),), volume_L=2000.0
    ),
    "two sources and a temperature": task(
        "penaeus-vannamei/pl10", 30.0, 20.0, (SourceWater("cold well", 1.0, 22.0), SourceWater("warm sea", 33.0, 32.0)),
        degC=27.0, target_degC=28.0,
    ),
}  # fmt: skip


def direction_of(found: Plan) -> str:
    return "down" if found.task.target.salinity < found.task.start.salinity else "up"


def lateness(found: Plan, generator: np.random.Generator) -> list[dict[int, float]]:
    """One step late and the next on time; every second late; all late by chance, up to the allowance."""
    numbers = range(1, len(found.steps) + 1)
    alone: list[dict[int, float]] = [{int(number): 20.0} for number in generator.choice(list(numbers), size=3)]
    return [{}, *alone, {n: 20.0 for n in numbers if n % 2}, {n: float(generator.uniform(0.0, 20.0)) for n in numbers}]


def assert_keeps_limits(found: Plan, *, wrongs: list[Wrong]) -> dict[str, float]:
    worst: dict[str, float] = {}
    for wrong in wrongs:
        shares = worst_share(found, replayed(found, wrong), direction=direction_of(found))
        for name, share in shares.items():
            worst[name] = max(worst.get(name, 0.0), share)
            assert share <= ROUNDING, f"{name} is used to {share:.4f} with {wrong}"
    return worst


@pytest.mark.parametrize("name", PLANS)
def test_no_plan_breaks_a_limit_when_done_exactly(name: str) -> None:
    found = plan(PLANS[name])
    assert found.is_feasible, found.reason
    worst = assert_keeps_limits(found, wrongs=[Wrong()])
    assert max(worst.values()) > 0.3  # it is a test only where a limit is nearly used


@pytest.mark.slow
@pytest.mark.parametrize("name", PLANS)
def test_no_plan_breaks_a_limit_with_everything_wrong_that_is_allowed_for(name: str) -> None:
    found = plan(PLANS[name])
    generator = np.random.default_rng(7)
    offsets = list(product((-1.0, 0.0, 1.0), repeat=len(found.task.sources)))
    wrongs = [
        Wrong(factor, {source.name: off for source, off in zip(found.task.sources, offset, strict=True)}, late)
        for factor, offset in product((0.9, 1.0, 1.1), offsets)
        for late in lateness(found, generator)
    ]
    wrongs += [
        Wrong(
            float(generator.uniform(0.9, 1.1)),
            {source.name: float(generator.uniform(-1.0, 1.0)) for source in found.task.sources},
            lateness(found, generator)[-1],
        )
        for _ in range(20)
    ]
    worst = assert_keeps_limits(found, wrongs=wrongs)
    say(f"{name}: {len(wrongs)} replays, worst shares { {key: round(value, 4) for key, value in worst.items()} }")


@pytest.mark.slow
def test_day_governed_plans_keep_the_day_with_everything_wrong() -> None:
    found = plan(task("dicentrarchus-labrax/fry-juvenile", 20.0, 12.0, degC=24.0))
    for factor, offset, late in product((0.9, 1.1), (0.0, 1.0), ({}, {2: 20.0}, dict.fromkeys(range(1, 60, 2), 20.0))):
        track = replayed(found, Wrong(factor, {"tap": offset}, late))
        shares = worst_share(found, track, direction="down", governs="day")
        assert max(shares.values()) <= ROUNDING, (factor, offset, late, shares)


def test_an_operator_who_is_later_than_allowed_does_break_a_limit() -> None:
    """The replay can see a breach: without it the tests above would prove nothing."""
    found = plan(task("penaeus-vannamei/pl10", 23.0, 4.0, allowances=Allowances(0.0, 0.0, 0.0)))
    late = worst_share(found, replayed(found, Wrong(late_min={3: 20.0})), direction="down")
    small = worst_share(found, replayed(found, Wrong(volume_factor=0.9)), direction="down")
    assert late["hour"] > 1.02
    assert small["hour"] > 1.02


@pytest.mark.slow
def test_the_replay_is_the_simulated_tank_stepped_second_by_second() -> None:
    found = plan(task("penaeus-vannamei/pl10", 23.0, 18.0))
    track = replayed(found, hours_after=0.1)
    water = tank_water(1000.0, absolute_salinity_g_kg=23.0 * 35.16504 / 35.0, temperature_degC=28.0)
    second = 0
    for planned in found.steps:
        begin, lasting = round(60 * planned.minute), round(60 * planned.duration_min)
        draining = lasting // 3
        for now in range(second, begin + lasting):
            exchange = Exchange()
            if begin <= now < begin + draining:
                exchange = Exchange(outflow_L_h=planned.drain_L * 3600.0 / draining)
            elif now >= begin + draining:
                exchange = Exchange((Inflow(planned.add["tap"] * 3600.0 / (lasting - draining), 0.0, 28.0),))
            water = step(water, exchange, duration_s=1.0)
            assert float(water.practical_salinity) == pytest.approx(track.salinity[now + 1], abs=2e-4)
        second = begin + lasting


@pytest.mark.slow
def test_the_cap_on_stress_slows_a_journey_that_would_be_too_fast() -> None:
    fast = Override("salinity per hour", 6.0, "Ines", "test of the cap")
    of = task("oreochromis-niloticus/juvenile", 0.0, 30.0, (SEA,))
    capped = plan(of, governs="hour", overrides=[fast])
    free = plan(
        of, governs="hour", overrides=[fast, Override("stress of the journey", None, "Ines", "test of the cap")]
    )
    assert free.worst_journey_stress > 60.5
    assert capped.worst_journey_stress <= 60.5
    assert capped.total_hours > free.total_hours
    assert capped.slowness < 1.0
    assert any("cap on stress" in cost for cost in capped.costs)


def test_the_chosen_rate_is_named_with_what_the_other_costs() -> None:
    found = plan(task("penaeus-vannamei/pl10", 23.0, 4.0))
    assert any("salinity per day does not govern" in cost and "45.6 h" in cost for cost in found.costs)
    by_day = plan(task("penaeus-vannamei/pl10", 23.0, 9.0), governs="day")
    by_hour = plan(task("penaeus-vannamei/pl10", 23.0, 9.0), governs="hour")
    assert by_day.total_hours > by_hour.total_hours
    assert {row.source for row in rates("penaeus-vannamei/pl10", direction="down", per="d")} == {"MCGRAW2004"}
    assert limits(task("oreochromis-niloticus/juvenile", 0.0, 35.0, (SEA,))).governs == "day"
    assert TAP.salinity == 0.0
