"""Tests that need history, and the keeping of it: what a block of usable readings does to levels and state."""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

import numpy as np

from analysis.flags import Quality
from analysis.sensor.quality import buckets, windows
from analysis.sensor.quality.moment import level
from analysis.sensor.quality.result import NO_AMENDMENTS, Amendments
from analysis.sensor.quality.state import (
    ATTENUATED_LEVEL,
    BEYOND,
    COMPARED,
    COMPARED_BEFORE,
    FLAT_FAIL_HIGH,
    FLAT_FAIL_LOW,
    FLAT_JUDGED,
    FLAT_SUSPECT_HIGH,
    FLAT_SUSPECT_LOW,
    HIGHEST,
    LOWEST,
    NEIGHBOUR_LEVEL,
    NO_BUCKET,
    NOISY,
    NOISY_BEFORE,
    RATE_LIMIT,
    RESOLUTION,
    TIGHT_RATE_LIMIT,
)
from analysis.sensor.quality.steps import Steps, does_not_answer, steps
from analysis.sensor.quality.thresholds import NO_NEIGHBOUR, NOISE_LIMIT, SPIKE_FAIL, SPIKE_SUSPECT
from analysis.sensor.quality.words import VARIABLES, QualityTest, Variable

if TYPE_CHECKING:
    from analysis.arrays import BoolArray, FloatArray, IntArray, QualityArray
    from analysis.sensor.quality.buckets import Groups
    from analysis.sensor.quality.rows import Rows
    from analysis.sensor.quality.state import QualityState
    from analysis.sensor.quality.thresholds import Thresholds

FEWEST_COMPARED: Final = 8
"""Second differences that the completed buckets must hold before a sensor is judged for noise."""

_FROM_LEVEL = np.array([Quality.NOT_EVALUATED, Quality.PASS, 0, Quality.SUSPECT, Quality.FAIL], dtype=np.uint8)
_NOBODY = np.zeros(0, dtype=np.int64)


def judged_by_history(
    levels: QualityArray, all_rows: Rows, keep: BoolArray, state: QualityState, thresholds: Thresholds
) -> tuple[IntArray, Amendments]:
    """Fill in the history tests for the rows where *keep* is true, and let *state* remember them.

    Parameters
    ----------
    levels : ndarray of uint8, (11, 3, rows)
        Changed in place.
    all_rows : Rows
    keep : ndarray of bool, (rows,)
    state : QualityState
        Its recent part is changed in place; the ring is replaced where it changes.
    thresholds : Thresholds

    Returns
    -------
    tuple of ndarray of int64, Amendments
        Sensors whose ring changed, and what was learned of earlier readings.
    """
    if bool(keep.all()):
        return _judge(levels, all_rows, state, thresholds)
    rows = all_rows.subset(keep)
    if not rows.count:
        return _NOBODY, NO_AMENDMENTS
    part = np.zeros((*levels.shape[:2], rows.count), dtype=np.uint8)
    outcome = _judge(part, rows, state, thresholds)
    history_tests = slice(QualityTest.SPIKE, QualityTest.IN_AIR)
    levels[history_tests][:, :, keep] = part[history_tests]
    return outcome


def _judge(
    levels: QualityArray, rows: Rows, state: QualityState, thresholds: Thresholds
) -> tuple[IntArray, Amendments]:
    limits = rows.pick(thresholds.row)
    found = steps(rows, state, gap_us=rows.pick(thresholds.gap_us))
    noisy = found.bend > limits[NOISE_LIMIT]
    noisy &= found.follows_two
    number, absent = buckets.in_steps(rows.value)
    groups = buckets.grouped(rows, bucket_us=rows.pick(thresholds.bucket_us))
    buckets.tally(groups, number, absent, compared=found.follows_two, noisy=noisy)
    goes_on = buckets.join_with_state(groups, state)
    verdict, changed = _verdicts(groups, goes_on, state, thresholds)
    spikes = _judge_spikes(levels, rows, found, limits)
    _judge_rates(levels, found, groups, verdict)
    _judge_flat_lines(levels, number, absent, groups, goes_on, verdict, state, thresholds)
    levels[QualityTest.ATTENUATED_SIGNAL] = groups.per_row(verdict[ATTENUATED_LEVEL].astype(np.uint8))
    if bool((verdict[NEIGHBOUR_LEVEL] > 0).any()):
        levels[QualityTest.NEIGHBOUR] = groups.per_row(verdict[NEIGHBOUR_LEVEL].astype(np.uint8))
    is_noisy = _judge_noise(levels, noisy, found, groups, goes_on, verdict, state, thresholds)
    onsets = _noise_onsets(rows, is_noisy, found, state, thresholds)
    _remember(rows, found, groups, is_noisy, state)
    return changed, Amendments.joined((spikes, onsets))


def _verdicts(
    groups: Groups, goes_on: BoolArray, state: QualityState, thresholds: Thresholds
) -> tuple[FloatArray, IntArray]:
    """Return what holds for each group, (11, 3, groups), and the sensors whose ring changed."""
    first = groups.first_of_segment
    owners = groups.sensor[first]
    count = groups.last_of_segment - first + 1
    current = goes_on & (count == 1) & (state.verdict_bucket[owners] == state.bucket[owners])
    if bool(current.all()):
        return state.verdict[owners].transpose(1, 2, 0), _NOBODY
    before = state.copy()
    state.ring, state.ring_bucket = before.ring, before.ring_bucket
    state.verdict, state.verdict_bucket = before.verdict, before.verdict_bucket
    out = np.empty((groups.sensor.shape[0], *state.verdict.shape[1:]))
    look_up = _LookUp(groups, state)
    fresh = np.flatnonzero(~current)
    for index in fresh:
        look_up.open(int(index), bool(goes_on[index]))
    for index in np.flatnonzero(current):
        out[first[index]] = state.verdict[owners[index]]
    for index in fresh:
        stop = int(first[index] + count[index])
        out[first[index] : stop] = look_up.verdicts(int(index), thresholds)
        state.verdict[owners[index]] = out[stop - 1]
        state.verdict_bucket[owners[index]] = groups.bucket[stop - 1]
    rolled = owners[~goes_on | (count > 1)]
    for index in fresh:
        look_up.close(int(index))
    return out.transpose(1, 2, 0), rolled


class _LookUp:
    """Buckets of the sensors of a block: from the ring, the open bucket, and the block itself."""

    def __init__(self, groups: Groups, state: QualityState) -> None:
        self.groups = groups
        self.state = state
        self.first = groups.first_of_segment
        self.stop = groups.last_of_segment + 1
        self.segment_of = {int(groups.sensor[start]): index for index, start in enumerate(self.first)}
        self.lines: dict[int, tuple[IntArray, IntArray]] = {}

    def open(self, segment: int, goes_on: bool) -> None:
        """Lay out a segment's buckets: those completed before, then those of the block."""
        start, stop = int(self.first[segment]), int(self.stop[segment])
        sensor = int(self.groups.sensor[start])
        held = self.state.ring_bucket[sensor] != NO_BUCKET
        bucket, tally = [self.state.ring_bucket[sensor][held]], [self.state.ring[sensor][held]]
        if not goes_on and self.state.bucket[sensor] != NO_BUCKET:
            bucket.append(self.state.bucket[sensor : sensor + 1])
            tally.append(self.state.tally[sensor : sensor + 1])
        bucket.append(self.groups.bucket[start:stop])
        tally.append(self.groups.tally[start:stop])
        self.lines[sensor] = np.concatenate(bucket), np.concatenate(tally)

    def bucket_tally(self, sensor: int, number: int) -> IntArray | None:
        """Return the tally of one bucket of one sensor, or None where nothing is held."""
        if sensor not in self.lines:
            segment = self.segment_of.get(sensor)
            if segment is None:
                return self._from_state(sensor, number)
            self.open(segment, bool(self.groups.bucket[self.first[segment]] == self.state.bucket[sensor]))
        bucket, tally = self.lines[sensor]
        place = int(np.searchsorted(bucket, number))
        return tally[place] if place < bucket.shape[0] and bucket[place] == number else None

    def _from_state(self, sensor: int, number: int) -> IntArray | None:
        if self.state.bucket[sensor] == number:
            return np.asarray(self.state.tally[sensor])
        place = np.flatnonzero(self.state.ring_bucket[sensor] == number)
        return np.asarray(self.state.ring[sensor, place[0]]) if place.shape[0] else None

    def verdicts(self, segment: int, thresholds: Thresholds) -> FloatArray:
        """Return what holds for each group of a segment, (groups, 11, 3)."""
        start, stop = int(self.first[segment]), int(self.stop[segment])
        sensor = int(self.groups.sensor[start])
        bucket, tally = self.lines[sensor]
        neighbour = int(thresholds.neighbour[sensor])
        return windows.verdicts(
            sensor,
            bucket=bucket,
            tally=tally,
            count=stop - start,
            thresholds=thresholds,
            water_changed_us=int(self.state.water_changed_us[sensor]),
            neighbour_tally=lambda number: None if neighbour == NO_NEIGHBOUR else self.bucket_tally(neighbour, number),
        )

    def close(self, segment: int) -> None:
        """Let the state's ring hold the last buckets that the segment completed."""
        sensor = int(self.groups.sensor[self.first[segment]])
        bucket, tally = self.lines[sensor]
        size = self.state.ring_bucket.shape[1]
        done = bucket[:-1][-size:]
        if done.shape[0]:
            self.state.ring_bucket[sensor, -done.shape[0] :] = done
            self.state.ring[sensor, -done.shape[0] :] = tally[:-1][-size:]


def _judge_spikes(levels: QualityArray, rows: Rows, found: Steps, limits: FloatArray) -> Amendments:
    """Pass what cannot become a spike, leave the rest open, and settle what was left open before."""
    suspect, fail = limits[SPIKE_SUSPECT], limits[SPIKE_FAIL]
    near = found.jump <= suspect
    near &= found.follows
    levels[QualityTest.SPIKE] = near
    settled = found.pending_jump > suspect
    settled &= found.follows_two
    if not settled.any():
        return NO_AMENDMENTS
    variable, row = np.nonzero(settled)
    size = found.spike_size()[variable, row]
    high = np.broadcast_to(fail, found.jump.shape)[variable, row]
    low = np.broadcast_to(suspect, found.jump.shape)[variable, row]
    verdict = _FROM_LEVEL[level(np.ones(size.shape, dtype=np.bool_), size > low, size > high)]
    at = found.before_us[row]
    return Amendments(
        sensor=rows.sensor[row],
        variable=variable.astype(np.int64),
        test=np.full(row.shape, QualityTest.SPIKE, dtype=np.int64),
        from_us=at,
        to_us=at,
        quality=verdict,
    )


def _judge_rates(levels: QualityArray, found: Steps, groups: Groups, verdict: FloatArray) -> None:
    limit = groups.per_row(verdict[RATE_LIMIT])
    judged = np.isfinite(limit)
    judged &= found.follows
    fast = found.jump > limit
    fast &= judged
    levels[QualityTest.RATE_OF_CHANGE] = level(judged, fast)
    warm = judged[Variable.TEMPERATURE]
    steps_up = found.jump[Variable.TEMPERATURE] > groups.per_row(verdict[TIGHT_RATE_LIMIT, Variable.TEMPERATURE])
    if steps_up.any():
        silent = steps_up & warm & does_not_answer(found)
        levels[QualityTest.MULTI_VARIATE, Variable.TEMPERATURE] = level(warm, silent)
    else:
        levels[QualityTest.MULTI_VARIATE, Variable.TEMPERATURE] = warm


def _rows_of(groups: Groups, group: int) -> slice:
    start = int(groups.starts[group])
    return slice(start, start + int(groups.sizes[group]))


def _carried(groups: Groups, goes_on: BoolArray, state: QualityState, tally: int) -> IntArray:
    """Return one tally of the open bucket for each group that goes on filling it, else of an empty one, (3, groups)."""
    empty = {LOWEST: BEYOND, HIGHEST: -BEYOND}.get(tally, 0)
    out = np.full((VARIABLES, groups.sensor.shape[0]), empty, dtype=np.int64)
    which = groups.first_of_segment[goes_on]
    out[:, which] = state.tally[groups.sensor[which], tally].T
    return out


def _judge_flat_lines(
    levels: QualityArray,
    number: IntArray,
    absent: BoolArray | None,
    groups: Groups,
    goes_on: BoolArray,
    verdict: FloatArray,
    state: QualityState,
    thresholds: Thresholds,
) -> None:
    judged = verdict[FLAT_JUDGED] > 0
    levels[QualityTest.FLAT_LINE] = groups.per_row(judged)
    spread = verdict[FLAT_SUSPECT_HIGH] - verdict[FLAT_SUSPECT_LOW]
    allowed = thresholds.flat_tolerance.take(groups.sensor, axis=1) * (1.0 / RESOLUTION) + 0.5
    candidates = spread <= allowed
    candidates &= judged
    if not candidates.any():
        return
    due = windows.shrunk(verdict[FLAT_SUSPECT_LOW].T * RESOLUTION).T
    allowed = np.floor(due * thresholds.flat_tolerance[:, groups.sensor] / RESOLUTION + 0.5)
    candidates &= spread <= allowed
    low = _carried(groups, goes_on, state, LOWEST)
    high = _carried(groups, goes_on, state, HIGHEST)
    for variable, group in zip(*np.nonzero(candidates), strict=True):
        rows = _rows_of(groups, group)
        value = number[variable, rows]
        if absent is not None and absent[variable, rows].any():
            continue
        lowest = np.minimum(np.minimum.accumulate(value), low[variable, group])
        highest = np.maximum(np.maximum.accumulate(value), high[variable, group])
        suspect, fail = (
            np.maximum(highest, verdict[top, variable, group]) - np.minimum(lowest, verdict[bottom, variable, group])
            <= allowed[variable, group]
            for bottom, top in ((FLAT_SUSPECT_LOW, FLAT_SUSPECT_HIGH), (FLAT_FAIL_LOW, FLAT_FAIL_HIGH))
        )
        levels[QualityTest.FLAT_LINE, variable, rows] = level(np.ones(suspect.shape, dtype=np.bool_), suspect, fail)


def _judge_noise(
    levels: QualityArray,
    noisy: BoolArray,
    found: Steps,
    groups: Groups,
    goes_on: BoolArray,
    verdict: FloatArray,
    state: QualityState,
    thresholds: Thresholds,
) -> BoolArray:
    """Fill in the noise test; return where a sensor is noisy, (3, rows)."""
    judged = verdict[COMPARED_BEFORE] >= FEWEST_COMPARED
    levels[QualityTest.NOISE] = groups.per_row(judged)
    is_noisy = np.zeros(noisy.shape, dtype=np.bool_)
    most = verdict[NOISY_BEFORE] + groups.tally[:, NOISY].T
    if not most.any():
        return is_noisy
    share = thresholds.noise_share[groups.sensor]
    candidates = judged & (most >= share * verdict[COMPARED_BEFORE])
    if not candidates.any():
        return is_noisy
    noisy_so_far = _carried(groups, goes_on, state, NOISY) + verdict[NOISY_BEFORE]
    compared_so_far = _carried(groups, goes_on, state, COMPARED) + verdict[COMPARED_BEFORE]
    for variable, group in zip(*np.nonzero(candidates), strict=True):
        rows = _rows_of(groups, group)
        many = np.cumsum(noisy[variable, rows]) + noisy_so_far[variable, group]
        of = np.cumsum(found.follows_two[rows]) + compared_so_far[variable, group]
        is_noisy[variable, rows] = many >= share[group] * of
    levels[QualityTest.NOISE][is_noisy] = Quality.SUSPECT
    return is_noisy


def _noise_onsets(
    rows: Rows, is_noisy: BoolArray, found: Steps, state: QualityState, thresholds: Thresholds
) -> Amendments:
    """Return what the first noisy reading says of the window before it."""
    if not is_noisy.any():
        return NO_AMENDMENTS
    was = np.empty_like(is_noisy)
    was[:, 1:] = is_noisy[:, :-1]
    was[:, rows.starts] = state.was_noisy[rows.owners].T
    variable, row = np.nonzero(is_noisy & ~was)
    sensor = rows.sensor[row]
    width = thresholds.bucket_us[sensor]
    begins = (rows.time_us[row] // width - thresholds.noise_buckets[sensor]) * width
    return Amendments(
        sensor=sensor,
        variable=variable.astype(np.int64),
        test=np.full(row.shape, QualityTest.NOISE, dtype=np.int64),
        from_us=begins,
        to_us=np.maximum(found.before_us[row], begins),
        quality=np.full(row.shape, Quality.SUSPECT, dtype=np.uint8),
    )


def _remember(rows: Rows, found: Steps, groups: Groups, is_noisy: BoolArray, state: QualityState) -> None:
    last_group = groups.last_of_segment
    state.last_value[rows.owners] = found.last_value
    state.last_us[rows.owners] = found.last_us
    state.bucket[rows.owners] = groups.bucket[last_group]
    state.tally[rows.owners] = groups.tally[last_group]
    state.was_noisy[rows.owners] = is_noisy[:, rows.ends].T
