from __future__ import annotations

import numpy as np
import pytest

from analysis.water.osmotic_pressure import (
    osmotic_pressure_from_absolute_salinity,
    osmotic_pressure_from_osmolality,
)
from analysis.water.seawater import osmolality_in_situ_from_absolute_salinity


def test_sea_water_of_35_at_25_degrees() -> None:
    # 2.592 MPa: our own value by TEOS-10 (regression)
    assert float(osmotic_pressure_from_absolute_salinity(35.16504, temperature_degC=25.0)) == pytest.approx(
        2592.04, abs=0.1
    )


@pytest.mark.parametrize("temperature", [0.0, 15.0, 35.0])
def test_the_short_way_is_within_an_eighth_of_a_percent(temperature: float) -> None:
    salinity = np.linspace(0.5, 45.0, 40)
    osmolality = osmolality_in_situ_from_absolute_salinity(salinity, temperature_degC=temperature)
    short = osmotic_pressure_from_osmolality(osmolality, temperature_degC=temperature)
    exact = osmotic_pressure_from_absolute_salinity(salinity, temperature_degC=temperature)
    np.testing.assert_allclose(short, exact, rtol=1.3e-3)


def test_the_limit_of_van_t_hoff() -> None:
    # pi = O R T rho of very dilute solutions: 1 mOsm/kg at 25 degC is 2.4717 kPa (8.314472 * 298.15 * 0.997047 / 1000)
    assert float(osmotic_pressure_from_osmolality(1.0, temperature_degC=25.0)) == pytest.approx(2.4717, rel=1e-4)
    assert float(osmotic_pressure_from_osmolality(0.0, temperature_degC=25.0)) == 0.0
    assert float(osmotic_pressure_from_absolute_salinity(0.0, temperature_degC=25.0)) == pytest.approx(0.0, abs=1e-6)


def test_what_cannot_be_is_nan() -> None:
    assert np.isnan(osmotic_pressure_from_osmolality([-1.0, np.nan], temperature_degC=20.0)).all()
    assert np.isnan(osmotic_pressure_from_absolute_salinity([-1.0, 130.0, np.nan], temperature_degC=20.0)).all()
