"""Work on sensors: a calibration (`sensor.calibrate`) and a cleaning without one (`sensor.service`).

A person enters what the sensor showed; its unit and its own compensation are undone here. The command is refused where
the result could not be trusted: with an expired standard, a cell that is not linear, readings that belong to no standard.
What was found goes into the ledger; the readings from then on are corrected by the chain, the record before by a job
(`ingest.worker.rederiving`).
"""

from __future__ import annotations

import math
from datetime import UTC, date, datetime, time, timedelta
from typing import TYPE_CHECKING

import msgspec

from analysis.errors import InvalidInputError
from analysis.sensor.calibration import CalibrationRecord, Point
from analysis.sensor.standard import Standard, StandardKind, standard_of
from ingest.chain.calibrated import holds_at
from ingest.chain.services import (
    CALIBRATED,
    SERVICED,
    FoulingBody,
    Rules,
    Service,
    ServiceBody,
    body_of,
    in_order,
    periods,
)
from ingest.clock import to_microseconds
from ingest.commands.ruling import Ruling
from ingest.store.block import Occurrence, SensorWork
from ingest.store.calibrations import PeriodRow, ServiceRow
from ingest.store.corrected import JobRow
from ingest.store.ledger import Event

if TYPE_CHECKING:
    from collections.abc import Sequence
    from zoneinfo import ZoneInfo

    from ingest.chain.services import Period
    from ingest.commands.context import Context
    from ingest.store.inbox import Command

CALIBRATE = "sensor.calibrate"
SERVICE = "sensor.service"
NEEDED_ROLE = {CALIBRATE: "biologist", SERVICE: "operator"}
"""A calibration changes every value that follows and the record before it; a cleaning is daily work."""

MOST_CHECKS = 6
"""USGS TM 1-D3 interpolates between up to six standards."""
REFUSING_REMARKS = {"expired_standard": "expired_standard", "not_linear": "not_linear"}
"""Remarks of the record that refuse it. The others (a single standard, no date on the bottle) stand beside it."""


class StandardEntry(msgspec.Struct, frozen=True, kw_only=True, forbid_unknown_fields=True):
    """What the sensor was held into; `value` and its unit by the kind, `expires_on` the day printed on the bottle."""

    kind: StandardKind
    value: float = 0.0
    lot: str = ""
    expires_on: str | None = None


class PointEntry(msgspec.Struct, frozen=True, kw_only=True, forbid_unknown_fields=True):
    """One reading in a standard.

    `reading` is what the sensor showed, in the unit of its declaration, compensated if it compensates; `temperature_degC`
    that of the standard; `sensor_temperature_degC` what the sensor said of it, where that differs.
    """

    standard: StandardEntry
    reading: float
    temperature_degC: float
    sensor_temperature_degC: float | None = None


class FoulingEntry(msgspec.Struct, frozen=True, kw_only=True, forbid_unknown_fields=True):
    """The sensor in the tank's water before and after cleaning, and a second meter beside it at the same moments. [mS/cm]"""

    before: float
    after: float
    temperature_degC: float
    field_start_mS_cm: float | None = None
    field_end_mS_cm: float | None = None


class ServiceEntry(msgspec.Struct, frozen=True, kw_only=True, forbid_unknown_fields=True):
    """The body of both commands. Without `performed_at_us` it was done now; `error_began_at_us` is what somebody knows better."""

    performed_at_us: int | None = None
    performed_by: str = ""
    as_found: tuple[PointEntry, ...] = ()
    as_left: tuple[PointEntry, ...] = ()
    fouling: FoulingEntry | None = None
    reference_temperature_degC: float | None = None
    sensor_temperature_degC: float | None = None
    valid_days: float | None = None
    cell_constant_per_cm: float | None = None
    error_began_at_us: int | None = None
    note: str = ""


def rule(command: Command, context: Context) -> Ruling:
    """Carry out a command on one sensor; `subject` is ``sensor/<id>``."""
    sensor = command.subject.removeprefix("sensor/")
    if sensor not in context.site.sensor_index:
        return Ruling.refused("no_such_sensor")
    try:
        entry = msgspec.convert(command.body, ServiceEntry)
    except msgspec.ValidationError:
        return Ruling.refused("unusable_details")
    performed_at_us = context.now_us if entry.performed_at_us is None else entry.performed_at_us
    if performed_at_us > context.now_us:
        return Ruling.refused("in_the_future")
    is_calibration = command.kind == CALIBRATE
    if is_calibration is not bool(entry.as_found) or max(len(entry.as_found), len(entry.as_left)) > MOST_CHECKS:
        return Ruling.refused("unusable_details")
    try:
        record = _record(sensor, performed_at_us, entry, command.actor, context) if is_calibration else None
        body = _body(sensor, performed_at_us, entry, record, command.actor, context)
        entered = Service(sensor, performed_at_us, CALIBRATED if is_calibration else SERVICED, body)
        return _applied(entered, record, command, context)
    except InvalidInputError as error:
        return Ruling.refused(REASONS.get(error.what, "unusable_reading"))
    except _RefusedError as error:
        return Ruling.refused(error.reason)


REASONS = {
    "molality of the standard": "unusable_standard",
    "label of the standard": "unusable_standard",
    "K15 of the standard": "unusable_standard",
    "temperature of the standard": "standard_temperature_unknown",
    "cell constant factor": "factor_out_of_range",
    "valid_days": "unusable_details",
}
"""What the science complains of, as a reason that the screen has words for."""


class _RefusedError(Exception):
    def __init__(self, reason: str) -> None:
        self.reason = reason
        super().__init__(reason)


def _record(sensor: str, performed_at_us: int, entry: ServiceEntry, actor: str, context: Context) -> CalibrationRecord:
    record = CalibrationRecord(
        sensor=sensor,
        performed_at_us=performed_at_us,
        performed_by=entry.performed_by.strip() or actor,
        as_found=tuple(_point(sensor, point, context) for point in entry.as_found),
        as_left=tuple(_point(sensor, point, context) for point in entry.as_left),
        reference_temperature_degC=_nan(entry.reference_temperature_degC),
        sensor_temperature_degC=_nan(entry.sensor_temperature_degC),
        valid_days=context.site.records.calibration_valid_days if entry.valid_days is None else entry.valid_days,
        nominal_cell_constant_per_cm=_nan(entry.cell_constant_per_cm),
        note=entry.note,
    )
    # The readings as found judge the record before: an expired bottle is no judge of that either.
    for point in (*record.as_found, *record.as_left):
        if point.standard.expires_us is not None and point.standard.expires_us < performed_at_us:
            raise _RefusedError("expired_standard")
    for remark in record.remarks:
        if remark in REFUSING_REMARKS:
            raise _RefusedError(REFUSING_REMARKS[remark])
    return record


def _point(sensor: str, entry: PointEntry, context: Context) -> Point:
    warmth = entry.temperature_degC if entry.sensor_temperature_degC is None else entry.sensor_temperature_degC
    reading = context.as_measured(sensor, entry.reading, temperature_degC=warmth)
    return Point(_standard(entry.standard, context.site.zone), reading, entry.temperature_degC)


def _standard(entry: StandardEntry, zone: ZoneInfo) -> Standard:
    expires_us = None
    if entry.expires_on is not None:
        try:
            day = date.fromisoformat(entry.expires_on)
        except ValueError as error:
            raise _RefusedError("unusable_details") from error
        midnight = datetime.combine(day + timedelta(days=1), time(), tzinfo=zone)
        expires_us = to_microseconds(midnight.astimezone(UTC)) - 1
    return standard_of(entry.kind, entry.value, lot=entry.lot, expires_us=expires_us)


def _body(
    sensor: str,
    performed_at_us: int,
    entry: ServiceEntry,
    record: CalibrationRecord | None,
    actor: str,
    context: Context,
) -> ServiceBody:
    fouling = None
    if entry.fouling is not None:
        own = entry.fouling
        fouling = FoulingBody(
            before_mS_cm=context.as_measured(sensor, own.before, temperature_degC=own.temperature_degC),
            after_mS_cm=context.as_measured(sensor, own.after, temperature_degC=own.temperature_degC),
            field_start_mS_cm=own.field_start_mS_cm,
            field_end_mS_cm=own.field_end_mS_cm,
        )
    return ServiceBody(
        performed_by=entry.performed_by.strip() or actor,
        record=None if record is None else record.to_jsonable(),
        shown=tuple(point.reading for point in (*entry.as_found, *entry.as_left)),
        fouling=fouling,
        error_began_at_us=entry.error_began_at_us,
        level_mS_cm=_level(sensor, performed_at_us, fouling, record, context),
        note=entry.note,
    )


def _level(
    sensor: str,
    performed_at_us: int,
    fouling: FoulingBody | None,
    record: CalibrationRecord | None,
    context: Context,
) -> float | None:
    """Return the conductivity of the water in which the sensor hangs, by the best there is. [mS/cm]"""
    if fouling is not None:
        held = holds_at(context.services(sensor), performed_at_us)
        return held.factor * fouling.before_mS_cm + held.offset_mS_cm
    seen = context.seen_near(sensor, performed_at_us)
    if seen is not None and seen.conductivity_mS_cm is not None:
        return seen.conductivity_mS_cm
    return None if record is None else max(point.true_mS_cm for point in record.as_found)


def _applied(entered: Service, record: CalibrationRecord | None, command: Command, context: Context) -> Ruling:
    sensor, number = entered.sensor, context.sensor_number(entered.sensor)
    rules = Rules.of(context.site.records)
    before = periods(context.services(sensor), rules)
    services = in_order([*context.services(sensor), entered])
    after = periods(services, rules)
    own = next(period for period in after if period.to_us == entered.performed_at_us)
    body = msgspec.structs.replace(entered.body, found=own.found, remarks=_remarks(entered, record, own))
    if record is not None:
        held = holds_at(services, entered.performed_at_us + 1)
        body = msgspec.structs.replace(
            body,
            factor=held.factor,
            offset_mS_cm=held.offset_mS_cm,
            temperature_offset_K=held.temperature_offset_K,
        )
    kept = body_of(entered._replace(body=body))
    event = Event(
        kind=entered.kind,
        subject=command.subject,
        measured_at=entered.performed_at_us,
        recorded_at=context.now_us,
        actor=command.actor,
        body=kept,
    )
    next_due = None if record is None else record.next_due_us
    work = SensorWork(
        services=(ServiceRow(number, entered.performed_at_us, entered.kind, command.actor, next_due, kept),),
        periods=tuple(_period_row(number, period) for period in after),
        derives_as=context.derives_as,
    )
    jobs = _jobs(number, entered, before, after, context.newest_us(sensor))
    return Ruling("applied", occurrences=(Occurrence(event),), work=work, jobs=jobs)


def _remarks(entered: Service, record: CalibrationRecord | None, period: Period) -> tuple[str, ...]:
    """Return codes of what is to be seen beside the entry."""
    found = list(() if record is None else record.remarks)
    fouling = entered.body.fouling
    if fouling is not None and (fouling.field_start_mS_cm is None or fouling.field_end_mS_cm is None):
        found.append("no_second_meter")
    if period.from_us is None and (record is not None or fouling is not None):
        found.append("start_of_error_unknown")
    return tuple(found)


def _period_row(number: int, period: Period) -> PeriodRow:
    found = period.found
    says = bool(period.conductivity)
    return PeriodRow(
        sensor=number,
        to_us=period.to_us,
        from_us=found.from_us,
        fouling_percent=found.fouling_percent if says else None,
        drift_percent=found.drift_percent if says else None,
        temperature_error_K=found.temperature_error_K if period.temperature_from_us is not None else None,
        rating=found.rating or None,
        temperature_rating=found.temperature_rating or None,
        is_corrected=found.is_corrected,
    )


def _jobs(
    number: int, entered: Service, before: Sequence[Period], after: Sequence[Period], newest_us: int | None
) -> tuple[JobRow, ...]:
    """Return what has to be derived again: the record that a changed period covers, and readings stored since the work was done."""
    if newest_us is None:
        return ()
    starts = [entered.performed_at_us] if entered.is_calibration else []
    for period in (*before, *after):
        if period.to_us >= entered.performed_at_us and period.found.is_corrected and period.from_us is not None:
            starts.append(period.from_us)
    start = min(starts, default=newest_us + 1)
    if start > newest_us:
        return ()
    return (JobRow(number, start, newest_us + 1, "calibration" if entered.is_calibration else "cleaning"),)


def _nan(value: float | None) -> float:
    return math.nan if value is None else value
