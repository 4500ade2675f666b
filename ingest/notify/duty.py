"""The sections about people, in the forms in which the call-out needs them."""

from __future__ import annotations

from datetime import UTC
from typing import TYPE_CHECKING

from analysis.alarm.call_out import DUTY, CallPlan, CallStep
from analysis.alarm.duty import DayKind, DutyCalendar, QuietHours, Shift, StandIn
from analysis.alarm.rules import Priority
from ingest.clock import to_microseconds
from ingest.site.calls import CHANNEL_KINDS, WEEKDAYS, minutes_of

if TYPE_CHECKING:
    from datetime import datetime

    from ingest.site.models import Site

USUAL_WAIT_S = 300.0
"""How long a person has to answer where the site file has no list. Common practice."""


def calendar_of(site: Site) -> DutyCalendar:
    """Return the duty calendar of a site."""
    duty = site.duty
    return DutyCalendar(
        zone=site.zone,
        shifts=tuple(
            Shift(
                who=shift.who,
                start_min=minutes_of(shift.begin),
                end_min=minutes_of(shift.end),
                weekdays=frozenset(WEEKDAYS.index(day) for day in shift.weekdays),
                days=DayKind(shift.days),
                first_day=shift.first_day,
                last_day=shift.last_day,
            )
            for shift in duty.shifts
        ),
        holidays=frozenset(duty.holidays),
        stand_ins=tuple(
            StandIn(item.absent, item.who, _utc_us(item.begin, site), _utc_us(item.end, site))
            for item in duty.stand_ins
        ),
        quiet=tuple(
            QuietHours(
                minutes_of(item.begin),
                minutes_of(item.end),
                frozenset(Priority(priority) for priority in item.priorities),
            )
            for item in duty.quiet_hours
        ),
    )


def plan_of(site: Site) -> CallPlan | None:
    """Return the call-out list of a site with its calendar; None where nobody is declared.

    Without a list of its own: whoever is on duty, then everybody in the order of the file.
    """
    if not site.people:
        return None
    steps = [CallStep(line.who, line.by or CHANNEL_KINDS, line.wait_min * 60.0) for line in site.call_out]
    if not steps:
        names = [DUTY] if site.duty.shifts else []
        steps = [CallStep(who, CHANNEL_KINDS, USUAL_WAIT_S) for who in (*names, *(one.id for one in site.people))]
    return CallPlan(tuple(steps), calendar_of(site))


def source_water_of(site: Site, tank_id: str) -> str:
    """Return what a tank's troubles are put down to: the only source of its kind of water, else that kind itself."""
    kind = site.tank(tank_id).water
    sources = [source.id for source in site.source_waters if source.kind == kind]
    return sources[0] if len(sources) == 1 else kind


def _utc_us(local: datetime, site: Site) -> int:
    return to_microseconds(local.replace(tzinfo=site.zone).astimezone(UTC))
