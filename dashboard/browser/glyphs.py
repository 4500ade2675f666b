"""Small pictures as SVG text: pennant, osmotic balance, day line, rule of the day. Pure functions; colours are CSS variables."""

from __future__ import annotations

import html
import math
from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache
from itertools import pairwise

import numpy as np

from analysis.arrays import FloatArray

PENNANT_PARTS = {"urgent": 3, "soon": 2, "note": 1}
"""The length of a pennant tells the priority; its letter repeats it, colour only repeats both."""

AXIS_STEP_mOsm_kg = 250
USUAL_TOP_mOsm_kg = 1250
LEVEL_GAP_mOsm_kg = 8.0
"""Below this gap no arrow is drawn: it is within what an estimate of either side can tell (our choice)."""


def pennant(priority: str, *, letter: str, word: str, size: int = 18) -> str:
    """Return a pennant of three, two or one parts with its letter.

    Parameters
    ----------
    priority : str
        "urgent", "soon" or "note".
    letter, word : str
        What stands on it and what is read aloud, in the reader's language.
    size : int
        Height. [px]
    """
    parts = PENNANT_PARTS[priority]
    width = 6 + 11 * parts
    scale = size / 18
    seams = "".join(
        f'<path d="M{4 + 11 * i} 1.5V16.5" stroke="var(--sheet)" stroke-width="1.2"/>' for i in range(1, parts)
    )
    return (
        f'<svg class="pennant" width="{(width + 2) * scale:.0f}" height="{size}" viewBox="0 0 {width + 2} 18" role="img"'
        f' aria-label="{html.escape(word)}"><path d="M1 0V18" stroke="var(--{priority})" stroke-width="2"/>'
        f'<path d="M2 1.5H{width}L{width - 5} 9L{width} 16.5H2Z" fill="var(--{priority})"/>{seams}'
        f'<text x="{8.7 if parts > 1 else 7.6}" y="13" text-anchor="middle"'
        f' style="fill:var(--sheet);font-size:11.5px;font-weight:700">{html.escape(letter)}</text></svg>'
    )


@dataclass(frozen=True, slots=True)
class Balance:
    """The figures of one osmotic balance; None where not known. All in mOsm/kg, freezing-point basis.

    Attributes
    ----------
    water, blood : float or None
        Osmolality of the water and of the animal's body fluid.
    tolerated, optimal : (float, float) or None
        Bands of the species and stage; an end may be NaN where no figure is known.
    """

    water: float | None = None
    blood: float | None = None
    tolerated: tuple[float, float] | None = None
    optimal: tuple[float, float] | None = None

    @property
    def gap(self) -> float:
        """Return water minus blood: positive draws water out of the animal; NaN where not known."""
        return math.nan if self.water is None or self.blood is None else float(self.water - self.blood)

    @property
    def direction(self) -> str:
        """Return "out", "in", "level", "unknown" or "no_water": the way water moves, seen from the animal."""
        if self.water is None:
            return "no_water"
        if math.isnan(self.gap):
            return "unknown"
        if abs(self.gap) < LEVEL_GAP_mOsm_kg:
            return "level"
        return "out" if self.gap > 0 else "in"


class _Axis:
    """From mOsm/kg to pixels."""

    def __init__(self, balance: Balance, width: float, margin: float) -> None:
        known = [
            v for v in (balance.water, balance.blood, *(balance.optimal or ())) if v is not None and math.isfinite(v)
        ]
        highest = max([*known, USUAL_TOP_mOsm_kg])
        self.top = AXIS_STEP_mOsm_kg * math.ceil(highest / AXIS_STEP_mOsm_kg)
        self.left, self.right = margin, width - margin

    def __call__(self, value: float) -> float:
        return float(self.left + (self.right - self.left) * min(max(value, 0.0), self.top) / self.top)

    def ticks(self) -> range:
        step = AXIS_STEP_mOsm_kg * (1 if self.top <= 1500 else 2)
        return range(0, self.top + 1, step)


@lru_cache(maxsize=1024)
def osmotic_balance(balance: Balance, *, label: str, width: int = 288) -> str:
    """Return the small balance of a card.

    One axis in mOsm/kg drawn as a chart's scale bar; the animal's body fluid is a drop, the water a diamond, the arrow
    is the way water moves; the tolerated and the optimal band lie behind. No drop where the figure is not known.
    """
    axis, y = _Axis(balance, width, 7), 13.0
    numbers = "".join(
        f'<text x="{axis(v):.1f}" y="37" text-anchor="{"start" if v == 0 else "middle"}"{_at_left(v)}>{v}</text>'
        for v in axis.ticks()
        if v % 500 == 0 and v < axis.top
    )
    return _svg(
        width,
        40,
        label,
        _bands(balance, axis, y - 8, 16) + _scale_bar(axis, 21) + numbers + _marks(balance, axis, y),
    )


@lru_cache(maxsize=1024)
def osmotic_balance_line(balance: Balance, *, label: str, width: int = 130) -> str:
    """Return the balance of a tile: bands, drop and diamond on one fine line, no figures."""
    axis, y = _Axis(balance, width, 5), 7.0
    line = f'<path d="M{axis.left} {y}H{axis.right}" stroke="var(--edge)" stroke-width=".8"/>'
    return _svg(width, 14, label, _bands(balance, axis, y - 5, 10) + line + _marks(balance, axis, y, scale=0.72))


def osmotic_balance_large(
    balance: Balance, *, label: str, water_word: str, blood_word: str, unit_word: str, width: int = 312
) -> str:
    """Return the balance of a tank's page, with both values written at their marks."""
    axis, y = _Axis(balance, width, 9), 58.0
    out = [_bands(balance, axis, y - 12, 24), _scale_bar(axis, y + 15)]
    for v in axis.ticks():
        anchor = "start" if v == 0 else "end" if v == axis.top else "middle"
        x = axis(v) + {"start": -5, "end": 5, "middle": 0}[anchor]
        out.append(f'<text x="{x:.1f}" y="{y + 32}" text-anchor="{anchor}">{v}</text>')
    out.append(f'<text x="{axis.right + 5:.1f}" y="{y + 47}" text-anchor="end">{html.escape(unit_word)}</text>')
    out.append(_marks(balance, axis, y, scale=1.35))
    out.append(_written(balance, axis, y, water_word, blood_word))
    return _svg(width, 114, label, "".join(out))


def day_line(
    times_s: Sequence[float] | FloatArray,
    values: Sequence[float] | FloatArray,
    *,
    from_s: float,
    to_s: float,
    label: str,
    band: tuple[float, float] | None = None,
    least_span: float = 2.0,
    width: int = 288,
    height: int = 46,
) -> str:
    """Return a day's line over the set-point band. NaN and long silences are gaps.

    Parameters
    ----------
    times_s, values : arrays of one shape
        Seconds and values, in order of time.
    from_s, to_s : float
        The time at the left and right edge. [s]
    band : (float, float), optional
        The set-point band, drawn as a wash.
    least_span : float
        The smallest height of the axis, so that noise never looks like a storm. [unit of the values]
    """
    t, v = np.asarray(times_s, dtype=np.float64), np.asarray(values, dtype=np.float64)
    low, high = _extent(v, band, least_span)

    def x(time: FloatArray | float) -> FloatArray:
        return np.asarray((np.asarray(time) - from_s) / (to_s - from_s) * (width - 4))

    def y(value: FloatArray | float) -> FloatArray:
        return np.asarray(3 + (height - 6) * (high - np.asarray(value)) / (high - low))

    parts = []
    if band is not None:
        parts.append(
            f'<rect x="0" y="{y(band[1]):.1f}" width="{width}" height="{float(y(band[0]) - y(band[1])):.1f}" fill="var(--wash)"/>'
        )
    for run in _runs(t, v, longest_silence_s=(to_s - from_s) / 24):
        parts.append(
            f'<path d="{_relative_path(x(t[run]), y(v[run]))}" fill="none" stroke="var(--water)" stroke-width="1.5"'
            ' stroke-linejoin="round" vector-effect="non-scaling-stroke"/>'
        )
    dot = ""
    finite = np.flatnonzero(np.isfinite(v))
    if len(finite):
        last = finite[-1]
        # The picture is stretched to its card; a short line with a round cap stays a round dot.
        dot = (
            f'<path d="M{float(x(t[last])):.1f} {float(y(v[last])):.1f}h.01" stroke="var(--water)" stroke-width="6"'
            ' stroke-linecap="round" vector-effect="non-scaling-stroke"/>'
        )
    return (
        f'<svg width="100%" height="{height}" viewBox="0 0 {width} {height}" preserveAspectRatio="none" role="img"'
        f' aria-label="{html.escape(label)}">{"".join(parts)}{dot}</svg>'
    )


def day_rule(now_part: float, marks: Sequence[tuple[float, str]] = (), *, label: str) -> str:
    """Return the rule under the masthead: the site's day as the graduated edge of a chart, an hour a field.

    Parameters
    ----------
    now_part : float
        How much of the day is over, 0 to 1; a diamond stands there.
    marks : sequence of (float, str)
        When an alarm was raised, as a part of the day, and its priority; a stroke rises there.
    """
    fields = "".join(
        f'<rect x="{1000 * h / 24:.2f}" y="9" width="{1000 / 24:.2f}" height="3.2" fill="var(--ink)"/>'
        for h in range(0, 24, 2)
    )
    strokes = "".join(
        f'<path d="M{1000 * min(max(part, 0.0), 1.0):.1f} 12.2V0" stroke="var(--{priority})" stroke-width="2"'
        ' vector-effect="non-scaling-stroke"/>'
        for part, priority in marks
    )
    picture = (
        f'<svg width="100%" height="14" viewBox="0 0 1000 14" preserveAspectRatio="none" role="img" aria-label="{html.escape(label)}">'
        f'<path d="M0 9H1000M0 12.2H1000" stroke="var(--ink)" stroke-width="1" vector-effect="non-scaling-stroke"/>{fields}{strokes}</svg>'
    )
    diamond = (
        f'<svg width="12" height="12" viewBox="0 0 12 12" style="position:absolute;left:calc({100 * now_part:.2f}% - 6px);top:4.5px"'
        ' aria-hidden="true"><path d="M6 0l6 6l-6 6l-6-6z" fill="var(--paper)" stroke="var(--water)" stroke-width="2"/></svg>'
    )
    hours = "".join(
        f'<span style="position:absolute;left:{100 * h / 24:.2f}%;transform:translateX({-100 * h / 24:.0f}%)">{h:02d}</span>'
        for h in (0, 6, 12, 18, 24)
    )
    return (
        f'<div class="dayrule" style="position:relative">{picture}{diamond}'
        f'<div class="quiet" aria-hidden="true" style="position:relative;height:16px;font-size:11px">{hours}</div></div>'
    )


def _svg(width: float, height: float, label: str, body: str) -> str:
    return f'<svg width="100%" viewBox="0 0 {width} {height}" role="img" aria-label="{html.escape(label)}">{body}</svg>'


def _at_left(value: int) -> str:
    return ' dx="-4"' if value == 0 else ""


def _scale_bar(axis: _Axis, y: float) -> str:
    """Return the axis as a scale bar: fields filled by turns between two hairlines."""
    ticks = list(range(0, axis.top + 1, AXIS_STEP_mOsm_kg))
    filled = "".join(
        f'<rect x="{axis(a):.1f}" y="{y}" width="{axis(b) - axis(a):.1f}" height="3" fill="var(--ink2)"/>'
        for a, b in list(pairwise(ticks))[::2]
    )
    outline = f'x="{axis.left}" y="{y}" width="{axis.right - axis.left}" height="3"'
    return f'{filled}<rect {outline} fill="none" stroke="var(--ink2)" stroke-width=".7"/>'


def _bands(balance: Balance, axis: _Axis, y: float, height: float) -> str:
    out = ""
    for band, colour in ((balance.tolerated, "tol"), (balance.optimal, "opt")):
        if band is None:
            continue
        low = axis(band[0]) if math.isfinite(band[0]) else axis.left
        high = axis(band[1]) if math.isfinite(band[1]) else axis.right
        out += (
            f'<rect x="{low:.1f}" y="{y}" width="{max(high - low, 0):.1f}" height="{height}" fill="var(--{colour})"/>'
        )
        ends = [axis(end) for end in band if math.isfinite(end) and end <= axis.top]
        if colour == "tol":
            out += "".join(
                f'<path d="M{end:.1f} {y}v{height}" stroke="var(--edge)" stroke-width=".8"/>' for end in ends
            )
    return out


def _marks(balance: Balance, axis: _Axis, y: float, *, scale: float = 1.0) -> str:
    out = ""
    if balance.water is not None and balance.blood is not None:
        out += _arrow(axis(balance.blood), axis(balance.water), y, scale, balance.direction)
    if balance.blood is not None:
        out += _drop(axis(balance.blood), y, scale)
    if balance.water is not None:
        out += _diamond(axis(balance.water), y, scale)
    return out


def _arrow(blood: float, water: float, y: float, scale: float, direction: str) -> str:
    """Return the arrow of moving water, from the weaker to the stronger side."""
    start, end = (blood, water) if direction == "out" else (water, blood)
    way = 1 if end > start else -1
    tip, tail = end - way * 8.5 * scale, start + way * 6.5 * scale
    if direction not in ("in", "out") or (tip - tail) * way < 5:
        return ""
    head = 4.6 * scale
    return (
        f'<path class="flow" d="M{tail:.1f} {y}H{tip - way * 2:.1f}" stroke="var(--water)" stroke-width="{2.2 * scale:.1f}"/>'
        f'<path d="M{tip - way * head * 1.25:.1f} {y - head:.1f}L{tip:.1f} {y}L{tip - way * head * 1.25:.1f} {y + head:.1f}"'
        f' fill="none" stroke="var(--water)" stroke-width="{2 * scale:.1f}"/>'
    )


BLOOD_DROP = "M0-8.4c3.2 4.2 5 6.6 5 9.2a5 5 0 0 1-10 0c0-2.6 1.8-5 5-9.2z"


def _drop(x: float, y: float, scale: float) -> str:
    return (
        f'<path class="blood" transform="translate({x:.1f} {y}) scale({scale})" d="{BLOOD_DROP}"'
        ' fill="var(--blood)" stroke="var(--sheet)" stroke-width="1"/>'
    )


def _diamond(x: float, y: float, scale: float) -> str:
    return (
        f'<path class="water" transform="translate({x:.1f} {y}) scale({scale})" d="M0-7l6 7l-6 7l-6-7z" fill="var(--sheet)"'
        ' stroke="var(--water)" stroke-width="2"/>'
    )


def _written(balance: Balance, axis: _Axis, y: float, water_word: str, blood_word: str) -> str:
    """Return both values at their marks; where they would touch, the drop's goes one line up."""
    out = ""
    near = (
        balance.water is not None and balance.blood is not None and abs(axis(balance.water) - axis(balance.blood)) < 120
    )
    for value, word, colour, lift in (
        (balance.water, water_word, "water", 20),
        (balance.blood, blood_word, "blood", 37 if near else 20),
    ):
        if value is None:
            continue
        x = axis(value)
        anchor = "start" if x < axis.left + 50 else "end" if x > axis.right - 50 else "middle"
        x += {"start": -7, "end": 7, "middle": 0}[anchor]
        out += (
            f'<text x="{x:.1f}" y="{y - lift:.1f}" text-anchor="{anchor}"'
            f' style="fill:var(--{colour});font-size:14px;font-weight:600">{html.escape(word)}</text>'
        )
    return out


def _extent(values: FloatArray, band: tuple[float, float] | None, least_span: float) -> tuple[float, float]:
    finite = values[np.isfinite(values)]
    ends = [*(float(f(finite)) for f in (np.min, np.max) if len(finite)), *(band or ())]
    if not ends:
        return 0.0, least_span
    low, high = min(ends), max(ends)
    spare = max((least_span - (high - low)) / 2, (high - low) * 0.12)
    return low - spare, high + spare


def _runs(times: FloatArray, values: FloatArray, *, longest_silence_s: float) -> list[slice]:
    """Return the unbroken stretches: no NaN inside, no silence longer than *longest_silence_s*."""
    runs: list[slice] = []
    start: int | None = None
    for i, is_known in enumerate(np.isfinite(values)):
        if start is not None and (not is_known or times[i] - times[i - 1] > longest_silence_s):
            runs.append(slice(start, i))
            start = None
        if is_known and start is None:
            start = i
    if start is not None:
        runs.append(slice(start, len(values)))
    return runs


def _relative_path(x: FloatArray, y: FloatArray) -> str:
    """Return an SVG path in whole tenths, relative, as short as it can be: 200 of them travel every two seconds."""
    xs, ys = np.round(np.asarray(x) * 10).astype(int), np.round(np.asarray(y) * 10).astype(int)
    steps = zip(np.diff(xs), np.diff(ys), strict=True)
    return (
        f"M{xs[0] / 10:g} {ys[0] / 10:g}l" + " ".join(f"{dx / 10:g} {dy / 10:g}" for dx, dy in steps)
        if len(xs) > 1
        else f"M{xs[0] / 10:g} {ys[0] / 10:g}h.01"
    )
