from __future__ import annotations

from dataclasses import fields

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from analysis.flags import Flag
from analysis.water.properties import Seawater, WaterKind, WaterProperties

WATER = Seawater()
ANY = st.one_of(st.floats(-5.0, 150.0), st.sampled_from([0.0, 1e-3, 2e-3, 0.0025, np.nan, np.inf, -np.inf, -99.0]))
NUMBERS = tuple(field.name for field in fields(WaterProperties) if field.name != "flags")


def values(properties: WaterProperties, index: int) -> list[float]:
    return [getattr(properties, name)[index] for name in NUMBERS]


def test_seawater_is_a_kind_of_water() -> None:
    water: WaterKind = WATER
    assert water.name == "seawater"


@pytest.mark.parametrize(
    ("conductivity", "temperature", "pressure", "flag"),
    [
        (np.nan, 15.0, 0.0, Flag.NOT_FINITE),
        (np.inf, 15.0, 0.0, Flag.NOT_FINITE),
        (30.0, np.nan, 0.0, Flag.NOT_FINITE),
        (30.0, 15.0, np.nan, Flag.NOT_FINITE),
        (-0.01, 15.0, 0.0, Flag.NEGATIVE),
        (30.0, -2.1, 0.0, Flag.OUT_OF_RANGE),
        (30.0, 45.1, 0.0, Flag.OUT_OF_RANGE),
        (30.0, 15.0, -11.0, Flag.OUT_OF_RANGE),
        (30.0, 15.0, 13000.0, Flag.OUT_OF_RANGE),
        (200.0, 15.0, 0.0, Flag.OUT_OF_RANGE),
        (-1.0, 60.0, 0.0, Flag.NEGATIVE | Flag.OUT_OF_RANGE),
    ],
)
def test_a_reading_that_cannot_be_used_is_null_with_its_reason(
    conductivity: float, temperature: float, pressure: float, flag: Flag
) -> None:
    found = WATER.properties([30.0, conductivity], temperature_degC=[15.0, temperature], pressure_dbar=[0.0, pressure])
    assert found.flags.tolist() == [0, int(flag)]
    assert np.isnan(values(found, 1)).all()
    assert np.isfinite(values(found, 0)).all()


@pytest.mark.parametrize(
    ("conductivity", "temperature", "pressure"),
    [(70.0, 15.0, 0.0), (30.0, 40.0, 0.0), (60.0, 10.0, 10500.0)],
)
def test_outside_the_published_range_keeps_its_value(conductivity: float, temperature: float, pressure: float) -> None:
    found = WATER.properties([conductivity], temperature_degC=[temperature], pressure_dbar=[pressure])
    assert found.flags.tolist() == [int(Flag.EXTRAPOLATED)]
    assert np.isfinite(values(found, 0)).all()


def test_salinity_just_above_the_published_range_is_marked_and_just_below_not() -> None:
    conductivity = WATER.conductivity_mS_cm(salinity=[41.999, 42.001, 119.0, 120.0], temperature_degC=25.0)
    found = WATER.properties(conductivity, temperature_degC=25.0)
    assert found.flags.tolist() == [0, int(Flag.EXTRAPOLATED), int(Flag.EXTRAPOLATED), int(Flag.OUT_OF_RANGE)]
    assert np.isfinite(found.practical_salinity).tolist() == [True, True, True, False]


@pytest.mark.parametrize("conductivity", [0.0, 0.001, 0.002, 0.00222])
def test_nearly_no_conductivity_is_fresh_water_below_the_range(conductivity: float) -> None:
    found = WATER.properties([conductivity], temperature_degC=[35.0])
    assert found.flags.tolist() == [int(Flag.BELOW_RANGE)]
    assert found.practical_salinity.tolist() == [0.0]
    assert found.osmolality_mOsm_kg.tolist() == [0.0]
    assert found.osmolality_in_situ_mOsm_kg.tolist() == [0.0]
    assert found.density_kg_m3[0] == pytest.approx(994.03, abs=0.01)  # pure water at 35 degC, IAPWS-95, from memory


@given(readings=st.lists(st.tuples(ANY, st.floats(-10.0, 60.0), st.floats(-20.0, 50.0)), min_size=1, max_size=8))
def test_one_reading_alone_gives_what_it_gives_in_a_block(readings: list[tuple[float, float, float]]) -> None:
    conductivity, temperature, pressure = (np.array(column) for column in zip(*readings, strict=True))
    block = WATER.properties(conductivity, temperature_degC=temperature, pressure_dbar=pressure)
    for index, (c, t, p) in enumerate(readings):
        alone = WATER.properties(c, temperature_degC=t, pressure_dbar=p)
        assert int(alone.flags) == block.flags[index]
        one = [float(getattr(alone, name)) for name in NUMBERS]
        assert one == pytest.approx(values(block, index), rel=1e-14, abs=1e-300, nan_ok=True)


@given(readings=st.lists(st.tuples(ANY, st.floats(-10.0, 60.0)), min_size=1, max_size=20))
def test_null_and_nulling_flags_go_together(readings: list[tuple[float, float]]) -> None:
    conductivity, temperature = (np.array(column) for column in zip(*readings, strict=True))
    found = WATER.properties(conductivity, temperature_degC=temperature)
    nulling = int(Flag.NEGATIVE | Flag.NOT_FINITE | Flag.OUT_OF_RANGE)
    flagged = (found.flags & np.uint32(nulling)) != 0
    for name in NUMBERS:
        assert np.array_equal(np.isnan(getattr(found, name)), flagged), name


def test_shapes_widen_together() -> None:
    found = WATER.properties([[30.0], [40.0]], temperature_degC=[10.0, 20.0, np.nan], longitude=20.0, latitude=58.0)
    assert {getattr(found, name).shape for name in (*NUMBERS, "flags")} == {(2, 3)}
    assert found.flags[:, 2].tolist() == [int(Flag.NOT_FINITE)] * 2
    placed = WATER.properties(30.0, temperature_degC=10.0, longitude=[20.0, -40.0], latitude=[58.0, 30.0])
    assert placed.practical_salinity.shape == placed.flags.shape == (2,)
    assert placed.absolute_salinity_g_kg[0] > placed.absolute_salinity_g_kg[1]


def test_an_empty_block_is_answered_with_an_empty_block() -> None:
    found = WATER.properties(np.empty(0), temperature_degC=np.empty(0), pressure_dbar=np.empty(0))
    assert found.flags.shape == found.osmolality_mOsm_kg.shape == (0,)


@given(salinity=st.floats(0.0, 110.0))
def test_salinity_goes_through_every_quantity_and_back(salinity: float) -> None:
    osmolality = WATER.osmolality_from_salinity(salinity)
    assert float(WATER.salinity_from_osmolality(osmolality)) == pytest.approx(salinity, rel=1e-10, abs=1e-12)
    absolute = WATER.absolute_salinity_from_salinity(salinity)
    assert float(WATER.salinity_from_absolute_salinity(absolute)) == pytest.approx(salinity, rel=1e-14, abs=1e-300)


def test_the_block_is_left_as_it_was_given() -> None:
    conductivity = np.array([30.0, -1.0, 0.0])
    conductivity.flags.writeable = False
    found = WATER.properties(conductivity, temperature_degC=15.0)
    assert conductivity.tolist() == [30.0, -1.0, 0.0]
    assert np.isfinite(found.practical_salinity).tolist() == [True, False, True]
