"""Units of the quantities that sensors send: conductivity, temperature, pressure.

Inside the project conductivity is in mS/cm, temperature in degC on ITS-90, pressure is sea pressure in dbar
(absolute pressure less 101325 Pa). Every unit here is a straight line into those, so that arrays of sensors
with different units are converted in one multiplication and one addition.
"""

from __future__ import annotations

from types import MappingProxyType
from typing import TYPE_CHECKING, Final, NamedTuple

import numpy as np

from analysis.errors import InvalidInputError

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import ArrayLike

    from analysis.arrays import FloatArray


class LinearUnit(NamedTuple):
    """A unit as a straight line: value in the project's unit = scale * value as sent + offset."""

    scale: float
    offset: float = 0.0


CONDUCTIVITY_UNITS: Final[Mapping[str, LinearUnit]] = MappingProxyType(
    {"mS/cm": LinearUnit(1.0), "uS/cm": LinearUnit(1e-3), "S/m": LinearUnit(10.0)}
)
"""Units of conductivity, into mS/cm."""

TEMPERATURE_UNITS: Final[Mapping[str, LinearUnit]] = MappingProxyType(
    {
        "degC": LinearUnit(1.0),
        "degF": LinearUnit(5.0 / 9.0, -160.0 / 9.0),
        "K": LinearUnit(1.0, -273.15),
    }
)
"""Units of temperature, into degC."""

PRESSURE_UNITS: Final[Mapping[str, LinearUnit]] = MappingProxyType(
    {"dbar": LinearUnit(1.0), "kPa": LinearUnit(0.1), "bar": LinearUnit(10.0)}
)
"""Units of sea pressure, into dbar."""

T90_FROM_T68: Final = 1.0 / 1.00024
"""ITS-90 temperature over IPTS-68 temperature, between -2 and 40 degC (Saunders 1990, WOCE Newsletter 10)."""


def _unit(unit: str, *, known: Mapping[str, LinearUnit], what: str) -> LinearUnit:
    try:
        return known[unit]
    except KeyError:
        raise InvalidInputError(f"{what} unit", found=unit, allowed=", ".join(known)) from None


def _into(values: ArrayLike, unit: LinearUnit) -> FloatArray:
    array = np.asarray(values, dtype=np.float64)
    if unit.scale == 1.0 and unit.offset == 0.0:
        return array
    return np.asarray(array * unit.scale + unit.offset)


def _out_of(values: ArrayLike, unit: LinearUnit) -> FloatArray:
    return np.asarray((np.asarray(values, dtype=np.float64) - unit.offset) / unit.scale)


def conductivity_mS_cm_from(conductivity: ArrayLike, *, unit: str) -> FloatArray:
    """Return conductivity in mS/cm.

    Parameters
    ----------
    conductivity : array_like
        Conductivity in *unit*.
    unit : str
        One of ``mS/cm``, ``uS/cm``, ``S/m``.

    Returns
    -------
    ndarray of float64
        [mS/cm]

    Raises
    ------
    InvalidInputError
        If the unit is not known.
    """
    return _into(conductivity, _unit(unit, known=CONDUCTIVITY_UNITS, what="conductivity"))


def conductivity_in(conductivity_mS_cm: ArrayLike, *, unit: str) -> FloatArray:
    """Return conductivity in *unit* from mS/cm: the inverse of `conductivity_mS_cm_from`."""
    return _out_of(conductivity_mS_cm, _unit(unit, known=CONDUCTIVITY_UNITS, what="conductivity"))


def temperature_degC_from(temperature: ArrayLike, *, unit: str) -> FloatArray:
    """Return temperature in degC.

    Parameters
    ----------
    temperature : array_like
        Temperature in *unit*.
    unit : str
        One of ``degC``, ``degF``, ``K``.

    Returns
    -------
    ndarray of float64
        [degC]

    Raises
    ------
    InvalidInputError
        If the unit is not known.
    """
    return _into(temperature, _unit(unit, known=TEMPERATURE_UNITS, what="temperature"))


def temperature_in(temperature_degC: ArrayLike, *, unit: str) -> FloatArray:
    """Return temperature in *unit* from degC: the inverse of `temperature_degC_from`."""
    return _out_of(temperature_degC, _unit(unit, known=TEMPERATURE_UNITS, what="temperature"))


def pressure_dbar_from(pressure: ArrayLike, *, unit: str) -> FloatArray:
    """Return sea pressure in dbar.

    Parameters
    ----------
    pressure : array_like
        Sea pressure (0 at the surface) in *unit*.
    unit : str
        One of ``dbar``, ``kPa``, ``bar``.

    Returns
    -------
    ndarray of float64
        [dbar]

    Raises
    ------
    InvalidInputError
        If the unit is not known.
    """
    return _into(pressure, _unit(unit, known=PRESSURE_UNITS, what="pressure"))


def pressure_in(pressure_dbar: ArrayLike, *, unit: str) -> FloatArray:
    """Return sea pressure in *unit* from dbar: the inverse of `pressure_dbar_from`."""
    return _out_of(pressure_dbar, _unit(unit, known=PRESSURE_UNITS, what="pressure"))
