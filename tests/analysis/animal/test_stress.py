"""Properties of the stress model."""

from __future__ import annotations

import dataclasses
import json

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from analysis.animal import tables
from analysis.animal.constants import constants
from analysis.animal.exposure import exposure_steps
from analysis.animal.osmoregulation import CohortState, GapRule
from analysis.animal.stage import Supports
from analysis.animal.stage_arrays import StageArrays
from analysis.animal.strains import Band, Driver, bands, combined_stress, exposure_strain
from analysis.animal.stress import Stress, advance, advance_series
from analysis.errors import InvalidInputError
from analysis.water.properties import Seawater
from analysis.water.sodium_chloride_water import SodiumChlorideWater

STAGES = tables.load()
NAMES = sorted(STAGES)
JUDGED = [name for name in NAMES if STAGES[name].supports & Supports.RANGE]
ALL = StageArrays.from_stages([STAGES[name] for name in NAMES])
ONE = {name: StageArrays.from_stages([STAGES[name]]) for name in NAMES}
PL10 = "penaeus-vannamei/pl10"

quick = settings(max_examples=40, deadline=None, derandomize=True)
water = st.floats(0.0, 1500.0)
warmth = st.floats(2.0, 36.0)


def one_step(figures, state, osmolality, temperature, seconds):
    return advance(
        figures,
        state,
        osmolality_mOsm_kg=np.array([osmolality]),
        temperature_degC=np.array([temperature]),
        elapsed_s=seconds,
    )


def settled(osmolality, temperature=25.0):
    return CohortState.used_to(np.array([float(osmolality)]), temperature_degC=np.array([float(temperature)]))


def optimum(figures):
    middle = (
        figures.optimal_low + np.where(np.isnan(figures.optimal_high), figures.optimal_low, figures.optimal_high)
    ) / 2
    low, high = figures.optimal_low_degC, figures.optimal_high_degC
    return middle, np.where(np.isnan(low + high), np.fmax(low, high), (low + high) / 2)


def test_a_settled_cohort_at_its_optimum_scores_0():
    middle, degC = optimum(ALL)
    state = CohortState.used_to(middle, temperature_degC=degC)
    for _ in range(3):
        state, stress = advance(ALL, state, osmolality_mOsm_kg=middle, temperature_degC=degC, elapsed_s=3600.0)
    judged = np.array([bool(STAGES[name].supports & Supports.RANGE) for name in NAMES])
    assert judged.sum() > 100
    np.testing.assert_allclose(stress.stress[judged], 0.0, atol=1e-9)
    assert np.all(stress.driver[judged] == Driver.NONE)
    assert np.all(np.isnan(stress.stress[~judged]) | (stress.supports[~judged] != 0))


@quick
@given(st.lists(st.floats(0, 1), min_size=4, max_size=4), st.integers(0, 3), st.floats(0, 1))
def test_stress_never_falls_when_a_strain_rises(strains, which, rise):
    higher = list(strains)
    higher[which] = min(1.0, strains[which] + rise)
    values = [
        float(combined_stress(osmotic=np.max(np.array(row[:3])), thermal=np.array(row[3]))) for row in (strains, higher)
    ]
    assert values[1] >= values[0] - 1e-9
    assert 0.0 <= values[0] <= 100.0


@quick
@given(st.sampled_from(JUDGED), water, warmth, st.floats(0.0, 3.0), st.floats(0.0, 3.0))
def test_more_exposure_never_scores_less(name, osmolality, temperature, exposure, more):
    figures = ONE[name]
    scores = []
    for dose in (exposure, exposure + more):
        state = dataclasses.replace(settled(osmolality, temperature), exposure=np.array([dose]))
        scores.append(one_step(figures, state, osmolality, temperature, 0.0)[1].stress[0])
    assert np.isnan(scores[0]) or scores[1] >= scores[0]


@quick
@given(st.sampled_from(JUDGED), water, water, warmth, st.lists(st.floats(0.01, 40000.0), min_size=2, max_size=7))
def test_the_state_does_not_depend_on_how_time_is_cut(name, home, osmolality, temperature, pieces):
    figures, gap = ONE[name], GapRule(hold_s=1e9, unknown_after_s=1e9)
    start, _ = one_step(figures, settled(home, temperature), osmolality, temperature, 0.0)
    whole, _ = advance(
        figures,
        start,
        osmolality_mOsm_kg=np.array([osmolality]),
        temperature_degC=np.array([temperature]),
        elapsed_s=sum(pieces),
        gap=gap,
    )
    cut = start
    for seconds in pieces:
        cut, _ = advance(
            figures,
            cut,
            osmolality_mOsm_kg=np.array([osmolality]),
            temperature_degC=np.array([temperature]),
            elapsed_s=seconds,
            gap=gap,
        )
    for member in ("acclimated", "internal", "exposure", "acclimated_degC", "uncertainty"):
        np.testing.assert_allclose(getattr(cut, member), getattr(whole, member), rtol=1e-7, atol=1e-9, err_msg=member)


@quick
@given(st.sampled_from(JUDGED), water, water, warmth)
def test_stress_is_continuous_in_the_water(name, home, osmolality, temperature):
    figures = ONE[name]
    pair = []
    for value in (osmolality, osmolality + 1e-6):
        state, _ = one_step(figures, settled(home, temperature), value, temperature, 0.0)
        pair.append(one_step(figures, state, value, temperature, 1800.0)[1].stress[0])
    if not np.isnan(pair).any():
        assert abs(pair[1] - pair[0]) < 1e-2


@quick
@given(st.sampled_from(JUDGED), water, st.floats(2.0, 36.0))
def test_stress_is_continuous_in_temperature(name, osmolality, temperature):
    figures = ONE[name]
    pair = [
        one_step(figures, settled(700.0, 20.0), osmolality, degC, 0.0)[1].stress[0]
        for degC in (temperature, temperature + 1e-7)
    ]
    if not np.isnan(pair).any():
        assert abs(pair[1] - pair[0]) < 1e-2


def random_record(rows, *, seed, holes=0.05):
    random = np.random.default_rng(seed)
    times = np.cumsum(random.integers(1, 7200, rows)) * 1_000_000
    osmolality = np.abs(600.0 + np.cumsum(random.normal(0.0, 50.0, rows)))
    temperature = 25.0 + np.cumsum(random.normal(0.0, 0.2, rows))
    osmolality[random.random(rows) < holes] = np.nan
    temperature[random.random(rows) < holes] = np.nan
    return times, osmolality, temperature


@pytest.mark.parametrize(
    "name", [PL10, "oreochromis-niloticus/fry-7-120-d", "perna-perna/adult", "haliotis-diversicolor/juvenile-adult"]
)
def test_one_tank_over_time_equals_many_steps(name):
    times, osmolality, temperature = random_record(400, seed=7)
    figures, start = ONE[name], settled(600.0)
    start = dataclasses.replace(start, updated_at_us=times[:1].copy())
    end, series = advance_series(
        figures, start, times_us=times, osmolality_mOsm_kg=osmolality, temperature_degC=temperature
    )
    state, before = start, times[0]
    for row, at in enumerate(times):
        state, step = one_step(figures, state, osmolality[row], temperature[row], (at - before) / 1e6)
        before = at
        for member in dataclasses.fields(Stress):
            np.testing.assert_allclose(
                getattr(series, member.name)[row],
                getattr(step, member.name)[0],
                rtol=1e-10,
                atol=1e-10,
                err_msg=f"{member.name}, row {row}",
            )
    for member in dataclasses.fields(CohortState):
        np.testing.assert_allclose(
            getattr(end, member.name), getattr(state, member.name), rtol=1e-9, err_msg=member.name
        )


def test_a_record_taken_in_two_parts_gives_the_same():
    times, osmolality, temperature = random_record(300, seed=3)
    figures, start = ONE[PL10], CohortState.unknown(1)
    _, whole = advance_series(
        figures, start, times_us=times, osmolality_mOsm_kg=osmolality, temperature_degC=temperature
    )
    middle, first = advance_series(
        figures, start, times_us=times[:171], osmolality_mOsm_kg=osmolality[:171], temperature_degC=temperature[:171]
    )
    _, second = advance_series(
        figures, middle, times_us=times[171:], osmolality_mOsm_kg=osmolality[171:], temperature_degC=temperature[171:]
    )
    np.testing.assert_allclose(np.concatenate([first.stress, second.stress]), whole.stress, rtol=1e-9, atol=1e-9)


def test_the_state_survives_a_restart_as_json():
    times, osmolality, temperature = random_record(50, seed=5)
    state, _ = advance_series(
        ONE[PL10], CohortState.unknown(1), times_us=times, osmolality_mOsm_kg=osmolality, temperature_degC=temperature
    )
    again = CohortState.from_dicts(json.loads(json.dumps(state.to_dicts())))
    for member in dataclasses.fields(CohortState):
        np.testing.assert_array_equal(getattr(again, member.name), getattr(state, member.name))
    with pytest.raises(InvalidInputError, match="exposure"):
        CohortState.from_dicts([{"acclimated": 1.0, "internal": None}])


def test_after_a_long_gap_what_they_are_used_to_is_unknown_until_it_has_settled_again():
    figures = ONE[PL10]
    state, before = one_step(figures, settled(800.0, 28.5), 800.0, 28.5, 60.0)
    assert before.supports[0] & Supports.CHANGE
    state, after = one_step(figures, state, 300.0, 28.5, 3 * 86400.0)
    assert not after.supports[0] & Supports.CHANGE
    assert not after.supports[0] & Supports.EXPOSURE
    assert after.supports[0] & Supports.RANGE
    for _ in range(72):
        state, after = one_step(figures, state, 300.0, 28.5, 3600.0)
    assert after.supports[0] & Supports.CHANGE


def test_a_hole_in_the_readings_gives_nan_and_loses_no_time():
    figures = ONE[PL10]
    start, _ = one_step(figures, settled(800.0, 28.5), 400.0, 28.5, 60.0)
    held, hole = one_step(figures, start, np.nan, 28.5, 1800.0)
    assert np.isnan(hole.stress[0])
    assert hole.band[0] == Band.UNKNOWN
    after, _ = one_step(figures, held, 400.0, 28.5, 1800.0)
    straight, _ = one_step(figures, start, 400.0, 28.5, 3600.0)
    np.testing.assert_allclose(after.acclimated, straight.acclimated, rtol=1e-12)


def test_time_must_not_run_backwards():
    with pytest.raises(InvalidInputError, match="elapsed_s"):
        one_step(ONE[PL10], settled(800.0), 800.0, 28.0, -1.0)
    with pytest.raises(InvalidInputError, match="times_us"):
        advance_series(
            ONE[PL10], settled(1), times_us=np.array([5, 4]), osmolality_mOsm_kg=[1, 1], temperature_degC=[1, 1]
        )


def test_the_sign_of_the_gap_says_which_way_water_moves():
    figures = ONE[PL10]
    _, fresh = one_step(figures, settled(720.0, 28.5), 300.0, 28.5, 0.0)
    _, salty = one_step(figures, settled(720.0, 28.5), 1000.0, 28.5, 0.0)
    assert fresh.gap_mOsm_kg[0] > 0.0 > salty.gap_mOsm_kg[0]


def test_exposure_meets_the_bands_at_the_published_losses():
    at_10_percent = (1.0 / 9.0) ** (1.0 / ALL.steepness)
    figures = ONE[PL10]
    np.testing.assert_allclose(exposure_strain(figures, np.array([0.0, at_10_percent, 1.0, 9.0])), [0.0, 0.7, 1.0, 1.0])


def test_bands_have_their_edges():
    np.testing.assert_array_equal(bands(np.array([0.0, 19.9, 20.0, 40.0, 70.0, 100.0, np.nan])), [0, 0, 1, 2, 3, 3, -1])


def test_equal_strains_at_equal_osmolality_whatever_the_salt():
    # The strains take osmolality alone, so seawater and plain-salt water of one osmolality cannot differ.
    osmolality = float(Seawater().osmolality_from_salinity(12.0))
    salts = np.linspace(5.0, 20.0, 20001)
    salt = float(np.interp(osmolality, SodiumChlorideWater().osmolality_from_salinity(salts), salts))
    pair = [
        one_step(ONE[PL10], settled(900.0, 28.5), float(kind.osmolality_from_salinity(value)), 28.5, 0.0)[1].stress[0]
        for kind, value in ((Seawater(), 12.0), (SodiumChlorideWater(), salt))
    ]
    assert pair[0] == pytest.approx(pair[1], abs=1e-4)


@pytest.mark.parametrize("name", NAMES)
def test_the_median_of_every_direct_test_is_kept(name):
    figures = ONE[name]
    for side, sign in (("low", 1.0), ("high", -1.0)):
        hours = STAGES[name].value(f"direct_{side}_h")
        jump, to = float(getattr(figures, f"jump_{side}")[0]), float(getattr(figures, f"jump_{side}_to")[0])
        if np.isnan(hours) or np.isnan(jump):
            continue
        steps = exposure_steps(
            figures, acclimated=np.array([to + sign * jump]), water=np.array([to]), temperature_degC=np.array([np.nan]),
            hours=np.array([hours]), model=constants(),
        )  # fmt: skip
        exposure = float((steps.shock + steps.level)[0])
        assert exposure == pytest.approx(1.0, rel=1e-6) or exposure > 1.0
