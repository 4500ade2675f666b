"""Thinning out keeps what matters."""

from __future__ import annotations

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from dashboard.browser.downsample import extremes_kept, stretches


def test_a_spike_of_one_minute_in_a_year_survives():
    times = np.arange(525_600) * 60.0
    values = 31 + 0.05 * np.sin(times / 7000)
    values[300_001] = 5.0
    kept = extremes_kept(times, values, columns=450)
    assert 300_001 in kept
    assert len(kept) <= 4 * 450


@settings(derandomize=True, max_examples=60)
@given(
    st.lists(st.one_of(st.floats(min_value=-50, max_value=50), st.just(float("nan"))), min_size=1, max_size=600),
    st.integers(min_value=1, max_value=40),
)
def test_every_column_keeps_its_first_lowest_highest_and_last(values, columns):
    v = np.array(values)
    t = np.arange(len(v), dtype=float)
    kept = extremes_kept(t, v, columns=columns)
    assert np.all(np.diff(kept) > 0) if len(kept) > 1 else True
    assert np.isfinite(v[kept]).all()
    known = np.flatnonzero(np.isfinite(v))
    if not len(known):
        assert not len(kept)
        return
    assert v[kept].min() == v[known].min()
    assert v[kept].max() == v[known].max()
    assert {known[0], known[-1]} <= set(kept)


def test_gaps_part_the_stretches():
    times = np.array([0.0, 10, 20, 100, 110])
    assert stretches(times, longest_silence=30) == [slice(0, 3), slice(3, 5)]
    assert stretches(np.array([]), longest_silence=30) == []


def test_a_regular_but_sparse_record_is_a_line():
    sparse, dense = np.arange(0, 90_000, 300.0), 90_000 + np.arange(0, 3600, 10.0)
    assert len(stretches(np.concatenate((sparse, dense)), longest_silence=60)) == 1


def test_an_outage_is_a_gap_in_a_sparse_record_too():
    times = np.arange(0, 90_000, 300.0)
    assert len(stretches(times[(times < 30_000) | (times > 34_000)], longest_silence=60)) == 2


def test_two_values_far_apart_are_two():
    assert len(stretches(np.array([0.0, 1000.0]), longest_silence=60)) == 2
