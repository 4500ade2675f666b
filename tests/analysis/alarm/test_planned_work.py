"""Planned work quietens what it must, for two hours at most, and never the animals' own limits in their water."""

from __future__ import annotations

import json

import pytest

from analysis.alarm.kinds import ConditionKind as Kind
from analysis.alarm.planned_work import (
    LONGEST_WORK_S,
    Band,
    PlannedWork,
    TankCondition,
    WorkKind,
    WorkPhase,
    band_in_force,
    begun_work,
    changed_rules,
    ended_work,
    first_duration_s,
    overdue_for_eyes,
    quiet_kinds,
    work_from_dict,
    work_phase,
    work_to_dict,
)
from analysis.errors import InvalidInputError
from tests.analysis.alarm.stories import HOUR, MINUTE

BATH_BAND = Band(0.0, 5.0)


def work(kind: WorkKind, duration_s: float = 3600.0, **more: object) -> PlannedWork:
    given = {"tank": "l3", "who": "Ana", "why": "routine", "now_us": 0, "floor": Band(15.0, 40.0)}
    if kind is WorkKind.BATH:
        given["band"] = BATH_BAND
    return begun_work(kind, duration_s=duration_s, **{**given, **more})


@pytest.mark.parametrize("kind", WorkKind)
def test_work_lasts_two_hours_at_most_and_ends_by_itself(kind: WorkKind) -> None:
    assert work(kind, first_duration_s(kind)).until_us <= 2 * HOUR
    with pytest.raises(InvalidInputError, match="duration"):
        work(kind, LONGEST_WORK_S + 1)
    piece = work(kind)
    assert work_phase(piece, now_us=HOUR - 1, is_in_band=None) is WorkPhase.UNDER_WAY
    assert work_phase(piece, now_us=HOUR, is_in_band=True) is WorkPhase.OVER


@pytest.mark.parametrize("is_in_band", [False, None])
def test_work_that_leaves_the_value_away_or_unseen_is_not_over(is_in_band: bool | None) -> None:
    piece = work(WorkKind.WATER_CHANGE)
    assert work_phase(piece, now_us=HOUR, is_in_band=is_in_band) is WorkPhase.NOT_BACK


def test_a_water_change_keeps_the_floor_and_the_watch() -> None:
    (quiet,) = quiet_kinds(TankCondition.IN_USE, work(WorkKind.WATER_CHANGE)).values()
    assert Kind.SALINITY_LOW in quiet
    assert not {Kind.SPECIES_BACKSTOP, Kind.STRESS, Kind.UNWATCHED, Kind.WORK_NOT_BACK_IN_BAND} & quiet


@pytest.mark.parametrize("kind", WorkKind)
def test_after_the_work_everything_but_the_set_point_speaks_again(kind: WorkKind) -> None:
    piece = work(kind)
    not_back = quiet_kinds(TankCondition.IN_USE, piece, phase=WorkPhase.NOT_BACK)[piece.rule]
    assert not {Kind.SPECIES_BACKSTOP, Kind.UNWATCHED, Kind.PROBE_DRY_OR_TANK_EMPTY} & not_back
    assert quiet_kinds(TankCondition.IN_USE, piece, phase=WorkPhase.OVER) == {}


@pytest.mark.parametrize("condition", TankCondition)
def test_no_condition_and_no_work_quietens_the_monitor(condition: TankCondition) -> None:
    for piece in (None, *(work(kind) for kind in WorkKind)):
        for quiet in quiet_kinds(condition, piece).values():
            assert not {Kind.BROKER_UNREACHABLE, Kind.DELIVERY_FAILING, Kind.WORK_NOT_BACK_IN_BAND} & quiet


def test_tanks_in_use_or_under_treatment_are_quietened_by_nothing_but_work() -> None:
    assert quiet_kinds(TankCondition.IN_USE) == quiet_kinds(TankCondition.UNDER_TREATMENT) == {}
    assert Kind.UNWATCHED in quiet_kinds(TankCondition.EMPTY)["condition/empty"]


def test_a_bath_has_its_own_band_and_clock() -> None:
    bath = work(WorkKind.BATH, 1800)
    set_point = Band(29.0, 33.0)
    assert band_in_force(bath, set_point=set_point, phase=WorkPhase.UNDER_WAY) == BATH_BAND
    assert band_in_force(bath, set_point=set_point, phase=WorkPhase.NOT_BACK) == set_point
    assert Kind.SALINITY_LOW not in quiet_kinds(TankCondition.UNDER_TREATMENT, bath)[bath.rule]
    for bad in ({"kind": WorkKind.BATH, "band": None}, {"kind": WorkKind.BATH, "band": Band(5.0, 0.0)}):
        with pytest.raises(InvalidInputError):
            work(**bad)
    with pytest.raises(InvalidInputError, match="who"):
        work(WorkKind.HARVEST, who=" ")


def test_only_what_changes_is_sent() -> None:
    piece = work(WorkKind.WATER_CHANGE)
    before = quiet_kinds(TankCondition.IN_USE, piece)
    begun, ended = changed_rules({}, before)
    assert {rule for _, rule in begun} == {piece.rule}
    assert not ended
    assert changed_rules(before, before) == ((), ())
    after = quiet_kinds(TankCondition.IN_USE, piece, phase=WorkPhase.NOT_BACK)
    assert {kind for kind, _ in changed_rules(before, after)[1]} == {
        Kind.PROBE_DRY_OR_TANK_EMPTY,
        Kind.SENSORS_DISAGREE,
    }


def test_work_ended_early_and_work_stored() -> None:
    piece = ended_work(work(WorkKind.BATH), now_us=10 * MINUTE)
    assert (piece.until_us, piece.is_ended_early) == (10 * MINUTE, True)
    assert ended_work(piece, now_us=HOUR) is piece
    for kind in WorkKind:
        assert work_from_dict(json.loads(json.dumps(work_to_dict(work(kind))))) == work(kind)


def test_tanks_nobody_looked_at_come_longest_first() -> None:
    seen = {"a": 0, "b": 5 * HOUR, "c": 9 * HOUR}
    assert overdue_for_eyes(seen, now_us=10 * HOUR, after_s=4 * 3600) == (("a", 36000.0), ("b", 18000.0))
