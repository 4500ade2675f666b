"""Salt, water and heat balance.

The worked examples are our own arithmetic with TEOS-10 densities (regression tests, not references); the
densities themselves are checked against published values in tests/reference.
"""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from analysis.errors import InvalidInputError
from analysis.water.mixing import (
    WaterBody,
    addition,
    after_exchange,
    blend,
    dissolve,
    evaporation,
    flow_through,
    flow_through_time_min,
    replacement,
    salt_addition,
)
from analysis.water.properties import Seawater

TANK = WaterBody(volume_L=1000.0, salinity=35.0, temperature_degC=20.0)
FRESH = WaterBody(volume_L=1.0, salinity=0.0, temperature_degC=20.0)
BRACKISH = WaterBody(volume_L=1.0, salinity=2.0, temperature_degC=20.0)

VOLUMES = st.floats(1.0, 1e5)
SALINITIES = st.floats(0.0, 45.0)
TEMPERATURES = st.floats(0.0, 35.0)
BODIES = st.builds(WaterBody, volume_L=VOLUMES, salinity=SALINITIES, temperature_degC=TEMPERATURES)


class OtherKind(Seawater):
    """Sea water under another name: a kind that must not be mixed with the first."""

    name = "other"


def test_e1_drain_and_fill_with_fresh_water() -> None:
    exchange = replacement(TANK, source=FRESH, target_salinity=20.0, held_temperature_degC=20.0)
    assert exchange.drain_L == pytest.approx(434.929250, abs=1e-4)
    assert exchange.add_L == pytest.approx(435.079002, abs=1e-4)
    assert exchange.after.volume_L == 1000.0
    # the shortcut by volume alone is 1.5 % short
    assert exchange.drain_L / (1000.0 * (1.0 - 20.0 / 35.0)) == pytest.approx(1.0148, abs=1e-4)


def test_e2_adding_only() -> None:
    exchange = addition(TANK, source=FRESH, target_salinity=20.0, held_temperature_degC=20.0)
    assert exchange.drain_L == 0.0
    assert exchange.add_L == pytest.approx(769.954917, abs=1e-4)
    assert exchange.after.volume_L == pytest.approx(1769.689902, abs=1e-4)
    assert exchange.after.salinity == pytest.approx(20.0, rel=1e-12)


def test_e3_drain_and_fill_with_brackish_water() -> None:
    exchange = replacement(TANK, source=BRACKISH, target_salinity=20.0, held_temperature_degC=20.0)
    assert exchange.drain_L == pytest.approx(460.614284, abs=1e-4)
    assert exchange.add_L == pytest.approx(460.742902, abs=1e-4)


@pytest.mark.parametrize(("source", "minutes"), [(FRESH, 114.160867), (BRACKISH, 123.462055)])
def test_e4_flow_through(source: WaterBody, minutes: float) -> None:
    found = flow_through_time_min(TANK, source=source, target_salinity=20.0, flow_L_min=5.0, held_temperature_degC=20.0)
    assert found == pytest.approx(minutes, abs=1e-4)
    salinity, temperature = flow_through(TANK, source=source, flow_L_min=5.0, minutes=[0.0, found])
    assert salinity.tolist() == pytest.approx([35.0, 20.0], rel=1e-5)  # here the heat of mixing is left in
    assert temperature.tolist() == pytest.approx([20.0, 20.0], abs=0.02)


def test_e5_sea_salt_into_a_tank() -> None:
    tank = WaterBody(volume_L=1000.0, salinity=5.0, temperature_degC=25.0)
    found = salt_addition(tank, target_salinity=15.0)
    assert found.product_kg == pytest.approx(10.209152, abs=1e-4)
    assert found.after.volume_L == pytest.approx(1002.6967, abs=1e-4)


@pytest.mark.parametrize(
    ("salinity", "grams", "growth"),
    [(1, 1.0028, 1.0002), (5, 5.0340, 1.0013), (10, 10.1192, 1.0026), (20, 20.4458, 1.0054), (35, 36.3391, 1.0098)],
)
def test_e5b_sea_salt_into_fresh_water(salinity: float, grams: float, growth: float) -> None:
    litre = WaterBody(volume_L=1.0, salinity=0.0, temperature_degC=25.0)
    found = salt_addition(litre, target_salinity=salinity)
    assert 1000.0 * found.product_kg == pytest.approx(grams, abs=1e-4)
    assert found.after.volume_L == pytest.approx(growth, abs=1e-4)


def test_e7_blend_of_two_waters_of_different_temperature() -> None:
    mixed = blend(
        WaterBody(volume_L=300.0, salinity=35.0, temperature_degC=10.0),
        WaterBody(volume_L=700.0, salinity=2.0, temperature_degC=22.0),
    )
    assert mixed.absolute_salinity_g_kg == pytest.approx(12.14725801, abs=1e-7)
    assert mixed.salinity == pytest.approx(12.09024732, abs=1e-7)
    assert mixed.temperature_degC == pytest.approx(18.433547, abs=1e-6)
    assert mixed.volume_L == pytest.approx(999.87323, abs=1e-5)
    assert mixed.osmolality_mOsm_kg == pytest.approx(351.3469, abs=1e-3)


def test_e8_evaporation() -> None:
    left = evaporation(WaterBody(volume_L=1000.0, salinity=35.0, temperature_degC=25.0), water_L=50.0)
    assert left.salinity == pytest.approx(36.79234625, abs=1e-7)


@given(bodies=st.lists(BODIES, min_size=1, max_size=4))
def test_a_blend_keeps_salt_and_mass_and_lies_between(bodies: list[WaterBody]) -> None:
    mixed = blend(*bodies)
    assert mixed.mass_kg == pytest.approx(sum(body.mass_kg for body in bodies), rel=1e-12)
    assert mixed.salt_kg == pytest.approx(sum(body.salt_kg for body in bodies), rel=1e-12, abs=1e-12)
    low, high = min(body.salinity for body in bodies), max(body.salinity for body in bodies)
    assert low - 1e-9 <= mixed.salinity <= high + 1e-9
    coldest, warmest = min(b.temperature_degC for b in bodies), max(b.temperature_degC for b in bodies)
    assert coldest - 0.1 <= mixed.temperature_degC <= warmest + 0.1


@given(body=BODIES, source=BODIES, share=st.floats(0.0, 0.98))
def test_what_was_planned_is_what_comes_out(body: WaterBody, source: WaterBody, share: float) -> None:
    target = body.salinity + share * (source.salinity - body.salinity)
    if abs(target - source.salinity) < 1e-3 and abs(target - body.salinity) > 0.0:
        return
    for plan in (replacement, addition):
        exchange = plan(body, source=source, target_salinity=target)
        if exchange.drain_L < 0.0:  # warm source water swells: the full tank overflows by what is not drained
            assert exchange.drain_L > -0.02 * body.volume_L
            continue
        done = after_exchange(body, source=source, drain_L=exchange.drain_L, add_L=exchange.add_L)
        assert done.salinity == pytest.approx(target, rel=1e-7, abs=1e-7)
        assert done.volume_L == pytest.approx(exchange.after.volume_L, rel=1e-9)
        assert done.temperature_degC == pytest.approx(exchange.after.temperature_degC, abs=1e-7)


@given(body=BODIES, source=BODIES, share=st.floats(0.01, 0.95))
def test_time_and_course_of_a_flow_through_agree(body: WaterBody, source: WaterBody, share: float) -> None:
    if abs(body.salinity - source.salinity) < 0.1:
        return
    target = body.salinity + share * (source.salinity - body.salinity)
    minutes = flow_through_time_min(body, source=source, target_salinity=target, flow_L_min=3.0)
    salinity, _ = flow_through(body, source=source, flow_L_min=3.0, minutes=minutes)
    assert float(salinity) == pytest.approx(target, rel=1e-6, abs=1e-6)


@given(body=BODIES, more=st.floats(0.0, 30.0), dry=st.floats(0.5, 1.0))
def test_planned_salt_gives_the_planned_salinity(body: WaterBody, more: float, dry: float) -> None:
    plan = salt_addition(body, target_salinity=body.salinity + more, dry_fraction=dry)
    done = dissolve(body, product_kg=plan.product_kg, dry_fraction=dry)
    assert done.salinity == pytest.approx(body.salinity + more, rel=1e-10, abs=1e-10)
    assert done.volume_L == pytest.approx(plan.after.volume_L, rel=1e-10)


def test_damp_salt_needs_more_of_it() -> None:
    dry = salt_addition(FRESH, target_salinity=10.0).product_kg
    damp = salt_addition(FRESH, target_salinity=10.0, dry_fraction=0.85).product_kg
    assert damp > dry / 0.85  # also its own water must be salted


@given(body=BODIES, share=st.floats(0.0, 0.5))
def test_evaporation_keeps_the_salt(body: WaterBody, share: float) -> None:
    left = evaporation(body, water_L=share * body.volume_L)
    assert left.salt_kg == pytest.approx(body.salt_kg, rel=1e-12, abs=1e-12)


def test_nothing_to_do_is_nothing() -> None:
    exchange = replacement(TANK, source=FRESH, target_salinity=35.0)
    assert (exchange.drain_L, exchange.add_L) == (pytest.approx(0.0, abs=1e-9), pytest.approx(0.0, abs=1e-9))
    assert flow_through_time_min(TANK, source=FRESH, target_salinity=35.0, flow_L_min=1.0) == 0.0


@pytest.mark.parametrize("target", [36.0, 0.0, -1.0, math.nan])
def test_a_target_that_the_source_cannot_reach_is_refused(target: float) -> None:
    with pytest.raises(InvalidInputError, match="salinity"):
        replacement(TANK, source=FRESH, target_salinity=target)
    with pytest.raises(InvalidInputError, match="salinity"):
        flow_through_time_min(TANK, source=FRESH, target_salinity=target, flow_L_min=5.0)


@pytest.mark.parametrize(
    ("volume", "salinity", "temperature"),
    [(-1.0, 10.0, 20.0), (1.0, -0.1, 20.0), (1.0, 10.0, 50.0), (1.0, math.nan, 20.0), (1.0, 130.0, 20.0)],
)
def test_water_that_cannot_be_is_refused(volume: float, salinity: float, temperature: float) -> None:
    with pytest.raises(InvalidInputError):
        WaterBody(volume_L=volume, salinity=salinity, temperature_degC=temperature)


def test_waters_of_two_kinds_have_no_common_balance() -> None:
    other = WaterBody(volume_L=1.0, salinity=3.0, temperature_degC=20.0, kind=OtherKind(name="other"))
    with pytest.raises(InvalidInputError, match="one kind"):
        blend(TANK, other)


@pytest.mark.parametrize(
    "act",
    [
        lambda: salt_addition(TANK, target_salinity=30.0),
        lambda: salt_addition(TANK, target_salinity=40.0, dry_fraction=0.0),
        lambda: salt_addition(TANK, target_salinity=40.0, dry_fraction=0.03),
        lambda: evaporation(TANK, water_L=1001.0),
        lambda: evaporation(TANK, water_L=999.0),
        lambda: after_exchange(TANK, source=FRESH, drain_L=1001.0, add_L=1.0),
        lambda: flow_through_time_min(TANK, source=FRESH, target_salinity=20.0, flow_L_min=0.0),
        lambda: blend(),
        lambda: dissolve(TANK, product_kg=-1.0),
    ],
)
def test_what_cannot_be_done_is_refused(act: object) -> None:
    assert callable(act)
    with pytest.raises(InvalidInputError):
        act()


def test_a_course_has_the_shape_of_its_times() -> None:
    salinity, temperature = flow_through(TANK, source=BRACKISH, flow_L_min=10.0, minutes=np.zeros((2, 3)))
    assert salinity.shape == temperature.shape == (2, 3)
