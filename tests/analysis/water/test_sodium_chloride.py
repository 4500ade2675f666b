from __future__ import annotations

from dataclasses import fields

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from analysis.flags import Flag
from analysis.water import sodium_chloride as salt
from analysis.water.mixing import WaterBody, salt_addition
from analysis.water.properties import WaterKind, WaterProperties
from analysis.water.sodium_chloride_water import SodiumChlorideWater, dose_for_osmolality

WATER = SodiumChlorideWater()
TEMPERATURES = st.floats(-2.0, 45.0)
MOLALITIES = st.floats(1e-4, 2.1)


@given(molality=MOLALITIES, temperature=TEMPERATURES)
def test_molality_to_conductivity_and_back(molality: float, temperature: float) -> None:
    conductivity = salt.conductivity_from_molality(molality, temperature_degC=temperature)
    back = salt.molality_from_conductivity(conductivity, temperature_degC=temperature)
    assert float(back) == pytest.approx(molality, rel=1e-9)


@given(molality=st.floats(0.0, 2.1))
def test_molality_to_osmolality_and_back(molality: float) -> None:
    osmolality = salt.osmolality_from_molality(molality)
    assert float(salt.molality_from_osmolality(osmolality)) == pytest.approx(molality, rel=1e-10, abs=1e-12)


@given(temperature=TEMPERATURES)
def test_more_salt_is_more_of_everything(temperature: float) -> None:
    molality = np.linspace(0.0, 2.1, 200)
    for relation in (
        salt.conductivity_from_molality(molality, temperature_degC=temperature),
        salt.osmolality_from_molality(molality),
        salt.osmolality_in_situ_from_molality(molality, temperature_degC=temperature),
        salt.density_from_molality(molality, temperature_degC=temperature),
    ):
        assert np.all(np.diff(relation) > 0.0)


def test_the_fit_of_freezing_point_osmolality_is_the_exact_value() -> None:
    molality = np.concatenate([np.geomspace(1e-5, 0.1, 60), np.linspace(0.1, 2.1, 120)])
    exact = salt.exact_osmolality_from_molality(molality)
    np.testing.assert_allclose(salt.osmolality_from_molality(molality), exact, rtol=4e-6)


def test_the_seawater_relation_would_be_wrong_here() -> None:
    # 9 g/kg water: 5 % too little by the relation of sea water (our own figure: a regression test)
    from analysis.water.properties import Seawater

    conductivity = salt.conductivity_from_molality(9.0 / salt.MOLAR_MASS_G_MOL, temperature_degC=25.0)
    true = float(WATER.properties(conductivity, temperature_degC=25.0).osmolality_mOsm_kg)
    wrong = float(Seawater().properties(conductivity, temperature_degC=25.0).osmolality_mOsm_kg)
    assert wrong / true - 1.0 == pytest.approx(-0.053, abs=0.002)


def test_e6_dose_for_300() -> None:
    """Our own figures with Pitzer's equation (regression); pharmacopoeia: 9.463 g/kg (from memory), 0.4 %."""
    dose = dose_for_osmolality(300.0)
    assert dose.grams_per_kg_water == pytest.approx(9.492165, abs=1e-4)
    assert dose.grams_per_L_water == pytest.approx(9.46414, abs=1e-4)
    assert dose.conductivity_mS_cm == pytest.approx(16.659, abs=1e-3)
    assert dose.grams_per_kg_water == pytest.approx(9.463, rel=4e-3)
    tank = WaterBody(volume_L=1000.0, salinity=0.0, temperature_degC=25.0, kind=WATER)
    plan = salt_addition(tank, target_salinity=float(WATER.salinity_from_osmolality(300.0)))
    assert plan.product_kg == pytest.approx(9.46414, abs=1e-4)
    assert plan.after.osmolality_mOsm_kg == pytest.approx(300.0, abs=1e-6)
    assert dose.grams_per_L == pytest.approx(1000.0 * plan.product_kg / plan.after.volume_L, rel=1e-9)


def test_it_is_a_kind_of_water() -> None:
    water: WaterKind = WATER
    salinity = np.linspace(0.1, 100.0, 30)
    conductivity = water.conductivity_mS_cm(salinity=salinity, temperature_degC=18.0)
    np.testing.assert_allclose(water.salinity_from_conductivity(conductivity, temperature_degC=18.0), salinity)
    np.testing.assert_allclose(water.salinity_from_osmolality(water.osmolality_from_salinity(salinity)), salinity)
    assert np.array_equal(
        water.salinity_from_absolute_salinity(water.absolute_salinity_from_salinity(salinity)), salinity
    )
    assert float(water.density_kg_m3(salinity=10.0, temperature_degC=20.0)) > 1000.0


def test_flags_and_nulls() -> None:
    strong = salt.conductivity_from_molality([1.4, 1.6, 2.09], temperature_degC=25.0)
    conductivity = [10.0, 0.0, 0.002, np.nan, np.inf, -1.0, *strong, 170.0]
    found = WATER.properties(conductivity, temperature_degC=25.0)
    assert found.flags.tolist() == [
        0,
        int(Flag.BELOW_RANGE),
        int(Flag.BELOW_RANGE),
        int(Flag.NOT_FINITE),
        int(Flag.NOT_FINITE),
        int(Flag.NEGATIVE),
        0,
        int(Flag.EXTRAPOLATED),
        int(Flag.EXTRAPOLATED),
        int(Flag.OUT_OF_RANGE),
    ]
    nulls = np.isnan(found.osmolality_mOsm_kg).tolist()
    assert nulls == [False, False, False, True, True, True, False, False, False, True]
    for field in fields(WaterProperties):
        if field.name not in ("flags", "practical_salinity"):
            assert np.isnan(getattr(found, field.name)).tolist() == nulls, field.name
    assert np.isnan(found.practical_salinity).all()
    assert found.osmolality_mOsm_kg[1] == 0.0


@pytest.mark.parametrize(
    ("temperature", "flag"), [(40.0, Flag.EXTRAPOLATED), (46.0, Flag.OUT_OF_RANGE), (-3.0, Flag.OUT_OF_RANGE)]
)
def test_temperatures(temperature: float, flag: Flag) -> None:
    assert int(WATER.properties(10.0, temperature_degC=temperature).flags) == int(flag)


@given(conductivity=st.floats(0.003, 140.0), temperature=st.floats(0.0, 35.0))
def test_one_reading_alone_gives_what_it_gives_in_a_block(conductivity: float, temperature: float) -> None:
    block = WATER.properties([[5.0], [conductivity]], temperature_degC=[20.0, temperature])
    alone = WATER.properties(conductivity, temperature_degC=temperature)
    for field in fields(WaterProperties):
        among, single = getattr(block, field.name)[1, 1], getattr(alone, field.name)
        assert float(single) == pytest.approx(float(among), rel=1e-13, nan_ok=True)


def test_the_model_is_less_certain_in_the_cold() -> None:
    assert WATER.model_uncertainty_percent([0.0, 10.0, 15.0, 30.0]).tolist() == [1.1, 1.1, 0.6, 0.6]


def test_beyond_the_relation_is_nan() -> None:
    assert np.isnan(salt.conductivity_from_molality([-0.1, 2.2, np.nan], temperature_degC=20.0)).all()
    assert np.isnan(salt.osmolality_from_molality([-0.1, 2.2, np.nan])).all()
    assert np.isnan(salt.molality_from_osmolality([-1.0, 9000.0, np.nan])).all()
    assert np.isnan(salt.osmotic_coefficient_from_molality([1.0, 7.0], temperature_degC=[80.0, 20.0])).all()
    assert float(salt.osmotic_coefficient_from_molality(0.0, temperature_degC=20.0)) == 1.0
