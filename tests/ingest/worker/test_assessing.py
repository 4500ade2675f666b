from __future__ import annotations

from collections.abc import Callable, Iterator
from pathlib import Path

import numpy as np
import pytest

from analysis.sensor.health import Belief
from tests.harness.hatchery import START_US, Bench, conductivity, payload, site_text
from tests.ingest.sensor_work import DAY_US, HOUR_US, ask, point, true_mS_cm, wait_until_time

STEP_US = 600_000_000
DAYS = 8
Water = Callable[[float], float]


@pytest.fixture
def bench(tmp_path: Path) -> Iterator[Bench]:
    text = site_text(port=1, sensors=2, sensors_a_tank=2, interval_s=600.0, animal=None)
    with Bench(tmp_path, text, now_us=START_US) as bench:
        yield bench


def steady(_day: float) -> float:
    return 31.0


def fouled(day: float) -> float:
    return 31.0 * (1.0 - 0.005 * day)


def live(
    bench: Bench, *, first: Water = steady, second: Water = steady, days: float = DAYS, from_day: float = 0.0
) -> None:
    """Let both sensors speak for some days: small noise, 1.5 K of warmth by day."""
    random = np.random.default_rng(11)
    for index in range(round(days * DAY_US / STEP_US)):
        at_us = START_US + round(from_day * DAY_US) + (index + 1) * STEP_US
        day = (at_us - START_US) / DAY_US
        warmth = 28.0 + 1.5 * np.sin(2.0 * np.pi * day)
        wait_until_time(bench, at_us)
        bodies = [
            (f"quay/s{place}", payload(at_us, water(day) + 0.01 * random.standard_normal(), warmth))
            for place, water in enumerate((first, second))
        ]
        bench.process([bench.received(topic, body) for topic, body in bodies])
    bench.roll_up()


def assessed(bench: Bench, sensor: str = "s0") -> tuple[Belief, list[str]]:
    bench.worker.assess()
    row = bench.queries.sensor_health()[sensor]
    assert row.assessed_at == bench.clock.now_us()
    return Belief(row.belief), [reason["finding"] for reason in row.body["reasons"]]


@pytest.mark.slow
def test_steady_sensors_are_believed_and_their_declaration_fits(bench):
    live(bench)
    assert assessed(bench) == (Belief.BELIEVE, [])
    assert assessed(bench, "s1") == (Belief.BELIEVE, [])
    row = bench.queries.sensor_health()["s0"]
    assert row.body["compensation"]["verdict"] == "consistent"
    assert bench.queries.events(kind_prefix="sensor.assessed") == []


@pytest.mark.slow
def test_a_fouling_sensor_is_doubted_until_it_is_cleaned(bench):
    live(bench, first=fouled)
    belief, findings = assessed(bench)
    assert belief is Belief.DOUBT
    assert "fouling" in findings
    [(_, event)] = bench.queries.events(kind_prefix="sensor.assessed", subject="sensor/s0")
    assert (event.body["belief"], event.body["before"]) == (Belief.DOUBT, None)
    ask(
        bench,
        "sensor.service",
        fouling={"before": conductivity(29.8), "after": conductivity(31.0), "temperature_degC": 28.0},
    )
    live(bench, days=0.5, from_day=DAYS)
    assert assessed(bench) == (Belief.BELIEVE, [])
    events = bench.queries.events(kind_prefix="sensor.assessed", subject="sensor/s0")
    assert [event.body["belief"] for _, event in events] == [Belief.DOUBT, Belief.BELIEVE]


@pytest.mark.slow
def test_a_wrong_declaration_is_found_from_the_stored_values(bench):
    # Declared raw, but what it sends does not follow the temperature: it compensates already.
    random = np.random.default_rng(12)
    for index in range(round(4 * DAY_US / STEP_US)):
        at_us = START_US + (index + 1) * STEP_US
        warmth = 28.0 + 1.5 * np.sin(2.0 * np.pi * (at_us - START_US) / DAY_US)
        wait_until_time(bench, at_us)
        shown = 48.0 * (1.0 + 0.0003 * random.standard_normal())
        bench.send("quay/s0", b'{"c": %.5f, "t": %.4f, "at": %d}' % (shown, warmth, at_us))
    bench.roll_up()
    belief, findings = assessed(bench)
    assert belief is Belief.DO_NOT_USE
    assert "compensation-doubted" in findings
    assert "compensates already" in bench.queries.sensor_health()["s0"].body["compensation"]["sentence"]


@pytest.mark.slow
def test_in_tidal_water_a_believed_neighbour_settles_what_the_sensor_declares(tmp_path):
    def tidal(day: float) -> float:
        return 26.0 + 4.0 * np.sin(2.0 * np.pi * day + 0.4)

    text = site_text(port=1, sensors=2, sensors_a_tank=2, interval_s=600.0, animal=None)
    with Bench(tmp_path, text, now_us=START_US) as bench:
        live(bench, first=tidal, second=tidal, days=4)
        assert assessed(bench)[0] is Belief.BELIEVE
        alone = bench.queries.sensor_health()["s0"].body["compensation"]["verdict"]
        assert alone == "undecided"
        assert assessed(bench)[0] is Belief.BELIEVE
        assert bench.queries.sensor_health()["s0"].body["compensation"]["verdict"] == "consistent"


def test_a_sensor_that_has_fallen_silent_is_not_to_be_used_and_one_that_never_spoke_is_not_judged(bench):
    bench.read("s0", START_US, 31.0)
    wait_until_time(bench, START_US + 20 * DAY_US)
    assert assessed(bench) == (Belief.DO_NOT_USE, ["silent"])
    assert set(bench.queries.sensor_health()) == {"s0"}
    assert len(bench.queries.events(kind_prefix="sensor.assessed")) == 1


def test_an_overdue_calibration_is_a_task_and_changes_no_belief(bench):
    ask(bench, "sensor.calibrate", as_found=[point(true_mS_cm())], valid_days=0.01)
    live(bench, days=0.25)
    belief, findings = assessed(bench)
    assert (belief, findings) == (Belief.BELIEVE, ["calibration-overdue"])
    due = bench.queries.calibrations_due()
    assert due == {"s0": START_US + round(0.01 * DAY_US), "s1": None}


def test_a_sample_from_the_bench_is_held_against_the_sensor(bench):
    live(bench, days=0.25)
    now_us = bench.clock.now_us()
    answer = ask(
        bench,
        "reading.by_hand",
        "tank/t0",
        instrument="second-meter",
        scale="conductivity_mS_cm",
        value=conductivity(33.0, 25.0),
        temperature_degC=25.0,
    )
    assert answer.outcome == "applied"
    assert assessed(bench) == (Belief.DO_NOT_USE, ["sample-disagrees"])
    ask(bench, "reading.by_hand", "sensor/s0", instrument="second-meter", scale="practical_salinity", value=31.1)
    wait_until_time(bench, now_us + HOUR_US // 60)
    ask(bench, "reading.by_hand", "sensor/s0", instrument="second-meter", scale="practical_salinity", value=31.1)
    assert assessed(bench) == (Belief.BELIEVE, ["sample-agrees"])
    assert assessed(bench, "s1") == (Belief.DO_NOT_USE, ["sample-disagrees"])


def test_an_assessment_goes_on_in_short_steps_and_begins_anew_after_a_restart(bench, monkeypatch):
    monkeypatch.setattr("ingest.worker.assessing.MOST_ROWS", 10)
    live(bench, days=0.25)
    bench.worker._assessor.begin(now_us=bench.clock.now_us())
    assert bench.worker._assessor.step(bench.worker.plant)
    bench.restart()
    assert bench.queries.sensor_health() == {}
    assert assessed(bench) == (Belief.BELIEVE, [])
