"""One cause, several tanks."""

from __future__ import annotations

import json

from analysis.alarm.grouping import (
    AlarmGroup,
    Member,
    acknowledged,
    cause_of,
    covered_by,
    groups_from_list,
    groups_to_list,
    joined,
    left,
    with_time_left,
)
from analysis.alarm.kinds import ConditionKind as Kind
from tests.analysis.alarm.stories import HOUR, MINUTE

CAUSE = "water/intake/salinity"


def alarm(tank: str, at_us: int, left_s: float = 3600.0, occurrence: int = 1) -> Member:
    return Member(tank, Kind.SALINITY_LOW, occurrence, at_us, left_s)


def twelve_tanks() -> tuple[AlarmGroup, ...]:
    groups: tuple[AlarmGroup, ...] = ()
    for number in range(12):
        groups = joined(groups, alarm(f"t{number}", number * MINUTE, 3600.0 - 60 * (number == 7)), cause=CAUSE).groups
    return groups


def test_the_intake_turned_fresh_and_twelve_tanks_follow_as_one_group() -> None:
    (group,) = twelve_tanks()
    assert group.first.tank == "t0"
    assert group.lead.tank == "t7"
    assert len(group.members) == 12


def test_only_the_first_begins_a_group() -> None:
    first = joined((), alarm("a", 0), cause=CAUSE)
    second = joined(first.groups, alarm("b", MINUTE), cause=CAUSE)
    other = joined(second.groups, alarm("c", MINUTE), cause="tank/c")
    assert [first.is_new_group, second.is_new_group, other.is_new_group] == [True, False, True]
    assert [group.number for group in other.groups] == [1, 2]


def test_what_comes_hours_later_is_another_cause() -> None:
    first = joined((), alarm("a", 0), cause=CAUSE)
    assert joined(first.groups, alarm("b", 3 * HOUR), cause=CAUSE).is_new_group


def test_an_acknowledgement_covers_the_tanks_it_lists_and_no_tank_that_joins_later() -> None:
    groups = twelve_tanks()
    listed = covered_by(groups[0])
    assert listed[0].tank == "t7"
    groups = joined(groups, alarm("late", 13 * MINUTE), cause=CAUSE).groups
    groups = acknowledged(groups, tuple((item.tank, item.kind, item.occurrence) for item in listed))
    assert [item.tank for item in covered_by(groups[0])] == ["late"]
    assert not groups[0].is_acknowledged


def test_a_new_occurrence_is_not_covered_by_the_old_acknowledgement() -> None:
    groups = joined((), alarm("a", 0), cause=CAUSE).groups
    groups = joined(groups, alarm("a", MINUTE, occurrence=2), cause=CAUSE).groups
    assert len(groups[0].members) == 1
    groups = acknowledged(groups, (("a", Kind.SALINITY_LOW, 1),))
    assert not groups[0].is_acknowledged


def test_time_left_moves_the_lead_and_a_closed_group_is_gone() -> None:
    groups = with_time_left(twelve_tanks(), {"t3": 60.0})
    assert groups[0].lead.tank == "t3"
    for number in range(12):
        groups = left(groups, f"t{number}", Kind.SALINITY_LOW)
    assert groups == ()


def test_groups_survive_the_store() -> None:
    groups = joined(twelve_tanks(), Member("x", Kind.UNWATCHED, 1, 0), cause="tank/x").groups
    assert groups_from_list(json.loads(json.dumps(groups_to_list(groups)))) == groups


def test_causes() -> None:
    assert cause_of(Kind.SALINITY_LOW, tank="a", source_water="intake") == CAUSE
    assert cause_of(Kind.STRESS, tank="b", source_water="intake") == CAUSE
    assert cause_of(Kind.SALINITY_LOW, tank="a", source_water="") == "tank/a"
    assert cause_of(Kind.UNWATCHED, tank="a", source_water="intake") == "tank/a"
    assert cause_of(Kind.STORE_FULL, tank="", source_water="") == "monitor/store_full"
