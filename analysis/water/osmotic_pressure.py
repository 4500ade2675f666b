"""Osmotic pressure: the pressure that would hold pure water back at a perfect membrane."""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

import gsw
import numpy as np

from analysis.water.seawater import (
    CELSIUS_ZERO_K,
    GAS_CONSTANT_J_MOL_K,
    HIGHEST_ABSOLUTE_SALINITY_G_KG,
)

if TYPE_CHECKING:
    from numpy.typing import ArrayLike

    from analysis.arrays import FloatArray

_PA_PER_DBAR: Final = 1e4
_KPA_PER_DBAR: Final = 10.0


def osmotic_pressure_from_osmolality(osmolality_mOsm_kg: ArrayLike, *, temperature_degC: ArrayLike) -> FloatArray:
    """Return osmotic pressure of any solution from its osmolality at the same temperature.

    The pressure P for which the work on pure water, integral of v dP, equals R T O; v is taken at P / 2. Within
    0.12 % of the exact value for sea water up to SP 45, and nearer in weaker solutions.

    Parameters
    ----------
    osmolality_mOsm_kg : array_like
        At the water's own temperature (in situ), not below 0. [mOsm/kg water]
    temperature_degC : array_like
        [degC]

    Returns
    -------
    ndarray of float64
        NaN where osmolality is negative or NaN. [kPa]
    """
    osmolality = np.asarray(osmolality_mOsm_kg, dtype=np.float64)
    temperature = np.asarray(temperature_degC, dtype=np.float64)
    osmolality = np.where(osmolality >= 0.0, osmolality, np.nan)
    energy_J_kg = 1e-3 * osmolality * GAS_CONSTANT_J_MOL_K * (temperature + CELSIUS_ZERO_K)
    pressure_dbar = energy_J_kg * 1000.0 / _PA_PER_DBAR
    for _ in range(3):
        pressure_dbar = energy_J_kg * np.asarray(gsw.rho_t_exact(0.0, temperature, 0.5 * pressure_dbar)) / _PA_PER_DBAR
    return np.asarray(pressure_dbar * _KPA_PER_DBAR)


def osmotic_pressure_from_absolute_salinity(
    absolute_salinity_g_kg: ArrayLike, *, temperature_degC: ArrayLike, water_pressure_dbar: ArrayLike = 0.0
) -> FloatArray:
    """Return osmotic pressure of sea water, exactly, by TEOS-10.

    The pressure above that of the pure water at which both have the same chemical potential of water, found by
    Newton's method.

    Parameters
    ----------
    absolute_salinity_g_kg : array_like
        0 to 120. [g/kg]
    temperature_degC : array_like
        [degC]
    water_pressure_dbar : array_like
        Sea pressure of the pure water beyond the membrane. [dbar]

    Returns
    -------
    ndarray of float64
        NaN outside 0 to 120 g/kg. [kPa]

    References
    ----------
    IOC, SCOR and IAPSO 2010, section 2.41 and eq. 2.41.1.
    """
    salinity = np.asarray(absolute_salinity_g_kg, dtype=np.float64)
    temperature = np.asarray(temperature_degC, dtype=np.float64)
    start = np.asarray(water_pressure_dbar, dtype=np.float64)
    possible = (salinity >= 0.0) & (salinity <= HIGHEST_ABSOLUTE_SALINITY_G_KG)
    salinity = np.where(possible, salinity, np.nan)
    wanted = 1000.0 * np.asarray(gsw.chem_potential_water_t_exact(0.0, temperature, start))
    pressure = start + 7.4 * salinity
    for _ in range(6):  # the potential is nearly a straight line of pressure: rounding after three or four
        short_of = wanted - 1000.0 * np.asarray(gsw.chem_potential_water_t_exact(salinity, temperature, pressure))
        pressure = pressure + short_of * np.asarray(gsw.rho_t_exact(0.0, temperature, pressure)) / _PA_PER_DBAR
    return np.asarray((pressure - start) * _KPA_PER_DBAR)
