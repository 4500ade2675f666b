"""The quality tests on a block of readings: one function for the live path and for a year of one logger.

How each test is applied
------------------------
Gap, gross range and climatology follow the QARTOD manual to the letter.

*Spike.* The manual judges reading n-1 when n arrives, against the middle of its two neighbours. That calls both
sides of a genuine step suspect. Here a spike must stand out of *both* neighbours in the same direction, and its
size is the smaller of the two steps; a step or a slope of the water has none. So reading n can be given an answer
at its arrival: if it is within the suspect threshold of the reading before, it passes for good, whatever comes;
if not, it is "not evaluated" (2) until the next reading shows whether it was a spike or a step, and the verdict
goes out as an amendment. It is never called suspect on the strength of a step alone.

*Rate of change.* |x(n) - x(n-1)| > N_DEV SD over the last 25 hours, suspect only; SD comes from completed buckets
and has a floor. *Flat line*: the range over whole buckets and the open one is not above EPS. *Attenuated signal*:
SD over completed buckets. *Multi-variate*: temperature steps, conductivity does not answer (`steps`).
*Neighbour*: bucket means of two sensors in a tank differ by more than allowed: suspect on both, never fail.
*Noise* and *in air* are the project's own; when noise is found, the window that showed it is amended.

Readings that fail gross range or are in air leave no trace in the history. A reading older than its sensor's newest
(late) is not judged by history tests and leaves no trace either.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

import numpy as np

from analysis.flags import Flag, Quality
from analysis.sensor.quality import moment
from analysis.sensor.quality.history import judged_by_history
from analysis.sensor.quality.result import NO_AMENDMENTS, QualityResult, joined
from analysis.sensor.quality.rows import laid_out, order_by_sensor
from analysis.sensor.quality.state import NEVER_US
from analysis.sensor.quality.words import TEST_FLAGS, TESTS, VARIABLES, QualityTest, Variable

if TYPE_CHECKING:
    from numpy.typing import ArrayLike

    from analysis.arrays import BoolArray, FlagArray, FloatArray, IntArray, QualityArray
    from analysis.sensor.quality.rows import Rows
    from analysis.sensor.quality.state import QualityState
    from analysis.sensor.quality.thresholds import Thresholds

from analysis.errors import InvalidInputError

BLOCK_ROWS: Final = 16_384
"""Larger blocks are cut into pieces that stay in the processor's cache; the result is the same."""

_UNPHYSICAL = np.uint32(Flag.NEGATIVE | Flag.OUT_OF_RANGE)
_DOUBTED = np.uint32(Flag.EXTRAPOLATED | Flag.WATER_KIND_DOUBTED)
_TEST_BITS = np.array([TEST_FLAGS[test] for test in QualityTest], dtype=np.uint32)[:, None]
_VALUE_TESTS = slice(QualityTest.GROSS_RANGE, TESTS)  # all but the gap


def evaluate(
    state: QualityState,
    thresholds: Thresholds,
    *,
    sensor: ArrayLike,
    measured_at_us: ArrayLike,
    conductivity: ArrayLike,
    temperature: ArrayLike,
    salinity: ArrayLike,
    flags: ArrayLike | None = None,
) -> tuple[QualityState, QualityResult]:
    """Return the state after a block of readings, and the flags of each reading.

    Parameters
    ----------
    state : QualityState
        What is remembered of each sensor; it is left as it is.
    thresholds : Thresholds
        For the same sensors.
    sensor : array_like of int, (rows,)
        Index of each reading's sensor.
    measured_at_us : array_like of int, (rows,)
        Microseconds UTC. Rows are in order of (measured_at, sensor).
    conductivity, temperature, salinity : array_like of float, (rows,)
        At the water's own temperature [mS/cm]; [degC]; practical salinity in seawater, g/kg in other kinds of
        water. NaN where missing.
    flags : array_like of uint32, (rows,), optional
        Words already known. `negative` and `out_of_range` say that a NaN was an unphysical value: gross range
        fails it, instead of calling it missing. With `extrapolated` or `water_kind_doubted` salinity is at least
        suspect when rolled up.

    Returns
    -------
    tuple of QualityState, QualityResult
        However the stream of readings is cut into blocks, the flags, the amendments and the state are the same.

    Raises
    ------
    InvalidInputError
        If lengths differ, a sensor is unknown, or the times of a sensor run backwards within the block.
    """
    who = np.asarray(sensor, dtype=np.int64).reshape(-1)
    when = np.asarray(measured_at_us, dtype=np.int64).reshape(-1)
    value = np.empty((VARIABLES, who.shape[0]))
    for variable, column in zip(Variable, (conductivity, temperature, salinity), strict=True):
        value[variable] = column
    known = np.zeros(who.shape, dtype=np.uint32) if flags is None else np.asarray(flags, dtype=np.uint32)
    _check(state, thresholds, who, when, known)
    if who.shape[0] <= BLOCK_ROWS:
        return _evaluate_block(state, thresholds, who, when, value, known)
    results = []
    for start in range(0, who.shape[0], BLOCK_ROWS):
        piece = slice(start, start + BLOCK_ROWS)
        state, result = _evaluate_block(state, thresholds, who[piece], when[piece], value[:, piece], known[piece])
        results.append(result)
    return state, joined(results)


def _check(state: QualityState, thresholds: Thresholds, who: IntArray, when: IntArray, known: FlagArray) -> None:
    if state.sensors != thresholds.sensors:
        raise InvalidInputError("state", found=f"{state.sensors} sensors", allowed=f"{thresholds.sensors} sensors")
    if when.shape != who.shape or known.shape != who.shape:
        raise InvalidInputError("measured_at_us, flags", found=(when.shape, known.shape), allowed=str(who.shape))
    if who.shape[0] and (int(who.min()) < 0 or int(who.max()) >= state.sensors):
        raise InvalidInputError("sensor", found=(int(who.min()), int(who.max())), allowed=f"0 to {state.sensors - 1}")


def _evaluate_block(
    state: QualityState,
    thresholds: Thresholds,
    who: IntArray,
    when: IntArray,
    value: FloatArray,
    known: FlagArray,
) -> tuple[QualityState, QualityResult]:
    if not who.shape[0]:
        return state, _nothing()
    order = order_by_sensor(who)
    if order is not None:
        rows = laid_out(who[order], when[order], np.ascontiguousarray(value[:, order]))
        ordered_flags = known[order]
    else:
        rows, ordered_flags = laid_out(who, when, value), known
    levels = np.zeros((TESTS, VARIABLES, rows.count), dtype=np.uint8)
    late = _late(rows, state)
    usable = _judge_moment(levels, rows, thresholds)
    after = state.with_recent_copied()
    _judge_gap(levels, rows, state, after, thresholds, late)
    keep = usable if late is None else usable & ~late
    ring_changed, amendments = judged_by_history(levels, rows, keep, after, thresholds)
    result = _assembled(levels, rows, ordered_flags, late)
    if order is not None:
        result = _in_order_given(result, order)
    quality, by_variable, flags, by_test = result
    return after, QualityResult(
        sensor=who,
        measured_at_us=when,
        by_test=by_test,
        by_variable=by_variable,
        quality=quality,
        flags=flags,
        ring_changed=ring_changed,
        amendments=amendments,
    )


def _nothing() -> QualityResult:
    none = np.zeros(0, dtype=np.int64)
    return QualityResult(
        sensor=none,
        measured_at_us=none,
        by_test=np.zeros((TESTS, VARIABLES, 0), dtype=np.uint8),
        by_variable=np.zeros((VARIABLES, 0), dtype=np.uint8),
        quality=np.zeros(0, dtype=np.uint8),
        flags=np.zeros(0, dtype=np.uint32),
        ring_changed=none,
        amendments=NO_AMENDMENTS,
    )


def _late(rows: Rows, state: QualityState) -> BoolArray | None:
    """Return where a reading is not newer than its sensor's newest; None where all are."""
    late = rows.time_us <= rows.pick(state.newest_us)
    if rows.owners.shape[0] < rows.count:
        again = rows.time_us[1:] == rows.time_us[:-1]
        if again.any():
            late[1:] |= again & (rows.sensor[1:] == rows.sensor[:-1])
    return late if late.any() else None


def _judge_moment(levels: QualityArray, rows: Rows, thresholds: Thresholds) -> BoolArray:
    """Fill in the tests that need no history; return which readings may enter it."""
    finite = np.isfinite(rows.value)
    suspect, fail = moment.gross_range(rows.value, rows.pick(thresholds.row))
    levels[QualityTest.GROSS_RANGE] = moment.level(finite, suspect, fail)
    dry = moment.in_air(rows.value[Variable.CONDUCTIVITY], limit_mS_cm=rows.pick(thresholds.in_air_mS_cm))
    levels[QualityTest.IN_AIR, Variable.CONDUCTIVITY] = moment.level(finite[Variable.CONDUCTIVITY], dry, dry)
    if thresholds.climatology is not None:
        levels[QualityTest.CLIMATOLOGY] = moment.climatology(
            rows.value, time_us=rows.time_us, table=thresholds.climatology, sensor=rows.sensor
        )
    usable = finite[Variable.CONDUCTIVITY] & finite[Variable.TEMPERATURE]
    if fail.any() or dry.any():
        usable &= ~(fail.any(axis=0) | dry)
    return np.asarray(usable)


def _judge_gap(
    levels: QualityArray,
    rows: Rows,
    state: QualityState,
    after: QualityState,
    thresholds: Thresholds,
    late: BoolArray | None,
) -> None:
    """Fill in the gap test for readings that are not late, and remember each sensor's newest."""
    on_time = rows if late is None else rows.subset(~late)
    if not on_time.count:
        return
    before = np.empty(on_time.count, dtype=np.int64)
    before[1:] = on_time.time_us[:-1]
    before[on_time.starts] = state.newest_us[on_time.owners]
    too_long = moment.timing_gap(on_time.time_us - before, limit_us=on_time.pick(thresholds.gap_us))
    judged = before != NEVER_US
    too_long &= judged
    level = moment.level(judged, too_long, too_long)
    if late is None:
        levels[QualityTest.GAP] = level
    else:
        levels[QualityTest.GAP][:, ~late] = level
    after.newest_us[on_time.owners] = on_time.time_us[on_time.ends]


def _assembled(
    levels: QualityArray, rows: Rows, known: FlagArray, late: BoolArray | None
) -> tuple[QualityArray, QualityArray, FlagArray, QualityArray]:
    """Return rolled-up flags, flags by variable, flag words and flags by test."""
    has_absent = not np.isfinite(rows.value).all()
    if has_absent:
        absent = ~np.isfinite(rows.value)
        unphysical = absent & ((known & _UNPHYSICAL) != 0)
        levels[QualityTest.GROSS_RANGE][unphysical] = 4
        absent &= ~unphysical
    flags = known.copy()
    if int(levels.max()) >= 3:
        found = levels.max(axis=1) >= 3
        flags |= np.bitwise_or.reduce(np.where(found, _TEST_BITS, np.uint32(0)), axis=0)
    if late is not None:
        flags[late] |= np.uint32(Flag.LATE)
    over_tests = levels[_VALUE_TESTS].max(axis=0)
    quality, by_variable, by_test = (_as_flags(each) for each in (over_tests.max(axis=0), over_tests, levels))
    if int(known.max()) and bool((known & _DOUBTED).any()):
        doubted = (known & _DOUBTED) != 0
        by_variable[Variable.SALINITY, doubted] = np.maximum(by_variable[Variable.SALINITY, doubted], Quality.SUSPECT)
        quality[doubted] = np.maximum(quality[doubted], Quality.SUSPECT)
    if has_absent:
        by_variable[absent] = Quality.MISSING
        by_test[:, absent] = Quality.MISSING
        quality[absent.any(axis=0)] = Quality.MISSING
    return quality, by_variable, flags, by_test


def _as_flags(levels: QualityArray) -> QualityArray:
    """Return QARTOD flags: level 0 is 2 (not evaluated), the other levels are flags already."""
    return np.asarray(levels + ((levels == 0).view(np.uint8) << 1))


def _in_order_given(
    result: tuple[QualityArray, QualityArray, FlagArray, QualityArray], order: IntArray
) -> tuple[QualityArray, QualityArray, FlagArray, QualityArray]:
    back = np.empty_like(order)
    back[order] = np.arange(order.shape[0])
    quality, by_variable, flags, by_test = result
    return quality[back], by_variable[:, back], flags[back], by_test[:, :, back]
