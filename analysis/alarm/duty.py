"""Who is on duty when: shifts, holidays and stand-ins in the site's own time zone, and quiet hours.

Everything is compared on the wall clock of the site, so a shift from 18:00 to 06:00 is that in the night the clocks
change too: the hour that comes twice is covered twice, the one that is left out is nobody's.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from datetime import UTC, date, datetime, timedelta, tzinfo
from enum import StrEnum

from analysis.alarm.rules import Priority
from analysis.arrays import MICROSECONDS_PER_SECOND
from analysis.errors import InvalidInputError

MINUTES_PER_DAY = 24 * 60
EVERY_DAY = frozenset(range(7))
_EPOCH = datetime(1970, 1, 1, tzinfo=UTC)


class DayKind(StrEnum):
    """On which days a shift is worked."""

    ANY = "any"
    WORKDAY = "workday"
    HOLIDAY = "holiday"


@dataclass(frozen=True, slots=True)
class Shift:
    """A shift that comes back every week.

    Parameters
    ----------
    who : str
        The person.
    start_min, end_min : int
        Minutes of the local day; an end at or before the start lies on the next day.
    weekdays : frozenset of int
        Days on which it begins, Monday 0.
    days : DayKind
        Any day, workdays only (no holidays), or holidays only.
    first_day, last_day : date or None
        When it is first and last begun.
    """

    who: str
    start_min: int
    end_min: int
    weekdays: frozenset[int] = EVERY_DAY
    days: DayKind = DayKind.ANY
    first_day: date | None = None
    last_day: date | None = None

    def __post_init__(self) -> None:
        for name in ("start_min", "end_min"):
            if not 0 <= getattr(self, name) <= MINUTES_PER_DAY:
                raise InvalidInputError(name, found=getattr(self, name), allowed="0 to 1440 minutes")


@dataclass(frozen=True, slots=True)
class StandIn:
    """Somebody takes another's shifts for a time. [us UTC]"""

    absent: str
    who: str
    from_us: int
    until_us: int


@dataclass(frozen=True, slots=True)
class QuietHours:
    """Hours of the local day in which alarms of some priorities wait. They never cover the top priority."""

    start_min: int
    end_min: int
    priorities: frozenset[Priority] = frozenset({Priority.NOTE, Priority.SOON})


@dataclass(frozen=True, slots=True)
class DutyCalendar:
    """The duty calendar of a site. `zone` is the site's time zone."""

    zone: tzinfo
    shifts: tuple[Shift, ...] = ()
    holidays: frozenset[date] = frozenset()
    stand_ins: tuple[StandIn, ...] = ()
    quiet: tuple[QuietHours, ...] = ()


def local_time(at_us: int, zone: tzinfo) -> datetime:
    """Return the wall-clock time of the site. [us UTC]"""
    return (_EPOCH + timedelta(microseconds=at_us)).astimezone(zone)


def on_duty(calendar: DutyCalendar, at_us: int) -> tuple[str, ...]:
    """Return who is on duty, stand-ins in the place of the absent, in the order of the shifts, each once."""
    local = local_time(at_us, calendar.zone)
    people = (shift.who for shift in calendar.shifts if _is_worked(shift, local, calendar.holidays))
    return tuple(dict.fromkeys(present(calendar, who, at_us) for who in people))


def present(calendar: DutyCalendar, who: str, at_us: int) -> str:
    """Return the person, or who stands in; a stand-in may have a stand-in."""
    seen: set[str] = set()
    while who not in seen:
        seen.add(who)
        for item in calendar.stand_ins:
            if item.absent == who and item.from_us <= at_us < item.until_us:
                who = item.who
                break
    return who


def _is_worked(shift: Shift, local: datetime, holidays: Iterable[date]) -> bool:
    minute = local.hour * 60 + local.minute
    for begun in (local.date(), local.date() - timedelta(days=1)):
        since = minute + (local.date() - begun).days * MINUTES_PER_DAY
        length = shift.end_min - shift.start_min
        end = shift.start_min + (length if length > 0 else length + MINUTES_PER_DAY)
        if shift.start_min <= since < end and _begins_on(shift, begun, holidays):
            return True
    return False


def _begins_on(shift: Shift, day: date, holidays: Iterable[date]) -> bool:
    if day.weekday() not in shift.weekdays:
        return False
    if (shift.first_day and day < shift.first_day) or (shift.last_day and day > shift.last_day):
        return False
    return shift.days is DayKind.ANY or (shift.days is DayKind.HOLIDAY) == (day in holidays)


def quiet_until_us(calendar: DutyCalendar, at_us: int, *, priority: Priority, is_top: bool) -> int:
    """Return when an alarm may call: `at_us` itself, or the end of the quiet hours that cover it. [us UTC]"""
    if is_top:
        return at_us
    until_us = at_us
    # Quiet hours may follow on each other; after a whole day of them an alarm is let through.
    for _ in range(len(calendar.quiet) + 1):
        ends = [_quiet_end_us(item, until_us, calendar.zone) for item in calendar.quiet if priority in item.priorities]
        latest_us = max(ends, default=until_us)
        if latest_us == until_us:
            break
        until_us = latest_us
    return min(until_us, at_us + MINUTES_PER_DAY * 60 * MICROSECONDS_PER_SECOND)


def _quiet_end_us(quiet: QuietHours, at_us: int, zone: tzinfo) -> int:
    local = local_time(at_us, zone)
    minute = local.hour * 60 + local.minute
    wraps = quiet.end_min <= quiet.start_min
    is_after, is_before = minute >= quiet.start_min, minute < quiet.end_min
    is_quiet = (is_after or is_before) if wraps else (is_after and is_before)
    if not is_quiet:
        return at_us
    day = local.date() + timedelta(days=1 if wraps and is_after else 0)
    end = datetime(day.year, day.month, day.day, tzinfo=zone) + timedelta(minutes=quiet.end_min)
    end_us = (end.astimezone(UTC) - _EPOCH) // timedelta(microseconds=1)
    return max(end_us, at_us)
