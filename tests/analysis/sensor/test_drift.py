"""USGS TM 1-D3: fouling and drift apart, signed for the data, absolute for the rating."""

from __future__ import annotations

import csv
import json
from pathlib import Path

import gsw
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from analysis.errors import InvalidInputError
from analysis.sensor.drift import (
    Criterion,
    DriftCheck,
    FoulingCheck,
    Rating,
    RecordCorrection,
    conductance_rating,
    corrected_temperature,
    daily_rating,
    temperature_rating,
)

FOLDER = Path(__file__).parents[2] / "reference"


def published() -> dict[str, tuple[dict, object, float]]:
    lines = (FOLDER / "usgs_tm_1d3.csv").read_text(encoding="utf-8").splitlines()
    rows = csv.DictReader(line for line in lines if not line.startswith("#"))
    return {
        row["id"]: (json.loads(row["inputs"]), json.loads(row["expected"]), float(row["tolerance"])) for row in rows
    }


USGS = published()


def fouling(row: dict) -> FoulingCheck:
    """uS/cm in the source, mS/cm here."""
    return FoulingCheck(
        before_mS_cm=row["before"] / 1000,
        after_mS_cm=row["after"] / 1000,
        field_start_mS_cm=row["field_start"] / 1000,
        field_end_mS_cm=row["field_end"] / 1000,
    )


def correction(total_percent: float, *, start_us: int = 0, end_us: int = 1_000_000) -> RecordCorrection:
    standard = DriftCheck(standard_mS_cm=10.0 * (1 + total_percent / 100), reading_mS_cm=10.0)
    return RecordCorrection(start_us, end_us, drift=(standard,))


def test_fouling():
    row, expected, tolerance = USGS["USGS01"]
    assert fouling(row).error_mS_cm * 1000 == pytest.approx(expected, abs=tolerance + 1e-9)
    row, expected, tolerance = USGS["USGS02"]
    assert fouling(row).percent == pytest.approx(expected, abs=tolerance)


def test_total_is_the_signed_sum():
    row, expected, tolerance = USGS["USGS04"]
    drift = DriftCheck(standard_mS_cm=row["standard"] / 1000, reading_mS_cm=row["reading"] / 1000)
    total = RecordCorrection(0, 1, fouling=fouling(row), drift=(drift,)).total_percent(30.0)
    assert float(total) == pytest.approx(expected, abs=tolerance)


@pytest.mark.parametrize("key", ["USGS05", "USGS06"])
def test_linear_proration(key):
    row, expected, tolerance = USGS[key]
    found = correction(row["total_percent"]).corrected(
        row["raw"] / 1000, measured_at_us=round(row["fraction"] * 1_000_000)
    )
    assert float(found) * 1000 == pytest.approx(expected, abs=tolerance + 1e-9)


def test_ratings():
    row, expected, _ = USGS["USGS07"]
    assert [conductance_rating(percent).words for percent in row["percent"]] == expected
    row, expected, _ = USGS["USGS08"]
    assert [temperature_rating(kelvin).words for kelvin in row["kelvin"]] == expected
    with pytest.raises(InvalidInputError, match="sum of corrections"):
        conductance_rating(float("nan"))


def test_errors_that_cancel_correct_little_and_rate_badly():
    row, expected, tolerance = USGS["USGS10"]
    both = RecordCorrection(
        0,
        1,
        fouling=FoulingCheck(100.0, 100.0 + row["fouling_percent"], 50.0, 50.0),
        drift=(DriftCheck(standard_mS_cm=100.0 + row["drift_percent"], reading_mS_cm=100.0),),
    )
    assert float(both.total_percent(30.0)) == pytest.approx(expected, abs=max(tolerance, 1e-9))
    assert float(both.absolute_sum_percent(30.0)) == pytest.approx(11.0)
    assert both.rating(30.0) is Rating.FAIR


def test_criterion():
    row, expected, tolerance = USGS["USGS11"]
    found = Criterion().error_mS_cm(np.array(row["conductance"]) / 1000) * 1000
    np.testing.assert_allclose(found, expected, atol=tolerance)
    row, expected, _ = USGS["USGS12"]
    asked = Criterion().asks_for_correction(
        conductance_mS_cm=row["conductance"] / 1000, error_mS_cm=row["error"] / 1000
    )
    assert asked is expected


def test_three_percent_is_more_than_one_in_salinity():
    """Why a hatchery may want a stricter criterion."""
    row, expected, tolerance = USGS["USGS14"]
    np.testing.assert_allclose(gsw.SP_from_C(row["conductivity"], row["temperature"], 0), expected, atol=tolerance)
    conductance = row["conductivity"][0]
    limit = float(Criterion().error_mS_cm(conductance))
    assert conductance + limit == pytest.approx(row["conductivity"][1])
    strict = Criterion(percent=0.5)
    assert strict.asks_for_correction(conductance_mS_cm=conductance, error_mS_cm=0.3)
    assert not Criterion().asks_for_correction(conductance_mS_cm=conductance, error_mS_cm=0.3)


@pytest.mark.parametrize("keywords", [{"percent": 3.1}, {"percent": 0.0}, {"least_mS_cm": 0.006}, {"least_mS_cm": 0.0}])
def test_a_criterion_laxer_than_the_standard_is_refused(keywords):
    with pytest.raises(InvalidInputError, match="criterion"):
        Criterion(**keywords)


def test_daily_rating_is_the_lowest():
    row, expected, _ = USGS["USGS13"]
    ratings = [Rating[word.upper()] for word in row["ratings"]]
    assert daily_rating(ratings).words == expected
    with pytest.raises(InvalidInputError, match="ratings of a day"):
        daily_rating([])


def test_more_standards_correct_each_reading_by_its_size():
    checks = (DriftCheck(1.02, 1.0), DriftCheck(50.0, 50.0))
    record = RecordCorrection(0, 100, drift=checks)
    np.testing.assert_allclose(record.drift_percent([0.1, 1.0, 25.5, 50.0, 80.0]), [2.0, 2.0, 1.0, 0.0, 0.0])
    np.testing.assert_allclose(record.corrected([1.0, 25.5], measured_at_us=[100, 50]), [1.02, 25.5 * (1 + 0.01 * 0.5)])


def test_outside_the_two_services_nothing_changes():
    record = correction(10.0, start_us=1000, end_us=2000)
    raw = np.array([5.0, 5.0, 5.0, np.nan])
    found = record.corrected(raw, measured_at_us=[999, 2001, 2000, 1500])
    np.testing.assert_allclose(found, [5.0, 5.0, 5.5, np.nan])
    assert raw[:3].tolist() == [5.0, 5.0, 5.0]


@given(st.floats(-20, 20), st.floats(0, 1))
def test_proration_is_linear_in_time(total, share):
    record = correction(total)
    at = round(share * 1_000_000)
    assert float(record.corrected(40.0, measured_at_us=at)) == pytest.approx(40.0 * (1 + total / 100 * at / 1e6))


def test_temperature_record():
    found = corrected_temperature([20.0, 20.0, 20.0], measured_at_us=[0, 50, 200], start_us=0, end_us=100, error_K=0.4)
    np.testing.assert_allclose(found, [20.0, 20.2, 20.0])
    with pytest.raises(InvalidInputError, match="end of the record"):
        corrected_temperature([20.0], measured_at_us=[0], start_us=5, end_us=5, error_K=0.1)


def test_what_cannot_be_is_refused():
    with pytest.raises(InvalidInputError, match="before cleaning"):
        FoulingCheck(0.0, 1.0, 1.0, 1.0)
    with pytest.raises(InvalidInputError, match="in the standard"):
        DriftCheck(standard_mS_cm=1.0, reading_mS_cm=0.0)
    with pytest.raises(InvalidInputError, match="end of the record"):
        RecordCorrection(5, 5)
    with pytest.raises(InvalidInputError, match="drift checks"):
        RecordCorrection(0, 1, drift=(DriftCheck(1.0, 1.0), DriftCheck(2.0, 1.0)))
    assert float(RecordCorrection(0, 1).total_percent(10.0)) == 0.0
