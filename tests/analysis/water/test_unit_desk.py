from __future__ import annotations

from itertools import product

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from analysis.errors import InvalidInputError
from analysis.water.compensation import Compensation, CompensationMethod
from analysis.water.properties import Seawater
from analysis.water.refraction import seawater_refractive_index, sodium_chloride_refractive_index_20
from analysis.water.sodium_chloride_water import SodiumChlorideWater
from analysis.water.unit_desk import SCALES, Circumstances, convert

SEA = Circumstances(temperature_degC=20.0, reference_temperature_degC=20.0)
BRINE = Circumstances(kind=SodiumChlorideWater(), temperature_degC=20.0)
PAIRS = [
    (scale, to, at)
    for at in (SEA, BRINE)
    for scale, to in product(SCALES, SCALES)
    if all(not SCALES[key].kinds or at.kind.name in SCALES[key].kinds for key in (scale, to))
]


@pytest.mark.parametrize(
    ("scale", "to", "at"), PAIRS, ids=lambda value: value if isinstance(value, str) else value.kind.name
)
def test_any_scale_to_any_other_and_back(scale: str, to: str, at: Circumstances) -> None:
    salinity = np.array([0.5, 5.0, 20.0, 34.0])
    readings = SCALES[scale].from_salinity(salinity, at)
    there = convert(readings, scale=scale, to=to, at=at)
    back = convert(there.value, scale=to, to=scale, at=at)
    np.testing.assert_allclose(back.value, readings, rtol=1e-7, atol=1e-9)
    assert there.unit == SCALES[to].unit
    assert any(SCALES[to].condition in condition for condition in there.conditions)


@pytest.mark.parametrize(
    ("to", "expected", "tolerance"),
    [
        ("absolute_salinity_g_kg", 35.16504, 1e-6),  # Millero et al. 2008 (looked up)
        ("conductivity_mS_cm", 47.9180, 1e-3),  # PSS-78 at 20 degC: our own table (regression)
        ("density_kg_m3", 1024.766, 1e-3),  # TEOS-10: our own value (regression); EOS-80: 1024.763 (from memory)
        ("osmolality_mOsm_kg", 1033.741, 1e-2),  # regression
        ("freezing_point_depression_K", 1.9216, 1e-3),  # regression
        ("specific_gravity", 1.0266, 1e-4),  # 1024.766 / 998.207: arithmetic
        ("salt_g_L", 36.036, 1e-2),  # 35.165 * 1.024766: arithmetic
        ("refractive_index", 1.33940, 5e-5),  # regression
    ],
)
def test_sea_water_of_35_on_every_scale(to: str, expected: float, tolerance: float) -> None:
    assert float(convert(35.0, scale="practical_salinity", to=to, at=SEA).value) == pytest.approx(
        expected, abs=tolerance
    )


def test_a_brine_refractometer_reads_sea_water_too_salty() -> None:
    # 36.5 g/kg of sodium chloride has the refractive index of sea water at 35 (a rule of marine aquarists,
    # looked up only as the statement that the two scales differ; the figure from memory)
    shown = float(convert(35.0, scale="practical_salinity", to="brine_refractometer_g_kg", at=SEA).value)
    assert shown == pytest.approx(36.5, abs=0.4)
    assert float(
        convert(20.0, scale="absolute_salinity_g_kg", to="brine_refractometer_g_kg", at=BRINE).value
    ) == pytest.approx(20.0, abs=1e-6)


@pytest.mark.parametrize("method", list(CompensationMethod))
def test_specific_conductance_follows_the_meter(method: CompensationMethod) -> None:
    at = Circumstances(temperature_degC=10.0, compensation=Compensation(method=method))
    shown = float(convert(35.0, scale="practical_salinity", to="specific_conductance_mS_cm", at=at).value)
    raw = float(convert(35.0, scale="practical_salinity", to="conductivity_mS_cm", at=at).value)
    assert shown == pytest.approx(raw / float(at.compensation.factor(10.0)), rel=1e-9)


@given(
    salinity=st.floats(0.0, 45.0),
    temperature=st.floats(0.0, 35.0),
    scale=st.sampled_from(sorted(set(SCALES) - {"brine_refractometer_g_kg"})),
)
def test_every_scale_rises_with_salinity(salinity: float, temperature: float, scale: str) -> None:
    at = Circumstances(temperature_degC=temperature)
    low, high = SCALES[scale].from_salinity(np.array([salinity, salinity + 0.01]), at)
    assert high > low


def test_fresh_water_and_readings_that_mean_nothing() -> None:
    fresh = convert([0.0, np.nan, -1.0, 500.0], scale="conductivity_mS_cm", to="practical_salinity", at=SEA).value
    assert fresh[0] == pytest.approx(0.0, abs=1e-3)
    assert np.isnan(fresh[1:]).all()
    light = convert(0.9, scale="specific_gravity", to="practical_salinity", at=SEA).value
    assert np.isnan(light)


def test_a_scale_without_a_relation_for_this_water_is_refused() -> None:
    with pytest.raises(InvalidInputError, match="in seawater"):
        convert(35.0, scale="practical_salinity", to="osmolality_mOsm_kg", at=BRINE)
    with pytest.raises(InvalidInputError, match="practical_salinity"):
        convert(35.0, scale="ppt", to="osmolality_mOsm_kg")
    with pytest.raises(InvalidInputError, match="-2 to 45"):
        Circumstances(temperature_degC=80.0)


def test_scalar_and_array_agree_and_seawater_is_the_default() -> None:
    alone = convert(20.0, scale="practical_salinity", to="osmolality_mOsm_kg")
    among = convert([1.0, 20.0], scale="practical_salinity", to="osmolality_mOsm_kg", at=Circumstances(kind=Seawater()))
    assert float(alone.value) == among.value[1]


def test_refractive_index_by_a_second_equation() -> None:
    # McNeil 1977 (looked up as transcribed in a public optics toolbox), wavelength in nm
    salinity, temperature, nm = np.array([0.0, 10.0, 35.0]), 20.0, 589.3
    second = 1.3247 - 2.5e-6 * temperature**2 + salinity * (2e-4 - 8e-7 * temperature) + 3300.0 / nm**2 - 3.2e7 / nm**4
    np.testing.assert_allclose(seawater_refractive_index(salinity, temperature_degC=temperature), second, atol=1e-4)


@pytest.mark.parametrize(
    ("percent", "index"),
    # CRC Handbook, 102nd ed., Concentrative Properties (looked up)
    [
        (0.1, 1.3332),
        (0.5, 1.3339),
        (1, 1.3347),
        (2, 1.3365),
        (3, 1.3383),
        (4, 1.3400),
        (5, 1.3418),
        (7, 1.3453),
        (10, 1.3505),
    ],
)
def test_handbook_refractive_index_of_brine(percent: float, index: float) -> None:
    assert float(sodium_chloride_refractive_index_20(10.0 * percent)) == pytest.approx(index, abs=1e-4)
