"""One cause, several tanks: alarms that share a cause form a group.

The first cause comes first, the tank with the shortest time left leads, a tank that joins sounds again, and an
acknowledgement of the group covers the tanks it lists and no others.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from math import inf
from typing import Any, NamedTuple

from analysis.alarm.kinds import MONITOR_KINDS, PROCESS_KINDS, ConditionKind
from analysis.alarm.rules import microseconds

JOIN_WITHIN_S = 2 * 3600.0
"""A tank joins a group whose last alarm is no older than this. Common practice; change it with the site's flow."""


class Member(NamedTuple):
    """One alarm of a group."""

    tank: str
    kind: ConditionKind
    occurrence: int
    raised_at_us: int
    time_left_s: float = inf
    """Lower bound of the time left to the tank's limit; infinity where nothing is in sight. [s]"""
    is_acknowledged: bool = False


@dataclass(frozen=True, slots=True)
class AlarmGroup:
    """Alarms of one cause, in the order in which they were raised."""

    number: int
    cause: str
    members: tuple[Member, ...]

    @property
    def first(self) -> Member:
        """The alarm that came first: where to look for the cause."""
        return self.members[0]

    @property
    def lead(self) -> Member:
        """The alarm with the shortest time left; the earliest of equals."""
        return min(self.members, key=lambda member: member.time_left_s)

    @property
    def is_acknowledged(self) -> bool:
        """Whether every member is acknowledged."""
        return all(member.is_acknowledged for member in self.members)


class Joined(NamedTuple):
    """An alarm found its group."""

    groups: tuple[AlarmGroup, ...]
    group: AlarmGroup
    is_new_group: bool
    """The first message of a group leaves at once; followers are gathered for some seconds. Both sound."""


def cause_of(kind: ConditionKind, *, tank: str, source_water: str) -> str:
    """Return the cause that an alarm is put down to.

    Alarms of the water share the cause "this kind of trouble from this source water"; alarms of the monitor
    share the site; everything else (a dry probe, a tank nobody sees) is a matter of its own tank.

    Parameters
    ----------
    kind : ConditionKind
        The condition.
    tank, source_water : str
        The tank and the source water that runs into it; an empty source: it stands alone.
    """
    if kind in MONITOR_KINDS:
        return f"monitor/{kind}"
    if kind in PROCESS_KINDS and source_water:
        return f"water/{source_water}/{_TROUBLE.get(kind, kind.value)}"
    return f"tank/{tank}"


_TROUBLE: dict[ConditionKind, str] = {
    ConditionKind.SALINITY_LOW: "salinity",
    ConditionKind.SALINITY_HIGH: "salinity",
    ConditionKind.CHANGING_TOO_FAST: "salinity",
    ConditionKind.HEADING_OUT_OF_RANGE: "salinity",
    ConditionKind.STRESS: "salinity",
    ConditionKind.OFF_PLAN: "salinity",
    ConditionKind.SPECIES_BACKSTOP: "salinity",
    ConditionKind.TEMPERATURE_LOW: "temperature",
    ConditionKind.TEMPERATURE_HIGH: "temperature",
}


def joined(
    groups: tuple[AlarmGroup, ...], member: Member, *, cause: str, join_within_s: float = JOIN_WITHIN_S
) -> Joined:
    """Put a newly announced alarm into the group of its cause, or begin one.

    An alarm that is in the group already (raised again, re-alarmed) takes its old place with its new
    occurrence and is unacknowledged.

    Parameters
    ----------
    groups : tuple of AlarmGroup
        The open groups.
    member : Member
        The alarm.
    cause : str
        From `cause_of`.
    join_within_s : float
        How long after a group's last alarm another one still joins. [s]
    """
    for position, group in enumerate(groups):
        newest_us = max(item.raised_at_us for item in group.members)
        if group.cause != cause or member.raised_at_us - newest_us > microseconds(join_within_s):
            continue
        members = _with_member(group.members, member)
        grown = replace(group, members=members)
        return Joined((*groups[:position], grown, *groups[position + 1 :]), grown, is_new_group=False)
    number = 1 + max((group.number for group in groups), default=0)
    begun = AlarmGroup(number, cause, (member,))
    return Joined((*groups, begun), begun, is_new_group=True)


def _with_member(members: tuple[Member, ...], member: Member) -> tuple[Member, ...]:
    for position, item in enumerate(members):
        if (item.tank, item.kind) == (member.tank, member.kind):
            again = member._replace(raised_at_us=min(item.raised_at_us, member.raised_at_us))
            return (*members[:position], again, *members[position + 1 :])
    return tuple(sorted((*members, member), key=lambda item: item.raised_at_us))


def with_time_left(groups: tuple[AlarmGroup, ...], time_left_s: dict[str, float]) -> tuple[AlarmGroup, ...]:
    """Return the groups with the present time left of each tank (tank id to seconds)."""
    return tuple(
        replace(
            group,
            members=tuple(
                member._replace(time_left_s=time_left_s.get(member.tank, member.time_left_s))
                for member in group.members
            ),
        )
        for group in groups
    )


def covered_by(group: AlarmGroup) -> tuple[Member, ...]:
    """Return the alarms that an acknowledgement of the group, as it stands now, would cover; lead first.

    The list goes with the acknowledgement: a tank that joins later is not on it.
    """
    waiting = [member for member in group.members if not member.is_acknowledged]
    return tuple(sorted(waiting, key=lambda member: (member.time_left_s, member.raised_at_us)))


def acknowledged(
    groups: tuple[AlarmGroup, ...], covered: tuple[tuple[str, ConditionKind, int], ...]
) -> tuple[AlarmGroup, ...]:
    """Mark the listed alarms (tank, kind, occurrence) as acknowledged; other occurrences stay as they are."""
    listed = set(covered)
    return tuple(
        replace(
            group,
            members=tuple(
                member._replace(is_acknowledged=True)
                if (member.tank, member.kind, member.occurrence) in listed
                else member
                for member in group.members
            ),
        )
        for group in groups
    )


def left(groups: tuple[AlarmGroup, ...], tank: str, kind: ConditionKind) -> tuple[AlarmGroup, ...]:
    """Take an alarm that is normal again out of its group; an empty group is closed."""
    remaining = (
        replace(
            group,
            members=tuple(member for member in group.members if (member.tank, member.kind) != (tank, kind)),
        )
        for group in groups
    )
    return tuple(group for group in remaining if group.members)


def groups_to_list(groups: tuple[AlarmGroup, ...]) -> list[dict[str, Any]]:
    """Return the groups as plain JSON data."""
    return [
        {
            "number": group.number,
            "cause": group.cause,
            "members": [
                {
                    **member._asdict(),
                    "kind": member.kind.value,
                    "time_left_s": None if member.time_left_s == inf else member.time_left_s,
                }
                for member in group.members
            ],
        }
        for group in groups
    ]


def groups_from_list(body: list[dict[str, Any]]) -> tuple[AlarmGroup, ...]:
    """Return the groups that `groups_to_list` wrote."""
    return tuple(
        AlarmGroup(
            item["number"],
            item["cause"],
            tuple(
                Member(
                    **{
                        **member,
                        "kind": ConditionKind(member["kind"]),
                        "time_left_s": inf if member["time_left_s"] is None else member["time_left_s"],
                    }
                )
                for member in item["members"]
            ),
        )
        for item in body
    )
