from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from analysis.errors import InvalidInputError
from analysis.water import units

FINITE = st.floats(min_value=-1e4, max_value=1e5)


@pytest.mark.parametrize(
    ("unit", "sent", "expected"), [("mS/cm", 42.914, 42.914), ("uS/cm", 42914, 42.914), ("S/m", 4.2914, 42.914)]
)
def test_one_conductivity_in_every_unit_is_the_same_water(unit: str, sent: float, expected: float) -> None:
    assert float(units.conductivity_mS_cm_from(sent, unit=unit)) == pytest.approx(expected, rel=1e-14)


@pytest.mark.parametrize(
    ("unit", "sent", "expected"), [("degC", 25, 25), ("degF", 77, 25), ("K", 298.15, 25), ("degF", 32, 0)]
)
def test_temperature_units(unit: str, sent: float, expected: float) -> None:
    assert float(units.temperature_degC_from(sent, unit=unit)) == pytest.approx(expected, abs=1e-12)


@pytest.mark.parametrize(("unit", "sent"), [("dbar", 10.0), ("kPa", 100.0), ("bar", 1.0)])
def test_pressure_units(unit: str, sent: float) -> None:
    assert float(units.pressure_dbar_from(sent, unit=unit)) == pytest.approx(10.0)


@given(value=FINITE, unit=st.sampled_from(sorted(units.CONDUCTIVITY_UNITS)))
def test_conductivity_comes_back(value: float, unit: str) -> None:
    there = units.conductivity_mS_cm_from(value, unit=unit)
    assert float(units.conductivity_in(there, unit=unit)) == pytest.approx(value, rel=1e-14, abs=1e-300)


@given(value=FINITE, unit=st.sampled_from(sorted(units.TEMPERATURE_UNITS)))
def test_temperature_comes_back(value: float, unit: str) -> None:
    there = units.temperature_degC_from(value, unit=unit)
    assert float(units.temperature_in(there, unit=unit)) == pytest.approx(value, rel=1e-12, abs=1e-9)


@given(value=FINITE, unit=st.sampled_from(sorted(units.PRESSURE_UNITS)))
def test_pressure_comes_back(value: float, unit: str) -> None:
    there = units.pressure_dbar_from(value, unit=unit)
    assert float(units.pressure_in(there, unit=unit)) == pytest.approx(value, rel=1e-12)


def test_nan_stays_nan_and_arrays_keep_their_shape() -> None:
    there = units.temperature_degC_from([[np.nan, 212.0]], unit="degF")
    assert there.shape == (1, 2)
    assert np.isnan(there[0, 0])
    assert there[0, 1] == pytest.approx(100.0)


def test_an_unknown_unit_is_refused_with_the_known_ones() -> None:
    with pytest.raises(InvalidInputError, match="mS/cm, uS/cm, S/m") as caught:
        units.conductivity_mS_cm_from(1.0, unit="mho")
    assert caught.value.found == "mho"
