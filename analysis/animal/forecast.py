"""How long until a limit is met, at the rate at which the water moves now: a cautious answer, or none.

Three windows of 5, 15 and 60 minutes are tried, the shortest first; a window speaks only when it holds at
least five readings, has moved by more than three resolutions, and its slope stands clear of its scatter. The
record is cut at a detected change of slope, so that an hour of calm does not hide ten minutes of fall. The
answer is the lower 90 % bound: the time at the steepest slope that the readings allow.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.special import stdtrit

from analysis.arrays import BoolArray, FloatArray, IntArray
from analysis.errors import InvalidInputError

WINDOWS_MIN = (5.0, 15.0, 60.0)
MIN_READINGS = 5
MIN_RESOLUTIONS = 3.0
CONFIDENCE = 0.9
CHANGE_F = 20.0
"""F ratio of two lines against one from which the slope counts as changed; p below 1e-5 for 30 readings."""
MICROSECONDS_PER_MINUTE = 60_000_000.0
BLOCK = 4096


@dataclass(frozen=True, slots=True)
class Slope:
    """A straight line through the latest readings.

    Parameters
    ----------
    per_min : float
        Slope in the unit of the readings. [unit/min]
    error_per_min : float
        Half width of its one-sided 90 % bound. [unit/min]
    now : float
        The line at the last reading.
    window_min : float
        Window that gave it. [min]
    readings : int
        Readings in it.
    since_us : int
        First reading used.
    """

    per_min: float
    error_per_min: float
    now: float
    window_min: float
    readings: int
    since_us: int


@dataclass(frozen=True, slots=True)
class TimeLeft:
    """Time to one limit.

    Parameters
    ----------
    name : str
        Of the limit.
    minutes : float
        Lower 90 % bound; 0 beyond the limit, infinite while the water moves away, NaN where it is not known. [min]
    likely_min : float
        The same at the fitted slope. [min]
    """

    name: str
    minutes: float
    likely_min: float


def _line(minutes: FloatArray, values: FloatArray, *, resolution: float) -> tuple[float, float, float]:
    """Return slope, its standard error and the value at the last reading."""
    x, y = minutes - minutes.mean(), values - values.mean()
    sxx = float(x @ x)
    slope = float(x @ y) / sxx
    residual = y - slope * x
    # A reading is never better than its resolution, however straight the digits lie.
    variance = max(float(residual @ residual) / max(1, x.size - 2), resolution**2 / 12.0)
    return slope, float(np.sqrt(variance / sxx)), float(values.mean() + slope * x[-1])


def _errors_of_parts(minutes: FloatArray, values: FloatArray) -> FloatArray:
    """Return the squared error of two free lines for every cut, the second starting at the index."""
    x, y = minutes - minutes.mean(), values - values.mean()

    def error(count: FloatArray, sums: tuple[FloatArray, ...]) -> FloatArray:
        sx, sy, sxx, sxy, syy = sums
        vxx, vxy, vyy = sxx - sx * sx / count, sxy - sx * sy / count, syy - sy * sy / count
        return np.asarray(vyy - np.divide(vxy * vxy, vxx, out=np.zeros_like(vxy), where=vxx > 0.0))

    before = tuple(np.concatenate([[0.0], np.cumsum(term)]) for term in (x, y, x * x, x * y, y * y))
    cuts = np.arange(MIN_READINGS, x.size - MIN_READINGS + 1)
    left = error(cuts.astype(np.float64), tuple(term[cuts] for term in before))
    right = error((x.size - cuts).astype(np.float64), tuple(term[-1] - term[cuts] for term in before))
    return np.asarray(left + right)


def last_change_of_slope(times_us: IntArray, values: FloatArray, *, resolution: float) -> int:
    """Return the index of the first reading after the last detected change of slope, 0 where there is none.

    Two free lines are fitted for every cut; the best cut counts when it lowers the squared error by an F ratio of
    more than `CHANGE_F`. The part after it is searched again.
    """
    start = 0
    minutes = (times_us - times_us[0]) / MICROSECONDS_PER_MINUTE if times_us.size else np.zeros(0)
    while values.size - start >= 2 * MIN_READINGS + 1:
        x, y = minutes[start:], values[start:]
        slope, _, _ = _line(x, y, resolution=resolution)
        one = float(np.sum(((y - y.mean()) - slope * (x - x.mean())) ** 2))
        errors = _errors_of_parts(x, y)
        best = int(np.argmin(errors))
        two = max(float(errors[best]), x.size * resolution**2 / 12.0, 1e-12)
        if (one - two) / 2.0 / (two / (x.size - 4)) < CHANGE_F:
            return start
        start += best + MIN_READINGS
    return start


def current_slope(times_us: IntArray, values: FloatArray, *, resolution: float) -> Slope | None:
    """Return the slope of the shortest window that stands clear of its scatter, or None.

    Parameters
    ----------
    times_us : ndarray of int64
        Times of the readings, rising; the last is now. [us]
    values : FloatArray
        Readings in any unit; NaN are left out.
    resolution : float
        Step of the readings, same unit. More than 0.

    Raises
    ------
    InvalidInputError
        If the resolution is not more than 0.
    """
    if not resolution > 0.0:
        raise InvalidInputError("resolution", found=resolution, allowed="more than 0, in the unit of the readings")
    is_usable = (
        ~np.isnan(values) & (times_us > times_us[-1] - WINDOWS_MIN[-1] * MICROSECONDS_PER_MINUTE)
        if times_us.size
        else None
    )
    if is_usable is None or np.count_nonzero(is_usable) < MIN_READINGS:
        return None
    times, seen = times_us[is_usable], values[is_usable]
    start = last_change_of_slope(times, seen, resolution=resolution)
    times, seen = times[start:], seen[start:]
    for window in WINDOWS_MIN:
        first = int(np.searchsorted(times, times[-1] - window * MICROSECONDS_PER_MINUTE))
        count = times.size - first
        if count < MIN_READINGS or times[-1] == times[first]:
            continue
        minutes = (times[first:] - times[-1]) / MICROSECONDS_PER_MINUTE
        slope, error, now = _line(minutes, seen[first:], resolution=resolution)
        half = error * float(stdtrit(count - 2, CONFIDENCE))
        moved = abs(slope) * -float(minutes[0])
        if moved > MIN_RESOLUTIONS * resolution and abs(slope) > 2.0 * half:
            return Slope(slope, half, now, window, count, int(times[first]))
    return None


def time_left(slope: Slope | None, *, value: float, limits: dict[str, float]) -> list[TimeLeft]:
    """Return the time to each limit from *value*; the side of a limit follows from where it lies.

    Parameters
    ----------
    slope : Slope or None
        From `current_slope`; None: the water does not move as far as can be told, and no time is known.
    value : float
        The latest reading, same unit as the limits.
    limits : dict of str to float
        Name and level; a name that ends in ``low`` is a lower limit, every other an upper. NaN or infinite
        limits give NaN: not known, or none.
    """
    found = []
    for name, level in limits.items():
        if not np.isfinite(level) or np.isnan(value):
            found.append(TimeLeft(name, np.nan, np.nan))
            continue
        out = -1.0 if name.endswith("low") else 1.0
        distance = (level - value) * out
        if distance <= 0.0:
            found.append(TimeLeft(name, 0.0, 0.0))
        elif slope is None:
            found.append(TimeLeft(name, np.nan, np.nan))
        else:
            speed, fastest = slope.per_min * out, slope.per_min * out + slope.error_per_min
            found.append(
                TimeLeft(
                    name,
                    distance / fastest if fastest > 0.0 and speed > 0.0 else np.inf,
                    distance / speed if speed > 0.0 else np.inf,
                )
            )
    return found


def minutes_to_limits(
    times_us: IntArray, values: FloatArray, *, low: FloatArray, high: FloatArray, resolution: float
) -> FloatArray:
    """Return for every row of a record the minutes to the limit that the water moves toward, lower 90 % bound.

    The same windows and rules as `current_slope`, for many rows at once and without the search for a change of
    slope: after a turn the shortest window needs up to five minutes to follow.

    Parameters
    ----------
    times_us : ndarray of int64
        Never falling. Shape (rows,). [us]
    values, low, high : FloatArray
        Readings and limits, shape (rows,); NaN or infinite limits give NaN.
    resolution : float
        Step of the readings. More than 0.

    Returns
    -------
    FloatArray
        0 beyond a limit, NaN where no window speaks or the limit ahead is not known. [min]
    """
    rows = values.size
    found = np.full(rows, np.nan)
    for begin in range(0, rows, BLOCK):
        end = min(rows, begin + BLOCK)
        first = int(np.searchsorted(times_us, times_us[begin] - int(WINDOWS_MIN[-1] * MICROSECONDS_PER_MINUTE)))
        block = slice(first, end)
        slope, half = _rolling_slopes(times_us[block], values[block], resolution=resolution, skip=begin - first)
        found[begin:end] = _minutes(values[begin:end], slope, half, low=low[begin:end], high=high[begin:end])
    return found


def _rolling_slopes(
    times_us: IntArray, values: FloatArray, *, resolution: float, skip: int
) -> tuple[FloatArray, FloatArray]:
    """Return slope and half width of each row from *skip* on, NaN where no window speaks. Sums are local to the block."""
    minutes = (times_us - times_us[-1]) / MICROSECONDS_PER_MINUTE
    is_usable = ~np.isnan(values)
    x = np.where(is_usable, minutes, 0.0)
    y = np.where(is_usable, values - np.nanmean(values) if is_usable.any() else 0.0, 0.0)
    sums = [np.concatenate([[0.0], np.cumsum(term)]) for term in (is_usable.astype(float), x, y, x * x, x * y, y * y)]
    last = np.arange(skip, values.size)
    slope, half = np.full(last.size, np.nan), np.full(last.size, np.nan)
    for window in WINDOWS_MIN:
        first = np.searchsorted(times_us, times_us[last] - int(window * MICROSECONDS_PER_MINUTE))
        count, sx, sy, sxx, sxy, syy = (term[last + 1] - term[first] for term in sums)
        with np.errstate(divide="ignore", invalid="ignore"):
            vxx, vxy, vyy = sxx - sx * sx / count, sxy - sx * sy / count, syy - sy * sy / count
            here = vxy / vxx
            variance = np.maximum((vyy - here * vxy) / np.maximum(1.0, count - 2.0), resolution**2 / 12.0)
            width = np.sqrt(variance / vxx) * stdtrit(np.maximum(1.0, count - 2.0), CONFIDENCE)
            moved = np.abs(here) * (minutes[last] - minutes[first])
            speaks: BoolArray = (count >= MIN_READINGS) & (vxx > 1e-9) & (moved > MIN_RESOLUTIONS * resolution)
            speaks &= (np.abs(here) > 2.0 * width) & np.isnan(slope)
        slope, half = np.where(speaks, here, slope), np.where(speaks, width, half)
    return slope, half


def _minutes(
    values: FloatArray, slope: FloatArray, half: FloatArray, *, low: FloatArray, high: FloatArray
) -> FloatArray:
    out = np.where(slope < 0.0, -1.0, 1.0)
    ahead = np.where(slope < 0.0, low, high)
    with np.errstate(invalid="ignore", divide="ignore"):
        minutes = (ahead - values) * out / (np.abs(slope) + half)
        is_beyond = (values < low) | (values > high)
    return np.where(is_beyond, 0.0, np.where(np.isfinite(minutes), np.maximum(0.0, minutes), np.nan))
