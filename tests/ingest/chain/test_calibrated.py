"""Calibrations in the chain: the right record for each reading, wherever the block is cut."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from analysis.flags import Flag
from analysis.sensor.calibration import CalibrationRecord, Point
from analysis.sensor.calibration import in_force as corrections_in_force
from analysis.sensor.standard import bottled_standard
from analysis.water.properties import Seawater
from ingest.chain.block import RawBlock
from ingest.chain.calibrated import holds_at, in_force
from ingest.chain.roster import roster
from ingest.chain.services import CALIBRATED, SERVICED, Service, ServiceBody, in_order
from ingest.chain.water import water
from ingest.site.loading import load_text
from tests.harness.hatchery import START_US, site_text

SITE = load_text(site_text(port=1, sensors=3), "site.yaml")
SENSORS = ("s0", "s1", "s2")
LABEL_MS_CM = 50.0


def record(sensor: str, at_us: int, reading: float, *, warmth_K: float | None = None) -> CalibrationRecord:
    temperatures = (
        {} if warmth_K is None else {"reference_temperature_degC": 25.0, "sensor_temperature_degC": 25.0 - warmth_K}
    )
    return CalibrationRecord(
        sensor=sensor,
        performed_at_us=at_us,
        performed_by="Ines",
        as_found=(Point(bottled_standard(LABEL_MS_CM), reading, 25.0),),
        **temperatures,
    )


def calibrated(sensor: str, at_us: int, reading: float, *, warmth_K: float | None = None) -> Service:
    plain = record(sensor, at_us, reading, warmth_K=warmth_K).to_jsonable()
    return Service(sensor, at_us, CALIBRATED, ServiceBody(performed_by="Ines", record=plain))


def cleaned(sensor: str, at_us: int) -> Service:
    return Service(sensor, at_us, SERVICED, ServiceBody(performed_by="Ines"))


def block(sensor: list[int], at_us: list[int], conductivity: float = 48.0) -> RawBlock:
    count = len(sensor)
    return RawBlock(
        sensor=np.array(sensor, dtype=np.int64),
        measured_at_us=np.array(at_us, dtype=np.int64),
        received_at_us=np.array(at_us, dtype=np.int64),
        conductivity=np.full(count, conductivity),
        temperature=np.full(count, 28.0),
        pressure=np.full(count, np.nan),
        flags=np.zeros(count, dtype=np.uint32),
    )


def said(services: dict[str, list[Service]], readings: RawBlock):
    return water(roster(SITE, {"seawater": Seawater()}, services), readings)


def test_without_a_record_nothing_is_looked_up_and_nothing_changes():
    assert roster(SITE, {"seawater": Seawater()}).in_force is None
    assert in_force(SENSORS, {"s0": [cleaned("s0", START_US)]}) is None
    found = said({}, block([0, 1], [START_US, START_US]))
    assert found.conductivity_mS_cm.tolist() == [48.0, 48.0]
    assert not (found.flags & np.uint32(Flag.CORRECTED)).any()


def test_a_block_that_straddles_the_moment_of_a_calibration_is_read_by_both_records():
    services = {"s1": [calibrated("s1", START_US, 49.0), calibrated("s1", START_US + 10, 51.0)]}
    at_us = [START_US - 1, START_US, START_US + 9, START_US + 10, START_US + 11]
    found = said(services, block([1] * 5 + [0], [*at_us, START_US + 11]))
    true = LABEL_MS_CM
    factors = [1.0, true / 49.0, true / 49.0, true / 51.0, true / 51.0, 1.0]
    assert found.conductivity_mS_cm == pytest.approx([48.0 * factor for factor in factors], rel=1e-12)
    is_corrected = (found.flags & np.uint32(Flag.CORRECTED)) != 0
    assert is_corrected.tolist() == [False, True, True, True, True, False]


@given(
    starts=st.lists(st.integers(0, 50), max_size=6, unique=True),
    others=st.lists(st.integers(0, 50), max_size=2, unique=True),
    at=st.lists(st.tuples(st.integers(0, 2), st.integers(-5, 60)), min_size=1, max_size=30),
)
def test_it_is_what_the_science_says_of_each_reading_alone(starts, others, at):
    readings = {"s0": [(start, 45.0 + start / 10.0) for start in starts], "s2": [(start, 52.0) for start in others]}
    services = {
        sensor: in_order(calibrated(sensor, START_US + start, reading) for start, reading in own)
        for sensor, own in readings.items()
    }
    held = in_force(SENSORS, services)
    if held is None:
        assert not starts
        assert not others
        return
    sensor = np.array([place for place, _ in at])
    time_us = np.array([START_US + moment for _, moment in at], dtype=np.int64)
    conductivity, warmth, is_calibrated = held.apply(
        sensor,
        measured_at_us=time_us,
        conductivity_mS_cm=np.full(len(at), 48.0),
        temperature_degC=np.full(len(at), 28.0),
    )
    for index, place in enumerate(sensor):
        records = [
            record(SENSORS[place], START_US + start, reading) for start, reading in readings.get(SENSORS[place], [])
        ]
        expected = corrections_in_force(records, time_us[index : index + 1])
        assert conductivity[index] == expected.conductivity([48.0])[0]
        assert is_calibrated[index] == expected.is_calibrated[0]
    assert (warmth == 28.0).all()


def test_a_thermometer_that_was_not_checked_keeps_its_offset():
    services = [calibrated("s0", START_US, 50.0, warmth_K=0.4), calibrated("s0", START_US + 10, 50.0)]
    found = said({"s0": services}, block([0, 0, 0], [START_US - 1, START_US, START_US + 10]))
    assert found.temperature_degC == pytest.approx([28.0, 28.4, 28.4])
    assert holds_at(services, START_US + 11).temperature_offset_K == pytest.approx(0.4)
    assert holds_at(services, START_US).factor == 1.0, "what is done at a moment does not hold before it"


def test_a_calibration_keeps_a_dry_probe_dry():
    low = Point(bottled_standard(1.413), 1.513, 25.0)
    plain = CalibrationRecord(
        sensor="s0",
        performed_at_us=START_US,
        performed_by="Ines",
        as_found=(low, Point(bottled_standard(50.0), 50.1, 25.0)),
    )
    assert plain.fit.offset_mS_cm < -0.09
    services = {
        "s0": [Service("s0", START_US, CALIBRATED, ServiceBody(performed_by="Ines", record=plain.to_jsonable()))]
    }
    found = said(services, block([0], [START_US + 1], conductivity=0.0))
    assert found.conductivity_mS_cm.tolist() == [0.0]
    assert found.salinity.tolist() == [0.0]
    assert not found.flags[0] & Flag.NEGATIVE


def test_what_is_missing_stays_missing():
    found = said({"s0": [calibrated("s0", START_US, 49.0)]}, block([0], [START_US + 1], conductivity=np.nan))
    assert np.isnan(found.conductivity_mS_cm).all()
    assert np.isnan(found.salinity).all()


def test_of_two_entries_of_one_moment_the_later_holds():
    first, second = calibrated("s0", START_US, 49.0), calibrated("s0", START_US, 51.0)
    assert in_order([first, second]) == [second]
