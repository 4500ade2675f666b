"""A tank's history as a chart: which stretch of time, which panels, what stands on them."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from dashboard.browser.charts import AlarmMark, Chart, Limit, Line, Panel
from dashboard.browser.trend import STANDING
from ingest.words import numbers
from ingest.words.alarms import priority_letter, priority_word, stress_band

if TYPE_CHECKING:
    from collections.abc import Sequence

    from analysis.arrays import FloatArray, IntArray
    from dashboard.browser.sights import SensorSight, Snapshot, SpeciesLimit, TankSight
    from dashboard.browser.trend import Trend
    from dashboard.browser.visit import Visit
    from ingest.store.ledger import Event
    from ingest.store.queries import History, StressHistory

HOUR_S = 3600.0
DAY_S = 24 * HOUR_S
SPANS_S: dict[str, float] = {
    "hour": HOUR_S,
    "six_hours": 6 * HOUR_S,
    "day": DAY_S,
    "week": 7 * DAY_S,
    "month": 30 * DAY_S,
    "year": 365 * DAY_S,
}
DEFAULT_SPAN = "day"
STEPS_IN_SPAN = 800
"""A chart moves on by a pixel or so at a time; between two moves it is not asked for again."""
SHORTEST_SPAN_S = 60.0
LEAST_SPANS = {"salinity": 1.0, "temperature": 1.0, "osmolality": 40.0}
SILENT_INTERVALS = 3.0
SHORTEST_PROJECTION, LONGEST_PROJECTION = 0.02, 0.2
"""Parts of the stretch."""
FARTHEST_S = 3 * HOUR_S
"""No straight line is drawn further ahead: water seldom keeps its way for longer."""


@dataclass(frozen=True, slots=True)
class Stretch:
    """From when to when a chart goes. `name` is empty for a stretch chosen by hand, which does not move on."""

    from_s: float
    to_s: float
    name: str = ""

    @property
    def is_live(self) -> bool:
        """Return whether it ends now."""
        return bool(self.name)


def stretch_of(query: Mapping[str, str], *, now_s: float) -> Stretch:
    """Return the stretch that an address asks for: a named span up to now, or `from` and `to` in seconds."""
    try:
        from_s, to_s = float(query["from"]), float(query["to"])
    except (KeyError, ValueError):
        pass
    else:
        if math.isfinite(from_s) and math.isfinite(to_s) and SHORTEST_SPAN_S <= to_s - from_s <= 20 * 366 * DAY_S:
            return Stretch(from_s, to_s)
    name = query.get("span", DEFAULT_SPAN)
    name = name if name in SPANS_S else DEFAULT_SPAN
    span = SPANS_S[name]
    step = max(2.0, span / STEPS_IN_SPAN)
    to_s = math.ceil(now_s / step) * step
    return Stretch(to_s - span, to_s, name)


def moved(stretch: Stretch, share: float, *, now_s: float) -> tuple[float, float]:
    """Return (from, to) moved by *share* of the stretch, never beyond now."""
    length = stretch.to_s - stretch.from_s
    to_s = min(stretch.to_s + share * length, now_s)
    return to_s - length, to_s


def tank_chart(
    tank: TankSight,
    snapshot: Snapshot,
    visit: Visit,
    *,
    stretch: Stretch,
    histories: Sequence[tuple[SensorSight, History]],
    stress: StressHistory | None,
    events: Sequence[Event],
    trend: Trend = STANDING,
) -> Chart:
    """Return the chart of a tank; the first of *histories* is the probe that stands for the tank, the others are finer lines.

    Where the water moves the axis reaches beyond now, and *trend* is drawn dashed up to its next limit.
    """
    main = histories[0][1] if histories else None
    ahead = projection(tank, stretch, trend)
    panels = []
    if main is not None:
        panels = [
            replace(_salinity(tank, snapshot, visit, histories, stretch), projection=ahead),
            _temperature(tank, visit, histories, stretch),
            _osmolality(tank, visit, histories, stress),
        ]
    if stress is not None and np.isfinite(stress.stress).any():
        panels.append(_stress(tank, visit, stress))
    return Chart(
        from_s=stretch.from_s,
        to_s=stretch.to_s if ahead is None else max(stretch.to_s, float(ahead[0][-1])),
        panels=tuple(panels),
        alarms=_marks(tank, visit, events),
        zone=snapshot.zone,
        language=visit.language,
        label=visit.language.text("chart_of", tank=tank.name),
        now_s=snapshot.now_us / 1e6,
        id=f"chart-{tank.id}",
    )


def projection(tank: TankSight, stretch: Stretch, trend: Trend) -> tuple[FloatArray, FloatArray] | None:
    """Return (times_s, values) of the straight way on, up to the next limit; None where there is none or it is too short to be seen."""
    shown = tank.shown
    if not stretch.is_live or shown is None or shown.measured_at_us is None or not math.isfinite(trend.per_h):
        return None
    span = stretch.to_s - stretch.from_s
    reach_s = trend.likely_min * 60 if math.isfinite(trend.likely_min) else LONGEST_PROJECTION * span
    reach_s = min(reach_s, LONGEST_PROJECTION * span, FARTHEST_S)
    if reach_s < SHORTEST_PROJECTION * span or not math.isfinite(shown.salinity):
        return None
    begin = shown.measured_at_us / 1e6
    values = [shown.salinity, shown.salinity + trend.per_h * reach_s / HOUR_S]
    return np.array([begin, begin + reach_s]), np.array(values)


def _line(sensor: SensorSight, history: History, mean: FloatArray, low: FloatArray, high: FloatArray) -> Line:
    is_rolled = history.resolution_us > 0
    silence_s = history.resolution_us / 1e6 * 1.5 if is_rolled else max(SILENT_INTERVALS * sensor.interval_s, 60.0)
    # A bucket's time is its start; its mean stands in its middle.
    times_s = (history.time_us + history.resolution_us // 2) / 1e6
    return Line(times_s, mean, silence_s, low if is_rolled else None, high if is_rolled else None)


def _believed(values: FloatArray, quality: IntArray) -> FloatArray:
    """Return the values without those that failed on physical grounds: they are a gap, not a picture of the water."""
    return np.where(quality >= 4, np.nan, values)


def _others(histories: Sequence[tuple[SensorSight, History]], values: str) -> tuple[tuple[Line, str, str], ...]:
    out = []
    for sensor, history in histories[1:]:
        believed = _believed(getattr(history, values), history.quality)
        out.append((_line(sensor, history, believed, believed, believed), "water2", sensor.name))
    return tuple(out)


def _salinity(
    tank: TankSight,
    snapshot: Snapshot,
    visit: Visit,
    histories: Sequence[tuple[SensorSight, History]],
    stretch: Stretch,
) -> Panel:
    sensor, history = histories[0]
    language = visit.language
    band = tank.salinity
    limits = () if tank.animals is None else tank.animals.limits
    shown = tank.shown
    text = ""
    if not math.isnan(band.target):
        text = language.text("set_point", point=numbers.set_point(band.target, band.half_width, language=language))
    elif band.limits is not None:
        low, high = (numbers.plain(v, language=language) for v in band.limits)
        text = language.text("tidal_band", low=low, high=high)
    name = language.text("salinity") if snapshot.salinity_label == "salinity" and not tank.salinity_unit else ""
    return Panel(
        name=(name or language.text("salinity")).capitalize(),
        unit=tank.salinity_unit or ("" if snapshot.salinity_label == "salinity" else snapshot.salinity_label),
        kind="salinity",
        line=_line(
            sensor, history, _believed(history.salinity, history.quality), history.salinity_min, history.salinity_max
        ),
        others=_others(histories, "salinity"),
        height=210,
        least_span=LEAST_SPANS["salinity"],
        band=band.limits,
        band_text=text,
        limits=tuple(_limit(x, visit) for x in limits),
        last_text=_last(math.nan if shown is None else shown.salinity, 1, visit, stretch),
    )


def _limit(limit: SpeciesLimit, visit: Visit) -> Limit:
    language = visit.language
    key = "tolerated_from" if limit.is_lower else "tolerated_to"
    value = numbers.number(limit.value, 1, language=language).removesuffix(f"{language.DECIMAL_MARK}0")
    return Limit(
        limit.value,
        language.text(key, value=value, mark=limit.mark),
        language.text(f"{key}_short", value=value),
        is_lower=limit.is_lower,
    )


def _temperature(
    tank: TankSight, visit: Visit, histories: Sequence[tuple[SensorSight, History]], stretch: Stretch
) -> Panel:
    sensor, history = histories[0]
    shown = tank.shown
    band = tank.temperature
    return Panel(
        name=visit.language.text("temperature").capitalize(),
        unit="°C",
        kind="temperature",
        colour="ink2",
        line=_line(sensor, history, history.temperature_degC, history.temperature_min, history.temperature_max),
        others=_others(histories, "temperature_degC"),
        height=96,
        least_span=LEAST_SPANS["temperature"],
        band=band.limits,
        last_text=_last(math.nan if shown is None else shown.temperature_degC, 1, visit, stretch),
    )


def _osmolality(
    tank: TankSight, visit: Visit, histories: Sequence[tuple[SensorSight, History]], stress: StressHistory | None
) -> Panel:
    sensor, history = histories[0]
    values = _believed(history.osmolality_mOsm_kg, history.quality)
    line = _line(sensor, history, values, values, values)
    others: tuple[tuple[Line, str, str], ...] = ()
    note = ""
    if stress is not None and np.isfinite(stress.internal_mOsm_kg).any():
        blood = Line(stress.time_us / 1e6, stress.internal_mOsm_kg, max(900.0, line.longest_silence_s))
        others = ((blood, "blood", visit.language.text("blood")),)
        last = stress.internal_mOsm_kg[np.isfinite(stress.internal_mOsm_kg)][-1]
        note = visit.language.text("blood_value", value=numbers.number(last, 0, language=visit.language))
    return Panel(
        name=visit.language.text("osmolality").capitalize(),
        unit="mOsm/kg",
        kind="osmolality",
        line=Line(line.times_s, line.values, line.longest_silence_s),
        others=others,
        height=112,
        least_span=LEAST_SPANS["osmolality"],
        last_text=_last(math.nan if tank.shown is None else tank.shown.osmolality_mOsm_kg, 0, visit, None),
        last_note=note,
    )


def _stress(tank: TankSight, visit: Visit, stress: StressHistory) -> Panel:
    now = math.nan if tank.stress is None else tank.stress.stress
    return Panel(
        name=visit.language.text("stress").capitalize(),
        kind="stress",
        colour="blood",
        line=Line(stress.time_us / 1e6, stress.stress, 1800.0),
        height=84,
        fixed=(0.0, 100.0),
        last_text=_last(now, 0, visit, None),
        last_note=stress_band(now, language=visit.language),
    )


def _last(value: float, decimals: int, visit: Visit, stretch: Stretch | None) -> str:
    """Return the last value for the margin; a stretch of the past has none."""
    if not math.isfinite(value) or (stretch is not None and not stretch.is_live):
        return ""
    return numbers.number(value, decimals, language=visit.language)


def _marks(tank: TankSight, visit: Visit, events: Sequence[Event]) -> tuple[AlarmMark, ...]:
    raised: dict[tuple[int, str], str] = {}
    for event in events:
        if event.kind == "alarm.raised":
            at = event.measured_at or event.recorded_at
            raised[at // 1_000_000, str(event.body.get("condition", ""))] = str(event.body.get("priority", "note"))
    for alarm in tank.alarms:
        if alarm.raised_at_us:
            raised[alarm.raised_at_us // 1_000_000, alarm.condition] = alarm.priority
    language = visit.language
    return tuple(
        AlarmMark(
            float(at_s),
            priority,
            priority_letter(priority, language=language),
            priority_word(priority, language=language),
        )
        for (at_s, _), priority in sorted(raised.items())
        if priority in language.PRIORITIES
    )
