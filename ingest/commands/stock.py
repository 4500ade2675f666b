"""Work on stock: animals are received, moved, split, joined, counted, harvested, taken out dead; their stage is confirmed.

The subject is ``cohort/<id>``. Each command leaves one event in the ledger, from which alone the cohorts can be told again
(`ingest.store.cohorts`); what the animals are used to goes with them. An entry may be made after the fact: the animals are
then taken from where they were at that moment through all that was measured since in the tank to which they came.
"""

from __future__ import annotations

import math
import re
from dataclasses import replace
from typing import TYPE_CHECKING, Any

import msgspec

from analysis.animal import cohort as herd
from analysis.animal.osmoregulation import StageArrays, steady_internal
from analysis.errors import InvalidInputError
from ingest.commands.ruling import Ruling
from ingest.commands.stock_entries import (
    CountEntry,
    DeadEntry,
    HarvestEntry,
    JoinEntry,
    MoveEntry,
    ReceiveEntry,
    SplitEntry,
    StageEntry,
)
from ingest.site.section import SLUG_LENGTH, SLUG_PATTERN
from ingest.store import cohorts
from ingest.store.block import Occurrence
from ingest.store.ledger import Event

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping

    from analysis.animal.osmoregulation import CohortState
    from ingest.commands.context import Context
    from ingest.commands.stock_book import StockBook
    from ingest.commands.stock_entries import Entry
    from ingest.store.cohorts import CohortRow
    from ingest.store.inbox import Command

RECEIVE = "stock.receive"
MOVE = "stock.move"
SPLIT = "stock.split"
JOIN = "stock.join"
COUNT = "stock.count"
REMOVE_DEAD = "stock.remove_dead"
HARVEST = "stock.harvest"
CONFIRM_STAGE = "stock.confirm_stage"
NEEDED_ROLE = {
    RECEIVE: "operator",
    MOVE: "operator",
    SPLIT: "operator",
    JOIN: "operator",
    COUNT: "operator",
    REMOVE_DEAD: "operator",
    HARVEST: "operator",
    CONFIRM_STAGE: "biologist",
}
"""Handling animals is daily work; which stage they are in decides on the limits that hold for them."""

MOST_ANIMALS = 10_000_000_000
LARGEST_SALINITY = 300.0


class RefusedError(Exception):
    """A command that is refused, with its reason as a code."""

    def __init__(self, reason: str) -> None:
        self.reason = reason
        super().__init__(reason)


def rule(command: Command, context: Context) -> Ruling:
    """Carry out a command on one cohort."""
    cohort_id = command.subject.removeprefix("cohort/")
    try:
        if command.kind == RECEIVE:
            return _received(cohort_id, command, context)
        row = present(cohort_id, command, context)
        entry = msgspec.convert(command.body, _ENTRIES[command.kind])
        at_us = moment(entry.at_us, context, not_before_us=row.changed_at)
        return _RULES[command.kind](row, entry, at_us, command, context)
    except msgspec.ValidationError:
        return Ruling.refused("unusable_details")
    except InvalidInputError as error:
        return Ruling.refused(REASONS.get(error.what, "unusable_details"))
    except RefusedError as error:
        return Ruling.refused(error.reason)


REASONS = {
    "number split off": "not_so_many",
    "number dead": "not_so_many",
    "number harvested": "not_so_many",
    "animal of the cohort put to it": "another_stage",
}
"""What the biology complains of, as a reason that the screen has words for."""


def present(cohort_id: str, command: Command, context: Context) -> CohortRow:
    """Return a cohort that is on the site, as the person who asks has seen it."""
    row = context.stock_book.cohort(cohort_id)
    if row is None:
        raise RefusedError("no_such_cohort")
    if row.ended_at is not None:
        raise RefusedError("cohort_has_ended")
    if command.expected and command.expected != str(row.event_id):
        raise RefusedError("changed_meanwhile")
    return row


def moment(at_us: int | None, context: Context, *, not_before_us: int = 0) -> int:
    """Return the moment of an entry: now, if it names none."""
    found = context.now_us if at_us is None else at_us
    if found > context.now_us:
        raise RefusedError("in_the_future")
    if found < not_before_us:
        raise RefusedError("before_the_last_entry")
    return found


def _received(cohort_id: str, command: Command, context: Context) -> Ruling:
    book = context.stock_book
    _check_new_id(cohort_id, book)
    entry = msgspec.convert(command.body, ReceiveEntry)
    at_us = moment(entry.at_us, context)
    _check_tank(entry.tank, context)
    stage = book.stage(entry.animal)
    if stage is None:
        raise RefusedError("no_such_animal")
    _check_number(entry.number)
    _check_received(entry, at_us)
    used_to = math.nan
    if entry.used_to_salinity is not None:
        used_to = book.osmolality_mOsm_kg(entry.tank, entry.used_to_salinity)
    came = herd.received(
        herd.Received(
            at_us,
            cohort_id,
            entry.tank,
            entry.animal,
            entry.number,
            used_to,
            used_for_h=_nan(entry.used_for_h),
            temperature_degC=_nan(entry.temperature_degC),
        ),
        stage,
    )
    # Their body fluid is that of animals settled in the water they lived in.
    inside = steady_internal(StageArrays.from_stages([stage]), came.state.acclimated)
    state = book.after_coming(replace(came.state, internal=inside), stage, tank=entry.tank, at_us=at_us)
    noted = msgspec.to_builtins(entry)
    kept = {name: value for name, value in noted.items() if value not in (None, "") and name != "at_us"}
    return _entered(cohorts.RECEIVED, cohort_id, at_us, kept | {"since": at_us}, {cohort_id: state}, command, context)


def _check_received(entry: ReceiveEntry, at_us: int) -> None:
    limits = (
        (entry.used_to_salinity, 0.0, LARGEST_SALINITY),
        (entry.used_for_h, 0.0, math.inf),
        (entry.temperature_degC, -2.0, 45.0),
        (entry.hours_packed, 0.0, 500.0),
        (entry.density_per_L, 0.0, 1e9),
        (entry.ph, 0.0, 14.0),
    )
    for value, low, high in limits:
        if value is not None and not low <= value <= high:
            raise RefusedError("unusable_details")
    _check_dates(entry.hatched_at, entry.metamorphosed_at, at_us)


def _moved(row: CohortRow, entry: MoveEntry, at_us: int, command: Command, context: Context) -> Ruling:
    _check_tank(entry.to_tank, context)
    if entry.to_tank == row.tank:
        raise RefusedError("already_there")
    [after] = herd.after(_cohort(row, at_us, context), herd.Moved(at_us, entry.to_tank))
    body = {"tank": after.tank, "from_tank": row.tank, "number": row.number}
    state = _there(after, at_us, context)
    return _entered(cohorts.MOVED, row.id, at_us, _noted(body, entry), {row.id: state}, command, context)


def _split(row: CohortRow, entry: SplitEntry, at_us: int, command: Command, context: Context) -> Ruling:
    _check_new_id(entry.new_id, context.stock_book)
    _check_tank(entry.to_tank, context)
    rest, new = herd.after(_cohort(row, at_us, context), herd.Split(at_us, entry.new_id, entry.to_tank, entry.number))
    body = {
        "number": rest.number,
        "number_before": row.number,
        "new_cohort": new.id,
        "new_tank": new.tank,
        "new_number": new.number,
        "new_name": entry.name,
    }
    # Those that stay are where they were: what the chain knows of them now is right as it is.
    stays = new.tank == row.tank
    states = {new.id: context.stock_book.live_state(row.id) if stays else _there(new, at_us, context)}
    return _entered(cohorts.SPLIT, row.id, at_us, _noted(body, entry), states, command, context)


def _joined(row: CohortRow, entry: JoinEntry, at_us: int, command: Command, context: Context) -> Ruling:
    other = context.stock_book.cohort(entry.other)
    if other is None or entry.other == row.id:
        raise RefusedError("no_such_cohort")
    if other.ended_at is not None:
        raise RefusedError("cohort_has_ended")
    if at_us < other.changed_at:
        raise RefusedError("before_the_last_entry")
    both, _ = herd.after(_cohort(row, at_us, context), herd.Joined(at_us, _cohort(other, at_us, context)))
    body = {
        "number": both.number,
        "number_before": row.number,
        "other": other.id,
        "other_number": other.number,
        "other_tank": other.tank,
    }
    states = {row.id: _there(both, at_us, context)}
    return _entered(cohorts.JOINED, row.id, at_us, _noted(body, entry), states, command, context)


def _counted(row: CohortRow, entry: CountEntry, at_us: int, command: Command, context: Context) -> Ruling:
    if not 0 <= entry.number <= MOST_ANIMALS:
        raise RefusedError("unusable_number")
    [after] = herd.after(_cohort(row, at_us, context), herd.Counted(at_us, entry.number))
    body = {"number": after.number, "number_before": row.number}
    return _entered(cohorts.COUNTED, row.id, at_us, _noted(body, entry), {}, command, context)


def _died(row: CohortRow, entry: DeadEntry, at_us: int, command: Command, context: Context) -> Ruling:
    from_us = row.body.get("counted_at", row.since) if entry.from_us is None else entry.from_us
    if not 0 <= from_us <= at_us:
        raise RefusedError("unusable_details")
    [after] = herd.after(_cohort(row, at_us, context), herd.Died(at_us, entry.number))
    body = {"number": after.number, "number_before": row.number, "dead": entry.number, "from_us": from_us}
    return _entered(cohorts.DIED, row.id, at_us, _noted(body, entry), {}, command, context)


def _harvested(row: CohortRow, entry: HarvestEntry, at_us: int, command: Command, context: Context) -> Ruling:
    [after] = herd.after(_cohort(row, at_us, context), herd.Harvested(at_us, entry.number))
    body = {"number": after.number, "number_before": row.number, "harvested": row.number - after.number}
    return _entered(cohorts.HARVESTED, row.id, at_us, _noted(body, entry), {}, command, context)


def _stage_confirmed(row: CohortRow, entry: StageEntry, at_us: int, command: Command, context: Context) -> Ruling:
    stage = context.stock_book.stage(entry.animal)
    if stage is None or _species(entry.animal) != _species(row.animal):
        raise RefusedError("no_such_animal")
    hatched = row.body.get("hatched_at") if entry.hatched_at is None else entry.hatched_at
    settled = row.body.get("metamorphosed_at") if entry.metamorphosed_at is None else entry.metamorphosed_at
    _check_dates(hatched, settled, at_us)
    proposed = row.body.get("proposed")
    body: dict[str, Any] = {"animal": entry.animal, "before": row.animal}
    body |= {"hatched_at": entry.hatched_at, "metamorphosed_at": entry.metamorphosed_at}
    if proposed is not None and entry.animal != proposed["stage"]:
        body["declined"] = proposed["stage"]
    kept = {name: value for name, value in body.items() if value is not None}
    return _entered(cohorts.STAGE_CONFIRMED, row.id, at_us, _noted(kept, entry), {}, command, context)


_ENTRIES: Mapping[str, Any] = {
    MOVE: MoveEntry,
    SPLIT: SplitEntry,
    JOIN: JoinEntry,
    COUNT: CountEntry,
    REMOVE_DEAD: DeadEntry,
    HARVEST: HarvestEntry,
    CONFIRM_STAGE: StageEntry,
}
_RULES: Mapping[str, Callable[[CohortRow, Any, int, Command, Context], Ruling]] = {
    MOVE: _moved,
    SPLIT: _split,
    JOIN: _joined,
    COUNT: _counted,
    REMOVE_DEAD: _died,
    HARVEST: _harvested,
    CONFIRM_STAGE: _stage_confirmed,
}


def _cohort(row: CohortRow, at_us: int, context: Context) -> herd.Cohort:
    state = context.stock_book.state(row.id, at_us=at_us)
    return herd.Cohort(
        row.id,
        row.tank,
        row.animal,
        row.number,
        state,
        row.body.get("hatched_at"),
        row.body.get("metamorphosed_at"),
    )


def _there(cohort: herd.Cohort, at_us: int, context: Context) -> CohortState:
    """Return the state of a cohort that came into its tank at *at_us*, as it is now."""
    stage = context.stock_book.stage(cohort.animal)
    if stage is None:
        return cohort.state
    return context.stock_book.after_coming(cohort.state, stage, tank=cohort.tank, at_us=at_us)


def _entered(
    kind: str,
    cohort_id: str,
    at_us: int,
    body: Mapping[str, Any],
    states: Mapping[str, CohortState],
    command: Command,
    context: Context,
) -> Ruling:
    """Return the ruling that writes one event, after taking it up into the animals of the chain."""
    book = context.stock_book
    row = book.cohort(cohort_id)
    known = {} if row is None else {"tank": row.tank, "animal": row.animal}
    # What the animals are used to at that moment is kept with the event: it tells what they were put through.
    kept = {name: state.to_dicts()[0] for name, state in states.items()}
    event = Event(
        kind=kind,
        subject=f"cohort/{cohort_id}",
        measured_at=at_us,
        recorded_at=context.now_us,
        actor=command.actor,
        body={"cohort": cohort_id, **known, **body} | ({"states": kept} if kept else {}),
    )
    book.enter(event, states)
    return Ruling("applied", occurrences=(Occurrence(event),))


def _noted(body: Mapping[str, Any], entry: Entry) -> dict[str, Any]:
    return {**body, "note": entry.note} if entry.note else dict(body)


def _check_new_id(cohort_id: str, book: StockBook) -> None:
    if re.fullmatch(SLUG_PATTERN, cohort_id) is None or len(cohort_id) > SLUG_LENGTH:
        raise RefusedError("unusable_id")
    if book.cohort(cohort_id) is not None:
        raise RefusedError("id_is_taken")


def _check_tank(tank: str, context: Context) -> None:
    if tank not in context.site.tank_index:
        raise RefusedError("no_such_tank")


def _check_number(number: int) -> None:
    if not 1 <= number <= MOST_ANIMALS:
        raise RefusedError("unusable_number")


def _check_dates(hatched_at: int | None, metamorphosed_at: int | None, at_us: int) -> None:
    dates = [date for date in (0, hatched_at, metamorphosed_at, at_us) if date is not None]
    if dates != sorted(dates):
        raise RefusedError("dates_out_of_order")


def _species(animal: str) -> str:
    return animal.partition("/")[0]


def _nan(value: float | None) -> float:
    return math.nan if value is None else value
