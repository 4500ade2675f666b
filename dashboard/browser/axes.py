"""Where the ticks of an axis stand, and what is written at them."""

from __future__ import annotations

import math
from datetime import UTC, datetime, timedelta, tzinfo

from ingest.words.language import ENGLISH, Language

MINUTE_S = 60
HOUR_S = 3600
DAY_S = 86_400
STEPS_S = (
    *(m * MINUTE_S for m in (1, 2, 5, 10, 15, 30)),
    *(h * HOUR_S for h in (1, 2, 3, 6, 12)),
    *(d * DAY_S for d in (1, 2, 7, 14)),
)
MONTH_STEPS = (1, 2, 3, 6, 12, 24, 60)


def value_ticks(low: float, high: float, *, most: int = 6) -> list[float]:
    """Return ticks in steps of 1, 2 or 5 times a power of ten from *low* to *high*, at most *most*."""
    span = high - low
    if not (math.isfinite(span) and span > 0):
        return []
    raw = span / most
    power = 10 ** math.floor(math.log10(raw))
    step = next(power * m for m in (1, 2, 5, 10) if power * m >= raw * (1 - 1e-9))
    first = math.ceil(low / step - 1e-9)
    last = math.floor(high / step + 1e-9)
    return [round(i * step, 10) for i in range(first, last + 1)]


def tick_decimals(ticks: list[float]) -> int:
    """Return how many decimals tell these ticks apart."""
    if len(ticks) < 2:
        return 1
    return max(0, -math.floor(math.log10(ticks[1] - ticks[0]) + 1e-9))


def time_ticks(
    from_s: float, to_s: float, zone: tzinfo, *, most: int = 8, language: Language = ENGLISH
) -> list[tuple[float, str, bool]]:
    """Return (time, text, is_day) of the ticks between two times, at whole hours, days or months of the site's own clock.

    `is_day` is true where a new day (or month, or year) begins: there the text is its name, written stronger.
    """
    span = to_s - from_s
    step = next((s for s in STEPS_S if span / s <= most), None)
    moments = _month_moments(from_s, to_s, zone, most) if step is None else _step_moments(from_s, to_s, zone, step)
    return [(moment.timestamp(), *_tick_text(moment, step, language)) for moment in moments]


def _step_moments(from_s: float, to_s: float, zone: tzinfo, step: int) -> list[datetime]:
    """Walk the site's wall clock; the hour that a change to summer time skips or doubles is named as the clock shows it."""
    start = datetime.fromtimestamp(from_s, tz=UTC).astimezone(zone)
    wall = start.replace(hour=0, minute=0, second=0, microsecond=0)
    if step >= DAY_S:
        wall -= timedelta(days=wall.timetuple().tm_yday % (step // DAY_S))
    moments: list[datetime] = []
    while wall.timestamp() <= to_s:
        if wall.timestamp() >= from_s:
            moments.append(wall)
        wall = (wall.replace(tzinfo=None) + timedelta(seconds=step)).replace(tzinfo=zone)
    return moments


def _month_moments(from_s: float, to_s: float, zone: tzinfo, most: int) -> list[datetime]:
    months = (to_s - from_s) / (30.4 * DAY_S)
    step = next((s for s in MONTH_STEPS if months / s <= most), MONTH_STEPS[-1])
    start = datetime.fromtimestamp(from_s, tz=UTC).astimezone(zone)
    number = start.year * 12 + (start.month - 1) // step * step
    moments: list[datetime] = []
    while True:
        moment = datetime(number // 12, number % 12 + 1, 1, tzinfo=zone)
        if moment.timestamp() > to_s:
            return moments
        if moment.timestamp() >= from_s:
            moments.append(moment)
        number += step


def _tick_text(moment: datetime, step: int | None, language: Language) -> tuple[str, bool]:
    month = str(language.MONTHS[moment.month - 1])
    if step is None:
        return (str(moment.year), True) if moment.month == 1 else (month, False)
    if step >= DAY_S:
        return f"{moment.day} {month}", moment.day == 1
    if moment.hour == 0 and moment.minute == 0:
        return f"{language.WEEKDAYS[moment.weekday()]} {moment.day}", True
    return moment.strftime("%H:%M"), False
