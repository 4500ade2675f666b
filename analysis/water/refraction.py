"""Refractive index: what a hand refractometer measures.

The scale printed in a refractometer is only right for the solution it was made for: one made for sodium chloride
brine shows sea water about 1.5 too salty at 35.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import ArrayLike

    from analysis.arrays import FloatArray

SODIUM_LINE_NM: Final = 589.3
"""The yellow line of sodium: the light of refractometers. [nm]"""

_BRINE = (1.33300, 1.75376e-4, -1.438e-9)
_BRINE_END_G_KG = 110.0


def seawater_refractive_index(
    salinity_g_kg: ArrayLike, *, temperature_degC: ArrayLike, wavelength_nm: float = SODIUM_LINE_NM
) -> FloatArray:
    """Return the refractive index of sea water by the empirical equation of Quan and Fry [1]_.

    Published for 0 to 30 degC, 0 to 35 parts per thousand, 400 to 700 nm; it fits its data within 2e-5.

    Parameters
    ----------
    salinity_g_kg : array_like
        Salinity in parts per thousand of the older scales, here taken as practical salinity. [1]
    temperature_degC : array_like
        Of the film on the prism. [degC]
    wavelength_nm : float
        [nm]

    Returns
    -------
    ndarray of float64
        NaN where an input is NaN or salinity negative. [1]

    References
    ----------
    .. [1] X. Quan and E. S. Fry 1995, Appl. Optics 34, 3477 (coefficients looked up in several public transcriptions
       that agree).
    """
    salinity = np.asarray(salinity_g_kg, dtype=np.float64)
    salinity = np.where(salinity >= 0.0, salinity, np.nan)
    t = np.asarray(temperature_degC, dtype=np.float64)
    by_salt = (1.779e-4 - 1.05e-6 * t + 1.6e-8 * t * t) * salinity
    by_colour = (15.868 + 0.01155 * salinity - 0.00423 * t) / wavelength_nm
    by_colour = by_colour - 4382.0 / wavelength_nm**2 + 1.1455e6 / wavelength_nm**3
    return np.asarray(1.31405 + by_salt - 2.02e-6 * t * t + by_colour)


def sodium_chloride_refractive_index_20(salinity_g_kg: ArrayLike) -> FloatArray:
    """Return the refractive index of sodium chloride water at 20 degC, sodium light.

    A parabola through the values of the CRC Handbook [1]_, 0 to 10 % by mass: within 6e-5, half of their last digit and a little.

    Parameters
    ----------
    salinity_g_kg : array_like
        Grams of sodium chloride per kilogram of solution, 0 to 100. [g/kg]

    Returns
    -------
    ndarray of float64
        NaN outside that range. [1]

    References
    ----------
    .. [1] CRC Handbook, 102nd ed., Concentrative Properties of Aqueous Solutions (looked up).
    """
    salinity = np.asarray(salinity_g_kg, dtype=np.float64)
    x = np.where((salinity >= 0.0) & (salinity <= _BRINE_END_G_KG), salinity, np.nan)
    return np.asarray(_BRINE[0] + _BRINE[1] * x + _BRINE[2] * x * x)


def sodium_chloride_salinity_from_refractive_index_20(refractive_index: ArrayLike) -> FloatArray:
    """Return what a refractometer with a sodium chloride scale shows at 20 degC: the inverse relation. [g/kg]"""
    index = np.asarray(refractive_index, dtype=np.float64)
    constant, linear, square = _BRINE
    inside = np.maximum(linear * linear - 4.0 * square * (constant - index), 0.0)
    salinity = (np.sqrt(inside) - linear) / (2.0 * square)
    return np.where((salinity >= -1e-9) & (salinity <= _BRINE_END_G_KG), np.maximum(salinity, 0.0), np.nan)
