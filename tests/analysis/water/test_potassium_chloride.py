from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from analysis.water import potassium_chloride as kcl


@given(molality=st.floats(1e-4, 4.4), temperature=st.floats(0.0, 55.0))
def test_molality_to_conductivity_and_back(molality: float, temperature: float) -> None:
    conductivity = kcl.conductivity_from_molality(molality, temperature_degC=temperature)
    assert float(kcl.molality_from_conductivity(conductivity, temperature_degC=temperature)) == pytest.approx(
        molality, rel=1e-9
    )


@pytest.mark.parametrize(
    ("label", "temperature", "expected"),
    [
        # our own table by McKee's equation (regression)
        (1.413, 5.0, 0.8940),
        (1.413, 35.0, 1.6934),
        (12.88, 20.0, 11.6638),
        (111.8, 30.0, 121.651),
        (0.084, 15.0, 0.0680),
    ],
)
def test_labelled_standards(label: float, temperature: float, expected: float) -> None:
    assert float(kcl.conductivity_of_labelled_standard(label, temperature_degC=temperature)) == pytest.approx(
        expected, rel=1e-3
    )


def test_a_label_at_25_is_itself_there() -> None:
    assert float(kcl.conductivity_of_labelled_standard(12.88, temperature_degC=25.0)) == pytest.approx(12.88, rel=1e-9)


def test_a_printed_misprint_is_not_followed() -> None:
    # A widely printed bottle table gives 1667 uS/cm at 35 degC for the 1413 uS/cm standard; the demal table of the
    # same manual (manualslib.mx manual 148298 p. 47, looked up) scales to 1693.
    assert float(kcl.conductivity_of_labelled_standard(1.413, temperature_degC=35.0)) == pytest.approx(
        1.6876 * 1413.0 / 1408.3, rel=1e-3
    )


def test_what_cannot_be_is_nan() -> None:
    assert np.isnan(
        kcl.conductivity_from_molality([-1.0, 5.0, 0.1, np.nan], temperature_degC=[20.0, 20.0, 60.0, 20.0])
    ).all()
    assert np.isnan(kcl.molality_from_conductivity([-1.0, 900.0, np.nan], temperature_degC=25.0)).all()
