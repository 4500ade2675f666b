"""Samples of animals: values of body fluid from the laboratory (`sample.blood`), the stress test of postlarvae (`sample.postlarvae`).

The subject is ``cohort/<id>``. A value whose standards fail is kept and blocked; a usable one resets the modelled body fluid.
A postlarvae test touches neither numbers nor state: it is a record of quality.
"""

from __future__ import annotations

import math
from dataclasses import asdict, replace
from typing import TYPE_CHECKING, Any

import msgspec
import numpy as np

from analysis.animal import blood
from analysis.animal.osmoregulation import StageArrays, steady_internal
from analysis.animal.postlarvae import USUAL_PASS_MARK, PostlarvaeTest, verdict
from analysis.errors import InvalidInputError
from ingest.commands.ruling import Ruling
from ingest.commands.stock import RefusedError, moment, present
from ingest.store import samples
from ingest.store.block import Occurrence
from ingest.store.ledger import Event

if TYPE_CHECKING:
    from collections.abc import Mapping

    from analysis.animal.osmoregulation import CohortState
    from analysis.animal.stage import Stage
    from ingest.commands.context import Context
    from ingest.commands.stock_book import FeltNear
    from ingest.store.cohorts import CohortRow
    from ingest.store.inbox import Command

BLOOD = "sample.blood"
POSTLARVAE = "sample.postlarvae"
NEEDED_ROLE = {BLOOD: "biologist", POSTLARVAE: "operator"}
"""A blood value changes what the chain says of the animals; a stress test is a count."""

US_PER_H = 3_600_000_000
US_PER_D = 24 * US_PER_H
FRESH_US = US_PER_H
"""Without a record of the moment of sampling a value stands for now this long. Assumed: body fluid settles in hours."""


class StandardEntry(msgspec.Struct, frozen=True, kw_only=True, forbid_unknown_fields=True):
    """A reference solution and what the osmometer read in it. [mOsm/kg]"""

    nominal_mOsm_kg: float
    read_mOsm_kg: float


class BloodEntry(msgspec.Struct, frozen=True, kw_only=True, forbid_unknown_fields=True):
    """A laboratory value as the person enters it; `at_us` is when the animals were sampled, now without it."""

    replicates_mOsm_kg: tuple[float, ...]
    method: blood.OsmometerMethod
    standards: tuple[StandardEntry, ...] = ()
    at_us: int | None = None
    volume_microlitre: float | None = None
    delay_s: float | None = None
    is_pooled: bool = False
    fluid: str = "haemolymph"
    moult_stage: str = ""
    by: str = ""
    note: str = ""


class PostlarvaeEntry(msgspec.Struct, frozen=True, kw_only=True, forbid_unknown_fields=True):
    """A stress test as it was done; without `age_d` the age follows from the cohort's metamorphosis, if that is known."""

    from_salinity: float
    to_salinity: float
    minutes: float
    recovery_minutes: float
    counted: int
    alive: int
    pass_mark: float = USUAL_PASS_MARK
    at_us: int | None = None
    age_d: float | None = None
    by: str = ""
    note: str = ""


def rule(command: Command, context: Context) -> Ruling:
    """Carry out a command on one cohort."""
    try:
        row = present(command.subject.removeprefix("cohort/"), command, context)
        if command.kind == BLOOD:
            return _blood(row, msgspec.convert(command.body, BloodEntry), command, context)
        return _postlarvae(row, msgspec.convert(command.body, PostlarvaeEntry), command, context)
    except (msgspec.ValidationError, InvalidInputError):
        return Ruling.refused("unusable_details")
    except RefusedError as error:
        return Ruling.refused(error.reason)


def _blood(row: CohortRow, entry: BloodEntry, command: Command, context: Context) -> Ruling:
    at_us = moment(entry.at_us, context, not_before_us=row.since)
    if not all(standard.nominal_mOsm_kg > 0 and standard.read_mOsm_kg > 0 for standard in entry.standards):
        raise RefusedError("unusable_details")
    value = blood.blood_value(
        blood.BloodSample(
            at_us,
            entry.replicates_mOsm_kg,
            entry.method,
            tuple(blood.Standard(one.nominal_mOsm_kg, one.read_mOsm_kg) for one in entry.standards),
            volume_microlitre=_nan(entry.volume_microlitre),
            delay_s=_nan(entry.delay_s),
            is_pooled=entry.is_pooled,
            fluid=entry.fluid,
            moult_stage=entry.moult_stage,
            by=entry.by or command.actor,
        )
    )
    stage = context.stock_book.stage(row.animal)
    felt = context.stock_book.felt_near(row.id, at_us)
    states: dict[str, CohortState] = {}
    if value.is_usable and stage is not None:
        after = _reset(context.stock_book.live_state(row.id), value, stage, felt, at_us, context.now_us)
        states = {} if after is None else {row.id: after}
    body = {
        **msgspec.to_builtins(entry),
        "by": entry.by or command.actor,
        "value_mOsm_kg": value.osmolality_mOsm_kg,
        "variation": value.variation,
        "is_usable": value.is_usable,
        "remarks": list(value.remarks),
        "has_reset": bool(states),
        **_capacity(value, stage, felt),
    }
    return _entered(samples.BLOOD, row, at_us, body, states, command, context)


def _reset(
    state: CohortState, value: blood.BloodValue, stage: Stage, felt: FeltNear | None, at_us: int, now_us: int
) -> CohortState | None:
    """Return the state whose body fluid is put right by a sample, None where the sample is too old to say anything.

    What the model was wrong by when the animals were sampled has died away since with its own settling time: the body
    fluid follows the water linearly.
    """
    modelled = math.nan if felt is None else felt.internal_mOsm_kg
    if felt is None or math.isnan(modelled):
        return blood.with_blood(state, 0, value) if now_us - at_us <= FRESH_US else None
    settling_h = float(StageArrays.from_stages([stage]).tau_internal[0])
    hours = max(0.0, (int(state.updated_at_us[0]) - at_us) / US_PER_H)
    left = math.exp(-hours / settling_h) if settling_h > 0 else 1.0
    now = float(state.internal[0]) + (value.osmolality_mOsm_kg - modelled) * left
    return blood.with_blood(state, 0, replace(value, osmolality_mOsm_kg=now))


def _capacity(value: blood.BloodValue, stage: Stage | None, felt: FeltNear | None) -> dict[str, float | None]:
    """Return the osmoregulatory capacity in the water of the moment of sampling, None where that is not on record."""
    names = ("water_mOsm_kg", "capacity_mOsm_kg", "expected_capacity_mOsm_kg", "capacity_share")
    if stage is None or felt is None or not value.is_usable:
        return dict.fromkeys(names)
    water = felt.internal_mOsm_kg - felt.gap_mOsm_kg
    if math.isnan(water):
        return dict.fromkeys(names)
    settled = float(steady_internal(StageArrays.from_stages([stage]), np.array([water]))[0])
    capacity = blood.osmoregulatory_capacity(
        value.osmolality_mOsm_kg, water_mOsm_kg=water, steady_internal_mOsm_kg=settled
    )
    found = (water, capacity.measured_mOsm_kg, capacity.expected_mOsm_kg, capacity.share)
    return {name: None if math.isnan(one) else one for name, one in zip(names, found, strict=True)}


def _postlarvae(row: CohortRow, entry: PostlarvaeEntry, command: Command, context: Context) -> Ruling:
    at_us = moment(entry.at_us, context, not_before_us=row.since)
    age_d = entry.age_d
    settled = row.body.get("metamorphosed_at")
    if age_d is None and settled is not None:
        age_d = (at_us - settled) / US_PER_D
    test = PostlarvaeTest(
        at_us,
        _nan(age_d),
        entry.from_salinity,
        entry.to_salinity,
        entry.minutes,
        entry.recovery_minutes,
        entry.counted,
        entry.alive,
        entry.pass_mark,
        entry.by or command.actor,
    )
    body = {**msgspec.to_builtins(entry), "by": test.by, "age_d": age_d, "verdict": asdict(verdict(test))}
    return _entered(samples.POSTLARVAE, row, at_us, body, {}, command, context)


def _entered(
    kind: str,
    row: CohortRow,
    at_us: int,
    body: Mapping[str, Any],
    states: Mapping[str, CohortState],
    command: Command,
    context: Context,
) -> Ruling:
    kept = {name: value for name, value in body.items() if name != "at_us"}
    event = Event(
        kind=kind,
        subject=f"cohort/{row.id}",
        measured_at=at_us,
        recorded_at=context.now_us,
        actor=command.actor,
        body={"cohort": row.id, "tank": row.tank, "animal": row.animal, **kept},
    )
    context.stock_book.enter(event, states)
    return Ruling("applied", occurrences=(Occurrence(event),))


def _nan(value: float | None) -> float:
    return math.nan if value is None else value
