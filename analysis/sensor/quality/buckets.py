"""History in buckets of time: readings of a block tallied by sensor and bucket, exactly.

Every tally is a whole number, so it does not matter in which order or in how many blocks the readings came.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import numpy as np

from analysis.sensor.quality.state import (
    BEYOND,
    COMPARED,
    COUNT,
    HIGHEST,
    LOWEST,
    NOISY,
    RESOLUTION,
    SQUARES,
    SUM,
    TALLIES,
)
from analysis.sensor.quality.words import VARIABLES

if TYPE_CHECKING:
    from analysis.arrays import BoolArray, FloatArray, IntArray
    from analysis.sensor.quality.rows import Rows
    from analysis.sensor.quality.state import QualityState

LARGEST_KEPT: Final = 200.0
"""Values are cut here before they are squared and summed: a day at ten readings a second still fits in 64 bits."""


@dataclass(slots=True)
class Groups:
    """Rows that share sensor and bucket, in the order of the rows.

    Parameters
    ----------
    starts, sizes : ndarray of int64, (groups,)
        First row of each group, and how many rows it has.
    bucket : ndarray of int64, (groups,)
        Its bucket's number: measured time over bucket width.
    sensor : ndarray of int64, (groups,)
    of_row : ndarray of int64, (rows,), or None
        The group of each row; None where there is one group a row.
    first_of_segment, last_of_segment : ndarray of int64, (segments,)
        The first and the last group of each sensor.
    tally : ndarray of int64, (groups, 7, 3)
        What the rows of the block put in (see `QualityState.tally`).
    """

    starts: IntArray
    sizes: IntArray
    bucket: IntArray
    sensor: IntArray
    of_row: IntArray | None
    first_of_segment: IntArray
    last_of_segment: IntArray
    tally: IntArray

    def per_row(self, per_group: np.ndarray) -> np.ndarray:
        """Return an array with groups along its last axis for each row."""
        return per_group if self.of_row is None else per_group.take(self.of_row, axis=-1)


def in_steps(value: FloatArray) -> tuple[IntArray, BoolArray | None]:
    """Return values as whole numbers of `RESOLUTION`, and where there is none (None where all are there)."""
    scaled = value * (1.0 / RESOLUTION)
    np.maximum(scaled, -LARGEST_KEPT / RESOLUTION, out=scaled)
    np.minimum(scaled, LARGEST_KEPT / RESOLUTION, out=scaled)
    np.rint(scaled, out=scaled)
    if not np.isnan(scaled.sum()):  # cut as they are, finite values cannot add up to NaN
        return scaled.astype(np.int64), None
    absent = np.isnan(scaled)
    scaled[absent] = 0.0
    return scaled.astype(np.int64), absent


def grouped(rows: Rows, *, bucket_us: IntArray) -> Groups:
    """Return the groups of *rows*, with tallies still empty.

    Parameters
    ----------
    rows : Rows
    bucket_us : ndarray of int64, (rows,) or (1,)
        Bucket width of each row's sensor. [us]
    """
    bucket = rows.time_us // bucket_us
    if rows.owners.shape[0] == rows.count:
        return _one_each(rows, bucket)
    begins = np.empty(rows.count, dtype=np.bool_)
    begins[0] = True
    np.not_equal(bucket[1:], bucket[:-1], out=begins[1:])
    begins[rows.starts] = True
    starts = np.flatnonzero(begins)
    if starts.shape[0] == rows.count:
        return _one_each(rows, bucket)
    of_row = np.cumsum(begins, dtype=np.int64)
    of_row -= 1
    return Groups(
        starts=starts,
        sizes=np.diff(starts, append=rows.count),
        bucket=bucket[starts],
        sensor=rows.sensor[starts],
        of_row=of_row,
        first_of_segment=of_row[rows.starts],
        last_of_segment=of_row[rows.ends],
        tally=np.empty((starts.shape[0], TALLIES, VARIABLES), dtype=np.int64),
    )


def _one_each(rows: Rows, bucket: IntArray) -> Groups:
    return Groups(
        starts=np.arange(rows.count),
        sizes=np.ones(rows.count, dtype=np.int64),
        bucket=bucket,
        sensor=rows.sensor,
        of_row=None,
        first_of_segment=rows.starts,
        last_of_segment=rows.ends,
        tally=np.empty((rows.count, TALLIES, VARIABLES), dtype=np.int64),
    )


def tally(groups: Groups, number: IntArray, absent: BoolArray | None, *, compared: BoolArray, noisy: BoolArray) -> None:
    """Fill in what the rows put into each group.

    Parameters
    ----------
    groups : Groups
        Changed in place.
    number : ndarray of int64, (3, rows)
        Values in steps of `RESOLUTION`.
    absent : ndarray of bool, (3, rows), or None
        Where there is no value.
    compared : ndarray of bool, (rows,)
        Where the second difference could be taken.
    noisy : ndarray of bool, (3, rows)
        Where it was too large.
    """
    starts, out = groups.starts, groups.tally
    low = number if absent is None else np.where(absent, BEYOND, number)
    high = number if absent is None else np.where(absent, -BEYOND, number)
    if absent is None:
        out[:, COUNT] = groups.sizes[:, None]
    else:
        out[:, COUNT] = np.add.reduceat(~absent, starts, axis=1, dtype=np.int64).T
    if groups.of_row is None:
        out[:, SUM], out[:, SQUARES], out[:, LOWEST], out[:, HIGHEST] = number.T, (number * number).T, low.T, high.T
        out[:, COMPARED] = compared[:, None]
        out[:, NOISY] = noisy.T
        return
    out[:, SUM] = np.add.reduceat(number, starts, axis=1).T
    out[:, SQUARES] = np.add.reduceat(number * number, starts, axis=1).T
    out[:, LOWEST] = np.minimum.reduceat(low, starts, axis=1).T
    out[:, HIGHEST] = np.maximum.reduceat(high, starts, axis=1).T
    out[:, COMPARED] = np.add.reduceat(compared, starts, dtype=np.int64)[:, None]
    out[:, NOISY] = np.add.reduceat(noisy, starts, axis=1, dtype=np.int64).T


def joined(first: IntArray, second: IntArray) -> IntArray:
    """Return the tally of two parts of one bucket, (..., 7, 3)."""
    out = first + second
    out[..., LOWEST, :] = np.minimum(first[..., LOWEST, :], second[..., LOWEST, :])
    out[..., HIGHEST, :] = np.maximum(first[..., HIGHEST, :], second[..., HIGHEST, :])
    return np.asarray(out)


def join_with_state(groups: Groups, state: QualityState) -> BoolArray:
    """Add what the state's open buckets hold to the groups that go on filling them.

    Returns
    -------
    ndarray of bool, (segments,)
        Whether each sensor's first group goes on with the state's open bucket.
    """
    first = groups.first_of_segment
    owners = groups.sensor[first]
    goes_on = groups.bucket[first] == state.bucket[owners]
    if groups.of_row is None and bool(goes_on.all()):
        groups.tally = joined(groups.tally, state.tally[owners])
        return np.asarray(goes_on)
    which = first[goes_on]
    if which.shape[0]:
        groups.tally[which] = joined(groups.tally[which], state.tally[groups.sensor[which]])
    return np.asarray(goes_on)
