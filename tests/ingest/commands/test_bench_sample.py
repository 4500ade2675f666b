from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest

from tests.harness.hatchery import START_US, Bench, conductivity, site_text
from tests.ingest.sensor_work import MINUTE_US, ask


@pytest.fixture
def bench(tmp_path: Path) -> Iterator[Bench]:
    with Bench(tmp_path, site_text(port=1, sensors=3, sensors_a_tank=2), now_us=START_US) as bench:
        yield bench


def taken(bench: Bench) -> dict:
    [(_, event)] = bench.queries.events(kind_prefix="reading.")
    return event.body


def test_it_is_kept_with_what_the_sensors_said_at_that_moment(bench):
    for minute in range(4):
        bench.read("s0", START_US - minute * MINUTE_US, 31.0 + minute)
        bench.read("s1", START_US - minute * MINUTE_US, 30.0)
    answer = ask(
        bench,
        "reading.by_hand",
        "tank/t0",
        role="operator",
        instrument="refractometer",
        scale="practical_salinity",
        value=31.0,
        taken_at_us=START_US - 2 * MINUTE_US,
        note="after feeding",
    )
    assert answer.outcome == "applied"
    body = taken(bench)
    first, second = body["beside"]
    assert first["sensor"] == "s0"
    assert first["measured_at"] == START_US - 2 * MINUTE_US
    assert first["difference"] == pytest.approx(2.0, abs=1e-6)
    # Two standard uncertainties: 1.0 of a refractometer (common practice) and 0.5 % and 0.1 K of the sensor as a rectangle.
    assert 2.0 < first["allowed_difference"] < 2.1
    assert first["agrees"]
    assert second["difference"] == pytest.approx(-1.0, abs=1e-6)
    [sample] = bench.queries.bench_samples(since_us=0)
    assert (sample["tank"], sample["sensor"], sample["actor"], sample["salinity"]) == ("t0", None, "Duty", 31.0)
    assert sample["note"] == "after feeding"


def test_every_scale_of_the_unit_desk_can_be_entered(bench):
    ask(
        bench,
        "reading.by_hand",
        "tank/t0",
        instrument="second-meter",
        scale="conductivity_mS_cm",
        value=conductivity(20.0, 22.0),
        temperature_degC=22.0,
    )
    assert taken(bench)["salinity"] == pytest.approx(20.0, abs=1e-4)
    assert taken(bench)["beside"] == []


@pytest.mark.parametrize(
    ("subject", "body", "reason"),
    [
        ("tank/t9", {}, "no_such_place"),
        ("hall/main", {}, "no_such_place"),
        ("tank/t0", {"instrument": "tongue"}, "unusable_details"),
        ("tank/t0", {"scale": "degrees of saltiness"}, "unusable_details"),
        ("tank/t0", {"scale": "conductivity_mS_cm"}, "temperature_missing"),
        ("tank/t0", {"value": 900.0}, "unusable_reading"),
        ("tank/t0", {"uncertainty": -1.0}, "unusable_reading"),
        ("tank/t0", {"taken_at_us": START_US + MINUTE_US}, "in_the_future"),
    ],
)
def test_what_means_nothing_is_refused(bench, subject, body, reason):
    plain = {"instrument": "refractometer", "scale": "practical_salinity", "value": 31.0}
    answer = ask(bench, "reading.by_hand", subject, **(plain | body))
    assert (answer.outcome, answer.reason) == ("refused", reason)
    assert bench.queries.events(kind_prefix="reading.") == []


def test_a_viewer_enters_nothing(bench):
    answer = ask(
        bench,
        "reading.by_hand",
        "tank/t0",
        role="viewer",
        instrument="refractometer",
        scale="practical_salinity",
        value=31.0,
    )
    assert answer.reason == "role_too_weak"
