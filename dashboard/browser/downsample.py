"""Fewer points for a line on a screen, such that every extreme stays visible."""

from __future__ import annotations

from itertools import pairwise

import numpy as np

from analysis.arrays import FloatArray, IntArray


def extremes_kept(times: FloatArray, values: FloatArray, *, columns: int) -> IntArray:
    """Return the indices of the points that draw the same line: of each column of the screen the first, lowest, highest, last.

    A line through these points covers the same pixels as the line through all of them, and a spike of one sample in a
    year stays as high as it was [1]_.

    Parameters
    ----------
    times : ndarray
        In ascending order.
    values : ndarray
        Same shape; NaN is never chosen.
    columns : int
        How many columns the screen has for them. At most four times as many indices come back.

    References
    ----------
    .. [1] Jugel, Jerzak, Hackenbroich and Markl, M4: a visualization-oriented time series data aggregation, Proceedings
       of the VLDB Endowment 7 (10), 2014, p. 797-808. DOI 10.14778/2732951.2732953.
    """
    known: IntArray = np.flatnonzero(np.isfinite(values))
    if len(known) <= 4 * columns or times[known[-1]] <= times[known[0]]:
        return known
    t, v = times[known], values[known]
    column = np.minimum(((t - t[0]) / (t[-1] - t[0]) * columns).astype(np.int64), columns - 1)
    starts = np.flatnonzero(np.r_[True, np.diff(column) > 0])
    ends = np.r_[starts[1:], len(known)] - 1
    by_value = np.lexsort((v, column))
    kept: IntArray = known[np.unique(np.concatenate((starts, ends, by_value[starts], by_value[ends])))]
    return kept


LOCAL_STEPS = 4
LOCAL_FACTOR = 3.0


def stretches(times: FloatArray, *, longest_silence: float) -> list[slice]:
    """Return the unbroken stretches of *times*.

    A gap is a silence longer than *longest_silence*, and longer than three times what is usual just before and just after:
    a record that came in every five minutes is a line too, even where the probe now sends every ten seconds.
    """
    if not len(times):
        return []
    steps = np.diff(times)
    long = np.flatnonzero(steps > longest_silence)
    breaks = [i + 1 for i in long.tolist() if steps[i] > LOCAL_FACTOR * _usual_step(steps, i)]
    edges = [0, *breaks, len(times)]
    return [slice(a, b) for a, b in pairwise(edges)]


def _usual_step(steps: FloatArray, at: int) -> float:
    """Return the usual step beside the one at *at*: the longer of what is usual before and after it, 0 where it stands alone."""
    sides = steps[max(0, at - LOCAL_STEPS) : at], steps[at + 1 : at + 1 + LOCAL_STEPS]
    return max((float(np.median(side)) for side in sides if len(side)), default=0.0)
