from __future__ import annotations

import gsw
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from analysis.errors import InvalidInputError
from analysis.tank import Exchange, Inflow, step, tank_water

CP0 = 3991.86795711963


class Brick:
    """A solution whose density does not change, 10 kg/L: the tank of the textbooks, where litres add up."""

    def density_kg_m3(self, absolute_salinity_g_kg, *, temperature_degC):
        return np.full(np.broadcast(absolute_salinity_g_kg, temperature_degC).shape, 10_000.0)

    def enthalpy_J_kg(self, absolute_salinity_g_kg, *, temperature_degC):
        return np.asarray(4000.0 * np.asarray(temperature_degC, dtype=float))

    def temperature_degC(self, absolute_salinity_g_kg, *, enthalpy_J_kg):
        return np.asarray(enthalpy_J_kg) / 4000.0


BRICK = Brick()


def sea(volume_L, practical_salinity, temperature_degC):
    return tank_water(
        volume_L, absolute_salinity_g_kg=gsw.SR_from_SP(practical_salinity), temperature_degC=temperature_degC
    )


def inflow(flow_L_h, practical_salinity, temperature_degC):
    return Inflow(flow_L_h, gsw.SR_from_SP(practical_salinity), temperature_degC)


# --- against theory -------------------------------------------------------------------------------------------


def test_textbook_tank_at_constant_volume():
    """Boyce and DiPrima, Elementary Differential Equations, section 2.3, example 1 (from memory): 100 gal,
    1/4 lb/gal at 3 gal/min, 50 lb at first: Q = 25 + 25 exp(-0.03 t), 25.5 lb at t = 130.4 min."""
    water = tank_water(100.0, absolute_salinity_g_kg=50.0, temperature_degC=20.0, solution=BRICK)
    exchange = Exchange(inflows=(Inflow(180.0, 25.0, 20.0),))
    after = step(water, exchange, duration_s=130.4 * 60, capacity_L=100.0, solution=BRICK)
    assert water.salt_kg == pytest.approx(50.0)
    assert after.salt_kg == pytest.approx(25.5, abs=0.001)
    assert after.salt_kg == pytest.approx(25 + 25 * np.exp(-0.03 * 130.4), rel=1e-12)


def test_textbook_tank_that_fills():
    """Boyce and DiPrima, section 2.3, problem 4 (from memory): 500 gal tank with 200 gal and 100 lb; 1 lb/gal in
    at 3 gal/min, out at 2 gal/min. At the point of overflowing the concentration is 121/125 lb/gal."""
    water = tank_water(200.0, absolute_salinity_g_kg=50.0, temperature_degC=20.0, solution=BRICK)
    exchange = Exchange(inflows=(Inflow(180.0, 100.0, 20.0),), outflow_L_h=120.0)
    after = step(water, exchange, duration_s=300 * 60, capacity_L=500.0, solution=BRICK)
    assert after.volume_L == pytest.approx(500.0)
    assert after.salt_kg / after.volume_L == pytest.approx(121 / 125, rel=1e-12)


def test_beyond_the_rim_the_rest_of_the_step_is_flow_through():
    water = tank_water(200.0, absolute_salinity_g_kg=50.0, temperature_degC=20.0, solution=BRICK)
    exchange = Exchange(inflows=(Inflow(180.0, 100.0, 20.0),), outflow_L_h=120.0)
    full = step(water, exchange, duration_s=300 * 60, capacity_L=500.0, solution=BRICK)
    whole = step(water, exchange, duration_s=400 * 60, capacity_L=500.0, solution=BRICK)
    law = 500.0 + (full.salt_kg - 500.0) * np.exp(-3.0 * 100 / 500)
    assert whole.salt_kg == pytest.approx(law, rel=1e-12)


def test_flow_through_is_the_exponential_law_in_salt_mass():
    water = sea(1000.0, 35.0, 20.0)
    after = step(water, Exchange(inflows=(inflow(300.0, 2.0, 20.0),)), duration_s=7200, capacity_L=1000.0)
    incoming = gsw.rho_t_exact(gsw.SR_from_SP(2.0), 20.0, 0) * gsw.SR_from_SP(2.0) / 1e6  # kg of salt per litre
    law = 1000 * incoming + (water.salt_kg - 1000 * incoming) * np.exp(-300 * 2 / 1000)
    assert after.salt_kg == pytest.approx(law, rel=1e-12)


def test_a_step_may_be_cut_anywhere():
    """Up to the contraction of mixing, which moves the level from step to step."""
    exchange = Exchange(
        inflows=(inflow(300.0, 0.0, 12.0),), heating_kW=1.5, heat_exchange_kW_K=0.05, surroundings_degC=15.0
    )
    whole = step(sea(1000.0, 35.0, 20.0), exchange, duration_s=7200, capacity_L=1000.0)
    cut = sea(1000.0, 35.0, 20.0)
    for _ in range(720):
        cut = step(cut, exchange, duration_s=10, capacity_L=1000.0)
    assert cut.practical_salinity == pytest.approx(whole.practical_salinity, rel=2e-4)
    assert cut.temperature_degC == pytest.approx(whole.temperature_degC, abs=0.01)
    assert cut.volume_L == pytest.approx(1000.0, abs=0.01)


def test_warmth_goes_to_where_heating_and_loss_meet():
    exchange = Exchange(heating_kW=4.0, heat_exchange_kW_K=0.5, surroundings_degC=10.0)
    after = step(sea(1000.0, 35.0, 20.0), exchange, duration_s=3.6e6)
    assert after.temperature_degC == pytest.approx(18.0, abs=0.02)


def test_heat_of_a_heater_in_a_closed_tank():
    water = sea(1000.0, 35.0, 20.0)
    after = step(water, Exchange(heating_kW=10.0), duration_s=3600)
    heat_capacity = gsw.cp_t_exact(gsw.SR_from_SP(35.0), 24.0, 0.0)
    assert after.temperature_degC - 20.0 == pytest.approx(3.6e7 / (heat_capacity * water.mass_kg), rel=1e-3)


def test_evaporation_takes_its_latent_heat():
    water = sea(1000.0, 35.0, 25.0)
    after = step(water, Exchange(evaporation_L_h=1.0), duration_s=3600)
    heat_J = gsw.latentheat_evap_t(gsw.SR_from_SP(35.0), 25.0) * 0.997047  # one litre of fresh water at 25 degC
    fall_K = heat_J / (gsw.cp_t_exact(gsw.SR_from_SP(35.0), 25.0, 0.0) * water.mass_kg)
    assert 25.0 - after.temperature_degC == pytest.approx(fall_K, rel=5e-3)


# --- worked examples (regression: computed with TEOS-10 densities by other code than this) ------------------


def test_two_waters_poured_together():
    """300 L of SP 35 at 10 degC and 700 L of SP 2 at 22 degC: SP 12.09024732, 18.433547 degC, 999.87323 L."""
    after = step(sea(300.0, 35.0, 10.0), Exchange(inflows=(inflow(700.0, 2.0, 22.0),)), duration_s=3600)
    assert after.practical_salinity == pytest.approx(12.09024732, abs=1e-6)
    assert after.temperature_degC == pytest.approx(18.433547, abs=1e-5)
    assert after.volume_L == pytest.approx(999.87323, abs=1e-4)


def test_thinned_by_adding_only():
    """1000 L of SP 35 to 20 at 20 degC: 769.954917 L of fresh water, 1769.689902 L in the end."""
    after = step(sea(1000.0, 35.0, 20.0), Exchange(inflows=(inflow(769.954917, 0.0, 20.0),)), duration_s=3600)
    assert after.practical_salinity == pytest.approx(20.0, abs=1e-6)
    assert after.volume_L == pytest.approx(1769.689902, rel=2e-5)


def test_drained_and_filled_again():
    """1000 L of SP 35 to 20 at 20 degC: drain 434.929250 L, add 435.079002 L of fresh water."""
    drained = step(sea(1000.0, 35.0, 20.0), Exchange(outflow_L_h=434.929250), duration_s=3600)
    after = step(drained, Exchange(inflows=(inflow(435.079002, 0.0, 20.0),)), duration_s=3600)
    assert after.practical_salinity == pytest.approx(20.0, abs=1e-5)
    assert after.volume_L == pytest.approx(1000.0, abs=0.02)


def test_dry_salt():
    """10.209152 kg of anhydrous sea salt take 1000 L of SP 5 at 25 degC to SP 15 and 1002.6967 L."""
    after = step(sea(1000.0, 5.0, 25.0), Exchange(dry_salt_kg_h=10.209152), duration_s=3600)
    assert after.practical_salinity == pytest.approx(15.0, abs=1e-6)
    assert after.volume_L == pytest.approx(1002.6967, abs=1e-3)
    assert after.temperature_degC == pytest.approx(25.0, abs=1e-3)


def test_fifty_litres_gone_to_the_air():
    """1000 L of SP 35 at 25 degC less 50 L of fresh water: SP 36.79234625 (the heat is not in that example)."""
    after = step(sea(1000.0, 35.0, 25.0), Exchange(evaporation_L_h=50.0), duration_s=3600)
    assert after.practical_salinity == pytest.approx(36.79234625, abs=1e-6)


def test_time_of_flow_through():
    """1000 L, 5 L/min of fresh water, SP 35 to 20 at 20 degC: 114.160867 min at constant volume."""
    water = sea(1000.0, 35.0, 20.0)
    for _ in range(1000):
        water = step(
            water,
            Exchange(inflows=(inflow(300.0, 0.0, 20.0),)),
            duration_s=114.160867 * 60 / 1000,
            capacity_L=1000.0,
        )
    assert water.practical_salinity == pytest.approx(20.0, rel=3e-4)  # the example lets no contraction be


# --- the balance, computed again with gsw alone ---------------------------------------------------------------

salinities = st.floats(0.0, 42.0)
temperatures = st.floats(1.0, 35.0)


@settings(derandomize=True, deadline=None, max_examples=300)
@given(
    volume=st.floats(10.0, 1e5),
    start=st.tuples(salinities, temperatures),
    flows=st.lists(st.tuples(st.floats(0.0, 2.0), salinities, temperatures), max_size=3),
    hours=st.floats(0.0, 10.0),
)
def test_mass_salt_and_heat_are_kept(volume, start, flows, hours):
    water = sea(volume, *start)
    inflows = tuple(inflow(part * volume, salinity, temperature) for part, salinity, temperature in flows)
    after = step(water, Exchange(inflows=inflows), duration_s=hours * 3600)

    def parts(litres, practical_salinity, temperature):
        salinity = gsw.SR_from_SP(practical_salinity)
        mass = litres * gsw.rho_t_exact(salinity, temperature, 0) / 1000
        return np.array([mass, mass * salinity / 1000, mass * CP0 * gsw.CT_from_t(salinity, temperature, 0)])

    expected = parts(volume, *start) + sum(
        (parts(part * volume * hours, salinity, temperature) for part, salinity, temperature in flows),
        start=np.zeros(3),
    )
    found_heat = after.mass_kg * CP0 * gsw.CT_from_t(after.absolute_salinity_g_kg, after.temperature_degC, 0)
    assert after.mass_kg == pytest.approx(expected[0], rel=1e-9)
    assert after.salt_kg == pytest.approx(expected[1], rel=1e-9, abs=1e-9)
    assert found_heat == pytest.approx(expected[2], rel=1e-7)


@settings(derandomize=True, deadline=None, max_examples=200)
@given(
    start=st.tuples(salinities, temperatures),
    entering=st.tuples(salinities, temperatures),
    turnovers=st.floats(0.0, 20.0),
    outflow=st.floats(0.0, 3.0),
)
def test_the_water_stays_between_what_was_there_and_what_comes_in(start, entering, turnovers, outflow):
    exchange = Exchange(inflows=(inflow(1000.0 * turnovers, *entering),), outflow_L_h=200.0 * outflow)
    after = step(sea(1000.0, *start), exchange, duration_s=3600, capacity_L=1200.0)
    low, high = sorted((start[0], entering[0]))
    assert low - 1e-9 <= after.practical_salinity <= high + 1e-9
    assert after.volume_L <= 1200.0 + 1e-9


def test_an_array_of_tanks_is_each_tank():
    salinities, temperatures = np.array([0.0, 12.0, 35.0]), np.array([28.0, 20.0, 10.0])
    flows = np.array([0.0, 50.0, 500.0])
    exchange = Exchange(inflows=(Inflow(flows, 10.0, 18.0),), evaporation_L_h=0.5, heating_kW=0.2)
    together = step(sea(800.0, salinities, temperatures), exchange, duration_s=1800, capacity_L=1000.0)
    for number in range(3):
        alone = step(
            sea(800.0, salinities[number], temperatures[number]),
            Exchange(inflows=(Inflow(flows[number], 10.0, 18.0),), evaporation_L_h=0.5, heating_kW=0.2),
            duration_s=1800,
            capacity_L=1000.0,
        )
        assert together.salt_kg[number] == pytest.approx(alone.salt_kg, rel=1e-12)
        assert together.temperature_degC[number] == pytest.approx(alone.temperature_degC, rel=1e-12)


def test_nothing_going_on_changes_nothing():
    water = sea(1000.0, 31.0, 28.0)
    after = step(water, Exchange(), duration_s=86_400)
    assert after.salt_kg == pytest.approx(water.salt_kg, rel=1e-12)
    assert after.temperature_degC == pytest.approx(28.0, abs=1e-9)


def test_nan_in_nan_out():
    after = step(sea(np.array([1000.0, np.nan]), 31.0, 28.0), Exchange(), duration_s=60)
    assert np.isfinite(after.practical_salinity[0])
    assert np.isnan(after.practical_salinity[1])


# --- what cannot be --------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("exchange", "duration_s", "named"),
    [
        (Exchange(outflow_L_h=-1.0), 60, "outflow_L_h"),
        (Exchange(evaporation_L_h=-1.0), 60, "evaporation_L_h"),
        (Exchange(inflows=(Inflow(-1.0, 0.0, 20.0),)), 60, r"inflows\[0\]"),
        (Exchange(), -60, "duration_s"),
        (Exchange(outflow_L_h=1000.0), 3600, "leave water in the tank"),
    ],
)
def test_what_cannot_be_is_refused_by_name(exchange, duration_s, named):
    with pytest.raises(InvalidInputError, match=named):
        step(sea(1000.0, 31.0, 28.0), exchange, duration_s=duration_s)


def test_a_tank_needs_a_volume_and_a_salinity_that_can_be():
    with pytest.raises(InvalidInputError, match="volume_L"):
        tank_water(0.0, absolute_salinity_g_kg=1.0, temperature_degC=20.0)
    with pytest.raises(InvalidInputError, match="absolute_salinity_g_kg"):
        tank_water(1.0, absolute_salinity_g_kg=-1.0, temperature_degC=20.0)
