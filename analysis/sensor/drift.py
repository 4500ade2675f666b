"""What fouling and drift did to a record between two services, and how good the record is: USGS TM 1-D3.

Fouling and drift are found apart: the monitor is read before and after cleaning (with a second meter alongside,
because the water may change meanwhile), then in a standard. The record is corrected by their *signed* sum,
growing linearly from the service before to this one; it is rated by the sum of their *absolute* values, so that
two large errors that happen to cancel do not make a good record. Raw data stay as they are.

References
----------
R. J. Wagner, R. W. Boulger, C. J. Oblinger and B. A. Smith, Guidelines and standard procedures for continuous
water-quality monitors: U.S. Geological Survey Techniques and Methods 1-D3, 2006. The formulas, criteria and
ratings are from memory.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from enum import IntEnum
from typing import TYPE_CHECKING, Final

import numpy as np

from analysis.errors import InvalidInputError

if TYPE_CHECKING:
    from collections.abc import Iterable

    from numpy.typing import ArrayLike

    from analysis.arrays import FloatArray, IntArray


class Rating(IntEnum):
    """How good a record is; a larger number is worse."""

    EXCELLENT = 0
    GOOD = 1
    FAIR = 2
    POOR = 3
    BEYOND_LIMIT = 4
    """Beyond the maximum allowable limit: not to be published."""

    @property
    def words(self) -> str:
        """The rating as TM 1-D3 prints it."""
        return "beyond maximum allowable limit" if self is Rating.BEYOND_LIMIT else self.name.lower()


CONDUCTANCE_BOUNDS_PERCENT: Final = (3.0, 10.0, 15.0, 30.0)
TEMPERATURE_BOUNDS_K: Final = (0.2, 0.5, 0.8, 2.0)


def conductance_rating(absolute_sum_percent: float) -> Rating:
    """Return the rating of a conductance record from the sum of absolute corrections. [%]"""
    return _rating(absolute_sum_percent, CONDUCTANCE_BOUNDS_PERCENT)


def temperature_rating(absolute_sum_K: float) -> Rating:
    """Return the rating of a temperature record from the sum of absolute corrections. [K]"""
    return _rating(absolute_sum_K, TEMPERATURE_BOUNDS_K)


def _rating(amount: float, bounds: tuple[float, ...]) -> Rating:
    if not math.isfinite(amount):
        raise InvalidInputError("sum of corrections", found=amount, allowed="a number")
    return Rating(sum(abs(amount) > bound for bound in bounds))


def daily_rating(ratings: Iterable[Rating]) -> Rating:
    """Return the rating of a day: the lowest of its values' ratings.

    Raises
    ------
    InvalidInputError
        If the day has no value.
    """
    worst = max(ratings, default=None)
    if worst is None:
        raise InvalidInputError("ratings of a day", found="none", allowed="at least one value")
    return worst


@dataclass(frozen=True, slots=True)
class Criterion:
    """When an error is large enough to be corrected.

    Parameters
    ----------
    percent : float
        TM 1-D3: 3 %. A site may set less: 3 % at sea-water conductance is 1.1 in salinity. [%]
    least_mS_cm : float
        TM 1-D3: 0.005 mS/cm (5 uS/cm); the greater of the two counts. [mS/cm]

    Raises
    ------
    InvalidInputError
        If it is laxer than TM 1-D3 or not above 0.
    """

    percent: float = 3.0
    least_mS_cm: float = 0.005

    def __post_init__(self) -> None:
        if not 0.0 < self.percent <= 3.0:
            raise InvalidInputError("criterion", found=self.percent, allowed="above 0, at most 3 % (USGS TM 1-D3)")
        if not 0.0 < self.least_mS_cm <= 0.005:
            raise InvalidInputError("criterion", found=self.least_mS_cm, allowed="above 0, at most 0.005 mS/cm")

    def error_mS_cm(self, conductance_mS_cm: ArrayLike) -> FloatArray:
        """Return the error above which a reading is corrected. [mS/cm]"""
        conductance = np.asarray(conductance_mS_cm, dtype=np.float64)
        return np.maximum(self.least_mS_cm, 0.01 * self.percent * conductance)

    def asks_for_correction(self, *, conductance_mS_cm: float, error_mS_cm: float) -> bool:
        """Return whether a combined error must be corrected."""
        return bool(abs(error_mS_cm) > self.error_mS_cm(conductance_mS_cm))


@dataclass(frozen=True, slots=True)
class FoulingCheck:
    """The monitor before and after cleaning, and the second meter at the start and the end of the service.

    Parameters
    ----------
    before_mS_cm, after_mS_cm : float
        The monitor in site water before and after cleaning. [mS/cm]
    field_start_mS_cm, field_end_mS_cm : float
        The second meter beside it at the same moments. [mS/cm]
    """

    before_mS_cm: float
    after_mS_cm: float
    field_start_mS_cm: float
    field_end_mS_cm: float

    def __post_init__(self) -> None:
        if not self.before_mS_cm > 0.0:
            raise InvalidInputError("reading before cleaning", found=self.before_mS_cm, allowed="above 0 mS/cm")

    @property
    def error_mS_cm(self) -> float:
        """What cleaning changed, less what the water changed meanwhile: Ef = (Ma - Mb) - (Fe - Fs). [mS/cm]"""
        return (self.after_mS_cm - self.before_mS_cm) - (self.field_end_mS_cm - self.field_start_mS_cm)

    @property
    def percent(self) -> float:
        """Correction for fouling: 100 Ef / Mb. [%]"""
        return 100.0 * self.error_mS_cm / self.before_mS_cm


@dataclass(frozen=True, slots=True)
class DriftCheck:
    """The clean monitor in a standard.

    Parameters
    ----------
    standard_mS_cm, reading_mS_cm : float
        What the standard is at its temperature, and what the monitor says. [mS/cm]
    """

    standard_mS_cm: float
    reading_mS_cm: float

    def __post_init__(self) -> None:
        if not self.reading_mS_cm > 0.0:
            raise InvalidInputError("reading in the standard", found=self.reading_mS_cm, allowed="above 0 mS/cm")

    @property
    def percent(self) -> float:
        """Correction for drift: 100 (Vs - Vc) / Vc. [%]"""
        return 100.0 * (self.standard_mS_cm - self.reading_mS_cm) / self.reading_mS_cm


@dataclass(frozen=True, slots=True)
class RecordCorrection:
    """What is to be done to the conductivity record between two services.

    Parameters
    ----------
    start_us, end_us : int
        The service before (or the event at which the error began) and this one. [us]
    fouling : FoulingCheck or None
    drift : tuple of DriftCheck
        None to six; with more than one the correction follows the reading, linear between the standards and
        constant beyond them.

    Raises
    ------
    InvalidInputError
        If the end is not after the start, or there are more than six drift checks or two with one reading.
    """

    start_us: int
    end_us: int
    fouling: FoulingCheck | None = None
    drift: tuple[DriftCheck, ...] = ()

    def __post_init__(self) -> None:
        if self.end_us <= self.start_us:
            raise InvalidInputError("end of the record", found=self.end_us, allowed=f"after {self.start_us}")
        readings = {check.reading_mS_cm for check in self.drift}
        if len(self.drift) > 6 or len(readings) < len(self.drift):
            raise InvalidInputError(
                "drift checks",
                found=[check.reading_mS_cm for check in self.drift],
                allowed="at most 6, each with a reading of its own",
            )

    @property
    def fouling_percent(self) -> float:
        """Correction for fouling at the end of the record. [%]"""
        return 0.0 if self.fouling is None else self.fouling.percent

    def drift_percent(self, reading_mS_cm: ArrayLike) -> FloatArray:
        """Return the correction for drift at the end of the record for readings of this size. [%]"""
        reading = np.asarray(reading_mS_cm, dtype=np.float64)
        if not self.drift:
            return np.zeros(reading.shape)
        checks = sorted(self.drift, key=lambda check: check.reading_mS_cm)
        return np.asarray(
            np.interp(reading, [check.reading_mS_cm for check in checks], [check.percent for check in checks])
        )

    def total_percent(self, reading_mS_cm: ArrayLike) -> FloatArray:
        """Return the signed sum that the data get at the end of the record. [%]"""
        return self.fouling_percent + self.drift_percent(reading_mS_cm)

    def absolute_sum_percent(self, reading_mS_cm: ArrayLike) -> FloatArray:
        """Return the sum of absolute corrections, by which the record is rated. [%]"""
        return np.asarray(abs(self.fouling_percent) + np.abs(self.drift_percent(reading_mS_cm)))

    def share(self, measured_at_us: ArrayLike) -> FloatArray:
        """Return how much of the correction applies at a time: 0 at the start, 1 at the end, NaN outside."""
        time_us: IntArray = np.asarray(measured_at_us, dtype=np.int64)
        passed = (time_us - self.start_us) / (self.end_us - self.start_us)
        return np.where((passed >= 0.0) & (passed <= 1.0), passed, np.nan)

    def corrected(self, conductivity_mS_cm: ArrayLike, *, measured_at_us: ArrayLike) -> FloatArray:
        """Return the record corrected by linear proration; values outside the two services are as they were.

        Parameters
        ----------
        conductivity_mS_cm : array_like
            As measured; it stays as it is. [mS/cm]
        measured_at_us : array_like of int
            [us]

        Returns
        -------
        ndarray of float64
            NaN where the input is NaN. [mS/cm]
        """
        raw = np.asarray(conductivity_mS_cm, dtype=np.float64)
        share = np.nan_to_num(self.share(measured_at_us), nan=0.0)
        return np.asarray(raw * (1.0 + 0.01 * self.total_percent(raw) * share))

    def rating(self, conductivity_mS_cm: float) -> Rating:
        """Return the rating of the record at readings of this size."""
        return conductance_rating(float(self.absolute_sum_percent(conductivity_mS_cm)))


def corrected_temperature(
    temperature_degC: ArrayLike, *, measured_at_us: ArrayLike, start_us: int, end_us: int, error_K: float
) -> FloatArray:
    """Return a temperature record with an error found at its end taken out by linear proration.

    Parameters
    ----------
    temperature_degC : array_like
    measured_at_us : array_like of int
    start_us, end_us : int
        The check before and this one. [us]
    error_K : float
        Reference thermometer less sensor, at the end. [K]
    """
    if end_us <= start_us:
        raise InvalidInputError("end of the record", found=end_us, allowed=f"after {start_us}")
    passed = (np.asarray(measured_at_us, dtype=np.int64) - start_us) / (end_us - start_us)
    share = np.where((passed >= 0.0) & (passed <= 1.0), passed, 0.0)
    return np.asarray(np.asarray(temperature_degC, dtype=np.float64) + error_K * share)
