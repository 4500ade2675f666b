from __future__ import annotations

import sqlite3
from collections.abc import Iterator
from contextlib import closing
from pathlib import Path

import gsw
import pytest

from analysis.flags import Flag, Quality
from ingest.store.ledger import first_broken_id
from tests.harness.hatchery import START_US, Bench, running_worker, site_text
from tests.harness.process import wait_until
from tests.ingest.sensor_work import (
    HOUR_US,
    MINUTE_US,
    ask,
    corrected,
    point,
    rederive,
    seen,
    send,
    table,
    true_mS_cm,
    wait_until_time,
)

END_US = START_US + 10 * HOUR_US


@pytest.fixture
def bench(tmp_path: Path) -> Iterator[Bench]:
    with Bench(tmp_path, site_text(port=1, sensors=2), now_us=START_US) as bench:
        yield bench


def ten_hours(bench: Bench, *, step_us: int = HOUR_US, shown: float = 45.0) -> None:
    """A clean calibration at the start, then ten hours of readings of both sensors."""
    assert ask(bench, "sensor.calibrate", as_found=[point(true_mS_cm())]).outcome == "applied"
    for at_us in range(START_US + step_us // 2, END_US, step_us):
        send(bench, at_us, shown)
        send(bench, at_us, shown, sensor="s1")
    wait_until_time(bench, END_US)


def find_fouling_and_drift(bench: Bench) -> None:
    """At the end 48 mS/cm before and 49 after cleaning while the second meter moved by 0.2; then 49 in a bottle of 50."""
    outcome = ask(
        bench,
        "sensor.calibrate",
        fouling={
            "before": 48.0,
            "after": 49.0,
            "temperature_degC": 25.0,
            "field_start_mS_cm": 49.1,
            "field_end_mS_cm": 49.3,
        },
        as_found=[point(49.0)],
    )
    assert outcome.outcome == "applied"


# By hand, after TM 1-D3 (Wagner and others 2006, from memory): Ef = (49 - 48) - (49.3 - 49.1) = 0.8 mS/cm, 100 x 0.8/48 =
# 1.6667 %; Ed = 50 - 49 = 1 mS/cm, 100 x 1/49 = 2.0408 %; the signed sum at the end is 3.7075 %.
FOULING_PERCENT = 1.6666666666666667
DRIFT_PERCENT = 2.0408163265306123
SUM_PERCENT = FOULING_PERCENT + DRIFT_PERCENT


def test_the_record_before_is_corrected_by_linear_proration(bench):
    ten_hours(bench)
    find_fouling_and_drift(bench)
    rederive(bench)
    better = corrected(bench)
    assert [row["measured_at"] for row in better] == [START_US + (2 * k + 1) * HOUR_US // 2 for k in range(10)]
    for k, row in enumerate(better):
        share = (k + 0.5) / 10.0
        by_hand = 45.0 * (1.0 + 0.01 * SUM_PERCENT * share)
        assert row["conductivity_mS_cm"] == pytest.approx(by_hand, rel=1e-9)
        assert row["practical_salinity"] == pytest.approx(float(gsw.SP_from_C(by_hand, 25.0, 0.0)), abs=1e-9)
        assert row["flags"] & Flag.CORRECTED
        assert row["quality"] == Quality.PASS
        assert row["reason"] == "calibration"
        assert row["conductivity"] == 45.0
    assert all(row["conductivity_mS_cm"] == 45.0 for row in seen(bench)), "what was seen stays"
    [period] = bench.queries.record_periods("s0")[1:]
    assert (period.from_us, period.to_us) == (START_US, END_US)
    assert period.fouling_percent == pytest.approx(FOULING_PERCENT)
    assert period.drift_percent == pytest.approx(DRIFT_PERCENT)
    assert period.rating == "good", "3.71 % in all: above 3, not above 10 %"
    assert period.is_corrected


def test_charts_use_the_best_and_audits_what_was_seen(bench):
    ten_hours(bench)
    find_fouling_and_drift(bench)
    rederive(bench)
    seen_set = bench.queries.history("s0", from_us=START_US, to_us=END_US, set="seen")
    best = bench.queries.history("s0", from_us=START_US, to_us=END_US)
    assert (seen_set.is_best, best.is_best) == (False, True)
    assert best.time_us.tolist() == seen_set.time_us.tolist()
    assert (best.salinity > seen_set.salinity).all()
    assert best.salinity[-1] == corrected(bench)[-1]["practical_salinity"]
    other = bench.queries.history("s1", from_us=START_US, to_us=END_US)
    assert other.salinity.tolist() == seen_set.salinity.tolist(), "the other sensor was not touched"


@pytest.mark.parametrize("is_swept_before", [True, False])
def test_long_charts_show_the_best_too_and_what_was_seen_stays(bench, monkeypatch, is_swept_before):
    monkeypatch.setattr("ingest.worker.rederiving.MOST_OF_SENSOR", 7)
    ten_hours(bench, step_us=5 * MINUTE_US)
    if is_swept_before:
        bench.roll_up()
    find_fouling_and_drift(bench)
    rederive(bench)
    bench.clock.advance(60)
    ask(bench, "sensor.calibrate", as_found=[point(47.0)], performed_at_us=END_US)
    rederive(bench)
    send(bench, END_US + HOUR_US, 45.0)
    bench.roll_up()
    span = {"from_us": START_US - 2 * 86_400_000_000, "to_us": END_US}
    best, seen_set = bench.queries.history("s0", **span), bench.queries.history("s0", **span, set="seen")
    assert best.resolution_us == seen_set.resolution_us == 15 * MINUTE_US
    newest = max(row["derivation"] for row in corrected(bench))
    better = {row["measured_at"]: row for row in corrected(bench) if row["derivation"] == newest}
    for index, start in enumerate(best.time_us.tolist()):
        rows = [row for at_us, row in better.items() if start <= at_us < start + 15 * MINUTE_US]
        assert best.salinity[index] == pytest.approx(
            sum(row["practical_salinity"] for row in rows) / len(rows), rel=1e-9
        )
        assert best.osmolality_mOsm_kg[index] == pytest.approx(
            sum(row["osmolality_mOsm_kg"] for row in rows) / len(rows), rel=1e-9
        )
        # Rounding apart: every reading of a bucket was seen with one and the same value here.
        assert best.salinity_min[index] == pytest.approx(best.salinity[index], rel=1e-12)
        assert best.salinity_max[index] == pytest.approx(best.salinity[index], rel=1e-12)
    assert seen_set.salinity == pytest.approx([seen(bench)[0]["practical_salinity"]] * len(seen_set.salinity), rel=1e-9)


def test_below_the_criterion_the_record_stays_as_it_is_and_is_rated(bench):
    ten_hours(bench)
    ask(bench, "sensor.calibrate", as_found=[point(true_mS_cm() / 1.02)])
    rederive(bench)
    assert corrected(bench) == []
    period = bench.queries.record_periods("s0")[-1]
    assert period.rating == "excellent"
    assert period.drift_percent == pytest.approx(2.0)
    assert not period.is_corrected


def test_a_site_may_be_stricter(tmp_path):
    text = site_text(port=1, sensors=2, extra="records: {correct_above_percent: 1}\n")
    with Bench(tmp_path, text, now_us=START_US) as bench:
        ten_hours(bench)
        ask(bench, "sensor.calibrate", as_found=[point(true_mS_cm() / 1.02)])
        rederive(bench)
        assert corrected(bench)[-1]["conductivity_mS_cm"] == pytest.approx(45.0 * (1 + 0.02 * 0.95), rel=1e-9)


def test_a_thermometer_found_wrong_is_taken_out_of_the_record_too(bench):
    warm = {"reference_temperature_degC": 25.0}
    ask(bench, "sensor.calibrate", as_found=[point(true_mS_cm())], sensor_temperature_degC=25.0, **warm)
    send(bench, START_US + 5 * HOUR_US, 45.0)
    wait_until_time(bench, END_US)
    ask(bench, "sensor.calibrate", as_found=[point(true_mS_cm())], sensor_temperature_degC=24.5, **warm)
    rederive(bench)
    [row] = corrected(bench)
    assert row["temperature_degC"] == pytest.approx(25.25), "half of the 0.5 K found at the end"
    assert row["conductivity_mS_cm"] == 45.0
    send(bench, END_US + HOUR_US, 45.0)
    assert seen(bench)[-1]["temperature_degC"] == pytest.approx(25.5)


def test_a_calibration_entered_late_reaches_the_readings_since(bench):
    ten_hours(bench)
    ask(bench, "sensor.calibrate", as_found=[point(49.0)], performed_at_us=START_US + 5 * HOUR_US)
    rederive(bench)
    better = {row["measured_at"]: row["conductivity_mS_cm"] for row in corrected(bench)}
    for k in range(5, 10):
        assert better[START_US + (2 * k + 1) * HOUR_US // 2] == pytest.approx(45.0 * true_mS_cm() / 49.0, rel=1e-9)


def test_a_cleaning_alone_takes_the_fouling_out(bench):
    ten_hours(bench)
    ask(bench, "sensor.service", fouling={"before": 46.0, "after": 48.0, "temperature_degC": 25.0})
    rederive(bench)
    better = corrected(bench)
    assert better[-1]["conductivity_mS_cm"] == pytest.approx(45.0 * (1 + 2.0 / 46.0 * 0.95), rel=1e-9)
    assert better[-1]["reason"] == "cleaning"


def test_a_second_calibration_supersedes_and_nothing_is_overwritten(bench):
    ten_hours(bench)
    find_fouling_and_drift(bench)
    rederive(bench)
    first = corrected(bench)
    bench.clock.advance(60)
    # The same moment entered anew: the bottle had been read wrongly.
    ask(bench, "sensor.calibrate", as_found=[point(47.0)], performed_at_us=END_US)
    rederive(bench)
    rows = corrected(bench)
    assert [row for row in rows if row["derivation"] == first[0]["derivation"]] == first
    best = bench.queries.history("s0", from_us=START_US, to_us=END_US)
    newest = [row for row in rows if row["derivation"] != first[0]["derivation"]]
    assert best.salinity.tolist() == [row["practical_salinity"] for row in newest]
    assert newest[-1]["conductivity_mS_cm"] == pytest.approx(45.0 * (1 + (true_mS_cm() / 47.0 - 1) * 0.95), rel=1e-9)


def test_a_late_reading_of_a_corrected_stretch_is_corrected_too(bench):
    ten_hours(bench)
    find_fouling_and_drift(bench)
    rederive(bench)
    send(bench, END_US + MINUTE_US, 45.0)
    assert bench.worker.rederive() is False
    send(bench, START_US + 4 * HOUR_US, 45.0)
    rederive(bench)
    [late] = [row for row in corrected(bench) if row["measured_at"] == START_US + 4 * HOUR_US]
    assert late["conductivity_mS_cm"] == pytest.approx(45.0 * (1 + 0.01 * SUM_PERCENT * 0.4), rel=1e-9)
    assert late["reason"] == "late readings"


def test_a_value_that_needs_more_than_thirty_percent_is_not_to_be_used(bench):
    ten_hours(bench)
    ask(bench, "sensor.calibrate", as_found=[point(true_mS_cm() / 1.5)])
    rederive(bench)
    qualities = [row["quality"] for row in corrected(bench)]
    assert qualities == [Quality.PASS] * 6 + [Quality.FAIL] * 4, "from 0.65 x 50 % on"
    assert bench.queries.record_periods("s0")[-1].rating == "beyond maximum allowable limit"


def test_no_alarm_is_raised_or_cleared_by_it(bench):
    # Salinity 25.5 before and 26.4 after correction, in a tank that should have 31.
    ten_hours(bench, shown=40.0)
    for minute in range(30):
        send(bench, END_US + minute * MINUTE_US, 40.0)
        bench.tick()
    before = table(bench, "SELECT * FROM alarm")
    assert any(row["condition"] == "salinity_low" and row["is_active"] for row in before)
    events = [event for _, event in bench.queries.events(kind_prefix="alarm.")]
    find_fouling_and_drift(bench)
    rederive(bench)
    assert len(corrected(bench)) == 40
    assert table(bench, "SELECT * FROM alarm") == before
    assert [event for _, event in bench.queries.events(kind_prefix="alarm.")] == events


def test_cut_off_between_slices_it_goes_on_and_makes_no_row_twice(bench, monkeypatch):
    monkeypatch.setattr("ingest.worker.rederiving.MOST_ROWS", 6)
    ten_hours(bench)
    find_fouling_and_drift(bench)
    slices = 0
    while bench.worker.rederive():
        slices += 1
        [job] = bench.queries.rederivations()
        made = corrected(bench)
        assert len(made) == job.row_count
        assert all(row["measured_at"] < job.next_us for row in made)
        bench.restart()
    assert slices > 3
    assert len(corrected(bench)) == 10
    [job] = bench.queries.rederivations()
    assert job.finished_at is not None
    [(_, event)] = bench.queries.events(kind_prefix="sensor.rederived")
    assert event.body["rows"] == 10
    with closing(sqlite3.connect(bench.store / "store.db")) as connection:
        connection.row_factory = sqlite3.Row
        assert first_broken_id(connection) is None


@pytest.mark.parametrize("most_of_sensor", [1, 3, 10, 11])
def test_however_it_is_sliced_the_rows_are_the_same(bench, monkeypatch, most_of_sensor):
    monkeypatch.setattr("ingest.worker.rederiving.MOST_OF_SENSOR", most_of_sensor)
    ten_hours(bench)
    find_fouling_and_drift(bench)
    assert rederive(bench) >= 10 // most_of_sensor
    better = corrected(bench)
    assert [row["measured_at"] for row in better] == [START_US + (2 * k + 1) * HOUR_US // 2 for k in range(10)]
    assert better[-1]["conductivity_mS_cm"] == pytest.approx(45.0 * (1.0 + 0.01 * SUM_PERCENT * 0.95), rel=1e-9)


def test_a_record_that_cannot_be_worked_out_does_not_end_the_worker(bench, monkeypatch):
    ten_hours(bench)
    find_fouling_and_drift(bench)

    def broken(*_: object) -> None:
        raise ZeroDivisionError

    monkeypatch.setattr("ingest.worker.rederiving._derived", broken)
    rederive(bench)
    assert corrected(bench) == []
    assert bench.queries.rederivations()[0].finished_at is not None
    [(_, event)] = bench.queries.events(kind_prefix="sensor.rederiv")
    assert event.kind == "sensor.rederivation_failed"
    assert bench.worker.rederive() is False


def test_live_readings_go_on_between_the_slices(bench, monkeypatch):
    monkeypatch.setattr("ingest.worker.rederiving.MOST_ROWS", 6)
    ten_hours(bench)
    find_fouling_and_drift(bench)
    assert bench.worker.rederive()
    send(bench, END_US + MINUTE_US, 45.0)
    rederive(bench)
    live = seen(bench)[-1]
    assert live["conductivity_mS_cm"] == pytest.approx(45.0 * true_mS_cm() / 49.0, rel=1e-9)
    assert len(corrected(bench)) == 10


def test_readings_are_taken_in_the_water_of_their_day(tmp_path):
    text = site_text(port=1, sensors=1, animal=None)
    with Bench(tmp_path, text, now_us=START_US) as bench:
        ask(bench, "sensor.calibrate", as_found=[point(true_mS_cm())])
        send(bench, START_US + 5 * HOUR_US, 45.0)
        bench.site_file.write_text(text.replace("water: seawater", "water: sodium-chloride"))
        assert bench.worker.reload()
        wait_until_time(bench, END_US)
        find_fouling_and_drift(bench)
        rederive(bench)
        [row] = corrected(bench)
        assert row["practical_salinity"] == pytest.approx(
            float(gsw.SP_from_C(45.0 * (1 + 0.005 * SUM_PERCENT), 25.0, 0.0))
        )


def test_a_new_site_file_keeps_the_calibrations(bench):
    ask(bench, "sensor.calibrate", as_found=[point(49.0)])
    bench.site_file.write_text(bench.site_file.read_text().replace("name: Quay House", "name: Quay House South"))
    assert bench.worker.reload()
    send(bench, START_US + MINUTE_US, 49.0)
    [row] = seen(bench)
    assert row["conductivity_mS_cm"] == pytest.approx(true_mS_cm(), abs=1e-9)
    derivations = table(bench, "SELECT * FROM derivation ORDER BY id")
    assert derivations[-1]["id"] == row["derivation"]
    assert (derivations[-1]["revision"], derivations[-1]["calibration_set"]) == (2, derivations[-2]["calibration_set"])


@pytest.mark.slow
def test_killed_in_the_middle_it_leaves_a_consistent_store_and_finishes_after_the_restart(tmp_path):
    count = 120_000
    with Bench(tmp_path, site_text(port=1, sensors=1, interval_s=1.0, animal=None), now_us=START_US) as bench:
        ask(bench, "sensor.calibrate", as_found=[point(true_mS_cm())])
        for block in range(0, count, 4000):
            wait_until_time(bench, START_US + (block + 4000) * 250_000)
            bodies = [
                b'{"c": 45.0, "t": 25.0, "at": %d}' % (START_US + (index + 1) * 250_000)
                for index in range(block, block + 4000)
            ]
            assert bench.send("quay/s0", *bodies)
        wait_until_time(bench, END_US)
        find_fouling_and_drift(bench)
        site_file, queries = bench.site_file, bench.queries
    with running_worker(site_file) as worker:
        wait_until(lambda: queries.rederivations()[0].row_count > 0, what="the first slice")
        worker.kill()
        [job] = queries.rederivations()
        assert job.finished_at is None, "too fast for this test: nothing was cut off"
        with closing(sqlite3.connect(worker.store / "store.db")) as connection:
            made = connection.execute("SELECT count(*), max(measured_at) FROM corrected").fetchone()
            assert made[0] == job.row_count
            assert made[1] < job.next_us
        worker.start()
        wait_until(lambda: queries.rederivations()[0].finished_at is not None, what="the end of the job")
        assert worker.stop() == 0
    with closing(sqlite3.connect(worker.store / "store.db")) as connection:
        # A row that its own repetition would supersede is not made; the first moves by 4e-7 of itself and is.
        assert connection.execute("SELECT count(*) FROM corrected").fetchone()[0] == count
        assert connection.execute("PRAGMA integrity_check").fetchone()[0] == "ok"
    assert len(queries.events(kind_prefix="sensor.rederived")) == 1
