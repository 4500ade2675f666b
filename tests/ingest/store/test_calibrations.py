"""Services, periods, samples and the trust in sensors, on a bare store."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest

from ingest.store import calibrations
from ingest.store.block import BlockCommit, Occurrence, SensorWork
from ingest.store.calibrations import NO_CALIBRATION, PeriodRow, SampleRow, ServiceRow
from ingest.store.ledger import Event
from ingest.store.queries import Queries
from ingest.store.store import Store
from tests.ingest.store.samples import START_US, store_with


@pytest.fixture
def store(tmp_path: Path) -> Iterator[Store]:
    held = store_with(tmp_path, sensors=("s0", "s1"))
    yield held
    held.close()


def work(store: Store, kind: str = "sensor.calibrated", **parts: object) -> int:
    event = Event(kind=kind, subject="sensor/s0", recorded_at=START_US)
    [event_id] = store.commit(BlockCommit(occurrences=[Occurrence(event)], work=SensorWork(**parts)))  # type: ignore[arg-type]
    return event_id


def service(at_us: int, *, sensor: int = 1, next_due: int | None = None) -> ServiceRow:
    return ServiceRow(sensor, at_us, "sensor.calibrated", "Ines", next_due, {"note": str(at_us)})


def period(to_us: int, rating: str, *, sensor: int = 1) -> PeriodRow:
    return PeriodRow(sensor, to_us, to_us - 10, 1.0, 2.0, None, rating, None, is_corrected=True)


def test_services_come_back_in_the_order_of_time_with_the_event_that_tells_of_them(store):
    late = work(store, services=(service(START_US + 5),))
    early = work(store, services=(service(START_US),))
    found = Queries(store.folder).services("s0")
    assert [(row.sensor, row.event_id, row.body["note"]) for row in found] == [
        ("s0", early, str(START_US)),
        ("s0", late, str(START_US + 5)),
    ]
    assert Queries(store.folder).services("s1") == []


def test_the_set_of_calibrations_is_named_by_its_newest_event(store):
    assert calibrations.calibration_set(store.connection) == NO_CALIBRATION
    event_id = work(store, services=(service(START_US),), derives_as=("1.0", 1))
    assert calibrations.calibration_set(store.connection) == str(event_id)
    assert [tuple(row) for row in store.connection.execute("SELECT code_version, calibration_set FROM derivation")] == [
        ("1.0", str(event_id))
    ]


def test_due_is_what_the_newest_calibration_says(store):
    work(store, services=(service(START_US + 5, next_due=500),))
    work(store, services=(service(START_US, next_due=900),))
    work(store, services=(service(START_US + 9),))
    assert Queries(store.folder).calibrations_due() == {"s0": 500, "s1": None}


def test_periods_of_a_sensor_are_written_anew_and_those_of_others_stay(store):
    work(store, periods=(period(START_US, "good"), period(START_US + 5, "fair")))
    work(store, periods=(period(START_US, "poor", sensor=2),))
    work(store, periods=(period(START_US + 7, "excellent"),))
    queries = Queries(store.folder)
    assert [(row.to_us, row.rating, row.is_corrected) for row in queries.record_periods("s0")] == [
        (START_US + 7, "excellent", True)
    ]
    assert [row.rating for row in queries.record_periods("s1")] == ["poor"]


def test_samples_carry_the_ids_of_their_places(store):
    sample = SampleRow(START_US, 1, None, "Ines", {"salinity": 31.0})
    event_id = work(
        store, "reading.taken", samples=(sample, sample._replace(taken_at=START_US + 1, tank=None, sensor=2))
    )
    assert event_id == 1
    first, second = Queries(store.folder).bench_samples(since_us=START_US)
    assert (first["tank"], first["sensor"], first["salinity"]) == ("t0", None, 31.0)
    assert (second["tank"], second["sensor"]) == (None, "s1")
    assert Queries(store.folder).bench_samples(since_us=START_US + 2) == []


def test_work_that_fails_leaves_nothing(store):
    store.connection.execute(
        "CREATE TRIGGER no_periods BEFORE INSERT ON record_period BEGIN SELECT RAISE(ABORT, 'no'); END"
    )
    with pytest.raises(Exception, match="no"):
        work(store, services=(service(START_US),), periods=(period(START_US, "good"),))
    assert Queries(store.folder).services() == []
    assert Queries(store.folder).events() == []


def test_the_newest_assessment_replaces_the_one_before(store):
    for moment, belief in ((1, 0), (2, 1)):
        with store.transaction() as connection:
            calibrations.upsert_health(
                connection, sensor=1, assessed_at=moment, belief=belief, since=moment, body={"reasons": []}
            )
    assert calibrations.belief(store.connection, sensor=1) == (1, 2)
    assert calibrations.belief(store.connection, sensor=2) is None
    [row] = Queries(store.folder).sensor_health().values()
    assert (row.sensor, row.assessed_at, row.belief, row.body) == ("s0", 2, 1, {"reasons": []})
