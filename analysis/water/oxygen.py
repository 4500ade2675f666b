"""How much oxygen water holds when it is in balance with the air above it."""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

import gsw
import numpy as np

from analysis.water.seawater import (
    density_from_absolute_salinity,
    practical_salinity_from_reference_salinity,
    reference_salinity_from_practical_salinity,
)

if TYPE_CHECKING:
    from numpy.typing import ArrayLike

    from analysis.arrays import FloatArray

OXYGEN_MOLAR_MASS_G_MOL: Final = 31.9988
"""Molar mass of molecular oxygen (IUPAC)."""

STANDARD_ATMOSPHERE_KPA: Final = 101.325


def oxygen_solubility_umol_kg(practical_salinity: ArrayLike, *, temperature_degC: ArrayLike) -> FloatArray:
    """Return oxygen in balance with moist air at 101.325 kPa.

    Published for 0 <= SP <= 42 and freezing point to 40 degC [1]_, fitted to the data of Benson and Krause.

    Parameters
    ----------
    practical_salinity : array_like
        [1]
    temperature_degC : array_like
        At the surface, where temperature and potential temperature are the same. [degC]

    Returns
    -------
    ndarray of float64
        NaN where salinity is negative. [umol/kg]

    References
    ----------
    .. [1] H. E. Garcia and L. I. Gordon 1992, Limnol. Oceanogr. 37, 1307 (with the coefficients of the GSW
       toolbox).
    """
    salinity = np.asarray(practical_salinity, dtype=np.float64)
    usable = np.where(salinity >= 0.0, salinity, np.nan)
    return np.asarray(gsw.O2sol_SP_pt(usable, np.asarray(temperature_degC, dtype=np.float64)))


def vapour_pressure_kPa(practical_salinity: ArrayLike, *, temperature_degC: ArrayLike) -> FloatArray:
    """Return the vapour pressure over sea water. [kPa]

    References
    ----------
    R. F. Weiss and B. A. Price 1980, Mar. Chem. 8, 347, eq. 10 (coefficients from memory; 3.169 kPa for pure
    water at 25 degC is met within 0.1 %).
    """
    kelvin = np.asarray(temperature_degC, dtype=np.float64) + 273.15
    logarithm = 24.4543 - 67.4509 * (100.0 / kelvin) - 4.8489 * np.log(kelvin / 100.0)
    return np.asarray(
        STANDARD_ATMOSPHERE_KPA * np.exp(logarithm - 0.000544 * np.asarray(practical_salinity, dtype=np.float64))
    )


def air_pressure_at_elevation(elevation_m: ArrayLike) -> FloatArray:
    """Return the air pressure of the standard atmosphere (ISO 2533) at an elevation below 11 km. [kPa]"""
    height = np.asarray(elevation_m, dtype=np.float64)
    return np.asarray(STANDARD_ATMOSPHERE_KPA * (1.0 - 2.25577e-5 * height) ** 5.25588)


def oxygen_solubility_mg_L(
    absolute_salinity_g_kg: ArrayLike,
    *,
    temperature_degC: ArrayLike,
    air_pressure_kPa: ArrayLike = STANDARD_ATMOSPHERE_KPA,
) -> FloatArray:
    """Return oxygen in balance with moist air, per litre.

    Other kinds of water are taken as sea water with the same mass fraction of salt: an estimate (salting-out
    depends on the ions by a few per cent of its own effect; common practice).

    Parameters
    ----------
    absolute_salinity_g_kg : array_like
        [g/kg]
    temperature_degC : array_like
        [degC]
    air_pressure_kPa : array_like
        Of the air above the water; the share of water vapour is taken off. [kPa]

    Returns
    -------
    ndarray of float64
        NaN where salinity is negative or beyond 120 g/kg. [mg/L]
    """
    salinity = practical_salinity_from_reference_salinity(absolute_salinity_g_kg)
    content = oxygen_solubility_umol_kg(salinity, temperature_degC=temperature_degC)
    density = density_from_absolute_salinity(
        reference_salinity_from_practical_salinity(salinity), temperature_degC=temperature_degC
    )
    vapour = vapour_pressure_kPa(salinity, temperature_degC=temperature_degC)
    dry_air = (np.asarray(air_pressure_kPa, dtype=np.float64) - vapour) / (STANDARD_ATMOSPHERE_KPA - vapour)
    return np.asarray(content * density * (OXYGEN_MOLAR_MASS_G_MOL * 1e-6) * dry_air)
