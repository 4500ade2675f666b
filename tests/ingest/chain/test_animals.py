"""What the chain makes of animals: the strain of the water by its definition, their record, their state over restarts.

The definition is the project's own (design, "The stress model"): 0 in the optimal band, 0.5 at the tolerable limit, 1 at
the lethal level, linear between; where times to death are published it stops at 0.6. The figures are those of the tables,
whose sources are tested elsewhere.
"""

from __future__ import annotations

import numpy as np
import pytest

from analysis.animal.fallbacks import resolved
from analysis.animal.tables import load
from ingest.chain.animal_roster import is_larva
from ingest.chain.animals import EVERY_US, RECORD_EVERY_US
from ingest.reading import RawReading
from tests.harness.hatchery import START_US, Bench, conductivity, site_text
from tests.ingest.chain.road import NAN, Road, plant_of

SECOND_US = 1_000_000
STAGES = (
    "penaeus-vannamei/juvenile",
    "penaeus-monodon/juvenile",
    "lates-calcarifer/juvenile",
    "oreochromis-niloticus/fry-7-120-d",
    "scylla-serrata/crablet-juvenile",
    "crassostrea-virginica/spat-adult",
    "haliotis-diversicolor/juvenile-adult",
    "mytilus-edulis/spat-juvenile",
)


def figure(animal: str, key: str) -> float:
    return float(resolved(load()[animal]).figures[key].value)


def strain(animal: str, osmolality_mOsm_kg: float) -> float:
    """Return the range strain of the animals' record after one reading of such water, at the middle of their warmth."""
    low, high = figure(animal, "optimal_low"), figure(animal, "optimal_high")
    kind_road = plant_of(site_text(port=1, animal=animal, set_point=20.0))
    kind = kind_road.roster.kinds[0]
    warmth = [resolved(load()[animal]).figures.get(f"optimal_{side}_degC") for side in ("low", "high")]
    temperature = float(np.mean([item.value for item in warmth])) if all(warmth) else 20.0
    salinity = float(kind.salinity_from_osmolality(osmolality_mOsm_kg))
    used_to = float(kind.salinity_from_osmolality((low + high) / 2))
    text = site_text(port=1, animal=animal, set_point=20.0)
    road = Road(plant_of(text.replace("used_to_salinity: 20.0", f"used_to_salinity: {used_to}")))
    road.take([RawReading(0, START_US, START_US, conductivity(salinity, temperature), temperature, NAN, 0)])
    (step,) = road.felt
    assert step.measured_at_us == START_US
    return float(step.values["range_strain"])


@pytest.mark.parametrize("animal", STAGES)
def test_strain_is_nothing_in_the_optimum_and_a_half_at_the_tolerable_limit(animal):
    low, high = figure(animal, "optimal_low"), figure(animal, "optimal_high")
    assert strain(animal, (low + high) / 2) == 0.0
    is_tested = False
    for side, optimal in (("low", low), ("high", high)):
        tolerable = figure(animal, f"tolerable_{side}")
        if abs(tolerable - optimal) < 20.0 or tolerable <= 0.0:
            continue
        is_tested = True
        assert strain(animal, tolerable) == pytest.approx(0.5, abs=1e-3), side
        assert strain(animal, (tolerable + optimal) / 2) == pytest.approx(0.25, abs=1e-3), side
        beyond = strain(animal, max(tolerable + 0.5 * (tolerable - optimal), 18.0))  # below that a probe is dry
        assert 0.5 < beyond <= 1.0, side
    assert is_tested


@pytest.mark.parametrize(
    ("animal", "expected"),
    [("penaeus-vannamei/zoea", True), ("penaeus-vannamei/pl10", False), ("crassostrea-virginica/larva", True),
     ("crassostrea-virginica/spat-adult", False), ("magallana-gigas/eyed-larva-setting", True)],
)  # fmt: skip
def test_larvae_are_known_by_the_word_of_their_stage(animal, expected):
    assert is_larva(load()[animal]) is expected


def test_animals_are_moved_on_once_a_slice_of_time_and_recorded_once_a_minute():
    road = Road(plant_of(site_text(port=1, interval_s=1.0)))
    for second in range(180):
        at_us = START_US + second * SECOND_US
        road.take([RawReading(0, at_us, at_us, conductivity(31.0), 28.0, NAN, 0)])
    minutes = [step.measured_at_us // RECORD_EVERY_US for step in road.felt]
    assert len(minutes) == len(set(minutes))
    assert 3 <= len(minutes) <= 4
    assert road.state.animals.cohorts.updated_at_us[0] // EVERY_US == (START_US + 179 * SECOND_US) // EVERY_US


def test_readings_without_a_value_move_no_animals():
    road = Road(plant_of(site_text(port=1)))
    road.take([RawReading(0, START_US, START_US, NAN, 28.0, NAN, 0)])
    assert road.felt == []
    assert road.state.animals.cohorts.updated_at_us[0] == 0


def test_a_tank_without_animals_feels_nothing():
    road = Road(plant_of(site_text(port=1, animal=None)))
    road.take([RawReading(0, START_US, START_US, conductivity(31.0), 28.0, NAN, 0)])
    assert road.felt == []


STRESS = (
    "SELECT measured_at, tank, cohort, stress, range_strain, change_strain, exposure_strain, thermal_strain, driver, band,"
    " acclimated_mOsm_kg, internal_mOsm_kg, gap_mOsm_kg FROM stress ORDER BY 1, 2"
)


def life(folder, *, has_restarts: bool) -> list[tuple[object, ...]]:
    """Let animals live through a fall of their water, with or without restarts, and return their record."""
    folder.mkdir()
    with Bench(folder, site_text(port=1, sensors=2, interval_s=30.0), now_us=START_US) as bench:
        for index in range(80):
            bench.clock.advance(30)
            bench.read("s0", bench.clock.now_us(), 31.0 - 0.2 * index, 28.0 - 0.05 * index)
            bench.read("s1", bench.clock.now_us(), 31.0 + 0.05 * index)
            if has_restarts and index % 7 == 0:
                bench.restart()
        return [tuple(row) for row in bench.worker.store.connection.execute(STRESS)]


def test_animals_are_to_the_last_bit_what_they_were_after_any_restart(tmp_path):
    expected = life(tmp_path / "calm", has_restarts=False)
    assert life(tmp_path / "restarted", has_restarts=True) == expected
    assert len(expected) >= 80
    acclimated = [row[10] for row in expected if row[1] == 1]
    assert acclimated[-1] < acclimated[0], "they follow their water"
