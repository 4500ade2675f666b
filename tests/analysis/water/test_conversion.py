from __future__ import annotations

import numpy as np
import pytest

from analysis.flags import Flag
from analysis.water.compensation import Compensation, CompensationMethod
from analysis.water.conversion import QUANTITIES, Conversion
from analysis.water.properties import Seawater
from analysis.water.sodium_chloride_water import SodiumChlorideWater


def test_every_quantity_is_answered_and_null_together() -> None:
    answers = Conversion(kind=Seawater()).answers(
        np.array([42.914, np.nan, -1.0]), temperature_degC=np.full(3, 15.0), pressure_dbar=np.zeros(3)
    )
    assert tuple(answers.quantities) == QUANTITIES
    for key, values in answers.quantities.items():
        assert np.isnan(values).tolist() == [False, True, True], key
    for key, values in answers.uncertainties.items():
        assert np.isnan(values).tolist() == [False, True, True], key


def test_the_sensor_is_undone_before_the_water_is_asked() -> None:
    raw = Conversion(kind=Seawater()).answers(
        np.array([30.0]), temperature_degC=np.array([10.0]), pressure_dbar=np.zeros(1)
    )
    compensated = Conversion(kind=Seawater(), unit="uS/cm", compensation=Compensation()).answers(
        np.array([30000.0 / (1.0 + 0.0191 * -15.0)]), temperature_degC=np.array([10.0]), pressure_dbar=np.zeros(1)
    )
    for key in QUANTITIES:
        assert compensated.quantities[key] == pytest.approx(raw.quantities[key], rel=1e-12)


def test_a_curve_beyond_its_table_is_marked_only_where_there_is_a_value() -> None:
    natural = Conversion(kind=Seawater(), compensation=Compensation(method=CompensationMethod.NATURAL_WATER))
    answers = natural.answers(
        np.array([5.0, np.nan]), temperature_degC=np.array([-1.0, -1.0]), pressure_dbar=np.zeros(2)
    )
    assert answers.flags.tolist() == [int(Flag.EXTRAPOLATED), int(Flag.NOT_FINITE)]


def test_the_salinity_of_plain_salt_is_a_mass_fraction() -> None:
    conversion = Conversion(kind=SodiumChlorideWater())
    assert conversion.salinity_key == "absolute_salinity_g_kg"
    answers = conversion.answers(np.array([10.0]), temperature_degC=np.array([20.0]), pressure_dbar=np.zeros(1))
    assert np.isnan(answers.quantities["practical_salinity"]).all()
    assert set(answers.uncertainties) == {"absolute_salinity_g_kg", "osmolality_mOsm_kg"}
