"""Calibration of a conductivity sensor: what the standard is, what the sensor says, and what follows.

A calibration record keeps what was found before anything was adjusted and what was left after; its cell constant
factor and offset apply from its time on. The record before it is corrected for drift (`analysis.sensor.drift`).
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from enum import StrEnum
from typing import TYPE_CHECKING, Final

import numpy as np

from analysis.arrays import MICROSECONDS_PER_SECOND
from analysis.errors import InvalidInputError
from analysis.sensor.drift import DriftCheck
from analysis.water import potassium_chloride
from analysis.water.seawater import conductivity_from_practical_salinity, practical_salinity_from_conductivity

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import ArrayLike

    from analysis.arrays import FloatArray, IntArray

STANDARD_SEAWATER_MS_CM: Final = 42.9140
"""Conductivity of seawater of practical salinity 35 at 15 degC on the scale of 1968 (PSS-78)."""

STANDARD_SEAWATER_DEGC: Final = 15.0 / 1.00024
"""That temperature on the scale of 1990."""

MICROSECONDS_PER_DAY: Final = 86_400 * MICROSECONDS_PER_SECOND


class StandardKind(StrEnum):
    """What a sensor is held into."""

    POTASSIUM_CHLORIDE = "potassium-chloride"
    """A solution of known molality."""
    BOTTLE = "bottle"
    """A bought solution with its conductivity at 25 degC on the label: potassium chloride."""
    STANDARD_SEAWATER = "standard-seawater"
    """An ampoule or bottle with its conductivity ratio K15 on the label."""
    DRY_AIR = "dry-air"
    """The clean, dry cell: zero."""


@dataclass(frozen=True, slots=True)
class Standard:
    """A calibration standard.

    Made by `potassium_chloride_standard`, `bottled_standard`, `standard_seawater` or `dry_air`.

    Parameters
    ----------
    kind : StandardKind
    value : float
        Molality [mol/kg], label at 25 degC [mS/cm], K15 [1] or 0, after its kind.
    lot : str
        As printed on the bottle; empty where made on site.
    expires_us : int or None
        End of the day printed on the bottle. [us]
    """

    kind: StandardKind
    value: float
    lot: str = ""
    expires_us: int | None = None

    def conductivity_mS_cm(self, temperature_degC: ArrayLike) -> FloatArray:
        """Return what the standard conducts at its own temperature.

        Parameters
        ----------
        temperature_degC : array_like
            Of the standard, not of the room. [degC]

        Returns
        -------
        ndarray of float64
            NaN outside 0 to 55 degC. [mS/cm]

        References
        ----------
        Potassium chloride: McKee 2009. Standard seawater: PSS-78 from K15.
        """
        temperature = np.asarray(temperature_degC, dtype=np.float64)
        match self.kind:
            case StandardKind.POTASSIUM_CHLORIDE:
                return potassium_chloride.conductivity_from_molality(self.value, temperature_degC=temperature)
            case StandardKind.BOTTLE:
                return potassium_chloride.conductivity_of_labelled_standard(self.value, temperature_degC=temperature)
            case StandardKind.STANDARD_SEAWATER:
                salinity = practical_salinity_from_k15(self.value)
                return conductivity_from_practical_salinity(salinity, temperature_degC=temperature)
        return np.where(np.isfinite(temperature), 0.0, np.nan)


def practical_salinity_from_k15(k15: ArrayLike) -> FloatArray:
    """Return practical salinity from the conductivity ratio to the standard solution at 15 degC (PSS-78)."""
    ratio = np.asarray(k15, dtype=np.float64)
    return practical_salinity_from_conductivity(
        ratio * STANDARD_SEAWATER_MS_CM, temperature_degC=STANDARD_SEAWATER_DEGC
    )


def potassium_chloride_standard(molality_mol_kg: float, *, lot: str = "", expires_us: int | None = None) -> Standard:
    """Return a potassium chloride solution of known molality, 0.0001 to 4.5 mol/kg water."""
    if not 1e-4 <= molality_mol_kg <= potassium_chloride.HIGHEST_MOLALITY:
        raise InvalidInputError("molality of the standard", found=molality_mol_kg, allowed="0.0001 to 4.5 mol/kg")
    return Standard(StandardKind.POTASSIUM_CHLORIDE, molality_mol_kg, lot, expires_us)


def bottled_standard(label_mS_cm: float, *, lot: str = "", expires_us: int | None = None) -> Standard:
    """Return a bought standard with its conductivity at 25 degC on the label, 0.01 to 250 mS/cm."""
    if not 0.01 <= label_mS_cm <= 250.0:
        raise InvalidInputError("label of the standard", found=label_mS_cm, allowed="0.01 to 250 mS/cm at 25 degC")
    return Standard(StandardKind.BOTTLE, label_mS_cm, lot, expires_us)


def standard_seawater(k15: float, *, lot: str = "", expires_us: int | None = None) -> Standard:
    """Return standard seawater with its ratio K15 on the label, 0.2 to 1.2 (practical salinity 6 to 43)."""
    if not 0.2 <= k15 <= 1.2:
        raise InvalidInputError("K15 of the standard", found=k15, allowed="0.2 to 1.2")
    return Standard(StandardKind.STANDARD_SEAWATER, k15, lot, expires_us)


def dry_air() -> Standard:
    """Return the zero point: the clean, dry cell in air."""
    return Standard(StandardKind.DRY_AIR, 0.0)


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
    valid_days: float = 30.0
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
