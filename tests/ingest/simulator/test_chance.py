from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

from ingest.simulator.chance import normal, uniform

TIMES = 1_796_000_000_000_000 + np.arange(200_000, dtype=np.int64) * 10_000_000


def test_the_splitmix64_sequence_is_the_published_one():
    """First outputs for the state 0: Vigna's splitmix64.c as quoted in the Java SplittableRandom tests (from memory):
    e220a8397b1dcdaf. With no seed parts the moment is mixed alone."""
    assert uniform(np.array([0]), seed=()) == pytest.approx((0xE220A8397B1DCDAF >> 11) * 2.0**-53, rel=1e-15)


def test_it_looks_uniform_and_normal():
    assert stats.kstest(uniform(TIMES, seed=(1, 2)), "uniform").pvalue > 0.01
    assert stats.kstest(normal(TIMES, seed=(1, 2)), "norm").pvalue > 0.01


def test_neighbours_and_other_seeds_do_not_go_together():
    noise = normal(TIMES, seed=(1, 2))
    assert abs(np.corrcoef(noise[1:], noise[:-1])[0, 1]) < 0.01
    assert abs(np.corrcoef(noise, normal(TIMES, seed=(1, 3)))[0, 1]) < 0.01


def test_a_moment_has_its_own_noise_however_the_times_are_cut():
    whole = normal(TIMES, seed=(5,))
    assert np.array_equal(np.concatenate([normal(TIMES[:777], seed=(5,)), normal(TIMES[777:], seed=(5,))]), whole)
