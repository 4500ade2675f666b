"""Tests on the last few readings: spike, rate of change, conductivity that does not answer to temperature, noise.

A block is laid out with three remembered readings before each sensor's own, so that every step is a difference
of neighbours in one array, whatever block they came in.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Final, TypeAlias

import numpy as np

from analysis.sensor.quality.state import HISTORY
from analysis.sensor.quality.words import Variable

if TYPE_CHECKING:
    from analysis.arrays import BoolArray, FloatArray, IntArray
    from analysis.sensor.quality.rows import Rows
    from analysis.sensor.quality.state import QualityState

Index: TypeAlias = "int | slice | IntArray"

HALF_OF_CONDUCTIVITY_PER_K: Final = 0.01
"""Half of the 2 % by which conductivity follows each kelvin (seawater 1.7 to 3.0 %/K, 35 to 0 degC)."""

SHADOW: Final = 2.0
"""A reading beside a spike more than this many times larger than its own is not a spike itself."""


@dataclass(slots=True)
class Steps:
    """Differences between neighbouring readings of a block; (3, rows) or (rows,)."""

    jump: FloatArray
    """Size of the step to each row from the reading before."""
    pending_jump: FloatArray
    """Size of the step to the reading before, from the one before that."""
    bend: FloatArray
    """Second difference at the reading before each row: its distance from the middle of its neighbours."""
    conductivity_step: FloatArray
    """Signed step of conductivity."""
    conductivity_before: FloatArray
    follows: BoolArray
    """Whether the reading before is near enough in time to compare."""
    follows_two: BoolArray
    """Whether the two readings before are."""
    before_us: IntArray
    """Time of the reading before."""
    last_value: FloatArray
    """(segments, 3, 3): what the state keeps."""
    last_us: IntArray
    all_steps: FloatArray
    """Signed steps, remembered readings included."""
    back: tuple[Index, Index, Index]
    """Where in `all_steps` stand the steps that end at each row, one reading before it, and two before it."""

    def spike_size(self) -> FloatArray:
        """Return how far the reading *before* each row stands out of both its neighbours; 0 where it does not."""
        size, rising = np.abs(self.all_steps), self.all_steps > 0.0
        stands_out = np.minimum(size[..., :-1], size[..., 1:])
        stands_out *= rising[..., :-1] != rising[..., 1:]
        _, two, three = self.back
        candidate, forerunner = stands_out[..., two], stands_out[..., three]
        is_lit = (forerunner <= SHADOW * candidate) | np.isnan(forerunner)
        return np.asarray(candidate * is_lit)


def steps(rows: Rows, state: QualityState, *, gap_us: IntArray) -> Steps:
    """Return the differences of *rows* among themselves and with what *state* remembers.

    Parameters
    ----------
    rows : Rows
        Usable readings only.
    state : QualityState
    gap_us : ndarray of int64
        Longest time over which two readings of a sensor are compared, (rows,) or (1,).
    """
    laid = _with_history(rows, state)
    value, time_us = laid.value, laid.time_us
    one, two, _ = laid.back
    step = value[..., 1:] - value[..., :-1]
    size = np.abs(step)
    passed = time_us[..., 1:] - time_us[..., :-1]
    bend = np.abs(step[..., two] - step[..., one])
    bend *= 0.5
    follows = passed[..., one] <= gap_us
    return Steps(
        jump=size[..., one],
        pending_jump=size[..., two],
        bend=bend,
        conductivity_step=step[Variable.CONDUCTIVITY][..., one],
        conductivity_before=value[Variable.CONDUCTIVITY][..., one],
        follows=follows,
        follows_two=follows & (passed[..., two] <= gap_us),
        before_us=time_us[..., one],
        last_value=laid.last_value,
        last_us=laid.last_us,
        all_steps=step,
        back=laid.back,
    )


@dataclass(slots=True)
class _Laid:
    """Readings with their sensor's remembered ones before them.

    `back` holds the indices, on the last axis of the first differences, of the steps that end at each row, one
    reading before it, and two before it.
    """

    value: FloatArray
    time_us: IntArray
    back: tuple[Index, Index, Index]
    last_value: FloatArray
    last_us: IntArray


def _with_history(rows: Rows, state: QualityState) -> _Laid:
    segments = rows.owners.shape[0]
    if segments == rows.count:
        return _one_each(rows, state)
    if segments == 1:
        return _one_sensor(rows, state)
    return _many(rows, state)


def _one_each(rows: Rows, state: QualityState) -> _Laid:
    """Lay out one reading of each sensor: (3, rows, 4)."""
    value = np.empty((rows.count, HISTORY + 1, rows.value.shape[0]))
    time_us = np.empty((rows.count, HISTORY + 1), dtype=np.int64)
    value[:, :HISTORY], value[:, HISTORY] = state.last_value[rows.owners], rows.value.T
    time_us[:, :HISTORY], time_us[:, HISTORY] = state.last_us[rows.owners], rows.time_us
    return _Laid(
        value=np.ascontiguousarray(value.transpose(2, 0, 1)),
        time_us=time_us,
        back=(2, 1, 0),
        last_value=value[:, 1:],
        last_us=time_us[:, 1:],
    )


def _one_sensor(rows: Rows, state: QualityState) -> _Laid:
    """Lay out many readings of one sensor: (3, rows + 3)."""
    only, count = int(rows.owners[0]), rows.count
    value = np.concatenate((state.last_value[only].T, rows.value), axis=1)
    time_us = np.concatenate((state.last_us[only], rows.time_us))
    return _Laid(
        value=value,
        time_us=time_us,
        back=(slice(2, 2 + count), slice(1, 1 + count), slice(0, count)),
        last_value=value[:, -HISTORY:].T[None],
        last_us=time_us[None, -HISTORY:],
    )


def _many(rows: Rows, state: QualityState) -> _Laid:
    """Lay out any number of readings of any number of sensors: (3, rows + 3 sensors)."""
    segments = rows.owners.shape[0]
    length = rows.count + HISTORY * segments
    value, time_us = np.empty((rows.value.shape[0], length)), np.empty(length, dtype=np.int64)
    segment = np.arange(segments)
    remembered = (rows.starts + HISTORY * segment)[:, None] + np.arange(HISTORY)
    place = np.arange(rows.count) + HISTORY * (np.repeat(segment, rows.ends - rows.starts + 1) + 1)
    value[:, remembered] = state.last_value[rows.owners].transpose(2, 0, 1)
    time_us[remembered] = state.last_us[rows.owners]
    value[:, place] = rows.value
    time_us[place] = rows.time_us
    last = (rows.ends + HISTORY * (segment + 1))[:, None] + np.arange(1 - HISTORY, 1)
    return _Laid(
        value=value,
        time_us=time_us,
        back=(place - 1, place - 2, place - 3),
        last_value=value[:, last].transpose(1, 2, 0),
        last_us=time_us[last],
    )


def does_not_answer(found: Steps) -> BoolArray:
    """Return True where temperature steps and conductivity does not follow it (QARTOD test 9).

    The manual's rule: the first variable fails a tight rate test, the second does not move. Conductivity of the
    same water moves about 2 % with each kelvin; less than half of that is taken as "does not move". Salt water
    that warms and thins at once by just that much would be called suspect too, never fail.
    """
    due = found.jump[Variable.TEMPERATURE] * found.conductivity_before
    due *= HALF_OF_CONDUCTIVITY_PER_K
    return np.asarray(np.abs(found.conductivity_step) < due)
