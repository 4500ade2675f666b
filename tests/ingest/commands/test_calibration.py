from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest

from analysis.flags import Flag
from tests.harness.hatchery import START_US, Bench, site_text
from tests.ingest.sensor_work import (
    DAY_US,
    HOUR_US,
    MINUTE_US,
    ask,
    bottle,
    corrected,
    point,
    seen,
    send,
    table,
    true_mS_cm,
)


@pytest.fixture
def bench(tmp_path: Path) -> Iterator[Bench]:
    with Bench(tmp_path, site_text(port=1, sensors=2), now_us=START_US) as bench:
        yield bench


def test_from_its_time_on_readings_are_corrected_and_those_before_are_as_they_were(bench):
    send(bench, START_US - MINUTE_US, 49.0)
    assert ask(bench, "sensor.calibrate", as_found=[point(49.0)]).outcome == "applied"
    send(bench, START_US + MINUTE_US, 49.0)
    send(bench, START_US + MINUTE_US, 49.0, sensor="s1")
    before, after, other = seen(bench)
    assert before["conductivity_mS_cm"] == 49.0
    assert after["conductivity_mS_cm"] == pytest.approx(true_mS_cm(), abs=1e-9)
    assert after["flags"] & Flag.CORRECTED
    assert not before["flags"] & Flag.CORRECTED
    assert after["conductivity"] == 49.0, "raw data stay"
    assert other["conductivity_mS_cm"] == 49.0
    assert not other["flags"] & Flag.CORRECTED
    assert after["derivation"] != before["derivation"]
    sets = [row["calibration_set"] for row in table(bench, "SELECT * FROM derivation ORDER BY id")]
    assert sets[0] == "none"
    assert len(set(sets)) == len(sets) == 2


def test_the_ledger_tells_the_whole_calibration(bench):
    ask(
        bench,
        "sensor.calibrate",
        as_found=[point(49.0)],
        as_left=[point(50.1)],
        reference_temperature_degC=25.0,
        sensor_temperature_degC=24.7,
        note="new window seal",
        valid_days=14,
    )
    [(event_id, event)] = bench.queries.events(kind_prefix="sensor.")
    assert (event.kind, event.subject, event.actor) == ("sensor.calibrated", "sensor/s0", "Duty")
    assert event.measured_at == START_US
    body = event.body
    assert body["record"]["as_found"][0]["lot"] == "K7"
    assert body["record"]["note"] == "new window seal"
    assert body["factor"] == pytest.approx(true_mS_cm() / 50.1)
    assert body["temperature_offset_K"] == pytest.approx(0.3)
    assert body["remarks"] == ["single_standard", "start_of_error_unknown"]
    [row] = table(bench, "SELECT * FROM service")
    assert row["event_id"] == event_id
    assert row["next_due"] == START_US + 14 * DAY_US


def test_a_calibration_survives_a_restart(bench):
    ask(bench, "sensor.calibrate", as_found=[point(49.0)])
    bench.restart()
    send(bench, START_US + MINUTE_US, 49.0)
    [row] = seen(bench)
    assert row["conductivity_mS_cm"] == pytest.approx(true_mS_cm(), abs=1e-9)
    assert len(table(bench, "SELECT * FROM derivation")) == 2


def test_the_compensation_of_the_sensor_is_undone_in_what_a_person_enters(tmp_path):
    text = site_text(port=1).replace(
        "    interval_s: 60.0\n",
        "    interval_s: 60.0\n    conductivity_unit: uS/cm\n    reports: compensated\n"
        "    compensation: {method: linear, coefficient_percent_per_K: 2.0, reference_temperature_degC: 25}\n",
    )
    with Bench(tmp_path, text) as bench:
        # At 20 degC a linear 2 %/K meter divides by 0.9; it shows uS/cm.
        shown = 1000.0 * true_mS_cm(20.0) / 0.9
        assert ask(bench, "sensor.calibrate", as_found=[point(shown * 0.98, 20.0)]).outcome == "applied"
        [(_, event)] = bench.queries.events(kind_prefix="sensor.")
        assert event.body["factor"] == pytest.approx(1.0 / 0.98, rel=1e-9)
        assert event.body["shown"] == [shown * 0.98]


@pytest.mark.parametrize(
    ("role", "kind", "outcome"),
    [
        ("viewer", "sensor.calibrate", "refused"),
        ("operator", "sensor.calibrate", "refused"),
        ("biologist", "sensor.calibrate", "applied"),
        ("viewer", "sensor.service", "refused"),
        ("operator", "sensor.service", "applied"),
    ],
)
def test_who_may_do_what(bench, role, kind, outcome):
    body = {"as_found": [point(49.0)]} if kind == "sensor.calibrate" else {}
    answer = ask(bench, kind, role=role, **body)
    assert answer.outcome == outcome
    assert answer.reason == ("" if outcome == "applied" else "role_too_weak")
    assert bool(bench.queries.events(kind_prefix="sensor.")) is (outcome == "applied")


@pytest.mark.parametrize(
    ("reason", "body"),
    [
        ("expired_standard", {"as_found": [{**point(49.0), "standard": bottle("2026-05-27")}]}),
        ("unusable_standard", {"as_found": [{**point(49.0), "standard": {"kind": "bottle", "value": 900.0}}]}),
        ("standard_temperature_unknown", {"as_found": [point(49.0, 70.0)]}),
        ("unusable_reading", {"as_found": [point(0.0)]}),
        ("factor_out_of_range", {"as_found": [point(12.0)]}),
        ("unusable_details", {"as_found": []}),
        ("unusable_details", {"as_found": "none"}),
        ("unusable_details", {"as_found": [point(49.0)], "cell": 1}),
        ("unusable_details", {"as_found": [{**point(49.0), "standard": bottle("next year")}]}),
        ("unusable_details", {"as_found": [point(49.0)], "valid_days": 0.0}),
        ("in_the_future", {"as_found": [point(49.0)], "performed_at_us": START_US + HOUR_US}),
        (
            "not_linear",
            {
                "as_found": [
                    {"standard": {"kind": "bottle", "value": value}, "reading": reading, "temperature_degC": 25.0}
                    for value, reading in ((12.88, 12.88), (50.0, 53.0), (80.0, 80.0))
                ]
            },
        ),
    ],
)
def test_what_cannot_be_trusted_is_refused_and_changes_nothing(bench, reason, body):
    answer = ask(bench, "sensor.calibrate", **body)
    assert (answer.outcome, answer.reason) == ("refused", reason)
    send(bench, START_US + MINUTE_US, 49.0)
    assert seen(bench)[0]["conductivity_mS_cm"] == 49.0
    assert table(bench, "SELECT * FROM service") == []
    assert bench.queries.events(kind_prefix="sensor.") == []


def test_a_bottle_is_good_until_the_end_of_its_day_on_the_site(tmp_path):
    # 2026-05-28 21:26 in Lisbon is the last evening of a bottle that expires on the 28th.
    with Bench(tmp_path, site_text(port=1), now_us=START_US) as bench:
        assert (
            ask(bench, "sensor.calibrate", as_found=[{**point(49.0), "standard": bottle("2026-05-28")}]).outcome
            == "applied"
        )


def test_of_an_unknown_sensor_nothing_is_taken(bench):
    assert ask(bench, "sensor.service", "sensor/s9").reason == "no_such_sensor"


def test_a_cleaning_changes_no_value_that_follows(bench):
    ask(bench, "sensor.service", fouling={"before": 48.0, "after": 50.0, "temperature_degC": 25.0})
    send(bench, START_US + MINUTE_US, 49.0)
    [row] = seen(bench)
    assert row["conductivity_mS_cm"] == 49.0
    assert not row["flags"] & Flag.CORRECTED
    [(_, event)] = bench.queries.events(kind_prefix="sensor.")
    assert event.kind == "sensor.serviced"
    assert event.body["remarks"] == ["no_second_meter", "start_of_error_unknown"]
    assert corrected(bench) == []


def test_a_calibration_entered_twice_is_never_applied_on_top_of_itself(bench):
    for _ in range(2):
        ask(bench, "sensor.calibrate", as_found=[point(49.0)], performed_at_us=START_US - HOUR_US)
    send(bench, START_US + MINUTE_US, 49.0)
    assert seen(bench)[0]["conductivity_mS_cm"] == pytest.approx(true_mS_cm(), abs=1e-9), (
        "never applied on top of itself"
    )
