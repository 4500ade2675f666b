"""A tank on the first page: a card while there is room, a tile when there are many."""

from __future__ import annotations

import math
from functools import lru_cache
from html import escape

from dashboard.browser import glyphs
from dashboard.browser.sights import Band, DayLine, Snapshot, TankSight
from dashboard.browser.views.say import say, say_doubted, say_outside, say_unwatched
from dashboard.browser.visit import Visit, age, link
from ingest.words import numbers
from ingest.words.alarms import stress_band

DAY_S = 86_400.0
EDGE_STEP_S = 300.0


def card(tank: TankSight, snapshot: Snapshot, visit: Visit) -> str:
    """Return a tank as a card: salinity large, its set point, the day's line, the osmotic balance, what to do."""
    return (
        f'<article class="card {_mood(tank)}" data-k="{escape(tank.id)}">{_top(tank, snapshot, visit)}{_reading(tank, snapshot, visit)}'
        f"{_day(tank, snapshot, visit)}{_balance(tank, visit)}{_say(tank, snapshot, visit)}</article>"
    )


def tile(tank: TankSight, snapshot: Snapshot, visit: Visit) -> str:
    """Return a tank as a tile: name, salinity, temperature, the day's line and a fine balance. The whole tile is the link."""
    shown = tank.shown
    temperature = (
        "" if shown is None else numbers.quantity(shown.temperature_degC, "temperature", language=visit.language)
    )
    inside = (
        f'<span class="top"><span class="name">{escape(tank.name)}</span>{_age(tank, snapshot, visit)}</span>'
        f'<span class="line"><span class="big{_doubt(tank, snapshot)}">{salinity_text(tank, visit)}</span>'
        f'<span class="small">{escape(_set_words(tank, visit))}<br>{escape(temperature)}</span></span>'
        f"{_day(tank, snapshot, visit, height=24)}{_balance(tank, visit, is_line=True)}"
    )
    return (
        f'<div data-k="{escape(tank.id)}">{link("tank", inside, tank=tank.id, classes=f"tile {tank.priority}")}</div>'
    )


def salinity_text(tank: TankSight, visit: Visit) -> str:
    """Return the tank's salinity as a number, a dash where it is not known."""
    value = math.nan if tank.shown is None else tank.shown.salinity
    return escape(numbers.number(value, 1, language=visit.language))


def unit_text(tank: TankSight, snapshot: Snapshot, visit: Visit) -> str:
    """Return what the number is: salinity, ppt by the site's wish, or salt in g/kg."""
    if tank.salinity_unit:
        return escape(tank.salinity_unit)
    return visit.text("salinity") if snapshot.salinity_label == "salinity" else escape(snapshot.salinity_label)


def _mood(tank: TankSight) -> str:
    return "urgent" if tank.is_unwatched and not tank.priority else tank.priority


def _doubt(tank: TankSight, snapshot: Snapshot) -> str:
    is_trusted = tank.shown is not None and tank.shown.is_believable and tank.shown.is_fresh(snapshot.now_us)
    return "" if is_trusted else " doubt"


def _age(tank: TankSight, snapshot: Snapshot, visit: Visit) -> str:
    shown = tank.shown
    return age(
        None if shown is None else shown.measured_at_us,
        now_us=snapshot.now_us,
        stale_after_s=None if shown is None else shown.stale_after_s,
        language=visit.language,
    )


def _top(tank: TankSight, snapshot: Snapshot, visit: Visit) -> str:
    who = escape(animals_text(tank, visit))
    name = link("tank", f'<span class="name">{escape(tank.name)}</span>', tank=tank.id)
    return f'<div class="top">{name}<span class="who" title="{who}">{who}</span>{_age(tank, snapshot, visit)}</div>'


def animals_text(tank: TankSight, visit: Visit) -> str:
    """Return who lives in the tank."""
    if tank.animals is None:
        return visit.language.text("no_animals")
    further = f" {visit.language.text('and_more', n=tank.animals.further)}" if tank.animals.further else ""
    return tank.animals.name + further


def _set_words(tank: TankSight, visit: Visit) -> str:
    band = tank.salinity
    if band.is_tidal:
        low, high = (numbers.plain(v, language=visit.language) for v in (band.low, band.high))
        return visit.language.text("tidal_band", low=low, high=high)
    if math.isnan(band.target):
        return visit.language.text("no_set_point")
    return visit.language.text("set", point=numbers.set_point(band.target, band.half_width, language=visit.language))


def _reading(tank: TankSight, snapshot: Snapshot, visit: Visit) -> str:
    shown = tank.shown
    language = visit.language
    rows = []
    temperature, osmolality = (
        (math.nan, math.nan) if shown is None else (shown.temperature_degC, shown.osmolality_mOsm_kg)
    )
    rows.append(("temperature", f"{escape(numbers.number(temperature, 1, language=language))} <i>°C</i>"))
    rows.append(("osmolality", f"{escape(numbers.number(osmolality, 0, language=language))} <i>mOsm/kg</i>"))
    if tank.stress is not None:
        word = escape(stress_band(tank.stress.stress, language=language))
        rows.append(("stress", f"{escape(numbers.number(tank.stress.stress, 0, language=language))} <i>{word}</i>"))
    elif tank.animals is not None:
        rows.append(("stress", f"<i>{visit.text('stress_unknown')}</i>"))
    listed = "".join(f"<dt>{visit.text(key)}</dt><dd>{value}</dd>" for key, value in rows)
    return (
        f'<div class="reading"><span class="big{_doubt(tank, snapshot)}">{salinity_text(tank, visit)}</span>'
        f'<span class="set">{unit_text(tank, snapshot, visit)}<br>{escape(_set_words(tank, visit))}</span><dl>{listed}</dl></div>'
    )


def _day(tank: TankSight, snapshot: Snapshot, visit: Visit, *, height: int = 46) -> str:
    # The right edge moves in steps of five minutes, so that a picture that stands still is neither drawn nor sent again.
    to_s = (snapshot.now_us / 1e6 // EDGE_STEP_S + 1) * EDGE_STEP_S
    label = visit.language.text("day_line", tank=tank.name)
    return _drawn_day(tank.day, tank.salinity, to_s, label, height)


@lru_cache(maxsize=1024)
def _drawn_day(day: DayLine, band: Band, to_s: float, label: str, height: int) -> str:
    half = band.half_width
    return glyphs.day_line(
        day.times_s,
        day.values,
        from_s=to_s - DAY_S,
        to_s=to_s,
        label=label,
        band=band.limits,
        least_span=2.0 if math.isnan(half) else max(0.5, 2.2 * half),
        height=height,
    )


def _balance(tank: TankSight, visit: Visit, *, is_line: bool = False) -> str:
    label = balance_words(tank, visit)
    if is_line:
        return glyphs.osmotic_balance_line(tank.balance, label=label)
    return (
        f'<div style="margin-top:9px" title="{escape(label)}">{glyphs.osmotic_balance(tank.balance, label=label)}</div>'
    )


def balance_words(tank: TankSight, visit: Visit) -> str:
    """Return the way water moves between the animals and their surroundings, as a sentence."""
    balance = tank.balance
    key = "empty" if tank.animals is None else balance.direction
    gap = "" if math.isnan(balance.gap) else numbers.number(abs(balance.gap), 0, language=visit.language)
    return str(visit.language.BALANCE[key]).format(gap=gap)


def _say(tank: TankSight, snapshot: Snapshot, visit: Visit) -> str:
    if tank.alarms:
        return say(tank.alarms[0], snapshot, visit, more=len(tank.alarms) - 1)
    if tank.is_unwatched:
        return say_unwatched(tank, snapshot, visit) if snapshot.has_store else ""
    if tank.is_outside:
        return say_outside(visit)
    return say_doubted(tank, visit, has_title=False) if tank.is_doubted else ""
