"""Freezing: the bridge between osmolality and what a freezing-point osmometer measures.

Every solution in equilibrium with ice at one temperature has the same water activity, whatever is dissolved
in it. So one relation, of water and ice alone, serves sea water, plain salt water and physiological fluids.
Temperatures are those of air-free water at 101325 Pa; pure water then freezes at +0.00252 degC, air-saturated
water at 0.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

import gsw
import numpy as np

from analysis.errors import InvalidInputError
from analysis.water.seawater import (
    CELSIUS_ZERO_K,
    GAS_CONSTANT_J_MOL_K,
    HIGHEST_ABSOLUTE_SALINITY_G_KG,
)

if TYPE_CHECKING:
    from numpy.typing import ArrayLike

    from analysis.arrays import FloatArray

ICE_POINT_DEGC: Final = float(gsw.t_freezing(0.0, 0.0, 0.0))
"""Freezing point of pure, air-free water at 101325 Pa. [degC]"""

CRYOSCOPIC_CONSTANT_K_KG_MOL: Final = 1.860
"""What pharmacopoeias prescribe (USP <785>; Ph. Eur. 2.2.35). Infinite dilution by TEOS-10: 1.8606."""

OTHER_CRYOSCOPIC_CONSTANT_K_KG_MOL: Final = 1.858
"""What some osmometers are built with: 0.11 % apart."""

LOWEST_FREEZING_POINT_DEGC: Final = -12.0


def osmolality_from_freezing_point(freezing_point_degC: ArrayLike) -> FloatArray:
    """Return the osmolality of a solution that freezes at a temperature, from water and ice of TEOS-10.

    Parameters
    ----------
    freezing_point_degC : array_like
        -12 to +0.00252 (pure water), air-free. [degC]

    Returns
    -------
    ndarray of float64
        NaN outside that range. [mOsm/kg water]

    References
    ----------
    IOC, SCOR and IAPSO 2010, section 3.33 (equality of the chemical potentials of water and ice); IAPWS R10-06.
    """
    temperature = np.asarray(freezing_point_degC, dtype=np.float64)
    possible = (temperature >= LOWEST_FREEZING_POINT_DEGC) & (temperature <= ICE_POINT_DEGC + 1e-9)
    usable = np.where(possible, temperature, np.nan)
    pure = 1000.0 * np.asarray(gsw.chem_potential_water_t_exact(0.0, usable, 0.0))
    ice = np.asarray(gsw.chem_potential_water_ice(usable, 0.0))
    return np.asarray((pure - ice) / ((GAS_CONSTANT_J_MOL_K * 1e-3) * (usable + CELSIUS_ZERO_K)))


def freezing_point_from_osmolality(osmolality_mOsm_kg: ArrayLike) -> FloatArray:
    """Return the freezing point of any solution from its osmolality on the freezing-point basis.

    Parameters
    ----------
    osmolality_mOsm_kg : array_like
        0 to 6,450. [mOsm/kg water]

    Returns
    -------
    ndarray of float64
        NaN where negative, NaN or beyond the range. [degC]
    """
    osmolality = np.asarray(osmolality_mOsm_kg, dtype=np.float64)
    highest = float(osmolality_from_freezing_point(LOWEST_FREEZING_POINT_DEGC))
    wanted = np.where((osmolality >= 0.0) & (osmolality <= highest), osmolality, np.nan)
    step = CRYOSCOPIC_CONSTANT_K_KG_MOL * 1e-3
    temperature = ICE_POINT_DEGC - step * wanted
    for _ in range(8):  # the slope changes by less than 0.5 % per kelvin: each step gains two digits or more
        temperature = np.clip(temperature, LOWEST_FREEZING_POINT_DEGC, ICE_POINT_DEGC)
        temperature = temperature + step * (osmolality_from_freezing_point(temperature) - wanted)
    return np.clip(temperature, LOWEST_FREEZING_POINT_DEGC, ICE_POINT_DEGC)


def freezing_point_depression_from_osmolality(osmolality_mOsm_kg: ArrayLike) -> FloatArray:
    """Return by how much a solution freezes below pure water. [K]"""
    return np.asarray(ICE_POINT_DEGC - freezing_point_from_osmolality(osmolality_mOsm_kg))


def osmolality_from_freezing_point_depression(depression_K: ArrayLike) -> FloatArray:
    """Return thermodynamic osmolality from a freezing-point depression. [mOsm/kg water]

    Parameters
    ----------
    depression_K : array_like
        Below the freezing point of pure water under the same conditions, 0 to 12. [K]
    """
    return osmolality_from_freezing_point(ICE_POINT_DEGC - np.asarray(depression_K, dtype=np.float64))


def osmometer_reading_from_depression(
    depression_K: ArrayLike, *, cryoscopic_constant: float = CRYOSCOPIC_CONSTANT_K_KG_MOL
) -> FloatArray:
    """Return what an osmometer displays for a freezing-point depression: dT / K_f.

    Within -0.03 to +0.11 % of the thermodynamic osmolality up to 1600 mOsm/kg.

    Parameters
    ----------
    depression_K : array_like
        [K]
    cryoscopic_constant : float
        1.860 by the pharmacopoeias, 1.858 in some instruments. [K kg/mol]

    Returns
    -------
    ndarray of float64
        [mOsm/kg water]

    Raises
    ------
    InvalidInputError
        If the constant is not within 1.8 to 1.9 K kg/mol.
    """
    if not 1.8 <= cryoscopic_constant <= 1.9:
        raise InvalidInputError(
            "cryoscopic constant of water", found=cryoscopic_constant, allowed="1.8 to 1.9 K kg/mol"
        )
    return np.asarray(np.asarray(depression_K, dtype=np.float64) * (1000.0 / cryoscopic_constant))


def seawater_freezing_point(
    absolute_salinity_g_kg: ArrayLike, *, pressure_dbar: ArrayLike = 0.0, air_saturation: ArrayLike = 0.0
) -> FloatArray:
    """Return the temperature at which sea water freezes, by TEOS-10.

    Parameters
    ----------
    absolute_salinity_g_kg : array_like
        0 to 120. [g/kg]
    pressure_dbar : array_like
        Sea pressure. [dbar]
    air_saturation : array_like
        Fraction of dissolved air: 0 air-free (as everywhere in this module) to 1 saturated (-0.0024 K). [1]

    Returns
    -------
    ndarray of float64
        NaN outside 0 to 120 g/kg. [degC]

    References
    ----------
    IOC, SCOR and IAPSO 2010, section 3.33.
    """
    salinity = np.asarray(absolute_salinity_g_kg, dtype=np.float64)
    usable = np.where((salinity >= 0.0) & (salinity <= HIGHEST_ABSOLUTE_SALINITY_G_KG), salinity, np.nan)
    return np.asarray(gsw.t_freezing(usable, pressure_dbar, air_saturation))
