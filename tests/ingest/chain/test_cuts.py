"""What comes out does not depend on how the stream was cut into blocks: so a kill at any moment changes nothing."""

from __future__ import annotations

from functools import cache

import pytest
from hypothesis import Phase, given, settings
from hypothesis import strategies as st

from ingest.reading import RawReading
from tests.harness.hatchery import START_US, conductivity, site_text
from tests.ingest.chain.road import NAN, Road, cut, plain, plant_of

SECOND_US = 1_000_000
INTERVAL_S = 10.0


@cache
def quay():
    """Three tanks, the first two with two sensors each."""
    return plant_of(site_text(port=1, sensors=6, sensors_a_tank=2, interval_s=INTERVAL_S))


def through(readings, lengths) -> Road:
    road = Road(quay())
    for block in cut(readings, lengths):
        road.take(block)
    return road


def everything(road: Road):
    return plain(
        {
            "rows": road.rows,
            "state": road.state,
            "happened": [item._asdict() for item in road.happened],
            "felt": [item._asdict() for item in sorted(road.felt, key=lambda item: (item.tank, item.measured_at_us))],
            "duplicates": road.duplicates,
            "contradictions": road.contradictions,
            "newest": road.newest_us,
        }
    )


def differing(one, other, path=""):
    """Return the first place where two plain structures differ: what a failing test should say."""
    if type(one) is not type(other):
        return f"{path}: {one!r} / {other!r}"
    if isinstance(one, dict):
        for key in {**one, **other}:
            found = differing(one.get(key, "absent"), other.get(key, "absent"), f"{path}.{key}")
            if found:
                return found
        return ""
    if isinstance(one, list):
        if len(one) != len(other):
            return f"{path}: {len(one)} / {len(other)} items"
        for index, (left, right) in enumerate(zip(one, other, strict=True)):
            found = differing(left, right, f"{path}[{index}]")
            if found:
                return found
        return ""
    return "" if one == other else f"{path}: {one!r} / {other!r}"


SALINITY = st.sampled_from([31.0, 31.02, 30.9, 28.5, 27.0, 33.6, 0.2, 20.0])
"""Near the set point, beyond each limit, in air."""


@st.composite
def streams(draw, most=60):
    """Readings in the order of arrival: at their pace, some delayed, some twice, some contradicting, some absent."""
    count = draw(st.integers(1, most))
    readings, now_us = [], START_US
    for _ in range(count):
        now_us += draw(st.sampled_from([0, 100_000, SECOND_US, 5 * SECOND_US, 40 * SECOND_US]))
        kind = draw(st.sampled_from(["live", "live", "live", "live", "delayed", "again", "other", "blank", "ahead"]))
        if kind in ("again", "other") and readings:
            one = draw(st.sampled_from(readings))
            value = one.conductivity if kind == "again" else one.conductivity + 0.5
            readings.append(one._replace(received_at_us=now_us, conductivity=value))
            continue
        delay_s = {"delayed": draw(st.sampled_from([3, 15, 25, 90, 600])), "ahead": -300}.get(kind, 0)
        value = NAN if kind == "blank" else conductivity(draw(SALINITY))
        sensor = draw(st.integers(0, 5))
        readings.append(RawReading(sensor, now_us - delay_s * SECOND_US, now_us, value, 28.0, NAN, 0))
    return readings


WITHOUT_SHRINKING = [Phase.explicit, Phase.reuse, Phase.generate]
"""A smaller example takes minutes to find; the first place that differs says as much."""


@settings(max_examples=12, phases=WITHOUT_SHRINKING)
@given(streams(most=30), st.lists(st.integers(1, 12), min_size=1, max_size=6))
def test_any_cut_gives_the_same(readings, lengths):
    assert differing(everything(through(readings, [])), everything(through(readings, lengths))) == ""


@pytest.mark.slow
@settings(max_examples=100, phases=WITHOUT_SHRINKING)
@given(streams(most=80), st.lists(st.integers(1, 12), min_size=1, max_size=6))
def test_any_cut_gives_the_same_as_reading_by_reading(readings, lengths):
    assert differing(everything(through(readings, [1])), everything(through(readings, lengths))) == ""


@pytest.mark.slow
def test_an_hour_of_one_tank_at_once_is_the_same_as_reading_by_reading():
    """Two sensors on either side of what the animals are used to, hundreds of their steps in one block."""
    readings = []
    for index in range(400):
        at_us = START_US + index * 5 * SECOND_US
        value = 29.0 + index / 200 if index % 2 else 33.5 - index / 300
        readings.append(RawReading(index % 2, at_us, at_us, conductivity(value), 28.0, NAN, 0))
    assert differing(everything(through(readings, [1])), everything(through(readings, []))) == ""
