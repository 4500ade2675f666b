"""Acclimation plans that are followed on tanks: what the ledger tells of them, with what the worker remembers of the water."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any, Final

import msgspec

from analysis.acclimation import follow
from analysis.acclimation.follow import Done, Followed, Progress
from analysis.acclimation.plan import Plan
from analysis.acclimation.record import from_record, to_record
from analysis.errors import InvalidInputError
from ingest.clock import to_datetime
from ingest.store import ledger, registry

if TYPE_CHECKING:
    import sqlite3
    from collections.abc import Iterable, Mapping
    from datetime import datetime

    from analysis.acclimation.follow import PlanBand
    from ingest.store.ledger import Event

PREFIX: Final = "plan."
STARTED: Final = "plan.started"
STEP_DONE: Final = "plan.step_done"
PAUSED: Final = "plan.paused"
RESUMED: Final = "plan.resumed"
ENDED: Final = "plan.ended"
"""Kinds of the ledger's events; their subject is ``tank/<id>``."""


@dataclass(frozen=True, slots=True)
class TankPlan:
    """The plan of a tank, while it runs and after.

    Attributes
    ----------
    tank : str
    started_at : int
        With the tank it names the plan. [us UTC]
    ended_at : int or None
        None while it runs. [us UTC]
    target : float
        The salinity that stands in the place of the site file's set point, because a plan has led there; NaN: none does.
    set_point : object
        What the site file said of the set point when that began (plain data): once it says something else, that holds.
    updated_at : int
        [us UTC]
    state : Followed
        Where it stands, and the record of what was done.
    """

    tank: str
    started_at: int
    ended_at: int | None
    target: float
    set_point: Any
    updated_at: int
    state: Followed

    @property
    def is_running(self) -> bool:
        """Whether it has not ended."""
        return self.ended_at is None

    @property
    def has_say(self) -> bool:
        """Whether the limits of its tank follow from it: while it runs, and after where it has led."""
        return self.is_running or not math.isnan(self.target)

    def salinities(self, at_us: int) -> tuple[float, float, float]:
        """Return where the tank should be now (NaN: where the site file says) and the band of the plan that runs (NaN: none)."""
        if not self.is_running:
            return self.target, math.nan, math.nan
        band = self.band(at_us)
        return self.target, band.low, band.high

    def moment(self, at_us: int) -> datetime:
        """Return a time as the plan's clock shows it."""
        return to_datetime(at_us).astimezone(self.state.task.begins_at.tzinfo)

    def band(self, at_us: int) -> PlanBand:
        """Return between which salinities the tank should be."""
        return follow.band_at(self.state, at=self.moment(at_us))


def projected(before: TankPlan | None, event: Event) -> TankPlan:
    """Return the plan of a tank after *event*.

    Parameters
    ----------
    before : TankPlan or None
        The newest plan of the tank; for a start one that has ended, or None.
    event : Event
        Of a kind of this module.

    Raises
    ------
    InvalidInputError
        If the plan cannot be started, or what is told cannot have happened to it.
    """
    body, at_us = event.body, event.recorded_at
    if event.kind == STARTED:
        plan: Plan = from_record(Plan, body["plan"])
        at = to_datetime(at_us).astimezone(plan.task.begins_at.tzinfo)
        state = follow.started(plan, by=event.actor, at=at, agreed=tuple(body["agreed"]))
        target, set_point = (math.nan, None) if before is None else (before.target, before.set_point)
        return TankPlan(
            event.subject.removeprefix("tank/"),
            at_us,
            None,
            target,
            set_point,
            at_us,
            _with_words(state, _yes(body["agreed"])),
        )
    if before is None:
        raise InvalidInputError("plan of a tank", found=event.kind, allowed="a plan that was started")
    after = replace(before, updated_at=at_us)
    if event.kind == ENDED:
        after = replace(after, ended_at=at_us)
        if body["has_arrived"]:
            after = replace(after, target=before.state.task.target.salinity, set_point=body["set_point"])
    return replace(after, state=_state_after(before, event))


def _state_after(plan: TankPlan, event: Event) -> Followed:
    state, body, by, at = plan.state, event.body, event.actor, plan.moment(event.recorded_at)
    if event.kind == STEP_DONE:
        # It was done: told again without the readings of then, a plan may seem halted.
        if state.progress is Progress.HALTED:
            state = replace(state, progress=Progress.ON_PLAN)
        return follow.step_done(state, by=by, at=at, words=body["words"])
    if event.kind == PAUSED:
        return follow.paused(state, by=by, at=at, reason=body["reason"])
    if event.kind == RESUMED and body["plan"] is not None:
        resumed = follow.resumed(state, from_record(Plan, body["plan"]), by=by, at=at)
        return _with_words(resumed, _yes(body["agreed"]))
    if event.kind == RESUMED:
        state = replace(state, progress=Progress.ON_PLAN, why="", record=(*state.record, Done(at, "resumed", by)))
        return follow.judged(state, at=at)
    if state.progress is Progress.FINISHED:
        return state
    return replace(state, record=(*state.record, Done(at, "ended", by, body["reason"])))


def _yes(agreed: Mapping[str, str]) -> str:
    return "; ".join(f"{who} agreed: {what}" for what, who in agreed.items())


def _with_words(state: Followed, words: str) -> Followed:
    """Return the state with *words* in its newest entry, where there are any."""
    return replace(state, record=(*state.record[:-1], replace(state.record[-1], words=words))) if words else state


def upsert(connection: sqlite3.Connection, plans: Iterable[TankPlan]) -> None:
    """Write down where plans stand, inside the caller's transaction."""
    for plan in plans:
        body = {"state": to_record(plan.state), "set_point": plan.set_point}
        connection.execute(
            "INSERT OR REPLACE INTO plan (tank, started_at, ended_at, animal, progress, target, updated_at, body)"
            " VALUES (?, ?, ?, ?, ?, ?, ?, ?)",
            (
                registry.tank_number(connection, plan.tank),
                plan.started_at,
                plan.ended_at,
                plan.state.task.animal,
                plan.state.progress.value,
                None if math.isnan(plan.target) else plan.target,
                plan.updated_at,
                msgspec.json.encode(body, order="deterministic").decode(),
            ),
        )


def read_all(connection: sqlite3.Connection) -> list[TankPlan]:
    """Return all plans in the order in which they were started, those that have ended too."""
    rows = connection.execute(
        "SELECT slug, started_at, ended_at, target, updated_at, body FROM plan JOIN tank ON tank.id = plan.tank"
        " ORDER BY started_at, slug"
    )
    return [_plan(row) for row in rows.fetchall()]


def with_say(connection: sqlite3.Connection) -> dict[str, TankPlan]:
    """Return the newest plan of each tank from which limits follow, by the tank's id."""
    rows = connection.execute(
        "SELECT slug, started_at, ended_at, target, updated_at, body FROM plan JOIN tank ON tank.id = plan.tank"
        " WHERE started_at = (SELECT max(started_at) FROM plan AS other WHERE other.tank = plan.tank)"
        " AND (ended_at IS NULL OR target IS NOT NULL) ORDER BY started_at, slug"
    )
    return {plan.tank: plan for plan in map(_plan, rows.fetchall())}


def _plan(row: sqlite3.Row) -> TankPlan:
    body = msgspec.json.decode(row["body"])
    target = math.nan if row["target"] is None else float(row["target"])
    state: Followed = from_record(Followed, body["state"])
    return TankPlan(
        row["slug"], row["started_at"], row["ended_at"], target, body["set_point"], row["updated_at"], state
    )


def rebuild(connection: sqlite3.Connection) -> int:
    """Make the table anew from the ledger, inside the caller's transaction; return the number of plans.

    What the worker remembers of the water is not in the ledger: the next reading of each tank tells it again.
    """
    connection.execute("DELETE FROM plan")
    newest: dict[str, TankPlan] = {}
    found: dict[tuple[str, int], TankPlan] = {}
    for _, event in ledger.read(connection, kind_prefix=PREFIX):
        plan = projected(newest.get(event.subject.removeprefix("tank/")), event)
        newest[plan.tank] = found[plan.tank, plan.started_at] = plan
    upsert(connection, found.values())
    return len(found)
