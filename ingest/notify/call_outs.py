"""From what happens to alarms to whom to call: one call-out for each group of alarms of one cause. Pure, apart from its own table."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any, NamedTuple

from analysis.alarm import call_out, grouping
from analysis.alarm.call_out import Phase, Reason
from analysis.alarm.kinds import ConditionKind
from analysis.alarm.rationale import RATIONALE
from analysis.alarm.rules import Priority
from analysis.alarm.state import NEVER_US
from analysis.alarm.transition import Happening

if TYPE_CHECKING:
    from collections.abc import Iterable

    from analysis.alarm.call_out import Call, CallEvent, CallOut, CallPlan
    from analysis.alarm.grouping import AlarmGroup

RETURNS = frozenset({Happening.RETURNED, Happening.RETURNED_AUTO_ACKNOWLEDGED, Happening.RESET})
HIDINGS = frozenset({Happening.SHELVED, Happening.SHELVED_ONCE, Happening.SUPPRESSED, Happening.REMOVED_FROM_SERVICE})

Alarm = tuple[str, ConditionKind]


class News(NamedTuple):
    """What happened to one alarm, as the ledger tells it."""

    event_id: int
    tank: str
    kind: ConditionKind
    happening: Happening
    occurrence: int
    at_us: int
    who: str
    is_announced: bool
    priority: Priority
    cause: str

    @property
    def alarm(self) -> Alarm:
        """Return which alarm it is."""
        return (self.tank, self.kind)


@dataclass(frozen=True, slots=True)
class Entry:
    """One call-out, the alarms it is about, and which of them are normal again."""

    call: CallOut
    group: AlarmGroup
    normal: frozenset[Alarm] = frozenset()

    @property
    def is_open(self) -> bool:
        """Return whether it is not over."""
        return self.call.phase is not Phase.OVER

    @property
    def alarms(self) -> frozenset[Alarm]:
        """Return the alarms it is about."""
        return frozenset((member.tank, member.kind) for member in self.group.members)

    @property
    def is_answered(self) -> bool:
        """Return whether a person has every alarm that still asks for one."""
        return all(
            member.is_acknowledged or ((member.tank, member.kind) in self.normal and not self.call.is_top)
            for member in self.group.members
        )


class CallOuts:
    """The open call-outs of a site by their ids. Changes are made on a copy and taken over when they are committed."""

    def __init__(self, plan: CallPlan, entries: dict[int, Entry] | None = None) -> None:
        self._plan = plan
        self.entries = entries or {}
        self.changed: set[int] = set()
        self.calls: list[tuple[int, Call]] = []

    def copy(self, plan: CallPlan) -> CallOuts:
        """Return a copy without marks, in which what is over is left out."""
        return CallOuts(plan, {number: entry for number, entry in self.entries.items() if entry.is_open})

    def hear(self, news: News, *, now_us: int) -> None:
        """Let something happen to an alarm."""
        if news.is_announced:
            self._announced(news, now_us)
            return
        for number in [number for number, entry in self.entries.items() if news.alarm in entry.alarms]:
            self._followed(number, news, now_us)

    def answer(self, number: int, covered: Iterable[tuple[str, ConditionKind, int]], *, who: str, now_us: int) -> None:
        """Let a person answer for the listed alarms of a call-out; a tank that joined later still calls."""
        entry = self.entries.get(number)
        if entry is None:
            return
        (group,) = grouping.acknowledged((entry.group,), tuple(covered))
        entry = replace(entry, group=group)
        self._keep(number, entry)
        if entry.is_answered:
            self._step(number, call_out.Acknowledged(who), now_us)

    def look(self, *, now_us: int) -> None:
        """Let everything happen that time alone brings."""
        for number in list(self.entries):
            self._step(number, call_out.TimePassed(), now_us)

    def move(self, by_us: int) -> None:
        """Follow a clock that was set: what is due stays as far ahead as it was. [us]"""
        for number, entry in self.entries.items():
            if entry.call.next_call_us != NEVER_US:
                moved = replace(entry.call, next_call_us=entry.call.next_call_us + by_us)
                self._keep(number, replace(entry, call=moved))

    def due_calls(self) -> list[tuple[int, Call]]:
        """Return the calls to make after all that happened: one a person and call-out, none for what is settled meanwhile."""
        first: dict[tuple[int, str], tuple[int, Call]] = {}
        for number, call in self.calls:
            if self.entries[number].call.phase is Phase.CALLING:
                first.setdefault((number, call.who), (number, call))
        return list(first.values())

    def _announced(self, news: News, now_us: int) -> None:
        record = RATIONALE[news.kind]
        member = grouping.Member(news.tank, news.kind, news.occurrence, news.at_us)
        known = next((n for n, entry in self.entries.items() if entry.is_open and news.alarm in entry.alarms), None)
        if known is not None:
            self._again(known, member, news, now_us)
            return
        groups = tuple(entry.group for entry in self.entries.values() if entry.is_open)
        joined = grouping.joined(groups, member, cause=news.cause)
        if not joined.is_new_group:
            number = joined.group.number
            self._keep(number, replace(self.entries[number], group=joined.group))
            self._step(number, call_out.TankJoined(news.priority, record.is_top, record.time_to_respond_s), now_us)
            return
        state, calls = call_out.begun(
            f"call/{news.event_id}",
            priority=news.priority,
            is_top=record.is_top,
            respond_s=record.time_to_respond_s,
            now_us=now_us,
            plan=self._plan,
        )
        self._keep(news.event_id, Entry(state, replace(joined.group, number=news.event_id)))
        self.calls += [(news.event_id, call) for call in calls]

    def _again(self, number: int, member: grouping.Member, news: News, now_us: int) -> None:
        """Let an alarm of a call-out be announced once more: raised again, or still not answered for."""
        entry = self.entries[number]
        was_normal = news.alarm in entry.normal
        group = grouping.joined((entry.group,), member, cause=entry.group.cause, join_within_s=float(2**40)).group
        self._keep(number, replace(entry, group=group, normal=entry.normal - {news.alarm}))
        if entry.call.is_normal:
            self._step(number, call_out.RaisedAgain(), now_us)
        elif was_normal:
            record = RATIONALE[news.kind]
            self._step(number, call_out.TankJoined(news.priority, record.is_top, record.time_to_respond_s), now_us)
        else:
            self._step(number, call_out.Worse(), now_us)

    def _followed(self, number: int, news: News, now_us: int) -> None:
        entry = self.entries[number]
        if news.happening in RETURNS:
            entry = replace(entry, normal=entry.normal | {news.alarm})
            self._keep(number, entry)
            if entry.normal >= entry.alarms:
                self._step(number, call_out.Returned(), now_us)
        elif news.happening is Happening.ACKNOWLEDGED:
            self.answer(number, [(news.tank, news.kind, news.occurrence)], who=news.who, now_us=now_us)
        elif news.happening is Happening.RECOVERING:
            self._step(number, call_out.TurningBack(), now_us)
        elif news.happening in HIDINGS:
            self._hidden(number, news, now_us)

    def _hidden(self, number: int, news: News, now_us: int) -> None:
        """Leave out an alarm that was put aside; a call-out of nothing else calls nobody any more."""
        entry = self.entries[number]
        if entry.alarms == {news.alarm}:
            self._step(number, call_out.Stopped(), now_us)
            return
        (group,) = grouping.left((entry.group,), news.tank, news.kind)
        entry = replace(entry, group=group, normal=entry.normal - {news.alarm})
        self._keep(number, entry)
        if entry.normal >= entry.alarms:
            self._step(number, call_out.Returned(), now_us)

    def _step(self, number: int, event: CallEvent, now_us: int) -> None:
        entry = self.entries[number]
        state, calls = call_out.step(entry.call, event, now_us, self._plan)
        if state is not entry.call:
            self._keep(number, replace(entry, call=state))
        self.calls += [(number, call) for call in calls]

    def _keep(self, number: int, entry: Entry) -> None:
        self.entries[number] = entry
        self.changed.add(number)


def entry_to_dict(entry: Entry) -> dict[str, Any]:
    """Return a call-out as plain JSON data."""
    return {
        "call": call_out.call_out_to_dict(entry.call),
        "group": grouping.groups_to_list((entry.group,)),
        "normal": sorted([tank, kind.value] for tank, kind in entry.normal),
    }


def entry_from_dict(body: dict[str, Any]) -> Entry:
    """Return the call-out that `entry_to_dict` wrote. Restoring calls nobody."""
    (group,) = grouping.groups_from_list(body["group"])
    return Entry(
        call_out.call_out_from_dict(body["call"]),
        group,
        frozenset((tank, ConditionKind(kind)) for tank, kind in body["normal"]),
    )


__all__ = ["CallOuts", "Entry", "News", "Reason", "entry_from_dict", "entry_to_dict"]
