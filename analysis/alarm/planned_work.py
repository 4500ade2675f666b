"""Planned work on a tank, and the condition the tank is in: what they quieten, and what they never quieten.

Work lasts at most two hours and ends by itself. A floor stays: the animals' tolerable limits are judged on as
long as the probe is in their water. When the work is over and the value is not back in its band, one alarm says so
and the set-point alarms wait until it is back.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from enum import StrEnum
from typing import Any, NamedTuple

from analysis.alarm.kinds import ConditionKind as Kind
from analysis.alarm.rules import microseconds
from analysis.errors import InvalidInputError

LONGEST_WORK_S = 2 * 3600.0


class TankCondition(StrEnum):
    """What a tank is being used for."""

    EMPTY = "empty"
    FILLING = "filling"
    IN_USE = "in_use"
    UNDER_TREATMENT = "under_treatment"
    DRYING = "drying"


class WorkKind(StrEnum):
    """What is done at a tank."""

    PROBE_CLEANING = "probe_cleaning"
    WATER_CHANGE = "water_change"
    BATH = "bath"
    DRAINING = "draining"
    HARVEST = "harvest"


class WorkPhase(StrEnum):
    """Where a piece of work stands."""

    UNDER_WAY = "under_way"
    NOT_BACK = "not_back"
    """It is over, but the value is not back in its band (or cannot be seen)."""
    OVER = "over"


class Band(NamedTuple):
    """A low and a high limit of salinity."""

    low: float
    high: float


@dataclass(frozen=True, slots=True)
class PlannedWork:
    """One piece of work at one tank. `band` is the bath's own band; None for other work."""

    tank: str
    kind: WorkKind
    who: str
    why: str
    started_at_us: int
    until_us: int
    floor: Band
    band: Band | None = None
    is_ended_early: bool = False

    @property
    def rule(self) -> str:
        """Name under which it suppresses alarms by design."""
        return f"work/{self.kind}"


_SET_POINT_KINDS = frozenset(
    {
        Kind.SALINITY_LOW,
        Kind.SALINITY_HIGH,
        Kind.TEMPERATURE_LOW,
        Kind.TEMPERATURE_HIGH,
        Kind.CHANGING_TOO_FAST,
        Kind.HEADING_OUT_OF_RANGE,
        Kind.OFF_PLAN,
    }
)
_WITHOUT_WATER = _SET_POINT_KINDS | {
    Kind.STRESS,
    Kind.SENSORS_DISAGREE,
    Kind.ION_DEFICIENCY,
    Kind.PROBE_DRY_OR_TANK_EMPTY,
    Kind.UNWATCHED,
    Kind.SPECIES_BACKSTOP,
}

_QUIET_BY_WORK: dict[WorkKind, frozenset[Kind]] = {
    # The probe is out of the water: nothing it says is about the animals, and the person is at the tank.
    WorkKind.PROBE_CLEANING: _WITHOUT_WATER,
    # The level may fall below the probe while a person is there; the animals' own limits stay.
    WorkKind.WATER_CHANGE: _SET_POINT_KINDS | {Kind.PROBE_DRY_OR_TANK_EMPTY, Kind.SENSORS_DISAGREE},
    # The bath's own band replaces the set point's; only what measures change is quiet.
    WorkKind.BATH: frozenset({Kind.CHANGING_TOO_FAST, Kind.HEADING_OUT_OF_RANGE, Kind.OFF_PLAN, Kind.STRESS}),
    WorkKind.DRAINING: _WITHOUT_WATER,
    WorkKind.HARVEST: _WITHOUT_WATER,
}
_QUIET_BY_CONDITION: dict[TankCondition, frozenset[Kind]] = {
    TankCondition.EMPTY: _WITHOUT_WATER,
    TankCondition.DRYING: _WITHOUT_WATER,
    TankCondition.FILLING: _WITHOUT_WATER,
    TankCondition.UNDER_TREATMENT: frozenset(),
    TankCondition.IN_USE: frozenset(),
}
_FIRST_DURATION_S: dict[WorkKind, float] = {
    WorkKind.PROBE_CLEANING: 900.0,
    WorkKind.WATER_CHANGE: 3600.0,
    WorkKind.BATH: 1800.0,
    WorkKind.DRAINING: 3600.0,
    WorkKind.HARVEST: LONGEST_WORK_S,
}
"""Common practice; asked for when the work is begun."""


def first_duration_s(kind: WorkKind) -> float:
    """Return the duration that is offered first. [s]"""
    return _FIRST_DURATION_S[kind]


def begun_work(
    kind: WorkKind,
    *,
    tank: str,
    who: str,
    why: str,
    now_us: int,
    duration_s: float,
    floor: Band,
    band: Band | None = None,
) -> PlannedWork:
    """Begin work at a tank.

    Parameters
    ----------
    kind : WorkKind
        What is done.
    tank, who, why : str
        Where, by whom, for what.
    now_us : int
        The present time. [us UTC]
    duration_s : float
        At most two hours. [s]
    floor : Band
        Limits that stay in force (the animals' tolerable limits).
    band : Band, optional
        A bath's own band; needed for a bath, and for nothing else.

    Raises
    ------
    InvalidInputError
        If the duration is not above 0 and at most two hours, nobody is named, or a bath has no band.
    """
    if not 0 < duration_s <= LONGEST_WORK_S:
        raise InvalidInputError("duration of the work", found=duration_s, allowed=f"above 0 to {LONGEST_WORK_S:g} s")
    if not who.strip():
        raise InvalidInputError("who does the work", found=who, allowed="a name")
    if (kind is WorkKind.BATH) != (band is not None):
        raise InvalidInputError("band of the work", found=band, allowed="a band for a bath, none for other work")
    if band is not None and not band.low < band.high:
        raise InvalidInputError("band of the bath", found=tuple(band), allowed="low below high")
    return PlannedWork(tank, kind, who, why, now_us, now_us + microseconds(duration_s), floor, band)


def ended_work(work: PlannedWork, *, now_us: int) -> PlannedWork:
    """End work before its time."""
    if now_us >= work.until_us:
        return work
    return replace(work, until_us=now_us, is_ended_early=True)


def work_phase(work: PlannedWork, *, now_us: int, is_in_band: bool | None) -> WorkPhase:
    """Return where the work stands.

    Parameters
    ----------
    work : PlannedWork
        The work.
    now_us : int
        The present time. [us UTC]
    is_in_band : bool or None
        Whether the tank's believable values lie in its band; None: nobody can see. Missing is never "back".
    """
    if now_us < work.until_us:
        return WorkPhase.UNDER_WAY
    return WorkPhase.OVER if is_in_band else WorkPhase.NOT_BACK


def quiet_kinds(
    condition: TankCondition, work: PlannedWork | None = None, *, phase: WorkPhase = WorkPhase.UNDER_WAY
) -> dict[str, frozenset[Kind]]:
    """Return what is suppressed by design: the name of each rule and the kinds it quietens.

    After the end of the work only the set-point kinds wait for the value to come back; `WORK_NOT_BACK_IN_BAND`
    speaks for them. Draining and harvest leave an empty tank: its condition has to be set.
    """
    rules: dict[str, frozenset[Kind]] = {}
    if _QUIET_BY_CONDITION[condition]:
        rules[f"condition/{condition}"] = _QUIET_BY_CONDITION[condition]
    if work is not None and phase is not WorkPhase.OVER:
        quiet = _QUIET_BY_WORK[work.kind]
        rules[work.rule] = quiet if phase is WorkPhase.UNDER_WAY else quiet & _SET_POINT_KINDS
    return rules


def band_in_force(work: PlannedWork | None, *, set_point: Band, phase: WorkPhase) -> Band:
    """Return the salinity band a tank is judged on now: a bath's own band while it lasts, else the set point's."""
    if work is not None and work.band is not None and phase is WorkPhase.UNDER_WAY:
        return work.band
    return set_point


def changed_rules(
    before: dict[str, frozenset[Kind]], after: dict[str, frozenset[Kind]]
) -> tuple[tuple[tuple[Kind, str], ...], tuple[tuple[Kind, str], ...]]:
    """Return which (kind, rule) pairs begin and which end: the `Suppress` and `Unsuppress` events to send."""
    old = {(kind, rule) for rule, kinds in before.items() for kind in kinds}
    new = {(kind, rule) for rule, kinds in after.items() for kind in kinds}
    return tuple(sorted(new - old)), tuple(sorted(old - new))


def overdue_for_eyes(last_seen_us: dict[str, int], *, now_us: int, after_s: float) -> tuple[tuple[str, float], ...]:
    """Return the tanks that nobody has looked at for too long, the longest first, with the time since. [s]

    Parameters
    ----------
    last_seen_us : dict of str to int
        When a person last stood at each tank (entered a hand reading, did work, or said so). [us UTC]
    now_us : int
        The present time. [us UTC]
    after_s : float
        From which time on it is overdue. [s]
    """
    since = ((tank, (now_us - seen_us) / microseconds(1.0)) for tank, seen_us in last_seen_us.items())
    return tuple(sorted((item for item in since if item[1] > after_s), key=lambda item: (-item[1], item[0])))


def work_to_dict(work: PlannedWork) -> dict[str, Any]:
    """Return the work as plain JSON data."""
    return {
        "tank": work.tank,
        "kind": work.kind.value,
        "who": work.who,
        "why": work.why,
        "started_at_us": work.started_at_us,
        "until_us": work.until_us,
        "floor": list(work.floor),
        "band": None if work.band is None else list(work.band),
        "is_ended_early": work.is_ended_early,
    }


def work_from_dict(body: dict[str, Any]) -> PlannedWork:
    """Return the work that `work_to_dict` wrote."""
    band = body["band"]
    changes = {"kind": WorkKind(body["kind"]), "floor": Band(*body["floor"]), "band": band and Band(*band)}
    return PlannedWork(**{**body, **changes})
