"""Sea water and its dilutions: PSS-78, TEOS-10, and osmolality from TEOS-10.

Bare relations on arrays. They follow one policy: NaN in, NaN out; a value that cannot be (negative
conductivity, water colder than ice allows, salt beyond the equation) gives NaN; a value outside the published
range but physical is computed. The flags that go with it are made in `analysis.water.properties`.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

import gsw
import numpy as np

if TYPE_CHECKING:
    from numpy.typing import ArrayLike

    from analysis.arrays import FloatArray

GAS_CONSTANT_J_MOL_K: Final = 8.314472
"""Molar gas constant of TEOS-10 (IOC, SCOR and IAPSO 2010, table D.1)."""

CELSIUS_ZERO_K: Final = 273.15
"""0 degC in kelvin."""

SEA_SALT_MOLAR_MASS_G_MOL: Final = 31.4038218
"""Mole-weighted mean mass of the particles of Reference Composition sea salt (Millero et al. 2008)."""

WATER_MOLAR_MASS_KG_MOL: Final = 0.018015268
"""Molar mass of water (IAPWS-95)."""

REFERENCE_SALINITY_PER_SP: Final = 35.16504 / 35.0
"""g/kg of Reference Salinity for one unit of practical salinity (Millero et al. 2008)."""

BELOW_RANGE_MS_CM: Final = 0.002
"""Conductivity at and below which practical salinity is taken as 0: the Hill extension ends there."""

HIGHEST_ABSOLUTE_SALINITY_G_KG: Final = 120.0
"""End of the saline part of the equation of state (IAPWS R13-08); beyond it nothing is computed."""

HIGHEST_PRACTICAL_SALINITY: Final = HIGHEST_ABSOLUTE_SALINITY_G_KG / REFERENCE_SALINITY_PER_SP

# Near zero conductivity the library gives NaN where its low-salinity polynomial falls below zero; the point
# moves from 0.0007 mS/cm at -2 degC to 0.0028 at 45 degC. Below this bound such a NaN means fresh, not faulty.
_POLYNOMIAL_ZERO_MS_CM = 0.003

# osm_fp [mOsm/kg] = SA * sum c_k SA^(k/2). Least-squares fit (re-weighted towards least maximum error) of the
# exact value below, 0.0004 to 120 g/kg: relative error at most 5e-7, and at most 6e-7 down to 1e-5 g/kg;
# the limit at infinite dilution, 1000 / 31.4038218, is met to 7e-7. tests: test_seawater.py.
_FREEZING_POINT_FIT = (
    31.8432795422,
    -2.10189446853,
    0.55264868301,
    -0.0705241741018,
    0.0050806997475,
    -0.000142168465707,
    1.62377637383e-06,
    -7.95754520055e-08,
)


def _floats(values: ArrayLike) -> FloatArray:
    return np.asarray(values, dtype=np.float64)


def _between(values: FloatArray, low: float, high: float) -> FloatArray:
    """Return *values* with NaN outside [low, high]; the same array where nothing is outside."""
    if values.size and bool(values.min() >= low) and bool(values.max() <= high):
        return values
    return np.where((values >= low) & (values <= high), values, np.nan)


def practical_salinity_from_conductivity(
    conductivity_mS_cm: ArrayLike, *, temperature_degC: ArrayLike, pressure_dbar: ArrayLike = 0.0
) -> FloatArray:
    """Return practical salinity by PSS-78 with the low-salinity extension of Hill and others.

    Published for 2 <= SP <= 42, -2 <= t <= 35 degC, 0 <= p <= 10000 dbar [1]_, extended to 0 < SP < 2 [2]_.

    Parameters
    ----------
    conductivity_mS_cm : array_like
        Conductivity at the water's own temperature, not compensated. [mS/cm]
    temperature_degC : array_like
        ITS-90 temperature. [degC]
    pressure_dbar : array_like
        Sea pressure, 0 at the surface. [dbar]

    Returns
    -------
    ndarray of float64
        0 from 0 to 0.002 mS/cm (and a little further where the relation itself ends, see below); NaN where
        conductivity is negative or infinite, or where an input is NaN. [1]

    Notes
    -----
    The library returns NaN, not 0, where the low-salinity polynomial is below zero (up to 0.0022 mS/cm at
    35 degC), and sometimes at exactly 0: those become 0 here.

    References
    ----------
    .. [1] UNESCO Technical Papers in Marine Science 44, 1983.
    .. [2] Hill, Dauphinee and Woods 1986, IEEE J. Oceanic Eng. 11, 109, as in the GSW toolbox.
    """
    conductivity, temperature, pressure = (
        _floats(conductivity_mS_cm),
        _floats(temperature_degC),
        _floats(pressure_dbar),
    )
    with np.errstate(invalid="ignore"):
        salinity = _floats(gsw.SP_from_C(conductivity, temperature, pressure))
    if conductivity.size and bool(conductivity.min() > _POLYNOMIAL_ZERO_MS_CM) and bool(conductivity.max() < np.inf):
        return salinity
    readable = np.isfinite(temperature) & np.isfinite(pressure)
    fresh = conductivity <= BELOW_RANGE_MS_CM
    fresh |= np.isnan(salinity) & (conductivity <= _POLYNOMIAL_ZERO_MS_CM)
    fresh = fresh & (conductivity >= 0.0) & readable
    return np.where(fresh, 0.0, np.where(np.isfinite(conductivity) & (conductivity >= 0.0), salinity, np.nan))


def conductivity_from_practical_salinity(
    practical_salinity: ArrayLike, *, temperature_degC: ArrayLike, pressure_dbar: ArrayLike = 0.0
) -> FloatArray:
    """Return conductivity from practical salinity: the inverse of `practical_salinity_from_conductivity`.

    Parameters
    ----------
    practical_salinity : array_like
        [1]
    temperature_degC : array_like
        ITS-90 temperature. [degC]
    pressure_dbar : array_like
        Sea pressure. [dbar]

    Returns
    -------
    ndarray of float64
        NaN where salinity is negative. [mS/cm]
    """
    with np.errstate(invalid="ignore"):
        return _floats(gsw.C_from_SP(_floats(practical_salinity), _floats(temperature_degC), _floats(pressure_dbar)))


def reference_salinity_from_practical_salinity(practical_salinity: ArrayLike) -> FloatArray:
    """Return Reference Salinity [g/kg] from practical salinity (Millero et al. 2008): SP * 35.16504 / 35."""
    return np.asarray(_floats(practical_salinity) * REFERENCE_SALINITY_PER_SP)


def practical_salinity_from_reference_salinity(reference_salinity_g_kg: ArrayLike) -> FloatArray:
    """Return practical salinity from Reference Salinity [g/kg]: the inverse relation."""
    return np.asarray(_floats(reference_salinity_g_kg) / REFERENCE_SALINITY_PER_SP)


def absolute_salinity_from_practical_salinity(
    practical_salinity: ArrayLike,
    *,
    pressure_dbar: ArrayLike = 0.0,
    longitude: ArrayLike = np.nan,
    latitude: ArrayLike = np.nan,
) -> FloatArray:
    """Return Absolute Salinity from practical salinity; Reference Salinity where no position is given.

    Parameters
    ----------
    practical_salinity : array_like
        [1]
    pressure_dbar : array_like
        Sea pressure. [dbar]
    longitude, latitude : array_like
        Position of the water's source; NaN where not known. In the Baltic box the regional relation is used;
        inland the anomaly is 0. [degrees east, degrees north]

    Returns
    -------
    ndarray of float64
        NaN where salinity is negative or NaN. [g/kg]

    References
    ----------
    McDougall and others 2012, Ocean Science 8, 1123 (the global atlas), through `gsw.SA_from_SP`.
    """
    salinity = _between(_floats(practical_salinity), 0.0, np.inf)
    reference = reference_salinity_from_practical_salinity(salinity)
    east, north = _floats(longitude), _floats(latitude)
    placed = np.isfinite(east) & np.isfinite(north) & (np.abs(north) <= 90.0)
    if not placed.any():
        return np.array(np.broadcast_to(reference, np.broadcast_shapes(reference.shape, placed.shape)))
    depth = np.maximum(_floats(pressure_dbar), 0.0)
    with np.errstate(invalid="ignore"):
        absolute = _floats(gsw.SA_from_SP(salinity, depth, np.where(placed, east, 0.0), np.where(placed, north, 0.0)))
    return np.where(placed & np.isfinite(absolute), absolute, reference)


def density_from_absolute_salinity(
    absolute_salinity_g_kg: ArrayLike, *, temperature_degC: ArrayLike, pressure_dbar: ArrayLike = 0.0
) -> FloatArray:
    """Return the density of sea water by TEOS-10, from temperature as measured (not potential temperature).

    Parameters
    ----------
    absolute_salinity_g_kg : array_like
        0 to 120. [g/kg]
    temperature_degC : array_like
        ITS-90 temperature. [degC]
    pressure_dbar : array_like
        Sea pressure. [dbar]

    Returns
    -------
    ndarray of float64
        NaN outside 0 to 120 g/kg. [kg/m3]

    References
    ----------
    IOC, SCOR and IAPSO 2010, The international thermodynamic equation of seawater, section 2.8; IAPWS R13-08.
    """
    salinity = _between(_floats(absolute_salinity_g_kg), 0.0, HIGHEST_ABSOLUTE_SALINITY_G_KG)
    return _floats(gsw.rho_t_exact(salinity, _floats(temperature_degC), _floats(pressure_dbar)))


def absolute_salinity_from_density(
    density_kg_m3: ArrayLike, *, temperature_degC: ArrayLike, pressure_dbar: ArrayLike = 0.0
) -> FloatArray:
    """Return Absolute Salinity from density: the inverse of `density_from_absolute_salinity`.

    Parameters
    ----------
    density_kg_m3 : array_like
        At least that of pure water at the same temperature. [kg/m3]
    temperature_degC : array_like
        ITS-90 temperature. [degC]
    pressure_dbar : array_like
        Sea pressure. [dbar]

    Returns
    -------
    ndarray of float64
        NaN where the density is below that of pure water or above that of 120 g/kg. [g/kg]
    """
    density, temperature = _floats(density_kg_m3), _floats(temperature_degC)
    salinity = np.full(np.broadcast_shapes(density.shape, temperature.shape, np.shape(pressure_dbar)), 20.0)
    for _ in range(12):  # secant of fixed slope: the slope varies by 10 %, so each step gains a digit
        found = density_from_absolute_salinity(
            np.clip(salinity, 0.0, HIGHEST_ABSOLUTE_SALINITY_G_KG),
            temperature_degC=temperature,
            pressure_dbar=pressure_dbar,
        )
        salinity = np.clip(salinity, 0.0, HIGHEST_ABSOLUTE_SALINITY_G_KG) + (density - found) / 0.76
    return _between(np.where(np.abs(salinity) < 1e-9, 0.0, salinity), 0.0, HIGHEST_ABSOLUTE_SALINITY_G_KG)


def molality_from_absolute_salinity(absolute_salinity_g_kg: ArrayLike) -> FloatArray:
    """Return the molality of all particles of sea salt [mol/kg water] (TEOS-10 manual, section 2.38)."""
    salinity = _floats(absolute_salinity_g_kg)
    return np.asarray(1000.0 * salinity / (SEA_SALT_MOLAR_MASS_G_MOL * (1000.0 - salinity)))


def osmolality_in_situ_from_absolute_salinity(
    absolute_salinity_g_kg: ArrayLike, *, temperature_degC: ArrayLike, pressure_dbar: ArrayLike = 0.0
) -> FloatArray:
    """Return osmolality at the water's own temperature and pressure by TEOS-10.

    O = (mu_pure - mu_water) / (R T) = phi * molality = -ln(a_w) / M_w [1]_.

    Parameters
    ----------
    absolute_salinity_g_kg : array_like
        0 to 120. [g/kg]
    temperature_degC : array_like
        ITS-90 temperature. [degC]
    pressure_dbar : array_like
        Sea pressure. [dbar]

    Returns
    -------
    ndarray of float64
        NaN outside 0 to 120 g/kg. [mOsm/kg water]

    References
    ----------
    .. [1] IOC, SCOR and IAPSO 2010, sections 2.14 and 2.40. The chemical potential of pure water is that of sea
       water at zero salinity: the same number as the Gibbs function, without its slow wrapper.
    """
    salinity = _between(_floats(absolute_salinity_g_kg), 0.0, HIGHEST_ABSOLUTE_SALINITY_G_KG)
    temperature, pressure = _floats(temperature_degC), _floats(pressure_dbar)
    pure = _floats(gsw.chem_potential_water_t_exact(0.0, temperature, pressure))
    lowered = _floats(gsw.chem_potential_water_t_exact(salinity, temperature, pressure))
    return np.asarray((pure - lowered) / ((GAS_CONSTANT_J_MOL_K * 1e-6) * (temperature + CELSIUS_ZERO_K)))


def osmolality_from_absolute_salinity(absolute_salinity_g_kg: ArrayLike) -> FloatArray:
    """Return osmolality on the freezing-point basis: what a freezing-point osmometer reads.

    A fit of `exact_osmolality_from_absolute_salinity`, in place of the search for the freezing point that
    costs twenty times as much; the fit holds within 6e-7 of the value (0.002 mOsm/kg) over the whole range.

    Parameters
    ----------
    absolute_salinity_g_kg : array_like
        0 to 120. [g/kg]

    Returns
    -------
    ndarray of float64
        NaN outside 0 to 120 g/kg. [mOsm/kg water]
    """
    salinity = _between(_floats(absolute_salinity_g_kg), 0.0, HIGHEST_ABSOLUTE_SALINITY_G_KG)
    root = np.sqrt(salinity)
    total = np.full(root.shape, _FREEZING_POINT_FIT[-1])
    for coefficient in _FREEZING_POINT_FIT[-2::-1]:
        total *= root
        total += coefficient
    total *= salinity
    return total


def exact_osmolality_from_absolute_salinity(absolute_salinity_g_kg: ArrayLike) -> FloatArray:
    """Return freezing-point basis osmolality from the freezing point itself: O(SA, T_f(SA), 0), air-free water."""
    salinity = _between(_floats(absolute_salinity_g_kg), 0.0, HIGHEST_ABSOLUTE_SALINITY_G_KG)
    freezing = _floats(gsw.t_freezing(salinity, 0.0, 0.0))
    return osmolality_in_situ_from_absolute_salinity(salinity, temperature_degC=freezing)


def absolute_salinity_from_osmolality(osmolality_mOsm_kg: ArrayLike) -> FloatArray:
    """Return Absolute Salinity from osmolality on the freezing-point basis.

    Parameters
    ----------
    osmolality_mOsm_kg : array_like
        0 to 4,250, which is the osmolality at 120 g/kg. [mOsm/kg water]

    Returns
    -------
    ndarray of float64
        NaN where negative, NaN or beyond 120 g/kg. [g/kg]
    """
    highest = float(osmolality_from_absolute_salinity(HIGHEST_ABSOLUTE_SALINITY_G_KG))
    wanted = _between(_floats(osmolality_mOsm_kg), 0.0, highest)
    salinity = wanted / 29.4
    for _ in range(8):  # the relation is nearly a straight line: five steps of Newton reach rounding
        salinity = np.clip(salinity, 0.0, HIGHEST_ABSOLUTE_SALINITY_G_KG)
        salinity = salinity - (osmolality_from_absolute_salinity(salinity) - wanted) / _slope(salinity)
    return np.clip(salinity, 0.0, HIGHEST_ABSOLUTE_SALINITY_G_KG)


def _slope(salinity_g_kg: FloatArray) -> FloatArray:
    """Return d(osm_fp)/d(SA) of the fit. [mOsm/kg per g/kg]"""
    root = np.sqrt(salinity_g_kg)
    total = np.zeros(root.shape)
    for power, coefficient in reversed(tuple(enumerate(_FREEZING_POINT_FIT))):
        total = total * root + coefficient * (1.0 + 0.5 * power)
    return total


def osmotic_coefficient_from_absolute_salinity(
    absolute_salinity_g_kg: ArrayLike, *, temperature_degC: ArrayLike, pressure_dbar: ArrayLike = 0.0
) -> FloatArray:
    """Return the osmotic coefficient of sea water [1] by TEOS-10; 1 in the limit of pure water."""
    salinity = _floats(absolute_salinity_g_kg)
    osmolality = osmolality_in_situ_from_absolute_salinity(
        salinity, temperature_degC=temperature_degC, pressure_dbar=pressure_dbar
    )
    particles = 1000.0 * molality_from_absolute_salinity(salinity)
    with np.errstate(invalid="ignore", divide="ignore"):
        return np.where(particles > 0.0, osmolality / particles, np.where(particles == 0.0, 1.0, np.nan))
