from __future__ import annotations

from zoneinfo import ZoneInfo

import numpy as np
import pytest

from analysis.errors import EuryhaleError
from ingest.simulator.record import Record
from tests.ingest.simulator.examples import one_tank

COMPENSATED = """fields: {conductivity: sc, temperature: temp, time: t}
    reports: compensated
    compensation: {method: linear, coefficient_percent_per_K: 1.91}"""


def record(tmp_path, text, *, lines="", columns=None, zone="UTC"):
    file = tmp_path / "logger.csv"
    file.write_text(text, encoding="utf-8")
    return Record(file, one_tank(lines).sensors[0], columns=columns or {}, zone=ZoneInfo(zone))


def rows(found: Record):
    (block,) = found.blocks()
    return block


def test_usual_names_are_found_and_units_are_turned_into_the_sensors_own(tmp_path):
    lines = "fields: {conductivity: c, temperature: t, time: z}\n    conductivity_unit: uS/cm\n    temperature_unit: K"
    found = record(tmp_path, "DateTime,Temp (degF),Cond (mS/cm)\n2024-05-01T00:00:00Z,77,48.5\n", lines=lines)
    assert found.columns == {"time": ("DateTime",), "conductivity": ("Cond (mS/cm)",), "temperature": ("Temp (degF)",)}
    readings = rows(found).readings
    assert readings.conductivity == pytest.approx([48_500.0])
    assert readings.temperature == pytest.approx([298.15])
    assert np.isnan(readings.pressure).all()


def test_a_compensating_sensor_takes_the_specific_conductance(tmp_path):
    text = "time_utc,temp_C,cond_mS_cm,spcond_mS_cm\n2024-05-01T00:00:00Z,20,40.0,44.2\n"
    assert record(tmp_path, text, lines=COMPENSATED).columns["conductivity"] == ("spcond_mS_cm",)
    assert record(tmp_path, text).columns["conductivity"] == ("cond_mS_cm",)


def test_blank_rows_are_counted_and_half_ones_are_kept(tmp_path):
    text = "time,temp,cond\n2024-05-01T00:00Z,20,40\n2024-05-01T01:00Z,,\n2024-05-01T02:00Z,-99,41\nyesterday,20,40\n"
    block = rows(record(tmp_path, text))
    assert (len(block.readings.time_us), block.blank, block.refused) == (2, 1, 1)
    assert np.isnan(block.readings.temperature).tolist() == [False, True]


def test_date_and_time_of_day_in_two_columns_and_a_zone(tmp_path):
    text = "Day;Hour;EC;T\n01.07.2024;12:00:00;40,5;20,1\n"
    columns = {"time": ["Day", "Hour"], "conductivity": ["EC"], "temperature": ["T"]}
    found = record(tmp_path, text, columns=columns, zone="Europe/Lisbon")
    assert rows(found).readings.time_us.tolist() == [1_719_831_600_000_000]  # 11:00 UTC in summer
    assert rows(found).readings.conductivity.tolist() == [40.5]


def test_the_survey_knows_the_extent_in_any_order_of_rows(tmp_path):
    text = "time,temp,cond\n2024-05-01T02:00Z,20,40\n2024-05-01T00:00Z,20,40\n2024-05-01T01:00Z,,\n"
    survey = record(tmp_path, text).survey()
    assert survey.rows == 3
    assert survey.last_us - survey.first_us == 2 * 3_600_000_000


@pytest.mark.parametrize(
    ("text", "columns", "named"),
    [
        ("when,temp,cond\n2024-05-01T00:00Z,20,40\n", {}, "time"),
        ("time,temp,chlor\n2024-05-01T00:00Z,20,40\n", {}, "--column conductivity=NAME with one of: time, temp, chlor"),
        ("time,temp,cond (psi)\n2024-05-01T00:00Z,20,40\n", {"conductivity": ["cond (psi)"]}, "unit of conductivity"),
        ("time,temp,cond\n2024-05-01T00:00Z,20,40\n", {"oxygen": ["temp"]}, "oxygen.*what sensor t1-ct sends"),
        ("time,temp,cond\n2024-05-01T00:00Z,20,40\n", {"temperature": ["temp", "cond"]}, "temperature twice"),
        ("time,temp,cond\n2024-05-01T00:00Z,20,40\n", {"temperature": ["tmp"]}, "tmp"),
    ],
)
def test_what_does_not_fit_is_said(tmp_path, text, columns, named):
    with pytest.raises(EuryhaleError, match=named):
        record(tmp_path, text, columns=columns)


def test_a_record_without_any_time_is_said(tmp_path):
    found = record(tmp_path, "time,temp,cond\n2024-05-01T00:00Z,20,40\n")
    (tmp_path / "logger.csv").write_text("time,temp,cond\n,20,40\n", encoding="utf-8")
    with pytest.raises(EuryhaleError, match="no row with a time"):
        found.survey()
