"""What a service says of the record before it: USGS TM 1-D3 with a service that only cleans, and a site that is stricter."""

from __future__ import annotations

import numpy as np
import pytest

from analysis.sensor.calibration import drift_checks
from analysis.sensor.drift import Criterion, FoulingCheck, RecordCorrection
from ingest.chain.services import (
    CALIBRATED,
    SERVICED,
    FoulingBody,
    Rules,
    Service,
    ServiceBody,
    body_of,
    periods,
    prorated,
    service,
)
from ingest.site.records import Records
from tests.harness.hatchery import START_US
from tests.ingest.chain.test_calibrated import calibrated, record

HOUR_US = 3_600_000_000
RULES = Rules.of(Records())


def with_body(one: Service, **changes: object) -> Service:
    plain = {**body_of(one), **changes}
    return service(one.sensor, one.performed_at_us, one.kind, plain)


def fouling(before: float, after: float) -> dict[str, float]:
    return {"before_mS_cm": before, "after_mS_cm": after}


def cleaned(at_us: int, before: float, after: float) -> Service:
    body = ServiceBody(
        performed_by="Ines", fouling=FoulingBody(before_mS_cm=before, after_mS_cm=after), level_mS_cm=before
    )
    return Service("s0", at_us, SERVICED, body)


def test_fouling_and_drift_of_one_visit_are_those_of_the_science():
    first = with_body(calibrated("s0", START_US, 50.0), level_mS_cm=45.0)
    last = with_body(calibrated("s0", START_US + 10 * HOUR_US, 48.0), level_mS_cm=45.0, fouling=fouling(45.0, 46.0))
    held = periods([first, last], RULES)
    expected = RecordCorrection(
        START_US,
        START_US + 10 * HOUR_US,
        fouling=FoulingCheck(45.0, 46.0, 0.0, 0.0),
        drift=drift_checks(record("s0", START_US + 10 * HOUR_US, 48.0), before=record("s0", START_US, 50.0)),
    )
    time_us = START_US + np.arange(0, 10 * HOUR_US, HOUR_US // 3)
    raw = np.linspace(30.0, 55.0, len(time_us))
    found, warmth, absolute = prorated(
        held, conductivity_mS_cm=raw, temperature_degC=np.full(raw.shape, 25.0), measured_at_us=time_us
    )
    assert found == pytest.approx(expected.corrected(raw, measured_at_us=time_us), rel=1e-12)
    assert (warmth == 25.0).all()
    assert absolute == pytest.approx(expected.absolute_sum_percent(raw) * expected.share(time_us), rel=1e-12)
    assert held[1].found.rating == expected.rating(45.0).words


def test_drift_goes_back_to_the_calibration_and_fouling_only_to_the_cleaning_between():
    services = [
        with_body(calibrated("s0", START_US, 50.0), level_mS_cm=45.0),
        cleaned(START_US + 6 * HOUR_US, 44.0, 45.98),
        with_body(calibrated("s0", START_US + 10 * HOUR_US, 48.0), level_mS_cm=45.0, fouling=fouling(44.0, 44.0)),
    ]
    held = periods(services, RULES)
    drift = 100.0 * 2.0 / 48.0
    found, _, _ = prorated(
        held,
        conductivity_mS_cm=np.array([40.0, 40.0]),
        temperature_degC=np.array([25.0, 25.0]),
        measured_at_us=np.array([START_US + 3 * HOUR_US, START_US + 8 * HOUR_US]),
    )
    # Before the cleaning half of its 4.5 %, and three tenths of the drift; after it, eight tenths of the drift alone.
    assert found[0] == pytest.approx(40.0 * (1.0 + 0.01 * (0.5 * 4.5 + 0.3 * drift)), rel=1e-12)
    assert found[1] == pytest.approx(40.0 * (1.0 + 0.01 * 0.8 * drift), rel=1e-12)


def test_where_nobody_knows_the_beginning_nothing_is_said():
    [alone] = periods([with_body(calibrated("s0", START_US, 40.0), level_mS_cm=45.0)], RULES)
    assert (alone.from_us, alone.found.rating, alone.found.is_corrected) == (None, "", False)


def test_a_person_may_know_when_the_error_began():
    began_us = START_US - 2 * HOUR_US
    [alone] = periods(
        [with_body(calibrated("s0", START_US, 40.0), level_mS_cm=45.0, error_began_at_us=began_us)], RULES
    )
    assert alone.from_us == began_us
    assert alone.found.drift_percent == pytest.approx(25.0)
    assert alone.found.rating == "poor"


@pytest.mark.parametrize(("percent", "is_corrected"), [(3.0, False), (2.0, True)])
def test_a_stricter_site_corrects_what_another_leaves(percent, is_corrected):
    rules = Rules(Criterion(percent), 0.2)
    first = with_body(calibrated("s0", START_US, 50.0), level_mS_cm=45.0)
    last = with_body(calibrated("s0", START_US + HOUR_US, 50.0 / 1.025), level_mS_cm=45.0)
    assert periods([first, last], rules)[1].found.is_corrected is is_corrected


def test_two_large_errors_that_cancel_are_not_corrected_and_make_no_good_record():
    first = with_body(calibrated("s0", START_US, 50.0), level_mS_cm=40.0)
    last = with_body(calibrated("s0", START_US + HOUR_US, 50.0 / 0.9), level_mS_cm=40.0, fouling=fouling(40.0, 44.0))
    found = periods([first, last], RULES)[1].found
    assert (found.fouling_percent, found.drift_percent) == (pytest.approx(10.0), pytest.approx(-10.0))
    assert not found.is_corrected
    assert found.rating == "poor", "20 % in all"


def test_a_service_reads_back_as_it_was_written():
    one = with_body(
        calibrated("s0", START_US, 49.0, warmth_K=0.2), level_mS_cm=45.0, fouling=fouling(44.0, 45.0), remarks=["x"]
    )
    assert service("s0", START_US, CALIBRATED, body_of(one)) == one
    assert one.record() == record("s0", START_US, 49.0, warmth_K=0.2)
