"""Mass, salt and heat of every plan re-computed with gsw alone; flow-through against the exponential law; worked examples."""

from __future__ import annotations

import math

import gsw
import numpy as np
import pytest

from analysis.acclimation.flowing import flowed
from analysis.acclimation.limits import Override
from analysis.acclimation.plan import Plan
from analysis.acclimation.problem import Problem, problem_of
from analysis.acclimation.scenarios import Amounts, exchanged
from analysis.acclimation.searching import run
from analysis.acclimation.source import Salt, SourceWater
from analysis.acclimation.stepping import Pace, Schedule
from analysis.acclimation.task import AcclimationTask, Allowances, Grid, Method, Vessel, Water
from tests.analysis.acclimation.tasks import EIGHT, SEA, TAP, limits, plan, task

EXACT = Allowances(0.0, 0.0, 0.0)


def problem(of: AcclimationTask) -> Problem:
    return problem_of(of, limits(of))


# The worked examples: facts on seawater, section 7 (computed there with TEOS-10 alone, 1000 L).


def example(start: float, target: float, source: SourceWater, degC: float = 20.0, **more: object) -> Problem:
    return problem(task("penaeus-vannamei/pl10", start, target, (source,), degC=degC, allowances=EXACT, **more))


def test_replacement_equals_the_worked_examples() -> None:
    for source, drain, add in (
        (SourceWater("fresh", 0.0, 20.0), 434.929250, 435.079002),
        (SourceWater("pond", 2.0, 20.0), 460.614284, 460.742902),
    ):
        of = example(35.0, 20.0, source)
        after = exchanged(of.tank, of.sources, Amounts(np.array([drain]), np.array([[add]]), np.zeros(1)))
        assert after.salinity[0, 0] == pytest.approx(20.0, rel=1e-4)
        assert after.volume_L[0, 0] == pytest.approx(1000.0, rel=1e-4)


def test_adding_equals_the_worked_example() -> None:
    of = example(35.0, 20.0, SourceWater("fresh", 0.0, 20.0), method=Method.ADD, vessel=Vessel(1000.0, 2000.0))
    after = exchanged(of.tank, of.sources, Amounts(np.zeros(1), np.array([[769.954917]]), np.zeros(1)))
    assert after.salinity[0, 0] == pytest.approx(20.0, rel=1e-4)
    assert after.volume_L[0, 0] == pytest.approx(1769.689902, rel=1e-4)


def test_dry_salt_equals_the_worked_example() -> None:
    of = example(5.0, 15.0, TAP, degC=25.0)
    for kilograms, dry in ((10.209152, 1.0), (10.209152 / 0.8, 0.8)):
        amounts = Amounts(np.zeros(1), np.zeros((1, 1)), np.array([kilograms]), dry)
        after = exchanged(of.tank, of.sources, amounts)
        water_in_the_salt_kg = kilograms * (1.0 - dry)
        expected = 15.0 / (1.0 + water_in_the_salt_kg / 1010.0)
        assert after.salinity[0, 0] == pytest.approx(expected, rel=1e-4)


def test_blending_two_waters_equals_the_worked_example() -> None:
    of = problem(
        task(
            "penaeus-vannamei/pl10", 35.0, 12.0, (SourceWater("well", 2.0, 22.0),), degC=10.0, allowances=EXACT,
            method=Method.ADD, vessel=Vessel(300.0, 1000.0),
        )
    )  # fmt: skip
    after = exchanged(of.tank, of.sources, Amounts(np.zeros(1), np.array([[700.0]]), np.zeros(1)))
    assert after.salinity[0, 0] == pytest.approx(12.09024732, rel=1e-4)
    assert after.temperature_degC[0, 0] == pytest.approx(18.433547, abs=1e-3)
    assert after.volume_L[0, 0] == pytest.approx(999.87323, rel=1e-4)


@pytest.mark.parametrize(("source_salinity", "minutes"), [(0.0, 114.160867), (2.0, 123.462055)])
def test_flow_through_equals_the_worked_examples(source_salinity: float, minutes: float) -> None:
    of = example(35.0, 20.0, SourceWater("source", source_salinity, 20.0), method=Method.FLOW)
    after = flowed(of.tank, of, flow_L_min=np.array([[5.0]]), minutes=np.array([minutes]))
    inflow = 5.0 * _salt_g_L(source_salinity, 20.0) / 1000.0  # kg/min
    salt = float(of.tank.water.salt_kg[0])
    lasting = inflow / 5.0 * 1000.0
    assert after.water.salt_kg[0, 0] == pytest.approx(
        lasting + (salt - lasting) * math.exp(-5.0 * minutes / 1000.0), rel=1e-9
    )
    # The tank's volume shrinks by 0.02 % in mixing, which the worked example holds constant.
    assert after.salinity[0, 0] == pytest.approx(20.0, rel=2e-4)


def test_a_flow_plan_follows_the_exponential_law_in_salt_mass() -> None:
    found = plan(task("penaeus-vannamei/pl10", 23.0, 4.0, method=Method.FLOW))
    concentration = _salt_g_L(23.0, 28.0)
    for step in found.steps:
        turnovers = step.flow_L_min * step.duration_min / 1000.0
        concentration *= math.exp(-turnovers)
        assert _salt_g_L(step.salinity, step.temperature_degC) == pytest.approx(concentration, rel=1e-4)
        assert step.drain_L == pytest.approx(step.flow_L_min * step.duration_min, rel=1e-9)


def _salt_g_L(salinity: float, degC: float) -> float:
    absolute = gsw.SR_from_SP(salinity)
    return float(absolute * gsw.rho_t_exact(absolute, degC, 0.0) / 1000.0)


def assert_balances_close(of: AcclimationTask, schedule: Schedule) -> None:
    """Re-compute the nominal water after every step with gsw alone."""
    absolute = gsw.SR_from_SP(of.start.salinity)
    mass = of.vessel.volume_L * gsw.rho_t_exact(absolute, of.start.temperature_degC, 0.0) / 1000.0
    salt, heat = mass * absolute / 1000.0, mass * gsw.CT_from_t(absolute, of.start.temperature_degC, 0.0)
    volume, warm = of.vessel.volume_L, of.start.temperature_degC
    for move in schedule.moves:
        kept = 1.0 - move.drain_L / volume
        mass, salt, heat = mass * kept, salt * kept, heat * kept
        for source, litres in zip(of.sources, move.add_L, strict=True):
            source_absolute = gsw.SR_from_SP(source.salinity)
            added = litres * gsw.rho_t_exact(source_absolute, source.temperature_degC, 0.0) / 1000.0
            mass, salt = mass + added, salt + added * source_absolute / 1000.0
            heat += added * gsw.CT_from_t(source_absolute, source.temperature_degC, 0.0)
        if move.salt_kg:
            assert of.salt is not None
            mass, salt = mass + move.salt_kg, salt + move.salt_kg * of.salt.dry_fraction
            heat = mass * gsw.CT_from_t(1000.0 * salt / mass, warm, 0.0)  # dissolved at the tank's temperature
        absolute = 1000.0 * salt / mass
        warm = gsw.t_from_CT(absolute, heat / mass, 0.0)
        volume = 1000.0 * mass / gsw.rho_t_exact(absolute, warm, 0.0)
        water = move.after.water
        assert water.mass_kg[0] == pytest.approx(mass, rel=1e-9)
        assert water.salt_kg[0] == pytest.approx(salt, rel=1e-9, abs=1e-9)
        assert float(move.after.salinity[0]) == pytest.approx(float(gsw.SP_from_SR(absolute)), rel=1e-6, abs=1e-7)
        # Dosing: 20 K of heat capacity against salt is known to 1e-3 K only.
        assert water.temperature_degC[0] == pytest.approx(warm, abs=2e-3 if move.salt_kg else 1e-6)
        assert water.volume_L[0] == pytest.approx(volume, rel=1e-6)
        volume, warm = float(water.volume_L[0]), float(water.temperature_degC[0])
        heat = mass * float(gsw.CT_from_t(absolute, warm, 0.0))


def random_task(generator: np.random.Generator) -> AcclimationTask:
    """Return a task that may or may not be feasible: any waters, volumes, methods."""
    animals = ("penaeus-vannamei/pl10", "oreochromis-niloticus/juvenile", "macrobrachium-rosenbergii/postlarva")
    method = Method(generator.choice([Method.STEPS, Method.ADD, Method.DOSE]))
    start = float(np.round(generator.uniform(0.0, 38.0), 1))
    change = float(generator.uniform(1.0, 6.0))
    target = (
        min(60.0, start + change) if method is Method.DOSE or generator.random() < 0.5 else max(0.2, start - change)
    )
    volume = float(np.round(10.0 ** generator.uniform(1.0, 4.5), 1))
    sources = tuple(
        SourceWater(
            f"s{n}", float(np.round(generator.uniform(0.0, 45.0), 1)), float(np.round(generator.uniform(10, 32), 1))
        )
        for n in range(int(generator.integers(1, 4)))
    )
    salt = Salt("salt", float(np.round(generator.uniform(0.6, 1.0), 2))) if method is Method.DOSE else None
    return AcclimationTask(
        animal=str(generator.choice(animals)),
        start=Water(start, float(np.round(generator.uniform(15.0, 30.0), 1))),
        target=Water(target),
        vessel=Vessel(volume, volume if method is Method.STEPS else 5.0 * volume),
        sources=sources,
        begins_at=EIGHT,
        method=method,
        salt=salt,
        grid=Grid(clock_min=20.0),
    )


def assert_random_balances(count: int, seed: int) -> int:
    generator = np.random.default_rng(seed)
    steps = 0
    for _ in range(count):
        of = random_task(generator)
        # A schedule of one pace: what is chosen among the paces is one of these.
        unit = of.litre_step if of.salt is None else of.vessel.volume_L / 1e4
        free = limits(of, governs="hour", overrides=[Override("salinity per hour", 3.0, "Rui", "shorter runs")])
        schedule = run(of, free, Pace(20.0, unit, 0.1))
        assert_balances_close(of, schedule)
        steps += len(schedule.moves)
    return steps


def test_balances_close_in_random_tasks() -> None:
    assert assert_random_balances(60, seed=20261201) > 80


@pytest.mark.slow
def test_balances_close_in_thousands_of_random_tasks() -> None:
    assert assert_random_balances(2000, seed=1) > 3000


def test_the_printed_table_is_the_balanced_schedule() -> None:
    of = task("penaeus-vannamei/pl10", 30.0, 12.0, (TAP, SEA))
    found: Plan = plan(of)
    volume, salinity = 1000.0, 30.0
    for step in found.steps:
        assert step.drain_L == pytest.approx(sum(step.add.values()))
        kept = _salt_g_L(salinity, 28.0) * (volume - step.drain_L)
        brought = sum(litres * _salt_g_L({"tap": 0.0, "sea": 36.5}[name], 28.0) for name, litres in step.add.items())
        assert _salt_g_L(step.salinity, step.temperature_degC) * step.volume_L == pytest.approx(
            kept + brought, rel=1e-5
        )
        volume, salinity = step.volume_L, step.salinity
    assert sum(found.water_used_L.values()) == pytest.approx(found.drained_L)
