from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from analysis.errors import InvalidInputError
from analysis.water.properties import Seawater
from analysis.water.sodium_chloride_water import SodiumChlorideWater
from analysis.water.uncertainty import AccuracyArrays, SensorAccuracy, uncertainty_of_readings

SEA = Seawater()


@pytest.mark.parametrize(
    ("salinity", "temperature", "by_conductivity", "by_temperature", "total", "osmolality"),
    [
        # our own central differences of PSS-78 and TEOS-10 for 0.5 % and 0.1 K (regression)
        (1, 25, 0.0053, 0.0021, 0.0057, 0.17),
        (5, 15, 0.0268, 0.0127, 0.0296, 0.86),
        (15, 15, 0.0818, 0.0382, 0.0903, 2.63),
        (35, 5, 0.1943, 0.1052, 0.2209, 6.80),
        (35, 15, 0.1958, 0.0897, 0.2154, 6.63),
        (35, 25, 0.1969, 0.0775, 0.2116, 6.51),
    ],
)
def test_half_a_percent_and_a_tenth_of_a_kelvin(
    salinity: float, temperature: float, by_conductivity: float, by_temperature: float, total: float, osmolality: float
) -> None:
    conductivity = SEA.conductivity_mS_cm(salinity=salinity, temperature_degC=temperature)
    found = uncertainty_of_readings(conductivity, temperature_degC=temperature, kind=SEA)
    assert float(found.salinity_from_conductivity) == pytest.approx(by_conductivity, abs=1e-4)
    assert float(found.salinity_from_temperature) == pytest.approx(by_temperature, abs=2e-4)
    assert float(found.salinity) == pytest.approx(total, abs=2e-4)
    assert float(found.osmolality_mOsm_kg) == pytest.approx(osmolality, abs=0.006)


@given(conductivity=st.floats(0.0, 70.0), temperature=st.floats(-2.0, 35.0), worse=st.floats(1.0, 5.0))
def test_a_worse_sensor_is_less_certain(conductivity: float, temperature: float, worse: float) -> None:
    good = SensorAccuracy(0.3, 0.005, 0.05)
    bad = SensorAccuracy(0.3 * worse, 0.005 * worse, 0.05 * worse)
    near, far = (
        uncertainty_of_readings(conductivity, temperature_degC=temperature, accuracy=accuracy, kind=SEA)
        for accuracy in (good, bad)
    )
    assert float(far.salinity) == pytest.approx(worse * float(near.salinity), rel=1e-9, abs=1e-12)
    assert float(far.osmolality_mOsm_kg) == pytest.approx(worse * float(near.osmolality_mOsm_kg), rel=1e-9, abs=1e-12)


def test_the_greater_of_percent_and_absolute_counts() -> None:
    accuracy = SensorAccuracy(conductivity_percent=1.0, conductivity_mS_cm=0.1, temperature_K=0.0)
    weak, strong = uncertainty_of_readings([2.0, 40.0], temperature_degC=20.0, accuracy=accuracy, kind=SEA).salinity
    assert weak == pytest.approx(
        float(
            SEA.salinity_from_conductivity(2.1, temperature_degC=20.0)
            - SEA.salinity_from_conductivity(2.0, temperature_degC=20.0)
        ),
        rel=0.01,
    )
    assert strong == pytest.approx(
        float(
            SEA.salinity_from_conductivity(40.4, temperature_degC=20.0)
            - SEA.salinity_from_conductivity(40.0, temperature_degC=20.0)
        ),
        rel=0.01,
    )


def test_the_model_of_plain_salt_adds_its_own() -> None:
    exact = SensorAccuracy(conductivity_percent=0.0, conductivity_mS_cm=0.0, temperature_K=0.0)
    water = SodiumChlorideWater()
    found = uncertainty_of_readings([10.0, 10.0], temperature_degC=[5.0, 25.0], accuracy=exact, kind=water)
    osmolality = water.properties([10.0, 10.0], temperature_degC=[5.0, 25.0]).osmolality_mOsm_kg
    assert (found.osmolality_mOsm_kg / osmolality).tolist() == pytest.approx([0.011, 0.006])
    assert found.salinity.tolist() == [0.0, 0.0]
    assert uncertainty_of_readings(10.0, temperature_degC=5.0, accuracy=exact, kind=SEA).osmolality_mOsm_kg == 0.0


def test_fresh_water_and_unreadable_readings() -> None:
    found = uncertainty_of_readings(
        [0.0, np.nan, -1.0], temperature_degC=20.0, accuracy=SensorAccuracy(0.5, 0.01, 0.1), kind=SEA
    )
    assert found.salinity[0] > 0.0
    assert np.isnan(found.salinity[1:]).all()
    assert np.isnan(found.osmolality_mOsm_kg[1:]).all()


def test_a_salinity_known_already_gives_the_same() -> None:
    conductivity = np.array([5.0, 30.0])
    salinity = SEA.salinity_from_conductivity(conductivity, temperature_degC=18.0)
    with_it = uncertainty_of_readings(conductivity, temperature_degC=18.0, kind=SEA, salinity=salinity)
    without = uncertainty_of_readings(conductivity, temperature_degC=18.0, kind=SEA)
    assert np.array_equal(with_it.salinity, without.salinity)


@pytest.mark.parametrize(
    "settings", [{"conductivity_percent": -1.0}, {"conductivity_mS_cm": np.nan}, {"temperature_K": 50.0}]
)
def test_an_accuracy_that_cannot_be_is_refused(settings: dict[str, float]) -> None:
    with pytest.raises(InvalidInputError, match="accuracy"):
        SensorAccuracy(**settings)


def test_many_sensors_at_once_each_with_its_own_accuracy() -> None:
    sensors = [SensorAccuracy(0.5, 0.0, 0.1), SensorAccuracy(2.0, 0.2, 0.5)]
    sensor = np.array([1, 0, 1, 0])
    conductivity, temperature = np.array([5.0, 5.0, 40.0, 40.0]), np.array([10.0, 10.0, 25.0, 25.0])
    together = uncertainty_of_readings(
        conductivity, temperature_degC=temperature, accuracy=AccuracyArrays.of(sensors).at(sensor), kind=SEA
    )
    for index, which in enumerate(sensor):
        alone = uncertainty_of_readings(
            conductivity[index], temperature_degC=temperature[index], accuracy=sensors[which], kind=SEA
        )
        assert float(alone.osmolality_mOsm_kg) == pytest.approx(together.osmolality_mOsm_kg[index], rel=1e-12)
