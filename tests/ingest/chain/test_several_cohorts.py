"""Several cohorts in one tank: each feels what it would feel alone, however the stream is cut."""

from __future__ import annotations

from functools import cache

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from ingest.chain.animal_roster import Stocked
from tests.harness.hatchery import site_text
from tests.ingest.chain.road import NAN, Road, cut, plant_of
from tests.ingest.chain.test_cuts import differing, everything, streams

PL10, PL1 = "penaeus-vannamei/pl10", "penaeus-vannamei/pl1-pl2"
OLD, YOUNG, FRESH = Stocked("old", PL10, 31.0), Stocked("young", PL1, 31.0), Stocked("fresh", PL10, 12.0)


@cache
def quay(*cohorts: Stocked):
    """Three tanks, the first with *cohorts*, the second empty, the third with one."""
    made = plant_of(site_text(port=1, sensors=6, sensors_a_tank=2, interval_s=10.0))
    return made.after_stock({"t0": cohorts, "t2": (Stocked("alone", PL10, 31.0),)})


def through(made, readings, lengths=()) -> Road:
    road = Road(made)
    for block in cut(readings, lengths):
        road.take(block)
    return road


def felt_by(road: Road, cohort: str):
    return [(item.measured_at_us, item.values) for item in road.felt if item.cohort == cohort]


def numbers(values):
    return {name: NAN if value is None else value for name, value in values.items() if not isinstance(value, str)}


@settings(max_examples=15, deadline=None, derandomize=True)
@given(streams(), st.lists(st.integers(1, 9), min_size=1, max_size=4))
def test_the_cut_changes_nothing(readings, lengths):
    made = quay(OLD, YOUNG, FRESH)
    assert differing(everything(through(made, readings)), everything(through(made, readings, lengths))) == ""


@settings(max_examples=15, deadline=None, derandomize=True)
@given(streams())
def test_each_feels_what_it_would_feel_alone(readings):
    """Two sensors a tank: for each cohort the one counts that is farthest from what that cohort is used to."""
    together = through(quay(OLD, YOUNG, FRESH), readings)
    for cohort in (OLD, YOUNG, FRESH):
        alone = felt_by(through(quay(cohort), readings), cohort.cohort)
        here = felt_by(together, cohort.cohort)
        assert [at_us for at_us, _ in here] == [at_us for at_us, _ in alone]
        for (_, one), (_, other) in zip(here, alone, strict=True):
            # A vectorised exponential may differ in its last digit with the length of the row, and so may the driver of no stress.
            assert numbers(one) == pytest.approx(numbers(other), rel=1e-9, abs=1e-9, nan_ok=True)


def test_rows_of_one_tank_stand_together_and_an_empty_tank_has_none():
    animals = quay(OLD, YOUNG, FRESH).animals
    assert animals.cohorts == ("old", "young", "fresh", "alone")
    assert [list(animals.rows_of(tank)) for tank in range(3)] == [[0, 1, 2], [], [3]]
    assert animals.stages[0].id == PL10
    assert animals.stages[1] is None
    assert not animals.is_larva.any()
