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


def stretches(times: FloatArray, *, longest_silence: float) -> list[slice]:
    """Return the unbroken stretches of *times*: a gap longer than *longest_silence* breaks the line."""
    if not len(times):
        return []
    breaks = np.flatnonzero(np.diff(times) > longest_silence) + 1
    edges = np.r_[0, breaks, len(times)]
    return [slice(int(a), int(b)) for a, b in pairwise(edges)]
