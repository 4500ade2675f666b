"""Laboratory values of body fluid."""

from __future__ import annotations

import dataclasses
import math

import numpy as np
import pytest

from analysis.animal.blood import (
    BloodSample,
    OsmometerMethod,
    Standard,
    blood_value,
    capacity_trend_per_d,
    freezing_point_basis,
    osmoregulatory_capacity,
    with_blood,
)
from analysis.animal.osmoregulation import CohortState
from analysis.errors import InvalidInputError

GOOD = BloodSample(
    0,
    (448.0, 450.0, 452.0),
    OsmometerMethod.FREEZING_POINT,
    (Standard(290.0, 291.0), Standard(850.0, 852.0)),
    10.0,
    60.0,
    moult_stage="C",
)


def test_a_good_sample_is_used_and_corrected_by_its_standards():
    value = blood_value(GOOD)
    assert value.is_usable
    assert value.remarks == ()
    assert value.osmolality_mOsm_kg == pytest.approx(450.0 - 1.0 - 159.0 / 561.0, abs=0.01)
    assert value.variation == pytest.approx(2.0 / 450.0)


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"standards": (Standard(290.0, 291.0),)}, "fewer than two"),
        ({"standards": (Standard(290.0, 310.0), Standard(850.0, 850.0))}, "off"),
        ({"standards": (Standard(100.0, 100.0), Standard(290.0, 290.0))}, "do not bracket"),
        ({"standards": (Standard(290.0, math.nan), Standard(850.0, 850.0))}, "off"),
    ],
)
def test_failed_standards_block_the_use(change, words):
    value = blood_value(dataclasses.replace(GOOD, **change))
    assert not value.is_usable
    assert words in " ".join(value.remarks)
    with pytest.raises(InvalidInputError, match="standards"):
        with_blood(CohortState.unknown(1), 0, value)


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"replicates_mOsm_kg": (400.0, 500.0)}, "vary"),
        ({"replicates_mOsm_kg": (450.0,)}, "single"),
        ({"volume_microlitre": 1.0}, "1 uL"),
        ({"delay_s": 1800.0}, "30 min"),
        ({"moult_stage": ""}, "moult"),
    ],
)
def test_a_doubtful_sample_says_why(change, words):
    value = blood_value(dataclasses.replace(GOOD, **change))
    assert value.is_usable
    assert words in " ".join(value.remarks)


def test_no_reading_is_refused():
    for readings in ((), (0.0,), (math.nan, 3.0)):
        with pytest.raises(InvalidInputError, match="replicates"):
            blood_value(dataclasses.replace(GOOD, replicates_mOsm_kg=readings))


def test_vapour_pressure_reads_1p3_to_1p4_percent_higher_at_practical_salinity_35():
    # seawater at 25 and 35 degC over the freezing-point value: TEOS-10, 1047.55 and 1048.57 over 1033.74 mOsm/kg
    assert freezing_point_basis(1047.55, method=OsmometerMethod.VAPOUR_PRESSURE) == pytest.approx(1033.74, rel=2e-4)
    assert freezing_point_basis(291.24, method=OsmometerMethod.VAPOUR_PRESSURE) == pytest.approx(290.93, rel=2e-4)
    assert freezing_point_basis(500.0, method=OsmometerMethod.FREEZING_POINT) == 500.0


def test_a_sample_resets_the_modelled_body_fluid():
    state = CohortState.used_to(np.array([700.0, 800.0]))
    after = with_blood(state, 1, blood_value(GOOD))
    assert np.isnan(after.internal[0])
    assert after.internal[1] == pytest.approx(448.7, abs=0.1)
    np.testing.assert_array_equal(after.acclimated, state.acclimated)


def test_capacity_of_stressed_postlarvae_against_settled_ones():
    # DOAJ_PL12: haemolymph 450, 546, 696 mOsm/kg at 5 ppt after steps of 5, 10, 15 ppt; 450 is near steady.
    water = 146.9
    shares = [
        osmoregulatory_capacity(blood, water_mOsm_kg=water, steady_internal_mOsm_kg=450.0).share
        for blood in (450.0, 546.0, 696.0)
    ]
    assert shares[0] == pytest.approx(1.0)
    assert shares[1] < shares[2]
    at_isosmotic = osmoregulatory_capacity(720.0, water_mOsm_kg=720.0, steady_internal_mOsm_kg=720.0)
    assert math.isnan(at_isosmotic.share)


def test_the_trend_of_capacity():
    days = np.array([0.0, 1.0, 2.0, 4.0]) * 86.4e9
    assert capacity_trend_per_d(days, np.array([1.0, 0.9, np.nan, 0.6])) == pytest.approx(-0.1)
    assert math.isnan(capacity_trend_per_d(days[:2], np.array([1.0, 0.9])))
