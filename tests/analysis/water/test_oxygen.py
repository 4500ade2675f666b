from __future__ import annotations

import numpy as np
import pytest

from analysis.water.oxygen import (
    air_pressure_at_elevation,
    oxygen_solubility_mg_L,
    oxygen_solubility_umol_kg,
    vapour_pressure_kPa,
)
from analysis.water.seawater import reference_salinity_from_practical_salinity


@pytest.mark.parametrize(
    ("salinity", "temperature", "expected"),
    # our own table of the Garcia and Gordon relation with TEOS-10 densities (regression); fresh water of Benson and
    # Krause as printed in textbooks: 14.62, 9.09, 8.26 (from memory)
    [
        (0, 0, 14.621),
        (0, 20, 9.091),
        (0, 25, 8.262),
        (10, 15, 9.484),
        (20, 30, 6.772),
        (35, 0, 11.445),
        (35, 35, 5.768),
    ],
)
def test_milligrams_per_litre(salinity: float, temperature: float, expected: float) -> None:
    absolute = reference_salinity_from_practical_salinity(salinity)
    assert float(oxygen_solubility_mg_L(absolute, temperature_degC=temperature)) == pytest.approx(expected, abs=1e-3)


def test_salt_and_warmth_drive_oxygen_out() -> None:
    salinity, temperature = np.linspace(0.0, 40.0, 20), np.linspace(0.0, 35.0, 20)
    assert np.all(np.diff(oxygen_solubility_umol_kg(salinity, temperature_degC=20.0)) < 0.0)
    assert np.all(np.diff(oxygen_solubility_umol_kg(20.0, temperature_degC=temperature)) < 0.0)


def test_thin_air_holds_less() -> None:
    at_sea, high = (oxygen_solubility_mg_L(0.0, temperature_degC=20.0, air_pressure_kPa=p) for p in (101.325, 84.556))
    # proportional to the pressure of dry air: (84.556 - 2.339) / (101.325 - 2.339)
    assert float(high / at_sea) == pytest.approx(0.8306, abs=3e-4)
    assert float(air_pressure_at_elevation(1500.0)) == pytest.approx(84.556, abs=1e-3)  # ISO 2533 (from memory)
    assert float(air_pressure_at_elevation(0.0)) == 101.325


def test_vapour_pressure() -> None:
    # 3.169 kPa for pure water at 25 degC, 1.228 at 10 degC: steam tables (from memory)
    assert float(vapour_pressure_kPa(0.0, temperature_degC=25.0)) == pytest.approx(3.169, rel=2e-3)
    assert float(vapour_pressure_kPa(0.0, temperature_degC=10.0)) == pytest.approx(1.228, rel=2e-3)
    assert vapour_pressure_kPa(35.0, temperature_degC=25.0) < vapour_pressure_kPa(0.0, temperature_degC=25.0)


def test_nan_stays_nan() -> None:
    assert np.isnan(oxygen_solubility_mg_L([np.nan, -1.0, 130.0], temperature_degC=20.0)).all()
    assert np.isnan(oxygen_solubility_mg_L(10.0, temperature_degC=np.nan))
