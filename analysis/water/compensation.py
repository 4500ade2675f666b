"""Temperature compensation undone, and done: specific conductance to and from conductivity.

A meter that reports "at 25 degC" has divided what its cell measured by a factor of the temperature. The
salinity of sea water needs what the cell measured; so the factor must be multiplied back, with the meter's
own method, coefficient and reference temperature.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum
from typing import TYPE_CHECKING, Final

import numpy as np

from analysis.errors import InvalidInputError

if TYPE_CHECKING:
    from numpy.typing import ArrayLike

    from analysis.arrays import BoolArray, FloatArray

DEFAULT_COEFFICIENT_PERCENT_PER_K: Final = 1.91
"""Linear coefficient of most field loggers (manual of a public estuarine monitoring programme)."""

DEFAULT_REFERENCE_TEMPERATURE_DEGC: Final = 25.0
"""Reference temperature of nearly all meters; 20 degC is the other one in use."""

NATURAL_WATER_RANGE_DEGC: Final = (0.0, 35.9)
"""Temperatures for which ISO 7888 prints its factors."""

# Ratio of conductivities after ISO 7888: a constant part and a part that follows the viscosity of water. The
# five numbers are from memory; they reproduce the printed table to its rounding (tests/reference/iso_7888.csv).
_VISCOUS_SHARE = 0.962144
_VISCOUS_POWER = 0.965078
_VISCOSITY = (-0.198058, -1.992186, 231.17628, 86.39123)


class CompensationMethod(StrEnum):
    """How a meter brings its reading to a reference temperature."""

    LINEAR = "linear"
    NATURAL_WATER = "natural-water"


def _viscosity(temperature_degC: FloatArray) -> FloatArray:
    a, b, c, d = _VISCOSITY
    return np.asarray(a + np.exp(b + c / (temperature_degC + d)))


def _resistance_ratio(temperature_degC: FloatArray) -> FloatArray:
    relative = _viscosity(temperature_degC) / _viscosity(np.asarray(20.0))
    return np.asarray((1.0 - _VISCOUS_SHARE) + _VISCOUS_SHARE * relative**_VISCOUS_POWER)


def linear_factor(
    temperature_degC: ArrayLike,
    *,
    coefficient_percent_per_K: ArrayLike = DEFAULT_COEFFICIENT_PERCENT_PER_K,
    reference_temperature_degC: ArrayLike = DEFAULT_REFERENCE_TEMPERATURE_DEGC,
) -> FloatArray:
    """Return conductivity over specific conductance for linear compensation: 1 + a (t - t_ref).

    Parameters
    ----------
    temperature_degC : array_like
        Temperature of the water. [degC]
    coefficient_percent_per_K : array_like
        The meter's coefficient at the reference temperature; 0 for a meter that does not compensate. [%/K]
    reference_temperature_degC : array_like
        The meter's reference temperature. [degC]

    Returns
    -------
    ndarray of float64
        NaN where the factor would not be positive (no meter can report there) or an input is NaN. [1]
    """
    slope = np.asarray(coefficient_percent_per_K, dtype=np.float64) * 0.01
    distance = np.asarray(temperature_degC, dtype=np.float64) - np.asarray(reference_temperature_degC, dtype=np.float64)
    factor = 1.0 + slope * distance
    return np.where(factor > 0.0, factor, np.nan)


def natural_water_factor(
    temperature_degC: ArrayLike, *, reference_temperature_degC: ArrayLike = DEFAULT_REFERENCE_TEMPERATURE_DEGC
) -> FloatArray:
    """Return conductivity over specific conductance for the natural-water curve: 1 / f25 of ISO 7888 [1]_.

    Printed for 0 to 35.9 degC and meant for dilute calcium bicarbonate waters (60 to 1000 uS/cm); some meters
    apply it to everything. Outside the printed temperatures the curve is continued (see
    `is_within_natural_water_range`).

    Parameters
    ----------
    temperature_degC : array_like
        Temperature of the water. [degC]
    reference_temperature_degC : array_like
        25, or 20 for the older setting (f20 = f25 / 1.116). [degC]

    Returns
    -------
    ndarray of float64
        NaN where an input is NaN or colder than -20 or warmer than 100 degC. [1]

    References
    ----------
    .. [1] ISO 7888:1985 = EN 27888:1993, Water quality - Determination of electrical conductivity, table 2.
    """
    temperature = np.asarray(temperature_degC, dtype=np.float64)
    liquid = (temperature >= -20.0) & (temperature <= 100.0)
    usable = np.where(liquid, temperature, np.nan)
    reference = np.asarray(reference_temperature_degC, dtype=np.float64)
    return np.asarray(_resistance_ratio(reference) / _resistance_ratio(usable))


def is_within_natural_water_range(temperature_degC: ArrayLike) -> BoolArray:
    """Return True where ISO 7888 prints a factor (0 to 35.9 degC)."""
    temperature = np.asarray(temperature_degC, dtype=np.float64)
    low, high = NATURAL_WATER_RANGE_DEGC
    return np.asarray((temperature >= low) & (temperature <= high))


@dataclass(frozen=True, slots=True)
class Compensation:
    """The way in which one meter compensates.

    Parameters
    ----------
    method : CompensationMethod
        ``linear`` or ``natural-water`` (ISO 7888).
    coefficient_percent_per_K : float
        For the linear method only. [%/K]
    reference_temperature_degC : float
        [degC]

    Raises
    ------
    InvalidInputError
        If the coefficient is not within 0 to 10 %/K or the reference temperature not within 0 to 40 degC.
    """

    method: CompensationMethod = CompensationMethod.LINEAR
    coefficient_percent_per_K: float = DEFAULT_COEFFICIENT_PERCENT_PER_K
    reference_temperature_degC: float = DEFAULT_REFERENCE_TEMPERATURE_DEGC

    def __post_init__(self) -> None:
        object.__setattr__(self, "method", _method(self.method))
        if not 0.0 <= self.coefficient_percent_per_K <= 10.0:
            raise InvalidInputError(
                "compensation coefficient", found=self.coefficient_percent_per_K, allowed="0 to 10 %/K"
            )
        if not 0.0 <= self.reference_temperature_degC <= 40.0:
            raise InvalidInputError(
                "reference temperature", found=self.reference_temperature_degC, allowed="0 to 40 degC"
            )

    def factor(self, temperature_degC: ArrayLike) -> FloatArray:
        """Return conductivity over specific conductance at *temperature_degC*."""
        if self.method is CompensationMethod.NATURAL_WATER:
            return natural_water_factor(temperature_degC, reference_temperature_degC=self.reference_temperature_degC)
        return linear_factor(
            temperature_degC,
            coefficient_percent_per_K=self.coefficient_percent_per_K,
            reference_temperature_degC=self.reference_temperature_degC,
        )

    def is_extrapolated(self, temperature_degC: ArrayLike) -> BoolArray:
        """Return True where the method is used outside the temperatures it is published for."""
        if self.method is CompensationMethod.NATURAL_WATER:
            temperature = np.asarray(temperature_degC, dtype=np.float64)
            return np.asarray(~is_within_natural_water_range(temperature) & np.isfinite(temperature))
        return np.zeros(np.shape(temperature_degC), dtype=np.bool_)


def _method(word: str) -> CompensationMethod:
    try:
        return CompensationMethod(word)
    except ValueError:
        allowed = ", ".join(method.value for method in CompensationMethod)
        raise InvalidInputError("compensation method", found=word, allowed=allowed) from None


def conductivity_from_specific_conductance(
    specific_conductance_mS_cm: ArrayLike, *, temperature_degC: ArrayLike, compensation: Compensation
) -> FloatArray:
    """Return the conductivity that the cell measured, from the compensated value that the meter reports.

    Parameters
    ----------
    specific_conductance_mS_cm : array_like
        Conductivity brought to the reference temperature by the meter. [mS/cm]
    temperature_degC : array_like
        Temperature of the water at the time, as the meter used it. [degC]
    compensation : Compensation
        The meter's method and settings.

    Returns
    -------
    ndarray of float64
        NaN where an input is NaN. [mS/cm]
    """
    specific = np.asarray(specific_conductance_mS_cm, dtype=np.float64)
    return np.asarray(specific * compensation.factor(temperature_degC))


def specific_conductance_from_conductivity(
    conductivity_mS_cm: ArrayLike, *, temperature_degC: ArrayLike, compensation: Compensation
) -> FloatArray:
    """Return what a compensating meter would report: the inverse of `conductivity_from_specific_conductance`."""
    conductivity = np.asarray(conductivity_mS_cm, dtype=np.float64)
    return np.asarray(conductivity / compensation.factor(temperature_degC))
