"""Times as people read them: in the site's zone, seconds only where they matter."""

from __future__ import annotations

import math
from datetime import datetime, tzinfo
from zoneinfo import ZoneInfo

from ingest.clock import MICROSECONDS_PER_SECOND, to_datetime
from ingest.words.language import ENGLISH, Language

MINUTE_S = 60
HOUR_S = 3600
DAY_S = 86_400


def zone(name: str) -> tzinfo:
    """Return the IANA time zone *name*."""
    return ZoneInfo(name)


def local(time_us: int, zone: tzinfo) -> datetime:
    """Return the site's own time of *time_us*."""
    return to_datetime(time_us).astimezone(zone)


def age(then_us: int | None, *, now_us: int, language: Language = ENGLISH) -> str:
    """Return "6 s ago", "4 min ago", "3 h ago", "2 d ago"; "never" for None."""
    words = language.TIMES
    if then_us is None:
        return str(words["never"])
    seconds = (now_us - then_us) / MICROSECONDS_PER_SECOND
    if seconds < -2 * MINUTE_S:
        return str(words["ahead"])
    if seconds < 1:
        return str(words["just_now"])
    for limit, key, unit in (
        (2 * MINUTE_S, "seconds_ago", 1),
        (2 * HOUR_S, "minutes_ago", MINUTE_S),
        (2 * DAY_S, "hours_ago", HOUR_S),
    ):
        if seconds < limit:
            return str(words[key]).format(n=int(seconds // unit))
    return str(words["days_ago"]).format(n=int(seconds // DAY_S))


def clock(time_us: int, zone: tzinfo, *, has_seconds: bool = False) -> str:
    """Return the time of day, 24 h: "21:52", "21:52:07"."""
    return local(time_us, zone).strftime("%H:%M:%S" if has_seconds else "%H:%M")


def day(time_us: int, zone: tzinfo, *, language: Language = ENGLISH, has_year: bool = False) -> str:
    """Return "24 Nov", with the year where it matters."""
    moment = local(time_us, zone)
    text = f"{moment.day} {language.MONTHS[moment.month - 1]}"
    return f"{text} {moment.year}" if has_year else text


def moment(time_us: int | None, zone: tzinfo, *, now_us: int, language: Language = ENGLISH) -> str:
    """Return the shortest clear name of a moment: "21:52", "Mon 21:52", "24 Nov 21:52", "24 Nov 2025 21:52"."""
    if time_us is None:
        return str(language.TIMES["never"])
    then, now = local(time_us, zone), local(now_us, zone)
    text = then.strftime("%H:%M")
    days = (now.date() - then.date()).days
    if days == 0:
        return text
    if 0 < days < 7:
        return f"{language.WEEKDAYS[then.weekday()]} {text}"
    return f"{day(time_us, zone, language=language, has_year=then.year != now.year)} {text}"


def masthead(time_us: int, zone: tzinfo, *, language: Language = ENGLISH) -> str:
    """Return the board's own clock: "Tue 21:52"."""
    then = local(time_us, zone)
    return f"{language.WEEKDAYS[then.weekday()]} {then.strftime('%H:%M')}"


def duration(seconds: float, *, language: Language = ENGLISH) -> str:
    """Return a length of time in at most two parts: "40 s", "11 min", "2 h 5 min", "3 d 4 h"."""
    words = language.TIMES
    if not math.isfinite(seconds):
        return "–"
    if seconds < 90:
        return str(words["seconds"]).format(n=round(seconds))
    minutes = round(seconds / MINUTE_S)
    if minutes < 120:
        return str(words["minutes"]).format(n=minutes)
    if minutes < 48 * 60:
        hours, rest = divmod(minutes, 60)
        return str(words["hours_minutes"] if rest else words["hours"]).format(h=hours, m=rest, n=hours)
    days, hours = divmod(round(seconds / HOUR_S), 24)
    return str(words["days_hours"] if hours and days < 7 else words["days"]).format(d=days, h=hours, n=days)


def _true_step_min(low_min: float, high_min: float) -> int:
    """Return to how many minutes a time with this range is true enough to be said."""
    width = high_min - low_min
    return next((step for below, step in ((10, 1), (45, 5), (150, 30)) if width < below), 60)


def time_left(
    best_min: float, low_min: float = math.nan, high_min: float = math.nan, *, language: Language = ENGLISH
) -> str:
    """Return "about 11 min (9 to 14 min)", the range only where it is known, and no finer than the range is wide."""
    words = language.TIMES
    if not math.isfinite(best_min):
        return ""
    if best_min < 1:
        return str(words["less_than_minute"])
    if not (math.isfinite(low_min) and math.isfinite(high_min)) or high_min - low_min < 1:
        return str(words["about"]).format(best=duration(best_min * MINUTE_S, language=language))
    step = _true_step_min(low_min, high_min)
    low_min, high_min = math.floor(low_min / step) * step, math.ceil(high_min / step) * step
    best = duration(max(round(best_min / step) * step, 1) * MINUTE_S, language=language)
    high = duration(high_min * MINUTE_S, language=language)
    is_one_unit = high_min < 120 and low_min >= 1
    low = str(int(low_min)) if is_one_unit else duration(low_min * MINUTE_S, language=language)
    return str(words["between"]).format(best=best, low=low, high=high)
