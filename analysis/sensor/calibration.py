"""Calibration of a conductivity sensor: what the standard is, what the sensor says, and what follows.

A calibration record keeps what was found before anything was adjusted and what was left after; its cell constant
factor and offset apply from its time on. The record before it is corrected for drift (`analysis.sensor.drift`).
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any, Final, Self

import numpy as np

from analysis.arrays import MICROSECONDS_PER_SECOND
from analysis.errors import InvalidInputError
from analysis.sensor.drift import DriftCheck
from analysis.sensor.standard import Standard, StandardKind, standard_of

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from numpy.typing import ArrayLike

    from analysis.arrays import FloatArray, IntArray

MICROSECONDS_PER_DAY: Final = 86_400 * MICROSECONDS_PER_SECOND


@dataclass(frozen=True, slots=True)
class Point:
    """One reading in one standard.

    Parameters
    ----------
    standard : Standard
    reading_mS_cm : float
        What the sensor says, compensation undone, before any calibration of ours. [mS/cm]
    temperature_degC : float
        Temperature of the standard. [degC]

    Raises
    ------
    InvalidInputError
        If the standard is not known at that temperature, or a conducting standard reads nothing.
    """

    standard: Standard
    reading_mS_cm: float
    temperature_degC: float

    def __post_init__(self) -> None:
        if not math.isfinite(self.true_mS_cm):
            raise InvalidInputError("temperature of the standard", found=self.temperature_degC, allowed="0 to 55 degC")
        conducts = self.standard.kind is not StandardKind.DRY_AIR
        if not math.isfinite(self.reading_mS_cm) or (conducts and self.reading_mS_cm <= 0.0):
            raise InvalidInputError(
                "reading in the standard", found=self.reading_mS_cm, allowed="above 0 mS/cm (a number, in dry air)"
            )

    @property
    def true_mS_cm(self) -> float:
        """What the standard is at its temperature. [mS/cm]"""
        return float(self.standard.conductivity_mS_cm(self.temperature_degC))

    @property
    def error_mS_cm(self) -> float:
        """Reading less true value. [mS/cm]"""
        return self.reading_mS_cm - self.true_mS_cm

    @property
    def error_percent(self) -> float:
        """Error in percent of the true value; NaN in dry air. [%]"""
        return 100.0 * self.error_mS_cm / self.true_mS_cm if self.true_mS_cm > 0.0 else math.nan


RELATIVE_WEIGHT: Final = 0.001
SMALLEST_WEIGHT_MS_CM: Final = 0.005
"""Points are weighted as if each were good to 0.1 % and 0.005 mS/cm: low standards are not drowned by high ones."""

LARGEST_DEPARTURE_PERCENT: Final = 1.0
"""A point further than this from the straight line means that the cell is not linear (common practice)."""


@dataclass(frozen=True, slots=True)
class CellFit:
    """True conductivity = factor x reading + offset.

    Parameters
    ----------
    factor : float
        By which the cell constant is to be multiplied. [1]
    offset_mS_cm : float
        0 with a single standard. [mS/cm]
    departures_percent : tuple of float
        Of each point from the line, in percent of its true value (of 0.5 mS/cm where that is larger).
    """

    factor: float
    offset_mS_cm: float
    departures_percent: tuple[float, ...]

    @property
    def is_linear(self) -> bool | None:
        """Whether all points lie on one line; None with fewer than three: two always do."""
        if len(self.departures_percent) < 3:
            return None
        return max(map(abs, self.departures_percent)) <= LARGEST_DEPARTURE_PERCENT


def fitted(points: Sequence[Point]) -> CellFit:
    """Return cell constant factor and offset from one or more points.

    One standard (or several readings in one) gives the factor alone; two or more give factor and offset by
    weighted least squares.

    Raises
    ------
    InvalidInputError
        If there is no conducting standard, or the factor comes out beyond 0.5 to 2: the cell is broken or the
        wrong bottle was used.
    """
    conducting = [point for point in points if point.standard.kind is not StandardKind.DRY_AIR]
    if not conducting:
        raise InvalidInputError("calibration points", found=len(points), allowed="at least one conducting standard")
    true = np.array([point.true_mS_cm for point in points])
    reading = np.array([point.reading_mS_cm for point in points])
    weight = 1.0 / (RELATIVE_WEIGHT * true + SMALLEST_WEIGHT_MS_CM)
    if np.ptp(true) <= 0.02 * true.max():
        factor, offset = float(np.sum(weight * true) / np.sum(weight * reading)), 0.0
    else:
        terms = np.stack((reading, np.ones_like(reading)), axis=1) * weight[:, None]
        solution = np.linalg.lstsq(terms, true * weight, rcond=None)[0]
        factor, offset = float(solution[0]), float(solution[1])
    if not 0.5 <= factor <= 2.0:
        raise InvalidInputError("cell constant factor", found=round(factor, 4), allowed="0.5 to 2")
    departure = factor * reading + offset - true
    percent = 100.0 * departure / np.maximum(true, SMALLEST_WEIGHT_MS_CM / 0.01)
    return CellFit(factor, offset, tuple(float(x) for x in percent))


DEFAULT_VALID_DAYS: Final = 30.0
"""A month between calibrations (common practice); fouling decides, not the calendar."""


@dataclass(frozen=True, slots=True, kw_only=True)
class CalibrationRecord:
    """One calibration: append-only; a mistake is superseded by another record, never changed.

    Parameters
    ----------
    sensor : str
        Id of the sensor.
    performed_at_us : int
        From when on it applies. [us]
    performed_by : str
        Who did it.
    as_found : tuple of Point
        After cleaning, before anything was adjusted.
    as_left : tuple of Point
        After adjustment; empty where nothing was adjusted in the sensor itself.
    reference_temperature_degC, sensor_temperature_degC : float, optional
        A reference thermometer beside the sensor, and what the sensor said. [degC]
    valid_days : float
        Until the next calibration is due. [d]
    nominal_cell_constant_per_cm : float, optional
        As the maker states it. [1/cm]
    note : str
    """

    sensor: str
    performed_at_us: int
    performed_by: str
    as_found: tuple[Point, ...]
    as_left: tuple[Point, ...] = ()
    reference_temperature_degC: float = math.nan
    sensor_temperature_degC: float = math.nan
    valid_days: float = DEFAULT_VALID_DAYS
    nominal_cell_constant_per_cm: float = math.nan
    note: str = ""
    fit: CellFit = field(init=False)

    def __post_init__(self) -> None:
        if not self.performed_by.strip():
            raise InvalidInputError("performed_by", found=self.performed_by, allowed="the name of a person")
        if not self.valid_days > 0.0:
            raise InvalidInputError("valid_days", found=self.valid_days, allowed="above 0 d")
        object.__setattr__(self, "fit", fitted(self.as_left or self.as_found))

    @property
    def next_due_us(self) -> int:
        """When the next calibration is due: a task, not an alarm. [us]"""
        return self.performed_at_us + round(self.valid_days * MICROSECONDS_PER_DAY)

    @property
    def cell_constant_per_cm(self) -> float:
        """The cell constant that the factor amounts to; NaN where the nominal one is not known. [1/cm]"""
        return self.nominal_cell_constant_per_cm * self.fit.factor

    @property
    def temperature_offset_K(self) -> float:
        """Reference less sensor; 0 where no reference thermometer was used. [K]"""
        offset = self.reference_temperature_degC - self.sensor_temperature_degC
        return offset if math.isfinite(offset) else 0.0

    @property
    def remarks(self) -> tuple[str, ...]:
        """Codes of what is to be seen beside the record.

        `expired_standard`, `standard_without_expiry`, `single_standard`, `not_linear`, `standards_do_not_differ`,
        `large_change`.
        """
        used = self.as_left or self.as_found
        bottles = [point.standard for point in used if point.standard.kind is not StandardKind.DRY_AIR]
        spread = np.ptp([point.true_mS_cm for point in used]) if len(used) > 1 else 0.0
        found = {
            "expired_standard": any(
                one.expires_us is not None and one.expires_us < self.performed_at_us for one in bottles
            ),
            "standard_without_expiry": any(one.expires_us is None for one in bottles),
            "single_standard": len(used) == 1,
            "standards_do_not_differ": len(used) > 1 and spread <= 0.02 * max(point.true_mS_cm for point in used),
            "not_linear": self.fit.is_linear is False,
            "large_change": abs(self.fit.factor - 1.0) > 0.1,
        }
        return tuple(code for code, is_so in found.items() if is_so)

    def to_jsonable(self) -> dict[str, Any]:
        """Return a dict that JSON can hold, for the ledger; what follows from it (the fit) is not in it."""
        return {
            "sensor": self.sensor,
            "performed_at_us": self.performed_at_us,
            "performed_by": self.performed_by,
            "as_found": [_point_to_jsonable(point) for point in self.as_found],
            "as_left": [_point_to_jsonable(point) for point in self.as_left],
            "reference_temperature_degC": _or_none(self.reference_temperature_degC),
            "sensor_temperature_degC": _or_none(self.sensor_temperature_degC),
            "valid_days": self.valid_days,
            "nominal_cell_constant_per_cm": _or_none(self.nominal_cell_constant_per_cm),
            "note": self.note,
        }

    @classmethod
    def from_jsonable(cls, plain: Mapping[str, Any]) -> Self:
        """Return the record that `to_jsonable` wrote.

        Raises
        ------
        InvalidInputError
            If something is missing, unknown, or cannot be.
        """
        try:
            return cls(
                sensor=str(plain["sensor"]),
                performed_at_us=int(plain["performed_at_us"]),
                performed_by=str(plain["performed_by"]),
                as_found=tuple(_point_from_jsonable(point) for point in plain["as_found"]),
                as_left=tuple(_point_from_jsonable(point) for point in plain.get("as_left", ())),
                reference_temperature_degC=_or_nan(plain.get("reference_temperature_degC")),
                sensor_temperature_degC=_or_nan(plain.get("sensor_temperature_degC")),
                valid_days=float(plain.get("valid_days", DEFAULT_VALID_DAYS)),
                nominal_cell_constant_per_cm=_or_nan(plain.get("nominal_cell_constant_per_cm")),
                note=str(plain.get("note", "")),
            )
        except KeyError as error:
            raise InvalidInputError(
                "calibration record", found=f"no {error.args[0]}", allowed="all of its parts"
            ) from error
        except (TypeError, ValueError) as error:
            raise InvalidInputError(
                "calibration record", found=str(error), allowed="numbers and words as written"
            ) from error


def _or_none(value: float) -> float | None:
    return value if math.isfinite(value) else None


def _or_nan(value: float | None) -> float:
    return math.nan if value is None else float(value)


def _point_to_jsonable(point: Point) -> dict[str, Any]:
    return {
        "standard": point.standard.kind.value,
        "value": point.standard.value,
        "lot": point.standard.lot,
        "expires_us": point.standard.expires_us,
        "reading_mS_cm": point.reading_mS_cm,
        "temperature_degC": point.temperature_degC,
    }


def _point_from_jsonable(plain: Mapping[str, Any]) -> Point:
    expires = plain.get("expires_us")
    standard = standard_of(
        StandardKind(plain["standard"]),
        float(plain["value"]),
        lot=str(plain.get("lot", "")),
        expires_us=None if expires is None else int(expires),
    )
    return Point(standard, float(plain["reading_mS_cm"]), float(plain["temperature_degC"]))


@dataclass(frozen=True, slots=True)
class Corrections:
    """What the calibrations in force make of readings; arrays of one shape."""

    factor: FloatArray
    offset_mS_cm: FloatArray
    temperature_offset_K: FloatArray
    is_calibrated: np.ndarray

    def conductivity(self, reading_mS_cm: ArrayLike) -> FloatArray:
        """Return corrected conductivity. [mS/cm]"""
        return np.asarray(self.factor * np.asarray(reading_mS_cm, dtype=np.float64) + self.offset_mS_cm)

    def temperature(self, reading_degC: ArrayLike) -> FloatArray:
        """Return corrected temperature. [degC]"""
        return np.asarray(np.asarray(reading_degC, dtype=np.float64) + self.temperature_offset_K)


def drift_checks(record: CalibrationRecord, *, before: CalibrationRecord | None) -> tuple[DriftCheck, ...]:
    """Return what the readings as found say of the record up to this calibration.

    Parameters
    ----------
    record : CalibrationRecord
    before : CalibrationRecord or None
        The calibration that was in force: the record was made with it.
    """
    factor, offset = (1.0, 0.0) if before is None else (before.fit.factor, before.fit.offset_mS_cm)
    return tuple(
        DriftCheck(standard_mS_cm=point.true_mS_cm, reading_mS_cm=factor * point.reading_mS_cm + offset)
        for point in record.as_found
        if point.standard.kind is not StandardKind.DRY_AIR
    )


def in_force(records: Sequence[CalibrationRecord], measured_at_us: ArrayLike) -> Corrections:
    """Return what the last calibration before each reading makes of it.

    Before the first calibration nothing is corrected. Of two records at one time the later in the sequence holds.

    Parameters
    ----------
    records : sequence of CalibrationRecord
        Of one sensor.
    measured_at_us : array_like of int
        [us]
    """
    time_us: IntArray = np.asarray(measured_at_us, dtype=np.int64)
    ordered = sorted(records, key=lambda record: record.performed_at_us)
    starts = np.array([record.performed_at_us for record in ordered], dtype=np.int64)
    which = np.searchsorted(starts, time_us, side="right")
    factor = np.array([1.0, *(record.fit.factor for record in ordered)])
    offset = np.array([0.0, *(record.fit.offset_mS_cm for record in ordered)])
    warmth = np.array([0.0, *(record.temperature_offset_K for record in ordered)])
    return Corrections(factor[which], offset[which], warmth[which], which > 0)
