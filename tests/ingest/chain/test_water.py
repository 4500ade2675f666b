"""From values as sent to the water, with the flags that the design names: units, compensation, ranges.

Reference values: gsw (the TEOS-10 toolbox) computes what PSS-78 defines; the flags are the project's own definition.
"""

from __future__ import annotations

import gsw
import numpy as np
import pytest

from analysis.flags import Flag, words
from ingest.chain.block import RawBlock
from ingest.chain.water import water
from ingest.reading import RawReading
from tests.harness.hatchery import START_US, site_text
from tests.ingest.chain.road import NAN, plant_of


def seen(conductivity: float, temperature: float = 25.0, *, flags: int = 0, **declared: str):
    """Return what one reading of a sensor says that is declared so."""
    extra = "".join(f"    {key}: {value}\n" for key, value in declared.items())
    text = site_text(port=1).replace("    interval_s: 60.0\n", f"    interval_s: 60.0\n{extra}")
    block = RawBlock.from_readings([RawReading(0, START_US, START_US, conductivity, temperature, NAN, flags)])
    return water(plant_of(text).roster, block)


def salinity(found) -> float:
    return float(found.properties.practical_salinity[0])


def flags(found) -> set[str]:
    return set(words(int(found.flags[0])))


@pytest.mark.parametrize(("unit", "value"), [("mS/cm", 50.0), ("uS/cm", 50_000.0), ("S/m", 5.0)])
def test_units_of_conductivity_say_the_same(unit, value):
    found = seen(value, conductivity_unit=unit)
    assert found.conductivity_mS_cm[0] == pytest.approx(50.0, rel=1e-12)
    assert salinity(found) == pytest.approx(gsw.SP_from_C(50.0, 25.0, 0.0), abs=1e-9)


@pytest.mark.parametrize(("unit", "value"), [("degC", 25.0), ("degF", 77.0), ("K", 298.15)])
def test_units_of_temperature_say_the_same(unit, value):
    found = seen(50.0, value, temperature_unit=unit)
    assert found.temperature_degC[0] == pytest.approx(25.0, abs=1e-9)
    assert salinity(found) == pytest.approx(gsw.SP_from_C(50.0, 25.0, 0.0), abs=1e-7)


@pytest.mark.parametrize("temperature", [5.0, 15.0, 25.0, 33.0])
def test_linear_compensation_is_undone(temperature):
    """C = SC (1 + a (T - 25)): the way field instruments state it (ISO 7888; common practice 1.91 %/K)."""
    found = seen(
        50.0, temperature, reports="compensated", compensation="{method: linear, coefficient_percent_per_K: 1.91}"
    )
    raw = 50.0 * (1 + 0.0191 * (temperature - 25.0))
    assert found.conductivity_mS_cm[0] == pytest.approx(raw, rel=1e-12)
    assert salinity(found) == pytest.approx(gsw.SP_from_C(raw, temperature, 0.0), abs=1e-9)


def test_the_reference_temperature_of_the_compensation_is_the_declared_one():
    compensation = "{method: linear, coefficient_percent_per_K: 2.0, reference_temperature_degC: 20}"
    found = seen(50.0, 30.0, reports="compensated", compensation=compensation)
    assert found.conductivity_mS_cm[0] == pytest.approx(50.0 * 1.2, rel=1e-12)


def test_within_the_published_range_nothing_is_flagged():
    assert flags(seen(50.0)) == set()


@pytest.mark.parametrize(
    ("conductivity", "temperature"), [(float(gsw.C_from_SP(43.0, 25.0, 0.0)), 25.0), (60.0, 36.0), (60.0, 44.9)]
)
def test_beyond_the_published_range_but_physical_the_value_stays_and_is_flagged(conductivity, temperature):
    found = seen(conductivity, temperature)
    assert flags(found) == {"extrapolated"}
    assert salinity(found) > 0
    assert np.isfinite(found.properties.osmolality_mOsm_kg[0])


@pytest.mark.parametrize("conductivity", [0.0, 0.001, 0.0019])
def test_next_to_nothing_is_fresh_water_below_the_range(conductivity):
    found = seen(conductivity)
    assert salinity(found) == 0.0
    assert flags(found) == {"below_range"}


@pytest.mark.parametrize(
    ("conductivity", "temperature", "word"),
    [
        (-0.5, 25.0, "negative"),
        (NAN, 25.0, "not_finite"),
        (np.inf, 25.0, "not_finite"),
        (50.0, NAN, "not_finite"),
        (50.0, 45.5, "out_of_range"),
        (50.0, -2.5, "out_of_range"),
        (5000.0, 25.0, "out_of_range"),
    ],
)
def test_what_cannot_be_is_null_and_says_why(conductivity, temperature, word):
    found = seen(conductivity, temperature)
    assert word in flags(found)
    for name in ("practical_salinity", "absolute_salinity_g_kg", "density_kg_m3", "osmolality_mOsm_kg"):
        assert np.isnan(getattr(found.properties, name)[0]), name


@pytest.mark.parametrize("known", [Flag.MISSING, Flag.FILLER])
def test_what_the_decoder_knows_of_an_absent_value_is_not_said_twice(known):
    assert flags(seen(NAN, flags=int(known))) == {known.name.lower()}


def test_a_block_of_several_kinds_of_water_is_read_each_by_its_own():
    text = site_text(port=1, sensors=3).replace("name: T1\n    volume_L: 1000\n    water: seawater",
                                                "name: T1\n    volume_L: 1000\n    water: sodium-chloride")  # fmt: skip
    made = plant_of(text)
    readings = [RawReading(sensor, START_US, START_US, 30.0, 25.0, NAN, 0) for sensor in (0, 1, 2)]
    together = water(made.roster, RawBlock.from_readings(readings))
    for index, reading in enumerate(readings):
        alone = water(made.roster, RawBlock.from_readings([reading]))
        for name in ("practical_salinity", "absolute_salinity_g_kg", "osmolality_mOsm_kg"):
            one, other = getattr(alone.properties, name)[0], getattr(together.properties, name)[index]
            assert one == other or (np.isnan(one) and np.isnan(other))
        assert alone.salinity[0] == together.salinity[index]
    assert np.isnan(together.properties.practical_salinity[1])
    assert together.salinity[1] == together.properties.absolute_salinity_g_kg[1]
    assert together.salinity[0] == together.properties.practical_salinity[0]
