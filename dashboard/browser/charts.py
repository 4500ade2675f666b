"""A chart of several panels that share one time axis, as SVG text. Pure functions; colours are CSS variables."""

from __future__ import annotations

import html
import math
from collections.abc import Sequence
from dataclasses import dataclass, field
from datetime import UTC, tzinfo

import numpy as np

from analysis.arrays import FloatArray
from dashboard.browser.axes import tick_decimals, time_ticks, value_ticks
from dashboard.browser.downsample import extremes_kept, stretches
from dashboard.browser.glyphs import pennant
from ingest.words import numbers
from ingest.words.language import ENGLISH, Language

LEFT = 46
RIGHT_WIDE = 118
RIGHT_NARROW = 62
NARROW = 560
HEAD = 26
"""Room above each panel for its name. [px]"""
FOOT = 26
LIMIT_REACH = 0.6
"""How far beyond what was measured an axis reaches for a limit or a projection, as a part of its height."""
PENNANTS = 18.0
"""Room for the pennants above the first panel. [px]"""


@dataclass(frozen=True, slots=True)
class Line:
    """One quantity over time.

    Attributes
    ----------
    times_s, values : ndarray
        One shape, ascending time; NaN where not known.
    low, high : ndarray, optional
        Extremes where a point stands for many readings: drawn as a wash around the line.
    longest_silence_s : float
        A longer silence shows as a gap.
    """

    times_s: FloatArray
    values: FloatArray
    longest_silence_s: float
    low: FloatArray | None = None
    high: FloatArray | None = None


@dataclass(frozen=True, slots=True)
class Limit:
    """A limit of the species, dotted, with its source written on it; `short` where there is no room for the source."""

    value: float
    text: str
    short: str = ""
    is_lower: bool = True


@dataclass(frozen=True, slots=True)
class Panel:
    """One quantity of a chart.

    Attributes
    ----------
    kind : str
        Quantity, for units and digits; a key of `ingest.words.numbers.USUAL_DECIMALS`.
    height : int
        Height of the drawing itself. [px]
    band, band_text : (float, float), str
        The set-point band, as a wash, and what is written in it.
    others : sequence of (Line, colour, name)
        Finer lines on the same axis: further probes, the animals' body fluid.
    projection : (times_s, values), optional
        Where it is heading, dashed.
    last_text, last_note : str
        The last value at the right margin, and a word under it.
    fixed : (float, float), optional
        A fixed axis instead of one that fits the values.
    """

    name: str
    kind: str
    line: Line
    colour: str = "water"
    height: int = 120
    least_span: float = 2.0
    band: tuple[float, float] | None = None
    band_text: str = ""
    limits: tuple[Limit, ...] = ()
    others: tuple[tuple[Line, str, str], ...] = ()
    projection: tuple[FloatArray, FloatArray] | None = None
    last_text: str = ""
    last_note: str = ""
    fixed: tuple[float, float] | None = None
    unit: str = ""


@dataclass(frozen=True, slots=True)
class AlarmMark:
    """An alarm on the time axis."""

    at_s: float
    priority: str
    letter: str
    word: str
    until_s: float | None = None


@dataclass(frozen=True, slots=True)
class Chart:
    """Panels over one stretch of time."""

    from_s: float
    to_s: float
    panels: tuple[Panel, ...]
    alarms: tuple[AlarmMark, ...] = ()
    zone: tzinfo = UTC
    language: Language = field(default=ENGLISH)
    label: str = ""
    now_s: float | None = None
    id: str = "chart"


@dataclass(frozen=True, slots=True)
class _Frame:
    chart: Chart
    width: int

    @property
    def right(self) -> float:
        return self.width - (RIGHT_NARROW if self.width < NARROW else RIGHT_WIDE)

    def x(self, time_s: FloatArray | float) -> FloatArray:
        part = (np.asarray(time_s, dtype=np.float64) - self.chart.from_s) / (self.chart.to_s - self.chart.from_s)
        return np.asarray(LEFT + (self.right - LEFT) * part)


@dataclass(frozen=True, slots=True)
class _Scale:
    top: float
    height: float
    low: float
    high: float

    def y(self, value: FloatArray | float) -> FloatArray:
        part = (self.high - np.asarray(value, dtype=np.float64)) / (self.high - self.low)
        return np.asarray(self.top + self.height * part)

    @property
    def bottom(self) -> float:
        return self.top + self.height


def multi_panel_chart(chart: Chart, *, width: int = 960) -> str:
    """Return the chart as one SVG, drawn for a width in pixels so that text keeps its size.

    Each panel carries its axis as data attributes (`data-low`, `data-high`, `data-top`, `data-bottom`), so that a pointer
    can read the values off the drawn lines.
    """
    frame = _Frame(chart, width)
    top, bodies, scales = (PENNANTS if chart.alarms else 2.0), [], []
    for panel in chart.panels:
        scale = _Scale(top + HEAD, panel.height, *_range(panel))
        scales.append(scale)
        bodies.append(_panel(frame, panel, scale))
        top = scale.bottom + 14
    height = top + FOOT - 8
    if not scales:
        return ""
    ground = _time_rules(frame, scales)
    alarms = _alarms(frame, scales[-1].bottom)
    words = _time_words(frame, scales[-1].bottom)
    return (
        f'<svg class="plot" width="100%" viewBox="0 0 {width} {height:.0f}" role="img" aria-label="{html.escape(chart.label)}"'
        f' data-from="{chart.from_s:.3f}" data-to="{chart.to_s:.3f}" data-left="{LEFT}" data-right="{frame.right:.0f}"'
        f' data-top="{scales[0].top:.0f}" data-bottom="{scales[-1].bottom:.0f}">'
        f"{ground}{''.join(bodies)}{alarms}{words}</svg>"
    )


def _range(panel: Panel) -> tuple[float, float]:
    """Return the ends of a panel's axis: what was measured and its band; a limit only when it is not far away."""
    if panel.fixed is not None:
        return panel.fixed
    line = panel.line
    pieces = [p[np.isfinite(p)] for p in (line.values, line.low, line.high) if p is not None]
    pieces += [other.values[np.isfinite(other.values)] for other, _, _ in panel.others]
    known = [float(e) for piece in pieces if len(piece) for e in (piece.min(), piece.max())]
    known += list(panel.band or ())
    if not known:
        return 0.0, panel.least_span
    low, high = min(known), max(known)
    reach = LIMIT_REACH * max(high - low, panel.least_span)
    floor, ceiling = low - reach, high + reach
    ahead = [] if panel.projection is None else [float(v) for v in panel.projection[1] if math.isfinite(v)]
    for value in (*ahead, *(limit.value for limit in panel.limits)):
        if floor <= value <= ceiling or value in ahead:
            low, high = min(low, max(value, floor)), max(high, min(value, ceiling))
    spare = max((panel.least_span - (high - low)) / 2, (high - low) * 0.07)
    return low - spare, high + spare


def _panel(frame: _Frame, panel: Panel, scale: _Scale) -> str:
    inner = (
        _band(frame, panel, scale)
        + _rules(frame, scale)
        + _limits(frame, panel, scale)
        + _curve(frame, panel, scale)
        + _projection(frame, panel, scale)
    )
    clip = f"{frame.chart.id}-{round(scale.top)}"
    name = html.escape(panel.name)
    unit = f' <tspan style="font-weight:400;fill:var(--ink2)">{html.escape(panel.unit)}</tspan>' if panel.unit else ""
    return (
        f'<g class="panel-plot" data-name="{name}" data-unit="{html.escape(panel.unit)}"'
        f' data-decimals="{numbers.USUAL_DECIMALS[panel.kind]}" data-low="{scale.low:.6g}" data-high="{scale.high:.6g}"'
        f' data-top="{scale.top:.1f}" data-bottom="{scale.bottom:.1f}">'
        f'<clipPath id="{clip}"><rect x="{LEFT}" y="{scale.top - 1:.1f}" width="{frame.width - LEFT}"'
        f' height="{panel.height + 2}"/></clipPath>'
        f'<text x="{LEFT}" y="{scale.top - 8:.1f}" style="fill:var(--ink);font:600 14px var(--serif)">{name}{unit}</text>'
        f'<g clip-path="url(#{clip})">{inner}</g>{_axis_words(scale, frame.chart.language)}{_last(frame, panel, scale)}</g>'
    )


def _band(frame: _Frame, panel: Panel, scale: _Scale) -> str:
    if panel.band is None:
        return ""
    top, bottom = float(scale.y(panel.band[1])), float(scale.y(panel.band[0]))
    words = ""
    if panel.band_text and bottom - top > 20:
        words = (
            f'<text x="{LEFT + 7}" y="{top + 14:.1f}" style="fill:var(--water)">{html.escape(panel.band_text)}</text>'
        )
    return f'<rect x="{LEFT}" y="{top:.1f}" width="{frame.right - LEFT:.1f}" height="{bottom - top:.1f}" fill="var(--wash)"/>{words}'


def _rules(frame: _Frame, scale: _Scale) -> str:
    return "".join(
        f'<path d="M{LEFT} {float(scale.y(v)):.1f}H{frame.right:.1f}" stroke="var(--rule2)" stroke-width="1"/>'
        for v in _ticks(scale)
    )


def _ticks(scale: _Scale) -> list[float]:
    return value_ticks(scale.low, scale.high, most=max(2, round(scale.height / 34)))


def _axis_words(scale: _Scale, language: Language) -> str:
    ticks = _ticks(scale)
    decimals = tick_decimals(ticks)
    return "".join(
        f'<text x="{LEFT - 8}" y="{float(scale.y(v)) + 4:.1f}" text-anchor="end">{numbers.number(v, decimals, language=language)}</text>'
        for v in ticks
    )


def _limits(frame: _Frame, panel: Panel, scale: _Scale) -> str:
    out = ""
    for limit in panel.limits:
        if not scale.low <= limit.value <= scale.high:
            out += _far_limit(frame, limit, scale)
            continue
        y = float(scale.y(limit.value))
        out += (
            f'<path d="M{LEFT} {y:.1f}H{frame.right:.1f}" stroke="var(--blood)" stroke-width="1.3"'
            ' stroke-dasharray="1.5 4" stroke-linecap="round"/>'
            f'<text x="{frame.right - 7:.1f}" y="{y + (13 if limit.is_lower else -5):.1f}" text-anchor="end" style="fill:var(--blood)">'
            f"{_limit_words(frame, limit)}</text>"
        )
    return out


def _limit_words(frame: _Frame, limit: Limit) -> str:
    return html.escape(limit.short if frame.width < NARROW and limit.short else limit.text)


def _far_limit(frame: _Frame, limit: Limit, scale: _Scale) -> str:
    """Return a word on a limit that lies beyond the axis, at the edge behind which it lies."""
    is_above = limit.value > scale.high
    y = scale.top + 13 if is_above else scale.bottom - 7
    arrow = "↑" if is_above else "↓"
    place = f'x="{frame.right - 7:.1f}" y="{y:.1f}" text-anchor="end"'
    return f'<text {place} style="fill:var(--blood)">{arrow} {_limit_words(frame, limit)}</text>'


def _curve(frame: _Frame, panel: Panel, scale: _Scale) -> str:
    out = _envelope(frame, panel.line, scale, panel.colour)
    for line, colour, name in panel.others:
        out += _strokes(
            frame,
            line,
            scale,
            f'class="other" data-name="{html.escape(name)}" stroke="var(--{colour})" stroke-width="1.1"',
        )
    return out + _strokes(frame, panel.line, scale, f'class="line" stroke="var(--{panel.colour})" stroke-width="1.6"')


def _strokes(frame: _Frame, line: Line, scale: _Scale, style: str) -> str:
    """Return the line, thinned to the pixels there are and broken at its gaps."""
    kept = extremes_kept(line.times_s, line.values, columns=max(int(frame.right - LEFT) // 2, 1))
    # Gaps are judged on all points: thinning out must not open new ones.
    known = np.flatnonzero(np.isfinite(line.values))
    stretch_of = np.zeros(len(line.values), dtype=np.int64)
    for number, part in enumerate(stretches(line.times_s[known], longest_silence=line.longest_silence_s)):
        stretch_of[known[part]] = number
    out = ""
    for number in np.unique(stretch_of[kept]):
        run = kept[stretch_of[kept] == number]
        if len(run) == 1:
            run = np.repeat(run, 2)  # a lone value is a dot, drawn by the round ends of a line without length
        points = _points(frame.x(line.times_s[run]), scale.y(line.values[run]))
        out += f'<polyline {style} points="{points}" fill="none" stroke-linejoin="round" stroke-linecap="round"/>'
    return out


def _envelope(frame: _Frame, line: Line, scale: _Scale, colour: str) -> str:
    """Return the wash between the extremes, on a grid of its own so that neither edge loses a peak."""
    if line.low is None or line.high is None:
        return ""
    columns = max(int(frame.right - LEFT) // 2, 1)
    known = np.flatnonzero(np.isfinite(line.low) & np.isfinite(line.high))
    out = ""
    for part in stretches(line.times_s[known], longest_silence=line.longest_silence_s):
        run = known[part]
        top = run[extremes_kept(line.times_s[run], line.high[run], columns=columns)]
        bottom = run[extremes_kept(line.times_s[run], line.low[run], columns=columns)][::-1]
        up = _points(frame.x(line.times_s[top]), scale.y(line.high[top]))
        down = _points(frame.x(line.times_s[bottom]), scale.y(line.low[bottom]))
        # A stroke as fine as a hair keeps a single high point visible where the wash alone is thinner than a pixel.
        out += (
            f'<polygon class="envelope" points="{up} {down}" fill="var(--{colour})" fill-opacity=".2" stroke="var(--{colour})"'
            ' stroke-opacity=".45" stroke-width=".8" stroke-linejoin="round"/>'
        )
    return out


def _projection(frame: _Frame, panel: Panel, scale: _Scale) -> str:
    if panel.projection is None:
        return ""
    times, values = panel.projection
    return (
        f'<polyline class="projection" points="{_points(frame.x(times), scale.y(values))}" fill="none"'
        f' stroke="var(--{panel.colour})" stroke-width="1.4" stroke-dasharray="4 4"/>'
    )


def _last(frame: _Frame, panel: Panel, scale: _Scale) -> str:
    if not panel.last_text:
        return ""
    known = panel.line.values[np.isfinite(panel.line.values)]
    y = float(scale.y(known[-1])) if len(known) else scale.top + scale.height / 2
    y = min(max(y, scale.top + 8), scale.bottom - (20 if panel.last_note else 4))
    x = frame.right + (9 if frame.width >= NARROW else 6)
    note = f'<text x="{x:.1f}" y="{y + 19:.1f}">{html.escape(panel.last_note)}</text>' if panel.last_note else ""
    style = "fill:var(--ink);font:600 15px var(--serif)"
    return f'<text x="{x:.1f}" y="{y + 5:.1f}" style="{style}">{html.escape(panel.last_text)}</text>{note}'


def _time_rules(frame: _Frame, scales: Sequence[_Scale]) -> str:
    out = ""
    for time_s, _, is_day in _time_ticks(frame):
        if not is_day:
            continue
        x = float(frame.x(time_s))
        out += "".join(
            f'<path d="M{x:.1f} {s.top:.1f}V{s.bottom:.1f}" stroke="var(--rule)" stroke-width="1"/>' for s in scales
        )
    out += "".join(
        f'<path d="M{LEFT} {s.bottom:.1f}H{frame.right:.1f}" stroke="var(--rule)" stroke-width="1"/>' for s in scales
    )
    return out


def _time_ticks(frame: _Frame) -> list[tuple[float, str, bool]]:
    most = max(3, int((frame.right - LEFT) // (84 if frame.width >= NARROW else 62)))
    chart = frame.chart
    return time_ticks(chart.from_s, chart.to_s, chart.zone, most=most, language=chart.language)


def _time_words(frame: _Frame, bottom: float) -> str:
    out = f'<path d="M{LEFT} {bottom:.1f}H{frame.right:.1f}" stroke="var(--ink2)" stroke-width="1"/>' + _now(
        frame, bottom
    )
    for time_s, text, is_day in _time_ticks(frame):
        x = float(frame.x(time_s))
        weight = ' style="font-weight:600;fill:var(--ink)"' if is_day else ""
        anchor = "start" if x < LEFT + 14 else "end" if x > frame.right - 8 else "middle"
        out += (
            f'<path d="M{x:.1f} {bottom:.1f}v5" stroke="var(--ink2)"/>'
            f'<text x="{x:.1f}" y="{bottom + 19:.1f}" text-anchor="{anchor}"{weight}>{html.escape(text)}</text>'
        )
    return out


def _now(frame: _Frame, bottom: float) -> str:
    """Return the mark of the present, where the chart reaches beyond it."""
    now = frame.chart.now_s
    if now is None or not frame.chart.from_s < now < frame.chart.to_s:
        return ""
    x = float(frame.x(now))
    return f'<path d="M{x:.1f} {bottom - 7:.1f}l5 7h-10z" fill="var(--water)"/>'


def _alarms(frame: _Frame, bottom: float) -> str:
    out = ""
    for mark in frame.chart.alarms:
        if not frame.chart.from_s <= mark.at_s <= frame.chart.to_s:
            continue
        x = float(frame.x(mark.at_s))
        out += (
            f'<path d="M{x:.1f} 8V{bottom:.1f}" stroke="var(--{mark.priority})" stroke-width="1"/>'
            f'<g transform="translate({x - 0.8:.1f},0)">{pennant(mark.priority, letter=mark.letter, word=mark.word, size=14)}</g>'
        )
    return out


def _points(x: FloatArray, y: FloatArray) -> str:
    return " ".join(f"{a:.1f},{b:.1f}" for a, b in zip(x.tolist(), y.tolist(), strict=True))
