from __future__ import annotations

import gsw
import numpy as np
import pytest

from analysis.errors import InvalidInputError
from ingest.simulator.hatchery import Hatchery
from ingest.simulator.scenario import Acclimation, Scenario, TankEvent, TankRun
from ingest.site.loading import load_text
from tests.ingest.simulator.conftest import ANCHOR_US, HOUR_US
from tests.ingest.simulator.examples import one_tank


def hatchery(site, scenario=None, *, start_h=-24.0, seed=1):
    start_us = ANCHOR_US + round(start_h * HOUR_US)
    return Hatchery(site, scenario=scenario or Scenario(), seed=seed, anchor_us=ANCHOR_US, start_us=start_us)


def at(hours):
    return ANCHOR_US + np.asarray(hours, dtype=np.float64) * HOUR_US


def test_a_quiet_tank_keeps_to_its_set_point(demo_site, demo_scenario):
    quiet = Scenario(tanks=demo_scenario.tanks)
    water = hatchery(demo_site, quiet, start_h=-14 * 24)
    hours = at(np.arange(-13 * 24, 0, 1.0))
    for number, tank in enumerate(demo_site.tanks):
        if tank.set_point is None or tank.set_point.salinity is None:
            continue
        found = water.tank_water_at(number, hours)
        assert np.all(abs(found.salinity - tank.set_point.salinity) < tank.set_point.band), tank.id
        assert np.all(abs(found.temperature_degC - tank.set_point.temperature_degC) < 1.2), tank.id


def test_a_stuck_fresh_water_valve_follows_the_law_of_flow_through():
    """1000 L, 20 L/min, no other flow: grams of salt in a litre (densities by gsw) fall by exp(-Q t / V)."""
    valve = TankEvent(kind="fresh-water-valve-stuck", tank="t1", start_h=0.0, lasts_h=0.5, size=20.0)
    still = Scenario(tanks={"t1": TankRun(exchange_per_day=0.0)}, tank_events=(valve,))
    water = hatchery(one_tank(), still).tank_water_at(0, at([0.0, 0.25, 0.5, 1.0]))

    def salt_g_L(salinity, temperature):
        reference = gsw.SR_from_SP(salinity)
        return reference * gsw.rho_t_exact(reference, temperature, 0.0) / 1000.0

    found, entering = salt_g_L(water.salinity, water.temperature_degC), salt_g_L(0.2, 17.0)
    law = entering + (found[0] - entering) * np.exp(-20.0 * np.array([0, 15, 30, 30]) / 1000.0)
    assert found == pytest.approx(law, rel=0.001)


def test_an_event_between_two_moments_of_the_grid_is_not_lost():
    brief = TankEvent(kind="fresh-water-valve-stuck", tank="t1", start_h=-10.02, lasts_h=0.01, size=100.0)
    still = Scenario(tanks={"t1": TankRun(exchange_per_day=0.0)}, tank_events=(brief,))
    before, after = hatchery(one_tank(), still).tank_water_at(0, at([-10.5, -9.5])).salinity
    assert after == pytest.approx(before * np.exp(-100.0 * 0.6 / 1000.0), rel=0.003)


def test_a_cold_heater_lets_the_tank_cool_and_it_warms_up_again():
    off = TankEvent(kind="heater-off", tank="t1", start_h=-12.0, lasts_h=6.0)
    found = hatchery(one_tank(), Scenario(tank_events=(off,))).tank_water_at(0, at([-12.5, -6.0, 0.0]))
    assert found.temperature_degC[0] == pytest.approx(25.0, abs=0.6)
    assert found.temperature_degC[1] < found.temperature_degC[0] - 0.5
    assert found.temperature_degC[2] == pytest.approx(25.0, abs=0.6)


def test_an_acclimation_brings_the_water_down_by_fractions():
    plan = Acclimation(tank="t1", from_salinity=30.0, to_salinity=5.0, start_h=-10.0, lasts_h=10.0)
    scenario = Scenario(tanks={"t1": TankRun(exchange_per_day=48.0)}, acclimations=(plan,))
    found = hatchery(one_tank(), scenario).tank_water_at(0, at([-10.5, -5.0, 0.0, 6.0])).salinity
    assert found[0] == pytest.approx(30.0, rel=0.02)
    assert 12.0 < found[1] < 17.0
    assert found[-1] == pytest.approx(5.0, rel=0.03)
    assert np.all(np.diff(found) < 0.0)


def test_who_starts_from_the_same_moment_finds_the_same_water(demo_site, demo_scenario):
    in_one_go = hatchery(demo_site, demo_scenario, start_h=-48.0)
    hours = np.arange(-40.0, 2.0, 0.37)
    whole = in_one_go.tank_water_at(2, at(hours)).salinity
    in_pieces = hatchery(demo_site, demo_scenario, start_h=-48.0)
    pieces = [in_pieces.tank_water_at(2, at(hours[start : start + 7])).salinity for start in range(0, hours.size, 7)]
    assert np.array_equal(np.concatenate(pieces), whole)


def test_forgetting_keeps_what_is_still_asked_for():
    water = hatchery(one_tank())
    hours = at([0.3, 0.4])
    before = water.tank_water_at(0, hours)
    water.forget_before(int(at(0.25)))
    assert np.array_equal(water.tank_water_at(0, hours).salinity, before.salinity)


def test_another_seed_is_another_day():
    first = hatchery(one_tank(), seed=1).tank_water_at(0, at([0.0])).salinity
    assert hatchery(one_tank(), seed=2).tank_water_at(0, at([0.0])).salinity != first


def test_sources_have_their_stated_water_and_the_intake_the_tide(demo_site, demo_scenario):
    water = hatchery(demo_site, demo_scenario)
    hours = at(np.arange(-20.0, 0.0, 0.5))
    assert np.all(water.source_water_at("saline-well", hours).salinity == 38.0)
    assert np.ptp(water.source_water_at("intake", hours).salinity) > 3.0


def test_a_water_that_it_does_not_know_is_refused():
    site = load_text(
        """
site: {id: sandbank, name: Sandbank, time_zone: Europe/Lisbon}
analyses: [{id: spring, name: Salt spring, ions: {Na: 3000, Cl: 4600}}]
tanks: [{id: t1, name: T1, volume_L: 100, water: spring}]
"""
    )
    with pytest.raises(InvalidInputError, match=r"tanks\[0\].water.*spring.*seawater"):
        hatchery(site)
