"""The model against published outcomes; the whole table is analysis/animal/VALIDATION.md."""

from __future__ import annotations

import dataclasses
from importlib import resources

import numpy as np
import pytest

from analysis.animal import tables
from analysis.animal.constants import constants
from tests.analysis.animal.outcomes import (
    FITTED,
    PUBLISHED_STEPS,
    all_stages,
    fitted,
    harmless_stress,
    judged,
    judged_bench,
    kept_constants,
    read_cases,
    swept_steps,
    total_loss,
)
from tests.analysis.animal.validation_report import is_hard, report

BENCH = judged_bench()
ROWS = judged(BENCH)


def test_the_page_is_what_the_code_says():
    written = resources.files("analysis.animal").joinpath("VALIDATION.md").read_text(encoding="utf-8")
    assert written == report(), "write it anew: python -m tests.analysis.animal.validation_report"


def test_every_case_names_a_source_of_the_table():
    known = set(tables.sources())
    assert {case.source for case in read_cases()} <= known
    assert {case.role for case in read_cases()} == {"input", "predicted", "swept", "harmless"}


def test_fitted_constants_are_at_most_half_the_outcomes():
    assert 2 * len(FITTED) <= sum(is_hard(row.case) for row in ROWS)


def test_every_study_is_predicted_without_itself():
    assert {case.source for case in BENCH.cases} == set(kept_constants())


@pytest.mark.parametrize(
    "case",
    [case for case in read_cases() if case.role == "harmless"],
    ids=lambda case: f"{case.stage} {case.kind} to {case.to_ppt:g}",
)
def test_no_published_harmless_schedule_scores_in_danger(case):
    # MCGRAW2002: 19, 25 and 47 % of the current salinity an hour made no difference to survival
    worst, _ = harmless_stress(case, all_stages()[case.stage])
    assert worst < 70.0


def test_larger_steps_kill_more_postlarvae_whatever_the_hold():
    # DOAJ_PL12: 35 to 5 ppt by 5, 10, 15 ppt: 90, 80, 58 % alive; hold and settling time are not printed
    found = swept_steps(tables.load()["penaeus-vannamei/pl12"])
    assert all(sweep.alive[0] >= sweep.alive[1] - 1e-9 and sweep.alive[1] >= sweep.alive[2] - 1e-9 for sweep in found)
    for index, seen in enumerate(PUBLISHED_STEPS):
        told = [sweep.alive[index] for sweep in found]
        assert min(told) <= seen <= max(told)


def test_limits_move_with_temperature_as_published():
    # ZHANG2009 against PONTINHA: vannamei juveniles' 24 h median 7.0 ppt at 20 degC, 2.4 at 28 degC
    told = {row.case.to_ppt: row.alive for row in ROWS if row.case.source == "ZHANG2009"}
    warm = dataclasses.replace(BENCH, warmth=np.full(BENCH.warmth.shape, 28.0)).alive(constants())
    for index, case in enumerate(BENCH.cases):
        if case.source == "ZHANG2009":
            assert told[case.to_ppt] < warm[index]
    # FINSTAD1988: trout in 26 ppt die at 1 degC and live at 8 degC
    trout = {row.case.temperature_degC: row.alive for row in ROWS if row.case.source == "FINSTAD1988"}
    assert trout[1.0] < 0.6 < 0.9 < trout[8.0]
    # THERMOHALINE1996: hybrid tilapia in 26 ppt, 6.7 % alive at 15 degC, all at 25 degC
    tilapia = {
        row.case.temperature_degC: row.alive
        for row in ROWS
        if row.case.source == "THERMOHALINE1996" and "niloticus" in row.case.stage
    }
    assert tilapia[15.0] < 0.1 < tilapia[25.0]


def test_predictions_are_no_worse_than_when_they_were_accepted():
    # Regression only: the figures are our own, from VALIDATION.md.
    hard = [row for row in ROWS if is_hard(row.case)]
    assert np.median([abs(row.alive - row.case.expected) for row in hard]) <= 0.30
    assert np.median([abs(row.missed_mOsm_kg) for row in hard]) <= 110.0
    easy = [row for row in ROWS if not is_hard(row.case)]
    assert np.mean([row.missed_decades < -0.1 for row in easy]) <= 0.15


@pytest.mark.slow
def test_the_constants_in_use_are_those_of_the_fit():
    refitted = fitted(BENCH, constants(), iterations=40)
    assert total_loss(BENCH, constants()) <= total_loss(BENCH, refitted) * 1.01
