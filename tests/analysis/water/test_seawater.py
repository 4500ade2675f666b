from __future__ import annotations

import gsw
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from analysis.water import seawater as sw

TEMPERATURES = st.floats(-2.0, 35.0)


@given(salinity=st.floats(0.01, 100.0), temperature=TEMPERATURES, pressure=st.floats(0.0, 50.0))
def test_salinity_to_conductivity_and_back(salinity: float, temperature: float, pressure: float) -> None:
    conductivity = sw.conductivity_from_practical_salinity(
        salinity, temperature_degC=temperature, pressure_dbar=pressure
    )
    back = sw.practical_salinity_from_conductivity(conductivity, temperature_degC=temperature, pressure_dbar=pressure)
    assert float(back) == pytest.approx(salinity, rel=1e-8)


@given(temperature=TEMPERATURES)
def test_more_conductivity_is_never_less_salt(temperature: float) -> None:
    conductivity = np.concatenate([np.linspace(0.0, 0.01, 200), np.geomspace(0.01, 90.0, 300)])
    salinity = sw.practical_salinity_from_conductivity(conductivity, temperature_degC=temperature)
    assert np.all(np.diff(salinity) >= 0.0)


@pytest.mark.parametrize("temperature", [-2.0, 0.0, 5.0, 10.0, 15.0, 18.0, 22.0, 25.0, 35.0, 45.0])
def test_nearly_no_conductivity_is_fresh_water_not_a_fault(temperature: float) -> None:
    # The library answers NaN for these (GSW-C source of gsw_sp_from_c: invalid where SP < 0).
    conductivity = np.concatenate([[0.0], np.geomspace(1e-6, 0.002, 50)])
    salinity = sw.practical_salinity_from_conductivity(conductivity, temperature_degC=temperature)
    assert salinity.tolist() == [0.0] * 51
    just_above = sw.practical_salinity_from_conductivity(0.0031, temperature_degC=temperature)
    assert 0.0 < float(just_above) < 0.003


@pytest.mark.parametrize("conductivity", [-1.0, -1e-9, np.nan, np.inf, -np.inf])
def test_conductivity_that_cannot_be_is_nan(conductivity: float) -> None:
    assert np.isnan(sw.practical_salinity_from_conductivity(conductivity, temperature_degC=15.0))
    assert np.isnan(sw.practical_salinity_from_conductivity([30.0, conductivity], temperature_degC=15.0)[1])


@pytest.mark.parametrize("other", [{"temperature_degC": np.nan}, {"temperature_degC": 15.0, "pressure_dbar": np.nan}])
def test_a_missing_companion_is_nan_even_in_fresh_water(other: dict[str, float]) -> None:
    for conductivity in (0.0, 0.001, 30.0):
        assert np.isnan(sw.practical_salinity_from_conductivity(conductivity, **other))


def test_negative_salinity_never_passes() -> None:
    # The library answers -1.0047 g/kg for SP -1.
    assert np.isnan(sw.absolute_salinity_from_practical_salinity(-1.0, longitude=0.0, latitude=40.0))
    assert np.isnan(sw.absolute_salinity_from_practical_salinity(-1.0))
    assert np.isnan(sw.density_from_absolute_salinity(-1.0, temperature_degC=10.0))
    assert np.isnan(sw.osmolality_from_absolute_salinity(-1.0))
    assert np.isnan(sw.conductivity_from_practical_salinity(-1.0, temperature_degC=10.0))


def test_absolute_salinity_without_position_is_reference_salinity() -> None:
    # Millero et al. 2008: SP 35 is 35.16504 g/kg
    assert float(sw.absolute_salinity_from_practical_salinity(35.0)) == pytest.approx(35.16504, abs=1e-12)


def test_absolute_salinity_with_positions_for_some_only() -> None:
    # Baltic: +0.087 (1 - SP/35) g/kg of Reich et al. / McDougall et al. 2012 eq. 28, here at SP 7
    salinity = sw.absolute_salinity_from_practical_salinity(
        [7.0, 7.0, 7.0, 7.0], longitude=[20.0, np.nan, 20.0, -100.0], latitude=[58.0, 58.0, 95.0, 40.0]
    )
    reference = 7.0 * 35.16504 / 35.0
    assert salinity[0] - reference == pytest.approx(0.087 * (1 - 7.0 / 35.0), abs=1e-6)
    assert salinity[1:].tolist() == pytest.approx([reference] * 3)


def test_the_fit_of_freezing_point_osmolality_holds_over_its_whole_range() -> None:
    salinity = np.concatenate([np.geomspace(1e-5, 1.0, 300), np.linspace(1.0, 120.0, 1500)])
    exact = sw.exact_osmolality_from_absolute_salinity(salinity)
    fitted = sw.osmolality_from_absolute_salinity(salinity)
    assert np.max(np.abs(fitted / exact - 1.0)) < 6e-7
    assert np.max(np.abs(fitted - exact)) < 2.1e-3


def test_the_fit_ends_where_the_equation_ends() -> None:
    assert float(sw.osmolality_from_absolute_salinity(0.0)) == 0.0
    assert np.isnan(sw.osmolality_from_absolute_salinity([120.1, np.nan, np.inf])).all()


def test_pure_water_by_the_short_way_equals_the_gibbs_function() -> None:
    temperature = np.linspace(-2.0, 45.0, 48)
    short = 1000.0 * gsw.chem_potential_water_t_exact(0.0, temperature, 3.0)
    long = gsw.gibbs(0, 0, 0, 0.0 * temperature, temperature, 3.0)
    np.testing.assert_allclose(short, long, rtol=1e-14)


@given(salinity=st.floats(0.0, 120.0))
def test_osmolality_to_salinity_and_back(salinity: float) -> None:
    osmolality = sw.osmolality_from_absolute_salinity(salinity)
    assert float(sw.absolute_salinity_from_osmolality(osmolality)) == pytest.approx(salinity, rel=1e-10, abs=1e-12)


def test_osmolality_without_a_salinity_is_nan() -> None:
    assert np.isnan(sw.absolute_salinity_from_osmolality([-1.0, np.nan, 5000.0])).all()


def test_osmotic_coefficient_tends_to_one() -> None:
    coefficients = sw.osmotic_coefficient_from_absolute_salinity([0.0, 1e-6, np.nan], temperature_degC=25.0)
    assert coefficients[0] == 1.0
    assert coefficients[1] == pytest.approx(1.0, abs=1e-3)
    assert np.isnan(coefficients[2])


@given(salinity=st.floats(0.0, 100.0), temperature=TEMPERATURES)
def test_a_scalar_equals_its_array_element(salinity: float, temperature: float) -> None:
    alone = sw.osmolality_in_situ_from_absolute_salinity(salinity, temperature_degC=temperature)
    among = sw.osmolality_in_situ_from_absolute_salinity([salinity, 3.0], temperature_degC=[temperature, 9.0])
    assert float(alone) == among[0]
    assert (
        float(sw.osmolality_from_absolute_salinity(salinity))
        == sw.osmolality_from_absolute_salinity([1.0, salinity])[1]
    )


@given(salinity=st.floats(0.0, 119.0), temperature=TEMPERATURES, pressure=st.floats(0.0, 50.0))
def test_density_to_salinity_and_back(salinity: float, temperature: float, pressure: float) -> None:
    density = sw.density_from_absolute_salinity(salinity, temperature_degC=temperature, pressure_dbar=pressure)
    back = sw.absolute_salinity_from_density(density, temperature_degC=temperature, pressure_dbar=pressure)
    assert float(back) == pytest.approx(salinity, rel=1e-9, abs=1e-8)


def test_a_density_that_no_sea_water_has_is_nan() -> None:
    assert np.isnan(sw.absolute_salinity_from_density([990.0, 1200.0, np.nan], temperature_degC=20.0)).all()
