"""Work done on sensors as the chain sees it: which calibration holds from when on, and what each service says of the record before."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, NamedTuple, Self

import msgspec
import numpy as np

from analysis.sensor.calibration import CalibrationRecord, drift_checks
from analysis.sensor.drift import (
    CONDUCTANCE_BOUNDS_PERCENT,
    Criterion,
    FoulingCheck,
    RecordCorrection,
    conductance_rating,
    corrected_temperature,
    temperature_rating,
)

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

    from analysis.arrays import FloatArray, IntArray
    from ingest.site.records import Records

MOST_PERCENT = CONDUCTANCE_BOUNDS_PERCENT[-1]
"""TM 1-D3: a value that needs more correction than this is not to be used."""
CALIBRATED = "sensor.calibrated"
SERVICED = "sensor.serviced"
"""Kinds of the ledger's events: a calibration, and a cleaning without one."""


class FoulingBody(msgspec.Struct, frozen=True, kw_only=True):
    """The sensor before and after cleaning, compensation undone, and a second meter beside it; None where there was none."""

    before_mS_cm: float
    after_mS_cm: float
    field_start_mS_cm: float | None = None
    field_end_mS_cm: float | None = None


class FoundBody(msgspec.Struct, frozen=True, kw_only=True):
    """What a service said of the record before it, as worked out when it was entered."""

    from_us: int | None
    fouling_percent: float
    drift_percent: float
    temperature_error_K: float
    rating: str
    temperature_rating: str
    is_corrected: bool


class ServiceBody(msgspec.Struct, frozen=True, kw_only=True, omit_defaults=True):
    """A calibration or a cleaning as the ledger keeps it.

    `record` is `CalibrationRecord.to_jsonable`, None for a cleaning; `shown` what the sensor showed in its own unit, as found
    and then as left. `level_mS_cm` is the conductivity of the water in which the sensor hangs: for it the error is judged.
    The last attributes are what follows; they are kept so that the ledger can be read without the program.
    """

    performed_by: str
    record: dict[str, Any] | None = None
    shown: tuple[float, ...] = ()
    fouling: FoulingBody | None = None
    error_began_at_us: int | None = None
    level_mS_cm: float | None = None
    note: str = ""
    factor: float | None = None
    offset_mS_cm: float | None = None
    temperature_offset_K: float | None = None
    remarks: tuple[str, ...] = ()
    found: FoundBody | None = None


class Service(NamedTuple):
    """A calibration or a cleaning of one sensor at one moment."""

    sensor: str
    performed_at_us: int
    kind: str
    body: ServiceBody

    @property
    def is_calibration(self) -> bool:
        """Whether the sensor was held into a standard."""
        return self.body.record is not None

    def record(self) -> CalibrationRecord | None:
        """Return the calibration record; None for a cleaning."""
        return None if self.body.record is None else CalibrationRecord.from_jsonable(self.body.record)

    def fouling(self, setting: Setting) -> FoulingCheck | None:
        """Return what cleaning changed, in the readings as *setting* corrected them."""
        own = self.body.fouling
        if own is None:
            return None
        start, end = own.field_start_mS_cm, own.field_end_mS_cm
        has_meter = start is not None and end is not None
        return FoulingCheck(
            before_mS_cm=setting.factor * own.before_mS_cm + setting.offset_mS_cm,
            after_mS_cm=setting.factor * own.after_mS_cm + setting.offset_mS_cm,
            field_start_mS_cm=start if has_meter and start is not None else 0.0,
            field_end_mS_cm=end if has_meter and end is not None else 0.0,
        )


@dataclass(frozen=True, slots=True)
class Setting:
    """What holds from a moment on: true conductivity = factor x reading + offset, true temperature = reading + offset."""

    from_us: int
    factor: float = 1.0
    offset_mS_cm: float = 0.0
    temperature_offset_K: float = 0.0


UNTOUCHED = Setting(-(2**63))
"""Before the first calibration."""


@dataclass(frozen=True, slots=True)
class Rules:
    """When an error of a record is large enough to be corrected."""

    conductivity: Criterion
    temperature_K: float

    @classmethod
    def of(cls, records: Records) -> Self:
        """Return the rules of a site."""
        return cls(Criterion(records.correct_above_percent, records.correct_above_mS_cm), records.correct_above_K)


@dataclass(frozen=True, slots=True)
class Period:
    """What one service says of the record up to it.

    Attributes
    ----------
    to_us : int
        When the service was done. [us UTC]
    conductivity : tuple of RecordCorrection
        Fouling since the service before, drift since the calibration before; empty where nothing can be said.
    temperature_from_us : int or None
        The check of temperature before.
    temperature_error_K : float
        Reference thermometer less sensor, as corrected until then.
    found : FoundBody
        In figures, with the rating.
    corrects_conductivity, corrects_temperature : bool
        Whether the errors exceed the criterion, so that the record is corrected.
    """

    to_us: int
    conductivity: tuple[RecordCorrection, ...]
    temperature_from_us: int | None
    temperature_error_K: float
    found: FoundBody
    corrects_conductivity: bool
    corrects_temperature: bool

    @property
    def from_us(self) -> int | None:
        """Where the part of the record begins that the service says something of; None if it says nothing."""
        return self.found.from_us


def has_temperature_check(record: CalibrationRecord) -> bool:
    """Return whether a reference thermometer was held beside the sensor."""
    return math.isfinite(record.reference_temperature_degC - record.sensor_temperature_degC)


def service(sensor: str, performed_at_us: int, kind: str, body: dict[str, Any]) -> Service:
    """Return a service from its body in the ledger."""
    return Service(sensor, performed_at_us, kind, msgspec.convert(body, ServiceBody))


def body_of(service: Service) -> dict[str, Any]:
    """Return what the ledger keeps of *service* as plain JSON data."""
    body: dict[str, Any] = msgspec.to_builtins(service.body)
    return body


def in_order(services: Iterable[Service]) -> list[Service]:
    """Return services of one sensor in the order of time; of two of one moment the later entry holds."""
    return sorted({one.performed_at_us: one for one in services}.values(), key=lambda one: one.performed_at_us)


def settings(services: Sequence[Service]) -> list[Setting]:
    """Return what holds from each calibration on, in the order of time; an unchecked thermometer keeps its offset."""
    held, warmth = [], 0.0
    for one in services:
        record = one.record()
        if record is None:
            continue
        if has_temperature_check(record):
            warmth = record.temperature_offset_K
        held.append(Setting(one.performed_at_us, record.fit.factor, record.fit.offset_mS_cm, warmth))
    return held


def periods(services: Sequence[Service], rules: Rules) -> list[Period]:
    """Return what each service says of the record before it.

    Fouling counts from the service before, drift from the calibration before; without one from the moment at which
    the person says that the error began. Where nobody knows that, the record stays as it is.

    Parameters
    ----------
    services : sequence of Service
        Of one sensor, in order (`in_order`).
    rules : Rules
    """
    found = []
    before: Service | None = None
    calibrated: CalibrationRecord | None = None
    checked_us: int | None = None
    setting = UNTOUCHED
    for one in services:
        record = one.record()
        found.append(
            _period(one, record, rules, before=before, calibrated=calibrated, checked_us=checked_us, setting=setting)
        )
        before = one
        if record is not None:
            calibrated = record
            warmth = setting.temperature_offset_K
            if has_temperature_check(record):
                warmth, checked_us = record.temperature_offset_K, one.performed_at_us
            setting = Setting(one.performed_at_us, record.fit.factor, record.fit.offset_mS_cm, warmth)
    return found


def _period(
    one: Service,
    record: CalibrationRecord | None,
    rules: Rules,
    *,
    before: Service | None,
    calibrated: CalibrationRecord | None,
    checked_us: int | None,
    setting: Setting,
) -> Period:
    began_us = one.body.error_began_at_us
    end_us = one.performed_at_us
    parts = []
    fouled_us = _start(None if before is None else before.performed_at_us, began_us, end_us)
    fouling = one.fouling(setting)
    if fouling is not None and fouled_us is not None:
        parts.append(RecordCorrection(fouled_us, end_us, fouling=fouling))
    drifted_us = _start(None if calibrated is None else calibrated.performed_at_us, began_us, end_us)
    if record is not None and drifted_us is not None:
        parts.append(RecordCorrection(drifted_us, end_us, drift=drift_checks(record, before=calibrated)))
    warm_us, error_K = None, 0.0
    if record is not None and has_temperature_check(record):
        warm_us = _start(checked_us, began_us, end_us)
        error_K = 0.0 if warm_us is None else record.temperature_offset_K - setting.temperature_offset_K
    level = one.body.level_mS_cm or 0.0
    signed = float(sum(part.total_percent(level) for part in parts))
    absolute = float(sum(part.absolute_sum_percent(level) for part in parts))
    corrects = bool(parts) and rules.conductivity.asks_for_correction(
        conductance_mS_cm=level, error_mS_cm=0.01 * signed * level
    )
    corrects_warmth = warm_us is not None and abs(error_K) > rules.temperature_K
    starts = [part.start_us for part in parts] + ([] if warm_us is None else [warm_us])
    figures = FoundBody(
        from_us=min(starts, default=None),
        fouling_percent=float(sum(part.fouling_percent for part in parts)),
        drift_percent=float(sum(float(part.drift_percent(level)) for part in parts)),
        temperature_error_K=error_K,
        rating=conductance_rating(absolute).words if parts else "",
        temperature_rating=temperature_rating(error_K).words if warm_us is not None else "",
        is_corrected=corrects or corrects_warmth,
    )
    return Period(end_us, tuple(parts), warm_us, error_K, figures, corrects, corrects_warmth)


def _start(known_us: int | None, began_us: int | None, end_us: int) -> int | None:
    """Return where an error began: at the work before, or later if a person knows better; None where nobody knows."""
    candidates = [moment for moment in (known_us, began_us) if moment is not None]
    start = max(candidates, default=None)
    return start if start is not None and start < end_us else None


def prorated(
    held: Sequence[Period], *, conductivity_mS_cm: FloatArray, temperature_degC: FloatArray, measured_at_us: IntArray
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Return a record with fouling and drift taken out, linearly in time from one service to the next (USGS TM 1-D3).

    Parameters
    ----------
    held : sequence of Period
        Of one sensor.
    conductivity_mS_cm, temperature_degC : ndarray of float64
        As the calibration in force made them.
    measured_at_us : ndarray of int64

    Returns
    -------
    tuple of three ndarray of float64
        Conductivity [mS/cm], temperature [degC], and the sum of the absolute corrections of conductivity [%].
    """
    percent, absolute = np.zeros(conductivity_mS_cm.shape), np.zeros(conductivity_mS_cm.shape)
    warmth = temperature_degC
    for period in held:
        # What is measured at the moment of a service is already read with its calibration.
        before = measured_at_us < period.to_us
        if period.corrects_conductivity:
            for part in period.conductivity:
                share = np.where(before, np.nan_to_num(part.share(measured_at_us), nan=0.0), 0.0)
                percent += share * part.total_percent(conductivity_mS_cm)
                absolute += share * part.absolute_sum_percent(conductivity_mS_cm)
        if period.corrects_temperature and period.temperature_from_us is not None:
            corrected = corrected_temperature(
                warmth,
                measured_at_us=measured_at_us,
                start_us=period.temperature_from_us,
                end_us=period.to_us,
                error_K=period.temperature_error_K,
            )
            warmth = np.where(before, corrected, warmth)
    return np.asarray(conductivity_mS_cm * (1.0 + 0.01 * percent)), np.asarray(warmth), absolute
