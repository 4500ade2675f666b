"""What the ledger tells about alarms, as the call-outs hear it."""

from __future__ import annotations

from typing import TYPE_CHECKING

from analysis.alarm.grouping import cause_of
from analysis.alarm.kinds import MONITOR_KINDS, ConditionKind
from analysis.alarm.rules import Priority
from analysis.alarm.transition import Happening
from ingest.notify.call_outs import News
from ingest.notify.duty import source_water_of

if TYPE_CHECKING:
    from collections.abc import Iterable

    from ingest.notify.call_outs import CallOuts
    from ingest.site.models import Site
    from ingest.store.calls import WaitingAlarm
    from ingest.store.ledger import Event


def news_of(site: Site, event_id: int, event: Event) -> News | None:
    """Return what an event says about an alarm; None if it is a refused act, or about something else."""
    body = event.body
    if body.get("refusal") or "condition" not in body:
        return None
    tank, kind = event.subject.removeprefix("tank/"), ConditionKind(body["condition"])
    ids = {person.name: person.id for person in site.people}
    return News(
        event_id=event_id,
        tank=tank,
        kind=kind,
        happening=Happening(body["happening"]),
        occurrence=body["after"].get("occurrence", 0),
        at_us=body["at_us"],
        who=ids.get(body["who"], body["who"]),
        is_announced=body["is_announced"],
        priority=Priority(body["priority"]),
        cause=_cause(site, kind, tank),
    )


def compare(site: Site, work: CallOuts, waiting: Iterable[WaitingAlarm], *, now_us: int) -> None:
    """After a start or a new site file: no alarm asks for a person without a call-out, and none is of a tank that is gone."""
    known = {alarm for entry in work.entries.values() for alarm in entry.alarms}
    for row in waiting:
        tank, kind = row.subject.removeprefix("tank/"), ConditionKind(row.condition)
        if tank in site.tank_index and (tank, kind) not in known:
            news = News(
                event_id=row.event_id,
                tank=tank,
                kind=kind,
                happening=Happening.RAISED,
                occurrence=row.occurrence,
                at_us=row.raised_at,
                who="",
                is_announced=True,
                priority=Priority(row.priority),
                cause=_cause(site, kind, tank),
            )
            work.hear(news, now_us=now_us)
    for tank, kind in known:
        if tank not in site.tank_index and kind not in MONITOR_KINDS:
            gone = Happening.REMOVED_FROM_SERVICE
            work.hear(News(0, tank, kind, gone, 0, now_us, "", False, Priority.NOTE, ""), now_us=now_us)


def _cause(site: Site, kind: ConditionKind, tank: str) -> str:
    source = source_water_of(site, tank) if tank in site.tank_index else ""
    return cause_of(kind, tank=tank, source_water=source)
