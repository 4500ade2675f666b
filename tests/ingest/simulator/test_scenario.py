from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from analysis.errors import InvalidInputError
from ingest.simulator.scenario import Acclimation, Scenario, TankEvent, load
from ingest.site.models import Site


def valve(**times: float) -> TankEvent:
    return TankEvent(kind="fresh-water-valve-stuck", tank="t1", **times)


def test_once_it_goes_on_from_start_to_before_the_end():
    event = valve(start_h=1.0, lasts_h=2.0)
    assert event.is_on(np.array([0.9, 1.0, 2.9, 3.0])).tolist() == [False, True, True, False]


def test_what_comes_again_comes_after_its_first_start():
    event = valve(start_h=1.0, lasts_h=2.0, every_h=24.0)
    assert event.is_on(np.array([-23.0, 1.0, 3.0, 26.5, 241.0])).tolist() == [False, True, False, True, True]
    assert event.hours_into(np.array([25.5]))[0] == pytest.approx(0.5)
    assert event.hours_since_start(np.array([-3.0, 30.0])).tolist() == [-4.0, 5.0]


@settings(derandomize=True, deadline=None)
@given(
    start=st.floats(-50, 50),
    lasts=st.floats(0.01, 5),
    pause=st.one_of(st.none(), st.floats(0.01, 50)),
    edges=st.lists(st.integers(-600, 600), min_size=2, max_size=20, unique=True).map(sorted),
)
def test_parts_of_spans_add_up_however_the_time_is_cut(start, lasts, pause, edges):
    event = valve(start_h=start, lasts_h=lasts, **({} if pause is None else {"every_h": lasts + pause}))
    edges = np.array(edges) / 10.0
    parts = event.part_of(edges)
    whole = event.part_of(edges[[0, -1]])[0] * (edges[-1] - edges[0])
    assert np.sum(parts * np.diff(edges)) == pytest.approx(whole, abs=1e-6)
    assert np.all((parts >= -1e-9) & (parts <= 1 + 1e-9))


def test_an_acclimation_goes_by_equal_fractions():
    plan = Acclimation(tank="t1", from_salinity=32.0, to_salinity=8.0, start_h=0.0, lasts_h=10.0)
    assert plan.salinity(np.array([-1.0, 0.0, 5.0, 10.0, 99.0])) == pytest.approx([32.0, 32.0, 16.0, 8.0, 8.0])


def test_the_demo_scenario_names_only_what_its_site_has(demo_site: Site, demo_scenario: Scenario):
    tanks = {tank.id for tank in demo_site.tanks}
    sensors = {sensor.id for sensor in demo_site.sensors}
    named = {event.tank for event in demo_scenario.tank_events} | {plan.tank for plan in demo_scenario.acclimations}
    assert named | set(demo_scenario.tanks) <= tanks
    assert {event.sensor for event in demo_scenario.sensor_events} <= sensors


@pytest.mark.parametrize(
    ("text", "named"),
    [
        ("tank_events: [{kind: flood, tank: t1, start_h: 0, lasts_h: 1}]", "tank_events.0.kind"),
        ("tank_events: [{kind: flushed, tank: t1, start_h: 0, lasts_h: 0}]", "tank_events.0.lasts_h"),
        ("rains: [{start_h: 0, lasts_h: 3, depth_mm: 5, every_h: 1}]", "rains.0"),
        ("weather: fine", "weather"),
        ("tanks: {t1: [", "scenario"),
    ],
)
def test_a_wrong_file_is_refused_with_its_key(tmp_path, text, named):
    file = tmp_path / "scenario.yaml"
    file.write_text(text, encoding="utf-8")
    with pytest.raises(InvalidInputError, match=f"scenario.yaml: {named}"):
        load(file)
