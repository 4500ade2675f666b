"""Calibration: what standards are, what follows from readings in them, and what the record says."""

from __future__ import annotations

import json

import gsw
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from analysis.errors import InvalidInputError
from analysis.sensor.calibration import (
    MICROSECONDS_PER_DAY,
    CalibrationRecord,
    Point,
    drift_checks,
    fitted,
    in_force,
)
from analysis.sensor.standard import (
    bottled_standard,
    dry_air,
    potassium_chloride_standard,
    practical_salinity_from_k15,
    standard_seawater,
)
from tests.reference.published import is_met, rows

DAY = MICROSECONDS_PER_DAY


@pytest.mark.parametrize("row", [row for row in rows("crc_pratt_kcl") if "m" in row.inputs], ids=lambda row: row.id)
def test_potassium_chloride_of_any_molality_and_temperature(row):
    """CRC Handbook p. 5-73 (Pratt and others 2001), through the standard's own door."""
    standard = potassium_chloride_standard(row.inputs["m"])
    assert is_met(float(standard.conductivity_mS_cm(row.inputs["t"])), row)


@pytest.mark.parametrize(("label", "molality"), [(1.4127, 0.010029), (12.896, 0.10058), (58.635, 0.50869)])
def test_a_label_stands_for_a_solution(label, molality):
    """Labels at 25 degC of 0.01, 0.1 and 0.5 mol/L: Chambers, Stokes and Stokes 1956 (tests/reference, NC15-NC17)."""
    bottle = bottled_standard(label)
    assert float(bottle.conductivity_mS_cm(25.0)) == pytest.approx(label, rel=1e-9)
    for temperature in (5.0, 15.0, 35.0):
        made = potassium_chloride_standard(molality).conductivity_mS_cm(temperature)
        assert float(bottle.conductivity_mS_cm(temperature)) == pytest.approx(float(made), rel=1e-3)


def test_a_bottle_of_1413_at_35_degC_is_not_what_some_labels_print():
    """1693 uS/cm, not 1667: the same printed table gives 1687.6 for the 1408.3 standard (tests/reference, KC05)."""
    assert float(bottled_standard(1.413).conductivity_mS_cm(35.0)) == pytest.approx(1.413 * 1.6876 / 1.4083, rel=5e-4)


@pytest.mark.parametrize("k15", [0.3, 0.9999, 1.0, 1.0002, 1.15])
def test_standard_seawater_from_its_k15(k15):
    """PSS-78: the ratio at 15 degC (1968 scale) by the library gsw; the same water at other temperatures."""
    expected = float(gsw.SP_from_C(k15 * 42.9140, 15.0 / 1.00024, 0.0))
    assert float(practical_salinity_from_k15(k15)) == pytest.approx(expected, abs=1e-9)
    found = standard_seawater(k15).conductivity_mS_cm(np.array([10.0, 25.0]))
    np.testing.assert_allclose(gsw.SP_from_C(found, [10.0, 25.0], 0.0), expected, atol=1e-6)


def test_k15_of_one_is_salinity_35_by_definition():
    assert float(practical_salinity_from_k15(1.0)) == pytest.approx(35.0, abs=1e-6)


@pytest.mark.parametrize(
    ("make", "value"),
    [
        (potassium_chloride_standard, 0.0),
        (potassium_chloride_standard, 5.0),
        (bottled_standard, 0.001),
        (bottled_standard, 1413.0),
        (standard_seawater, 35.0),
        (standard_seawater, 0.0),
    ],
)
def test_a_standard_that_cannot_be_is_refused(make, value):
    with pytest.raises(InvalidInputError, match="of the standard"):
        make(value)


def test_one_standard_gives_the_factor_alone():
    point = Point(bottled_standard(12.88), reading_mS_cm=12.50, temperature_degC=25.0)
    fit = fitted([point])
    assert fit.factor == pytest.approx(12.88 / 12.50)
    assert fit.offset_mS_cm == 0.0
    assert fit.is_linear is None
    assert point.error_mS_cm == pytest.approx(-0.38)
    assert point.error_percent == pytest.approx(-100 * 0.38 / 12.88)


@settings(max_examples=20)
@given(factor=st.floats(0.7, 1.4), offset=st.floats(-0.05, 0.05))
def test_factor_and_offset_come_back(factor, offset):
    standards = [bottled_standard(1.413), bottled_standard(12.88), standard_seawater(1.0)]
    points = []
    for standard, temperature in zip(standards, (24.0, 25.0, 22.0), strict=True):
        true = float(standard.conductivity_mS_cm(temperature))
        points.append(Point(standard, (true - offset) / factor, temperature))
    fit = fitted(points)
    assert fit.factor == pytest.approx(factor, rel=1e-9)
    assert fit.offset_mS_cm == pytest.approx(offset, abs=1e-9)
    assert fit.is_linear is True


def test_two_readings_in_one_standard_make_no_line():
    standard = bottled_standard(12.88)
    fit = fitted([Point(standard, 12.5, 25.0), Point(standard, 12.6, 25.0)])
    assert fit.offset_mS_cm == 0.0
    assert fit.factor == pytest.approx(12.88 / 12.55, rel=1e-6)


def test_a_dry_cell_gives_the_zero():
    fit = fitted([Point(dry_air(), 0.03, 22.0), Point(bottled_standard(12.88), 12.91, 25.0)])
    assert fit.factor == pytest.approx(1.0)
    assert fit.offset_mS_cm == pytest.approx(-0.03)


def test_a_cell_that_is_not_linear_is_found():
    points = [
        Point(bottled_standard(1.413), 1.413, 25.0),
        Point(bottled_standard(12.88), 12.88, 25.0),
        Point(bottled_standard(111.8), 104.0, 25.0),
    ]
    assert fitted(points).is_linear is False


def test_the_wrong_bottle_is_refused():
    with pytest.raises(InvalidInputError, match="cell constant factor"):
        fitted([Point(bottled_standard(12.88), 1.41, 25.0)])
    with pytest.raises(InvalidInputError, match="at least one conducting"):
        fitted([Point(dry_air(), 0.0, 20.0)])
    with pytest.raises(InvalidInputError, match="temperature of the standard"):
        Point(bottled_standard(12.88), 12.0, 80.0)
    with pytest.raises(InvalidInputError, match="reading in the standard"):
        Point(bottled_standard(12.88), 0.0, 25.0)


def record(day: float, factor: float, **more) -> CalibrationRecord:
    standard = bottled_standard(12.88, lot="A17", expires_us=100 * DAY)
    return CalibrationRecord(
        sensor="l3-ct",
        performed_at_us=round(day * DAY),
        performed_by="Ines",
        as_found=(Point(standard, 12.88 / factor, 25.0),),
        **more,
    )


def test_a_record_says_when_the_next_is_due_and_what_to_see():
    one = record(10, 1.02, valid_days=14, nominal_cell_constant_per_cm=0.5)
    assert one.next_due_us == 24 * DAY
    assert one.cell_constant_per_cm == pytest.approx(0.51)
    assert one.remarks == ("single_standard",)
    late = record(101, 1.2)
    assert set(late.remarks) == {"single_standard", "expired_standard", "large_change"}
    home_made = potassium_chloride_standard(0.1)
    again = CalibrationRecord(
        sensor="s",
        performed_at_us=0,
        performed_by="Ines",
        as_found=(Point(home_made, 12.8, 25.0), Point(home_made, 12.8, 25.1)),
    )
    assert set(again.remarks) == {"standard_without_expiry", "standards_do_not_differ"}


def test_as_left_counts_where_the_sensor_itself_was_adjusted():
    standard = bottled_standard(12.88)
    one = CalibrationRecord(
        sensor="s",
        performed_at_us=0,
        performed_by="Ines",
        as_found=(Point(standard, 12.0, 25.0),),
        as_left=(Point(standard, 12.88, 25.0),),
        reference_temperature_degC=25.0,
        sensor_temperature_degC=25.3,
    )
    assert one.fit.factor == pytest.approx(1.0)
    assert one.temperature_offset_K == pytest.approx(-0.3)
    assert one.as_found[0].error_percent == pytest.approx(-6.83, abs=0.01)


def test_calibrations_apply_from_their_time_on():
    records = [record(20, 1.1, reference_temperature_degC=20.0, sensor_temperature_degC=19.8), record(10, 1.05)]
    found = in_force(records, np.array([9, 10, 19, 20, 30]) * DAY)
    np.testing.assert_allclose(found.conductivity(np.full(5, 10.0)), [10.0, 10.5, 10.5, 11.0, 11.0])
    np.testing.assert_allclose(found.temperature(np.full(5, 20.0)), [20.0, 20.0, 20.0, 20.2, 20.2])
    assert found.is_calibrated.tolist() == [False, True, True, True, True]
    assert in_force([], [1, 2]).factor.tolist() == [1.0, 1.0]


def test_what_was_found_says_how_the_record_drifted():
    before, after = record(10, 1.05), record(40, 1.08)
    (check,) = drift_checks(after, before=before)
    assert check.percent == pytest.approx(100 * (1.08 / 1.05 - 1))
    (unknown,) = drift_checks(after, before=None)
    assert unknown.percent == pytest.approx(8.0)


def test_who_and_how_long_must_be_said():
    with pytest.raises(InvalidInputError, match="performed_by"):
        CalibrationRecord(
            sensor="s", performed_at_us=0, performed_by=" ", as_found=(Point(bottled_standard(12.88), 12.88, 25.0),)
        )
    with pytest.raises(InvalidInputError, match="valid_days"):
        record(1, 1.0, valid_days=0)


def test_a_record_goes_through_the_ledger():
    one = CalibrationRecord(
        sensor="l3-ct",
        performed_at_us=5 * DAY,
        performed_by="Ines",
        as_found=(
            Point(dry_air(), 0.01, 22.0),
            Point(bottled_standard(12.88, lot="A17", expires_us=9 * DAY), 12.5, 24.0),
            Point(potassium_chloride_standard(0.01), 1.38, 24.0),
        ),
        as_left=(Point(standard_seawater(1.0), 52.9, 25.0),),
        reference_temperature_degC=20.0,
        sensor_temperature_degC=20.1,
        valid_days=14.0,
        note="electrode cleaned",
    )
    stored = json.loads(json.dumps(one.to_jsonable()))
    again = CalibrationRecord.from_jsonable(stored)
    assert again.to_jsonable() == one.to_jsonable()
    assert again.fit == one.fit


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"as_found": None}, "calibration record"),
        ({"performed_at_us": "soon"}, "calibration record"),
        ({"as_found": [{"standard": "soup", "value": 1}]}, "calibration record"),
        ({"as_found": [{"standard": "bottle", "value": 1413, "reading_mS_cm": 1.4, "temperature_degC": 25}]}, "label"),
        ({"as_found": [{"standard": "bottle", "value": 1.413, "temperature_degC": 25}]}, "no reading_mS_cm"),
    ],
)
def test_a_broken_record_is_refused(change, words):
    plain = {**record(1, 1.0).to_jsonable(), **change}
    with pytest.raises(InvalidInputError, match=words):
        CalibrationRecord.from_jsonable(plain)
