"""What would proposed limits have done? Past data replayed against them, by the very machine that runs live."""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike

from analysis.alarm.events import Observation, Verdict
from analysis.alarm.excursions import Excursion, excursions
from analysis.alarm.limits import high_verdict, is_usable, low_verdict
from analysis.alarm.machine import step
from analysis.alarm.performance import is_chattering
from analysis.alarm.rules import AlarmRules, microseconds
from analysis.alarm.state import AlarmState
from analysis.alarm.transition import Happening
from analysis.arrays import FloatArray, IntArray, QualityArray
from analysis.errors import InvalidInputError


@dataclass(frozen=True, slots=True)
class ProposedLimit:
    """A limit to try: low or high, with its deadband and rules."""

    limit: float
    deadband: float
    is_high: bool
    rules: AlarmRules


class PastAlarm(NamedTuple):
    """An alarm that would have been raised. [us UTC]; `returned_at_us` None: it still held at the end."""

    raised_at_us: int
    returned_at_us: int | None
    worst: float
    """The value furthest beyond the limit, from the begin of the on-delay."""


@dataclass(frozen=True, slots=True)
class WhatIf:
    """What a proposed limit would have done."""

    alarms: tuple[PastAlarm, ...]
    total_s: float
    """How long it would have been active in all."""
    longest_s: float
    is_chattering: bool
    missed: tuple[Excursion, ...]
    """Excursions beyond the reference limit during which it would not have been active."""
    warned: tuple[tuple[Excursion, float], ...]
    """The others, with the time from the alarm to the excursion's begin; negative: the alarm came after. [s]"""

    @property
    def count(self) -> int:
        """How many alarms."""
        return len(self.alarms)


def replayed(
    value: FloatArray,
    *,
    measured_at_us: IntArray,
    quality: QualityArray,
    proposed: ProposedLimit,
    reference_limit: float,
    reference_min_duration_s: float = 0.0,
) -> WhatIf:
    """Replay one tank's past values against a proposed limit.

    Parameters
    ----------
    value : ndarray of float64, shape (N,)
        What the limit is judged on (see `analysis.alarm.nearest`).
    measured_at_us : ndarray of int64, shape (N,)
        Ascending. [us UTC]
    quality : ndarray of uint8, shape (N,)
        QARTOD quality.
    proposed : ProposedLimit
        The limit to try.
    reference_limit : float
        The limit that matters (the present alarm limit, or what the animals tolerate): excursions beyond it
        without an alarm were missed.
    reference_min_duration_s : float
        Excursions shorter than this need no alarm. [s]

    Returns
    -------
    WhatIf

    Raises
    ------
    InvalidInputError
        If the times do not ascend.
    """
    if np.any(np.diff(measured_at_us) < 0):
        row = int(np.flatnonzero(np.diff(measured_at_us) < 0)[0]) + 1
        raise InvalidInputError(
            "measured time", found=int(measured_at_us[row]), allowed="ascending", where=f"row {row}"
        )
    usable = is_usable(value, quality=quality)
    alarms = _alarms(np.where(usable, value, np.nan), measured_at_us, usable, proposed)
    past = excursions(
        value,
        measured_at_us=measured_at_us,
        usable=usable,
        limit=reference_limit,
        is_high=proposed.is_high,
        max_gap_s=proposed.rules.max_gap_s,
        min_duration_s=reference_min_duration_s,
    )
    end_us = int(measured_at_us[-1]) if measured_at_us.size else 0
    lengths = [((alarm.returned_at_us or end_us) - alarm.raised_at_us) / microseconds(1.0) for alarm in alarms]
    met = [(item, _alarm_of(item, alarms)) for item in past]
    return WhatIf(
        alarms=alarms,
        total_s=sum(lengths),
        longest_s=max(lengths, default=0.0),
        is_chattering=is_chattering([alarm.raised_at_us for alarm in alarms]),
        missed=tuple(item for item, alarm in met if alarm is None),
        warned=tuple(
            (item, (item.begun_at_us - alarm.raised_at_us) / microseconds(1.0))
            for item, alarm in met
            if alarm is not None
        ),
    )


def _alarm_of(excursion: Excursion, alarms: tuple[PastAlarm, ...]) -> PastAlarm | None:
    """Return the first alarm that was active at some time of the excursion."""
    for alarm in alarms:
        has_ended = alarm.returned_at_us is not None and alarm.returned_at_us < excursion.begun_at_us
        if not has_ended and alarm.raised_at_us <= excursion.ended_at_us:
            return alarm
    return None


def _alarms(
    value: FloatArray, measured_at_us: IntArray, usable: ArrayLike, proposed: ProposedLimit
) -> tuple[PastAlarm, ...]:
    """Run the machine, leaping from one reading that can change something to the next."""
    judge = high_verdict if proposed.is_high else low_verdict
    verdict = judge(value, limit=proposed.limit, deadband=proposed.deadband, usable=usable)
    is_beyond = (verdict == Verdict.TRUE) | (verdict == Verdict.NEAR)
    leaps = {False: np.flatnonzero(is_beyond), True: np.flatnonzero(verdict == Verdict.FALSE)}
    state, row, raised_row, run_row = AlarmState(), 0, -1, 0
    found: list[PastAlarm] = []
    while row < verdict.size:
        if not state.has_pending:
            ahead = leaps[state.is_active]
            place = int(np.searchsorted(ahead, row))
            if place == ahead.size:
                break
            row = int(ahead[place])
        at_us = int(measured_at_us[row])
        if not state.is_active and not state.has_pending:
            run_row = row
        state, entries = step(state, proposed.rules, Observation(Verdict(int(verdict[row])), at_us), at_us)
        if not state.is_active and state.pending_since_us == at_us:
            run_row = row
        for entry in entries:
            if entry.happening is Happening.RAISED:
                raised_row = row
            elif raised_row >= 0:
                found.append(_past_alarm(value, measured_at_us, (run_row, raised_row, row), proposed))
                raised_row = -1
        row += 1
    if raised_row >= 0:
        found.append(_past_alarm(value, measured_at_us, (run_row, raised_row, None), proposed))
    return tuple(found)


def _past_alarm(
    value: FloatArray, measured_at_us: IntArray, rows: tuple[int, int, int | None], proposed: ProposedLimit
) -> PastAlarm:
    """Return the alarm whose on-delay began, which was raised and which returned at these rows."""
    begun, raised, returned = rows
    stretch = value[begun : None if returned is None else returned + 1]
    worst = float(np.nanmax(stretch) if proposed.is_high else np.nanmin(stretch))
    returned_at_us = None if returned is None else int(measured_at_us[returned])
    return PastAlarm(int(measured_at_us[raised]), returned_at_us, worst)
