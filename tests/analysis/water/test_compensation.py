from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from analysis.errors import InvalidInputError
from analysis.water.compensation import (
    Compensation,
    CompensationMethod,
    conductivity_from_specific_conductance,
    is_within_natural_water_range,
    linear_factor,
    natural_water_factor,
    specific_conductance_from_conductivity,
)

METHODS = st.builds(
    Compensation,
    method=st.sampled_from(list(CompensationMethod)),
    coefficient_percent_per_K=st.floats(0.0, 3.0),
    reference_temperature_degC=st.sampled_from([20.0, 25.0]),
)


@given(compensation=METHODS, temperature=st.floats(-2.0, 45.0), conductivity=st.floats(0.0, 120.0))
def test_undoing_and_doing_come_back(compensation: Compensation, temperature: float, conductivity: float) -> None:
    reported = specific_conductance_from_conductivity(
        conductivity, temperature_degC=temperature, compensation=compensation
    )
    back = conductivity_from_specific_conductance(reported, temperature_degC=temperature, compensation=compensation)
    assert float(back) == pytest.approx(conductivity, rel=1e-12, abs=1e-300)


@given(compensation=METHODS)
def test_at_the_reference_temperature_nothing_changes(compensation: Compensation) -> None:
    factor = compensation.factor(compensation.reference_temperature_degC)
    assert float(factor) == pytest.approx(1.0, rel=1e-14)


@given(compensation=METHODS)
def test_warm_water_conducts_better(compensation: Compensation) -> None:
    factors = compensation.factor(np.linspace(-2.0, 45.0, 95))
    assert np.all(np.diff(factors) >= 0.0)


def test_linear_factor_by_hand() -> None:
    # 1 + 0.0191 * (15 - 25): arithmetic of the definition
    assert float(linear_factor(15.0)) == pytest.approx(0.809, rel=1e-15)


def test_reference_20_is_reference_25_over_the_printed_ratio() -> None:
    # f20 = f25 / 1.116, ISO 7888:1985 / EN 27888 (looked up in a reprint: manualslib.de manual 494750 p. 35)
    ratio = natural_water_factor(17.0, reference_temperature_degC=20.0) / natural_water_factor(17.0)
    assert float(ratio) == pytest.approx(1.116, abs=6e-4)


def test_arrays_of_sensors_with_settings_of_their_own() -> None:
    factors = linear_factor([10.0, 10.0], coefficient_percent_per_K=[0.0, 2.0], reference_temperature_degC=[25.0, 20.0])
    assert factors.tolist() == pytest.approx([1.0, 0.8])


def test_nan_stays_nan_and_an_impossible_factor_is_nan() -> None:
    assert np.isnan(linear_factor(np.nan))
    assert np.isnan(linear_factor(-40.0, coefficient_percent_per_K=2.0))
    assert np.isnan(natural_water_factor([np.nan, -86.4, 500.0])).all()


def test_the_printed_range_of_the_natural_water_curve() -> None:
    assert is_within_natural_water_range([-0.1, 0.0, 35.9, 36.0]).tolist() == [False, True, True, False]
    natural = Compensation(method=CompensationMethod.NATURAL_WATER)
    assert natural.is_extrapolated([10.0, 40.0, np.nan]).tolist() == [False, True, False]
    assert Compensation().is_extrapolated([10.0, 40.0]).tolist() == [False, False]


@pytest.mark.parametrize(
    "settings",
    [
        {"method": "cubic"},
        {"coefficient_percent_per_K": -1.0},
        {"coefficient_percent_per_K": np.nan},
        {"reference_temperature_degC": 250.0},
    ],
)
def test_settings_that_no_meter_has_are_refused(settings: dict[str, float]) -> None:
    with pytest.raises(InvalidInputError):
        Compensation(**settings)  # type: ignore[arg-type]
