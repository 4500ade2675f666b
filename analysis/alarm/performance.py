"""How well the alarms work: what people were called for, beside the figures of the standards.

Only annunciated alarms count (not shelved or suppressed ones), per duty person. Days and nights are those of the site's
wall clock.

References
----------
.. [1] ANSI/ISA-18.2-2016, Table 7, and IEC 62682:2022, as restated in public articles.
.. [2] EEMUA 191, long-term average classes, as restated in public articles.
.. [3] HSE Chemical Information Sheet CHIS6, Better alarm handling.
"""

from __future__ import annotations

from collections import Counter, defaultdict
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace
from datetime import date, timedelta, tzinfo
from statistics import median
from typing import NamedTuple

from analysis.alarm.duty import local_time
from analysis.alarm.kinds import ConditionKind
from analysis.alarm.rules import Priority, microseconds
from analysis.alarm.transition import Happening, Refusal, Transition

CHATTERING_COUNT = 3
CHATTERING_WITHIN_S = 60.0
STALE_AFTER_S = 24 * 3600.0
FLOOD_WINDOW_S = 600.0
FLOOD_BEGINS_ABOVE = 10
FLOOD_ENDS_BELOW = 5
TOP_COUNT = 10
PERIODS_PER_DAY = 144
NIGHT_FROM_H, NIGHT_UNTIL_H = 20, 8


class Figure(NamedTuple):
    """A figure of a standard, to stand beside what was measured."""

    code: str
    target: str
    source: str


FIGURES: tuple[Figure, ...] = (
    Figure("per_day", "about 144 very likely acceptable, 288 at most manageable", "ISA-18.2 Table 7, restated"),
    Figure("per_10_min", "1 very likely acceptable, 2 at most manageable", "ISA-18.2 Table 7; EEMUA 191, restated"),
    Figure("share_of_time_in_flood", "below about 1 %", "ISA-18.2 Table 7, restated"),
    Figure("top_ten_share", "about 1 % to 5 % at most, with a plan of action", "ISA-18.2 Table 7, restated"),
    Figure("chattering", "none", "ISA-18.2 Table 7, restated"),
    Figure("stale", "fewer than 5 on any day", "ISA-18.2 Table 7, restated; 24 h from memory"),
    Figure("priority_split", "about 5 % high, 15 % medium, 80 % low", "ISA-18.2, EEMUA 191, HSE CHIS6, restated"),
    Figure("calls_per_shift", "at most 2 incidents in 12 h", "published on-call practice, restated"),
)
"""The targets hold for people at a desk; a person asleep is worth sparing more (common practice)."""


@dataclass(frozen=True, slots=True)
class Annunciation:
    """One time that an alarm was announced: raised, and what became of it. [us UTC], None: not yet."""

    tank: str
    kind: ConditionKind
    priority: Priority
    raised_at_us: int
    returned_at_us: int | None = None
    acknowledged_at_us: int | None = None
    acknowledged_by: str = ""
    has_led_to_action: bool | None = None
    """Said at the acknowledgement or at hand-over; None: not said."""
    is_repeat: bool = False
    """Announced again (re-alarm, worse, shown again) while its condition held."""

    @property
    def alarm(self) -> tuple[str, ConditionKind]:
        """Which alarm it was."""
        return (self.tank, self.kind)


def annunciations(
    history: Iterable[tuple[str, ConditionKind, Transition]], priorities: dict[ConditionKind, Priority]
) -> tuple[Annunciation, ...]:
    """Return the annunciations in a stored history.

    Parameters
    ----------
    history : iterable of (str, ConditionKind, Transition)
        Tank, kind and transition, in the order of time.
    priorities : dict
        Priority of each kind.
    """
    found: list[Annunciation] = []
    places: dict[tuple[str, ConditionKind], list[int]] = defaultdict(list)
    for tank, kind, entry in history:
        if entry.refusal is not Refusal.NONE:
            continue
        if entry.is_announced and entry.happening is not Happening.ESCALATED:
            places[tank, kind].append(len(found))
            is_repeat = entry.happening is not Happening.RAISED
            found.append(Annunciation(tank, kind, priorities[kind], entry.at_us, is_repeat=is_repeat))
            continue
        for place in places[tank, kind]:
            found[place] = _followed(found[place], entry)
    return tuple(found)


def _followed(alarm: Annunciation, entry: Transition) -> Annunciation:
    """Return an annunciation with its return or its acknowledgement, the first of each."""
    is_return = entry.happening in {Happening.RETURNED, Happening.RETURNED_AUTO_ACKNOWLEDGED}
    if is_return and alarm.returned_at_us is None:
        return replace(alarm, returned_at_us=entry.at_us)
    if entry.happening is Happening.ACKNOWLEDGED and alarm.acknowledged_at_us is None:
        return replace(alarm, acknowledged_at_us=entry.at_us, acknowledged_by=entry.who)
    return alarm


def calls_per_night(
    calls: Iterable[tuple[str, int]],
    zone: tzinfo,
    *,
    from_h: int = NIGHT_FROM_H,
    until_h: int = NIGHT_UNTIL_H,
) -> dict[str, dict[date, int]]:
    """Return how often each person was called in each night, a night named by its evening.

    Parameters
    ----------
    calls : iterable of (str, int)
        Person and time of each call. [us UTC]
    zone : tzinfo
        The site's time zone.
    from_h, until_h : int
        When the night begins and ends on the wall clock. [h]
    """
    counts: dict[str, dict[date, int]] = defaultdict(dict)
    for who, at_us in calls:
        local = local_time(at_us, zone)
        if until_h <= local.hour < from_h:
            continue
        evening = local.date() - timedelta(days=1 if local.hour < until_h else 0)
        counts[who][evening] = counts[who].get(evening, 0) + 1
    return dict(counts)


def share_with_action(alarms: Sequence[Annunciation]) -> float | None:
    """Return the share of annunciations that led to an action, of those where it was said; None: never said."""
    said = [alarm.has_led_to_action for alarm in alarms if alarm.has_led_to_action is not None]
    return sum(said) / len(said) if said else None


def is_chattering(raised_at_us: Sequence[int]) -> bool:
    """Return whether an alarm came three times or more within a minute (ISA-18.2, restated)."""
    times = sorted(raised_at_us)
    window_us = microseconds(CHATTERING_WITHIN_S)
    last = CHATTERING_COUNT - 1
    return any(times[place] - times[place - last] <= window_us for place in range(last, len(times)))


def chattering(alarms: Sequence[Annunciation]) -> tuple[tuple[str, ConditionKind], ...]:
    """Return the alarms that chattered."""
    times: dict[tuple[str, ConditionKind], list[int]] = defaultdict(list)
    for alarm in alarms:
        times[alarm.alarm].append(alarm.raised_at_us)
    return tuple(sorted(name for name, raised in times.items() if is_chattering(raised)))


def stale(alarms: Sequence[Annunciation], *, now_us: int) -> tuple[Annunciation, ...]:
    """Return the annunciations whose condition has held for more than 24 h without a break."""
    limit_us = microseconds(STALE_AFTER_S)
    first = (alarm for alarm in alarms if not alarm.is_repeat)
    return tuple(alarm for alarm in first if (alarm.returned_at_us or now_us) - alarm.raised_at_us > limit_us)


def top_ten(alarms: Sequence[Annunciation]) -> tuple[tuple[tuple[str, ConditionKind], int], ...]:
    """Return the ten alarms that came most often, with their counts."""
    counts = Counter(alarm.alarm for alarm in alarms)
    return tuple(sorted(counts.items(), key=lambda item: (-item[1], item[0]))[:TOP_COUNT])


def top_ten_share(alarms: Sequence[Annunciation]) -> float:
    """Return the share of all annunciations that the ten most frequent alarms make; 0 with none."""
    return sum(count for _, count in top_ten(alarms)) / len(alarms) if alarms else 0.0


def acknowledgement_times_s(alarms: Sequence[Annunciation]) -> tuple[float, ...]:
    """Return how long each acknowledged annunciation waited for a person, ascending. [s]"""
    waits = (
        (alarm.acknowledged_at_us - alarm.raised_at_us) / microseconds(1.0)
        for alarm in alarms
        if alarm.acknowledged_at_us is not None
    )
    return tuple(sorted(waits))


def rate_class(per_10_min: float) -> str:
    """Return the class of a long-term average rate (EEMUA 191, restated): a stable code."""
    if per_10_min <= 1:
        return "very_likely_acceptable"
    if per_10_min <= 2:
        return "manageable"
    return "likely_over_demanding" if per_10_min <= FLOOD_BEGINS_ABOVE else "very_likely_unacceptable"


def floods(raised_at_us: Sequence[int]) -> tuple[tuple[int, int], ...]:
    """Return the alarm floods as (begin, end), in whole periods of 10 minutes from the first alarm. [us UTC]

    A flood begins with a period of more than 10 alarms and ends with one of fewer than 5 (ISA-18.2, restated).
    """
    if not raised_at_us:
        return ()
    period_us, first_us = microseconds(FLOOD_WINDOW_S), min(raised_at_us)
    counts = Counter((at_us - first_us) // period_us for at_us in raised_at_us)
    found: list[tuple[int, int]] = []
    begun_us: int | None = None
    for period in range(max(counts) + 2):
        at_us = first_us + period * period_us
        if begun_us is None and counts[period] > FLOOD_BEGINS_ABOVE:
            begun_us = at_us
        elif begun_us is not None and counts[period] < FLOOD_ENDS_BELOW:
            found.append((begun_us, at_us))
            begun_us = None
    return tuple(found)


def priority_split(alarms: Sequence[Annunciation]) -> dict[Priority, float]:
    """Return the share of each priority; all 0 with no annunciation."""
    counts = Counter(alarm.priority for alarm in alarms)
    return {priority: counts[priority] / len(alarms) if alarms else 0.0 for priority in Priority}


@dataclass(frozen=True, slots=True)
class PerformanceReport:
    """What was measured over a time; `FIGURES` stand beside it."""

    from_us: int
    until_us: int
    count: int
    per_day: float
    per_10_min: float
    rate_class: str
    share_with_action: float | None
    chattering: tuple[tuple[str, ConditionKind], ...]
    stale: tuple[Annunciation, ...]
    top_ten: tuple[tuple[tuple[str, ConditionKind], int], ...]
    top_ten_share: float
    share_of_time_in_flood: float
    priority_split: dict[Priority, float]
    acknowledged_count: int
    median_acknowledgement_s: float | None
    slowest_acknowledgement_s: float | None
    calls_per_night: dict[str, dict[date, int]]


def performance(
    alarms: Sequence[Annunciation], calls: Sequence[tuple[str, int]], *, from_us: int, until_us: int, zone: tzinfo
) -> PerformanceReport:
    """Return how well the alarms worked in a time; a fair measure spans at least 30 days.

    Parameters
    ----------
    alarms : sequence of Annunciation
        Annunciations; only those raised within the time count.
    calls : sequence of (str, int)
        Person and time of each call. [us UTC]
    from_us, until_us : int
        The time. [us UTC]
    zone : tzinfo
        The site's time zone.
    """
    within = [alarm for alarm in alarms if from_us <= alarm.raised_at_us < until_us]
    days = max(until_us - from_us, 1) / microseconds(24 * 3600.0)
    flooded_us = sum(end - begin for begin, end in floods([alarm.raised_at_us for alarm in within]))
    waits = acknowledgement_times_s(within)
    per_10_min = len(within) / days / PERIODS_PER_DAY
    return PerformanceReport(
        from_us=from_us,
        until_us=until_us,
        count=len(within),
        per_day=len(within) / days,
        per_10_min=per_10_min,
        rate_class=rate_class(per_10_min),
        share_with_action=share_with_action(within),
        chattering=chattering(within),
        stale=stale(within, now_us=until_us),
        top_ten=top_ten(within),
        top_ten_share=top_ten_share(within),
        share_of_time_in_flood=flooded_us / max(until_us - from_us, 1),
        priority_split=priority_split(within),
        acknowledged_count=len(waits),
        median_acknowledgement_s=median(waits) if waits else None,
        slowest_acknowledgement_s=waits[-1] if waits else None,
        calls_per_night=calls_per_night([call for call in calls if from_us <= call[1] < until_us], zone),
    )
