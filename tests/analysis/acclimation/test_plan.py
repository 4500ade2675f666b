"""Plans: what they use and print, when people work, and what forbids one."""

from __future__ import annotations

import json
import math
from dataclasses import replace
from datetime import datetime, time, timedelta
from itertools import pairwise

import pytest

from analysis.acclimation.ammonia import PackedWater
from analysis.acclimation.cautions import ALWAYS
from analysis.acclimation.plan import Plan, planned
from analysis.acclimation.record import from_record, to_record
from analysis.acclimation.source import Release, Salt, SourceWater
from analysis.acclimation.summary import plan_summary
from analysis.acclimation.task import Grid, Method, Rest, Vessel, Water, nice_step
from analysis.animal import tables
from analysis.errors import InvalidInputError
from tests.analysis.acclimation.tasks import EIGHT, LISBON, SEA, TAP, limits, override, plan, task

SHRIMP = "penaeus-vannamei/pl10"
SHORT = task(SHRIMP, 20.0, 14.0)


def test_steps_are_rounded_litres_at_clock_times_in_the_sites_zone() -> None:
    found = plan(SHORT)
    assert found.steps
    for step in found.steps:
        assert step.drain_L % 1.0 == 0.0
        assert step.start.tzinfo is LISBON
        assert step.start.second == 0
        assert step.start.minute % 5 == 0
        assert step.start == EIGHT + timedelta(minutes=step.minute)
        assert step.salinity_low <= step.salinity <= step.salinity_high
    assert abs(found.steps[-1].salinity - 14.0) <= 0.25
    assert found.ends_at - EIGHT == timedelta(hours=found.total_hours)


def test_clock_times_follow_the_zone_through_a_change_of_the_clocks() -> None:
    begins = datetime(2026, 10, 24, 22, 0, tzinfo=LISBON)  # clocks go back at 02:00 on the 25th
    found = plan(task(SHRIMP, 20.0, 6.0, begins_at=begins))
    last = found.steps[-1]
    assert last.start.utcoffset() == timedelta(0)
    assert begins.utcoffset() == timedelta(hours=1)
    assert (last.start.timestamp() - begins.timestamp()) / 60.0 == pytest.approx(last.minute)


def test_nobody_steps_outside_working_hours_or_in_a_rest() -> None:
    of = task(SHRIMP, 23.0, 8.0, working_hours=(time(8), time(16)), rests=(Rest(time(12), time(13)),))
    found = plan(of)
    assert found.is_feasible
    for step in found.steps:
        assert time(8) <= step.start.time() < time(16)
        assert not time(12) <= step.start.time() < time(13)
    assert found.total_hours > plan(task(SHRIMP, 23.0, 8.0)).total_hours
    night = Rest(time(20), time(6))
    assert night.covers(time(23))
    assert night.covers(time(5))
    assert not night.covers(time(12))


def test_no_working_hour_at_all_is_no_plan() -> None:
    found = plan(task(SHRIMP, 20.0, 14.0, rests=(Rest(time(0), time(12)), Rest(time(12), time(0)))))
    assert not found.is_feasible


def test_a_slow_pump_and_a_small_store_are_kept() -> None:
    slow = SourceWater("well", 0.0, 28.0, max_L_per_h=60.0)
    found = plan(task(SHRIMP, 20.0, 16.0, (slow,)))
    assert found.is_feasible
    assert all(step.add["well"] <= 60.0 * step.duration_min / 60.0 + 1e-9 for step in found.steps)
    short = plan(task(SHRIMP, 20.0, 10.0, (replace(slow, max_L_per_h=math.inf, available_L=150.0),)))
    assert not short.is_feasible
    assert "used up" in short.reason
    assert sum(short.water_used_L.values()) <= 150.0


def test_adding_lets_the_volume_grow_up_to_the_rim() -> None:
    bag = Vessel(10.0, 25.0, "bag")
    found = plan(task(SHRIMP, 30.0, 15.0, vessel=bag, method=Method.ADD))
    assert found.is_feasible
    assert found.drained_L == 0.0
    assert found.steps[-1].volume_L <= 25.0
    full = plan(task(SHRIMP, 30.0, 5.0, vessel=bag, method=Method.ADD))
    assert not full.is_feasible
    assert "full" in full.reason


def test_dosing_dissolves_the_salt_first_and_counts_its_water() -> None:
    mix = Salt("reef mix", dry_fraction=0.85)
    found = plan(task("oreochromis-niloticus/juvenile", 0.0, 5.0, (), method=Method.DOSE, salt=mix, degC=27.0))
    assert found.is_feasible
    assert found.drained_L == 0.0
    for step in found.steps:
        assert step.dissolve_L >= 10.0 * step.salt["reef mix"] - 1e-9
    dry_kg = 0.85 * found.salt_used_kg["reef mix"]
    assert dry_kg == pytest.approx(5.0 * 1.0047 * 1.0, rel=0.06)
    assert any("Never put dry salt into a stocked tank" in caution for caution in found.cautions)


def test_plain_salt_is_refused_for_sea_water_unless_a_reason_is_given() -> None:
    plain = Salt("table salt", is_sodium_chloride=True)
    of = task("oreochromis-niloticus/juvenile", 5.0, 8.0, (), method=Method.DOSE, salt=plain, degC=27.0)
    refused = plan(of)
    assert not refused.is_feasible
    assert "plain sodium chloride" in refused.reason
    allowed = plan(replace(of, plain_salt_reason="Rui: transport bath of an hour"))
    assert allowed.is_feasible
    assert any("does not replace sea salt" in caution for caution in allowed.cautions)
    brine = SourceWater("brine", 80.0, 27.0, kind="sodium-chloride")
    assert "plain sodium chloride" in plan(task(SHRIMP, 20.0, 25.0, (brine,))).reason


@pytest.mark.parametrize(
    ("of", "words"),
    [
        (task(SHRIMP, 20.0, 2.0, (SourceWater("pond", 6.0, 28.0),)), "no source is fresh enough"),
        (task(SHRIMP, 20.0, 34.0, (SourceWater("pond", 6.0, 28.0),)), "no source is salty enough"),
        (task(SHRIMP, 20.0, 15.0, target_degC=32.0), "warm or cool a source"),
        (
            task(SHRIMP, 20.0, 15.0, (TAP, SourceWater("hot sea", 36.0, 38.0)), target_degC=37.0),
            "no blend of these waters",
        ),
        (task(SHRIMP, 20.0, 15.0, (), salt=Salt("mix"), method=Method.DOSE), "raises salinity"),
        (task(SHRIMP, 20.0, 25.0, method=Method.DOSE), "no brine is saltier"),
    ],
)
def test_what_cannot_be_reached_is_said_before_any_search(of: object, words: str) -> None:
    found = plan(of)  # type: ignore[arg-type]
    assert not found.is_feasible
    assert words in found.reason
    assert found.evaluations == 0
    assert math.isnan(found.total_hours)


def test_a_limit_that_forbids_every_step_is_named_with_its_source() -> None:
    coarse = replace(SHORT, grid=Grid(litres=400.0))
    found = plan(coarse)
    assert not found.is_feasible
    assert "salinity per" in found.reason
    assert "MCGRAW2002" in found.reason or "DOAJ_PL12" in found.reason


def release(**changes: object) -> Release:
    settings: dict[str, object] = {
        "by": "Ines",
        "valid_until": EIGHT + timedelta(days=1),
        "chlorine_mg_L": 0.0,
    } | changes
    return Release(**settings)  # type: ignore[arg-type]


@pytest.mark.parametrize(
    ("given", "words"),
    [
        (release(chlorine_mg_L=0.1), "chlorine 0.1 mg/L"),
        (release(chlorine_mg_L=math.nan), "chlorine was not measured"),
        (release(valid_until=EIGHT - timedelta(hours=1)), "ended"),
        (release(temperature_degC=22.0), "released at 22 degC and has 28"),
    ],
)
def test_a_source_whose_release_does_not_hold_is_not_used(given: Release, words: str) -> None:
    found = plan(task(SHRIMP, 20.0, 14.0, (replace(TAP, release=given),)))
    assert not found.is_feasible
    assert words in found.reason
    other = plan(
        task(SHRIMP, 20.0, 14.0, (replace(TAP, release=given), SourceWater("well", 1.0, 28.0, release=release())))
    )
    assert other.is_feasible
    assert set(other.water_used_L) == {"well"}
    assert any(words in caution for caution in other.cautions)


def test_a_source_whose_ph_has_moved_is_closed_again() -> None:
    water = SourceWater("well", 0.0, 28.0, ph=6.9, release=release(ph=7.9, temperature_degC=27.0))
    assert "released at pH 7.9" in water.obstacle(EIGHT)
    assert replace(water, ph=7.6).obstacle(EIGHT) == ""


def test_an_unreleased_source_is_planned_with_but_said_or_left_out() -> None:
    assert any("releases each source" in caution for caution in plan(SHORT).cautions)
    strict = planned(SHORT, tables.find(SHRIMP), limits(SHORT), needs_release=True)
    assert not strict.is_feasible
    assert "nobody has released it" in strict.reason


def test_an_ion_gate_opens_by_the_release_of_the_fresh_water() -> None:
    def needs(chloride: float) -> tuple[str, ...]:
        water = replace(TAP, release=release(ions_mg_L={"chloride": chloride}))
        return plan(task("sciaenops-ocellatus/juvenile", 2.5, 1.5, (water,), degC=25.0)).needs_yes

    assert any("chloride" in need for need in needs(60.0))
    assert not any("chloride" in need for need in needs(200.0))


def test_the_destinations_own_strain_needs_a_named_yes_and_is_shown_apart() -> None:
    harsh = plan(task("penaeus-vannamei/pl10", 6.0, 3.0))
    assert harsh.is_feasible
    assert harsh.standing is not None
    assert harsh.standing.range_strain > 0.5
    assert any("destination" in need for need in harsh.needs_yes)
    mild = plan(task("penaeus-vannamei/pl10", 30.0, 26.0))
    assert not any("destination" in need for need in mild.needs_yes)


def test_smolts_ask_for_the_window_and_for_a_small_shift_of_temperature() -> None:
    cold = SourceWater("sea", 34.0, 6.0)
    found = plan(task("salmo-salar/smolt", 24.0, 30.0, (cold,), degC=12.0))
    assert any("STAURNES2001" in need for need in found.needs_yes)
    assert any("smolt window" in need for need in found.needs_yes)


def test_a_schedule_that_outlasts_the_bag_says_where_to_go_first() -> None:
    bag = task(SHRIMP, 30.0, 10.0, vessel=Vessel(10.0, 60.0, "bag"), method=Method.ADD)
    packed = PackedWater(hours_packed=10.0, total_ammonia_mg_L=6.0, ph=6.8)
    found = plan(replace(bag, packed=packed, sources=(SourceWater("pond", 4.0, 28.0, ph=8.1),)))
    assert not found.is_feasible
    assert "move to an aerated acclimation tank first" in found.reason
    assert "un-ionised ammonia" in found.reason
    fresh = plan(replace(bag, packed=PackedWater(hours_packed=1.0, is_aerated=True)))
    assert fresh.is_feasible


def test_ph_is_kept_where_it_is_known_and_said_where_it_is_not() -> None:
    acid, hard = SourceWater("bog", 0.0, 28.0, ph=5.5), task(SHRIMP, 16.0, 10.0, ph=8.2)
    with_ph = plan(replace(hard, sources=(acid,)))
    without = plan(hard)
    assert with_ph.total_hours > without.total_hours
    steps = [8.2, *(step.ph for step in with_ph.steps)]
    assert max(abs(after - before) for before, after in pairwise(steps)) <= 0.25 + 1e-9
    assert any("pH is not known" in caution for caution in without.cautions)


def test_nothing_to_do_is_a_feasible_plan_without_steps() -> None:
    found = plan(task(SHRIMP, 20.0, 20.1))
    assert found.is_feasible
    assert not found.steps
    assert found.total_hours == 0.0


def test_the_cautions_are_always_there() -> None:
    for found in (plan(SHORT), plan(task(SHRIMP, 20.0, 2.0, (SourceWater("pond", 6.0, 28.0),)))):
        assert set(ALWAYS) <= set(found.cautions)


def test_the_summary_has_the_promised_keys_and_is_json() -> None:
    summary = json.loads(json.dumps(plan_summary(plan(SHORT)), allow_nan=False))
    assert {"steps", "total_hours", "water_used_L", "limits", "survival", "feasible", "reason"} <= set(summary)
    keys = {"start", "drain_L", "add", "salt", "practical_salinity", "temperature_degC", "osmolality_mOsm_kg", "stress"}
    assert keys <= set(summary["steps"][0])
    assert {"name", "value", "source"} <= set(summary["limits"][0])
    none = json.loads(json.dumps(plan_summary(plan(task(SHRIMP, 20.0, 2.0, (SEA,)))), allow_nan=False))
    assert (none["feasible"], none["total_hours"], none["steps"]) == (False, None, [])


def test_a_plan_survives_the_way_through_json() -> None:
    found = plan(task(SHRIMP, 20.0, 14.0, (replace(TAP, release=release()),), working_hours=(time(8), time(20))))
    record = json.loads(json.dumps(to_record(found), allow_nan=False))
    again = from_record(Plan, record, zone=LISBON)
    assert to_record(again) == record
    assert again.steps[0].start == found.steps[0].start
    assert again.task.sources[0].release is not None
    assert again.task.sources[0].release.by == "Ines"
    with pytest.raises(InvalidInputError, match="steps"):
        from_record(Plan, {key: value for key, value in record.items() if key != "steps"})


def test_a_site_in_sodium_chloride_water_reads_grams_per_kilogram() -> None:
    brine, tap = SourceWater("brine", 60.0, 27.0, kind="sodium-chloride"), replace(TAP, kind="sodium-chloride")
    found = plan(
        task("oreochromis-niloticus/juvenile", 0.0, 4.0, (tap, brine), degC=27.0, water_kind="sodium-chloride"),
        overrides=[override("salinity per hour", 2.0)],
    )
    assert found.is_feasible
    step = plan_summary(found)["steps"][-1]
    assert step["practical_salinity"] is None
    assert step["salinity_g_kg"] == pytest.approx(4.0, abs=0.25)
    assert step["osmolality_mOsm_kg"] == pytest.approx(126.0, rel=0.07)  # about 31.5 mOsm/kg for a gram a kilogram


@pytest.mark.parametrize(
    "build",
    [
        lambda: Vessel(0.0),
        lambda: Vessel(10.0, 5.0),
        lambda: Water(-1.0),
        lambda: Water(5.0, 80.0),
        lambda: SourceWater("", 0.0, 20.0),
        lambda: SourceWater("x", 200.0, 20.0),
        lambda: SourceWater("x", 0.0, 20.0, max_L_per_h=0.0),
        lambda: Salt("x", dry_fraction=0.0),
        lambda: Salt("x", litres_per_kg=1.0),
        lambda: Grid(clock_min=0.0),
        lambda: task(SHRIMP, 20.0, 10.0, ()),
        lambda: task(SHRIMP, 20.0, 10.0, (TAP, TAP)),
        lambda: task(SHRIMP, 20.0, 10.0, begins_at=datetime(2026, 12, 1, 8)),  # noqa: DTZ001
        lambda: task(SHRIMP, 20.0, 10.0, tolerance_salinity=0.0),
        lambda: release(by=" "),
    ],
)
def test_impossible_tasks_are_refused_with_words(build: object) -> None:
    with pytest.raises(InvalidInputError, match="allowed"):
        build()  # type: ignore[operator]


def test_rounding_of_litres_follows_the_volume() -> None:
    assert [nice_step(about) for about in (0.05, 0.049, 5.0, 4.9, 1.0, 37.0)] == [0.05, 0.02, 5.0, 2.0, 1.0, 20.0]
