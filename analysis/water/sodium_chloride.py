"""Sodium chloride in water: salt baths, transport water, freshwater hatcheries.

Conductivity and temperature give molality, Pitzer's equation gives the osmotic coefficient, and the freezing
point of that molality gives the osmolality that an osmometer reads. The relation of sea water would be 3 to
7 % wrong here.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import gsw
import numpy as np

from analysis.water.freezing import osmolality_from_freezing_point
from analysis.water.seawater import BELOW_RANGE_MS_CM

if TYPE_CHECKING:
    from numpy.typing import ArrayLike

    from analysis.arrays import FloatArray

MOLAR_MASS_G_MOL: Final = 58.4428
"""Molar mass of sodium chloride (IUPAC atomic weights)."""

HIGHEST_FITTED_MOLALITY: Final = 1.5
HIGHEST_MOLALITY: Final = 2.1
"""Up to 1.5 mol/kg the conductivity relation is fitted; to 2.1 it is continued (0.6 %) and marked. [mol/kg]"""

HIGHEST_PITZER_MOLALITY: Final = 6.0
"""End of Pitzer's equation for NaCl: near saturation. [mol/kg]"""

# ln(kappa / m) = sum a_ij m^(i/2) ((t - 20) / 20)^j, kappa in mS/cm: our own fit of what PHREEQC 3.8.6 with its
# phreeqc.dat computes for NaCl (0 to 40 degC, 0.0003 to 1.5 mol/kg, largest difference 0.15 %); one row for
# each power of sqrt(m). Against Chambers 1956 and Robinson and Stokes at 25 degC: -0.3 to +0.2 %.
_CONDUCTIVITY_FIT = (
    (4.727502, 0.4441464, -0.07807481, 0.01526472),
    (-0.712704, -0.02496788, 0.0002387941),
    (0.789022, -0.001325796, 0.003571491),
    (-0.7917035,),
    (0.4226329,),
    (-0.1001348,),
)

# PHREEQC's conductivities are low in the cold for every water alike. 1 + c (25 - t)^2 below 25 degC brings KCl
# to the values of Pratt and others within 0.1 to 1.3 % and sea water to PSS-78 within 0.5 %: our own fit.
COLD_CORRECTION_PER_K2: Final = 2.8e-5

# Apparent molar volume [cm3/mol] = sum b_ij ((t - 20) / 20)^i m^(j/2): our own fit of the specific volumes of
# Rogers and Pitzer 1982 (as printed in the CRC Handbook, 0 to 30 degC, 0.1 to 1 mol/kg): 0.024 kg/m3 at most.
_VOLUME_FIT = (
    (16.01733537210856, 2.297336909959394, -0.6684337589737823, 0.1223123980985322),
    (1.9713276609754646, -0.47236119901106105),
    (0.07304712965572957,),
)

# osm_fp [mol/kg] = m * (2 + sum d_k m^(k/2)): our own fit of the exact value (`exact_osmolality_from_molality`),
# 0 to 2.1 mol/kg, relative error at most 3e-6.
_FREEZING_POINT_FIT = (
    2.0,
    -0.753095796445,
    1.4873393515,
    -1.9982111368,
    1.96529701994,
    -1.36388120373,
    0.648918189201,
    -0.186927850188,
    0.0242454851843,
)

# Moeller 1988: P(T) = a0 + a1 T + a2/T + a3 ln T + a4/(T - 263) + a5 T^2 + a6/(680 - T) + a7/(T - 227)
_DEBYE_HUCKEL = (
    3.36901532e-1,
    -6.32100430e-4,
    9.14252359,
    -1.35143986e-2,
    2.26089488e-3,
    1.92118597e-6,
    4.52586464e1,
    0.0,
)
_BETA0 = (1.43783204e1, 5.60767406e-3, -4.22185236e2, -2.51226677, 0.0, -2.61718135e-6, 4.43854508, -1.70502337)
_BETA1 = (-4.83060685e-1, 1.40677479e-3, 1.19311989e2, 0.0, 0.0, 0.0, 0.0, -4.23433299)
_C_PHI = (-1.00588714e-1, -1.80529413e-5, 8.61185543, 1.24880954e-2, 0.0, 3.41172108e-8, 6.83040995e-2, 2.93922611e-1)


def _floats(values: ArrayLike) -> FloatArray:
    return np.asarray(values, dtype=np.float64)


def _polynomial(coefficients: tuple[float, ...], x: FloatArray) -> FloatArray:
    total = np.full(np.shape(x), coefficients[-1])
    for coefficient in coefficients[-2::-1]:
        total = total * x + coefficient
    return total


def _possible(molality: ArrayLike, *, highest: float = HIGHEST_MOLALITY) -> FloatArray:
    values = _floats(molality)
    return np.where((values >= 0.0) & (values <= highest * (1.0 + 1e-9)), values, np.nan)


def _moeller(temperature_K: FloatArray, a: tuple[float, ...]) -> FloatArray:
    t = temperature_K
    straight = a[0] + a[1] * t + a[2] / t + a[3] * np.log(t) + a[5] * t * t
    return np.asarray(straight + a[4] / (t - 263.0) + a[6] / (680.0 - t) + a[7] / (t - 227.0))


@dataclass(frozen=True, slots=True)
class PitzerParameters:
    """Parameters of Pitzer's equation for NaCl at one temperature, 1 bar.

    Parameters
    ----------
    debye_huckel, beta0, beta1, c_phi : ndarray of float64
        [kg^0.5/mol^0.5], [kg/mol], [kg/mol], [kg2/mol2]
    """

    debye_huckel: FloatArray
    beta0: FloatArray
    beta1: FloatArray
    c_phi: FloatArray


def pitzer_parameters(temperature_degC: ArrayLike) -> PitzerParameters:
    """Return Pitzer's parameters of NaCl after Moeller [1]_.

    Equal to the table of Pitzer, Peiper and Busey [2]_ in its last digit from 0 to 40 degC.

    References
    ----------
    .. [1] N. Moeller 1988, Geochim. Cosmochim. Acta 52, 821.
    .. [2] K. S. Pitzer, J. C. Peiper, R. H. Busey 1984, J. Phys. Chem. Ref. Data 13, 1, table A-1.
    """
    kelvin = _floats(temperature_degC) + 273.15
    return PitzerParameters(
        debye_huckel=_moeller(kelvin, _DEBYE_HUCKEL),
        beta0=_moeller(kelvin, _BETA0),
        beta1=_moeller(kelvin, _BETA1),
        c_phi=_moeller(kelvin, _C_PHI),
    )


def osmotic_coefficient_from_molality(molality_mol_kg: ArrayLike, *, temperature_degC: ArrayLike) -> FloatArray:
    """Return the osmotic coefficient of a sodium chloride solution by Pitzer's equation.

    Parameters
    ----------
    molality_mol_kg : array_like
        0 to 6. [mol/kg water]
    temperature_degC : array_like
        -9 to 45. [degC]

    Returns
    -------
    ndarray of float64
        NaN outside those ranges. [1]

    References
    ----------
    K. S. Pitzer and G. Mayorga 1973, J. Phys. Chem. 77, 2300, eq. 3, with the parameters of `pitzer_parameters`.
    """
    molality = _possible(molality_mol_kg, highest=HIGHEST_PITZER_MOLALITY)
    temperature = _floats(temperature_degC)
    usable = np.where((temperature >= -9.0) & (temperature <= 45.0), temperature, np.nan)
    at = pitzer_parameters(usable)
    root = np.sqrt(molality)
    electrostatic = at.debye_huckel * root / (1.0 + 1.2 * root)
    pairs = molality * (at.beta0 + at.beta1 * np.exp(-2.0 * root))
    return np.asarray(1.0 - electrostatic + pairs + molality**2 * at.c_phi)


def osmolality_in_situ_from_molality(molality_mol_kg: ArrayLike, *, temperature_degC: ArrayLike) -> FloatArray:
    """Return osmolality at the water's own temperature: 2 m phi. [mOsm/kg water]"""
    coefficient = osmotic_coefficient_from_molality(molality_mol_kg, temperature_degC=temperature_degC)
    return np.asarray(2000.0 * _floats(molality_mol_kg) * coefficient)


def osmolality_from_molality(molality_mol_kg: ArrayLike) -> FloatArray:
    """Return osmolality on the freezing-point basis.

    Parameters
    ----------
    molality_mol_kg : array_like
        0 to 2.1. [mol/kg water]

    Returns
    -------
    ndarray of float64
        NaN outside that range. [mOsm/kg water]
    """
    molality = _possible(molality_mol_kg)
    return np.asarray(1000.0 * molality * _polynomial(_FREEZING_POINT_FIT, np.sqrt(molality)))


def exact_osmolality_from_molality(molality_mol_kg: ArrayLike) -> FloatArray:
    """Return the osmolality at which Pitzer's equation and the ice of TEOS-10 agree. [mOsm/kg water]

    The freezing point is found by bisection; `osmolality_from_molality` is the fit of this.
    """
    molality = _possible(molality_mol_kg)
    low, high = np.full(molality.shape, -8.5), np.full(molality.shape, 0.0025)
    for _ in range(50):
        middle = 0.5 * (low + high)
        dissolved = osmolality_in_situ_from_molality(molality, temperature_degC=middle)
        is_colder = dissolved > osmolality_from_freezing_point(middle)
        high = np.where(is_colder, middle, high)
        low = np.where(is_colder, low, middle)
    return osmolality_in_situ_from_molality(molality, temperature_degC=0.5 * (low + high))


def molality_from_osmolality(osmolality_mOsm_kg: ArrayLike) -> FloatArray:
    """Return molality from osmolality on the freezing-point basis; NaN beyond 2.1 mol/kg. [mol/kg water]"""
    wanted = _floats(osmolality_mOsm_kg)
    highest = float(osmolality_from_molality(HIGHEST_MOLALITY))
    wanted = np.where((wanted >= 0.0) & (wanted <= highest), wanted, np.nan)
    molality = wanted / 1850.0
    for _ in range(40):  # Picard: each step divides the error by ten or more
        ratio = _polynomial(_FREEZING_POINT_FIT, np.sqrt(np.clip(molality, 0.0, HIGHEST_MOLALITY)))
        molality = wanted / (1000.0 * ratio)
    return molality


def _conductivity_coefficients(temperature_degC: FloatArray) -> list[FloatArray]:
    tau = (temperature_degC - 20.0) / 20.0
    return [_polynomial(row, tau) for row in _CONDUCTIVITY_FIT]


def _logarithm_of_ratio(coefficients: list[FloatArray], root: FloatArray) -> FloatArray:
    total = coefficients[-1]
    for coefficient in coefficients[-2::-1]:
        total = total * root + coefficient
    return total


def cold_correction(temperature_degC: ArrayLike) -> FloatArray:
    """Return the factor that corrects PHREEQC's conductivities below 25 degC (our own empirical fit). [1]"""
    below = np.maximum(25.0 - _floats(temperature_degC), 0.0)
    return np.asarray(1.0 + COLD_CORRECTION_PER_K2 * below * below)


def conductivity_from_molality(molality_mol_kg: ArrayLike, *, temperature_degC: ArrayLike) -> FloatArray:
    """Return the conductivity of a sodium chloride solution.

    Parameters
    ----------
    molality_mol_kg : array_like
        0 to 2.1. [mol/kg water]
    temperature_degC : array_like
        -2 to 45; fitted from 0 to 40. [degC]

    Returns
    -------
    ndarray of float64
        Within 0.5 % at 15 to 35 degC, 1 % at 0 to 10 degC. [mS/cm]
    """
    molality, temperature = _possible(molality_mol_kg), _floats(temperature_degC)
    ratio = np.exp(_logarithm_of_ratio(_conductivity_coefficients(temperature), np.sqrt(molality)))
    return np.asarray(molality * ratio * cold_correction(temperature))


def molality_from_conductivity(conductivity_mS_cm: ArrayLike, *, temperature_degC: ArrayLike) -> FloatArray:
    """Return molality from conductivity: the inverse of `conductivity_from_molality`.

    Newton's method on the logarithms, where the relation is nearly a straight line.

    Parameters
    ----------
    conductivity_mS_cm : array_like
        At the water's own temperature, not compensated; any conductivity of the make-up water subtracted. [mS/cm]
    temperature_degC : array_like
        [degC]

    Returns
    -------
    ndarray of float64
        0 up to 0.002 mS/cm; NaN where negative, NaN, or beyond 2.1 mol/kg. [mol/kg water]
    """
    conductivity, temperature = np.broadcast_arrays(_floats(conductivity_mS_cm), _floats(temperature_degC))
    salty = conductivity > BELOW_RANGE_MS_CM
    usable = np.where(salty & np.isfinite(conductivity), conductivity, np.nan)
    coefficients = _conductivity_coefficients(temperature)
    slopes = [0.5 * power * coefficient for power, coefficient in enumerate(coefficients)][1:]
    target = np.log(usable / cold_correction(temperature))
    logarithm = target - coefficients[0] + 0.2
    highest = float(np.log(1.5 * HIGHEST_MOLALITY))
    for _ in range(5):
        root = np.exp(0.5 * np.minimum(logarithm, highest))
        excess = logarithm + _logarithm_of_ratio(coefficients, root) - target
        logarithm = logarithm - excess / (1.0 + root * _logarithm_of_ratio(slopes, root))
    molality = np.exp(logarithm)
    fresh = (conductivity >= 0.0) & ~salty & np.isfinite(temperature)
    with np.errstate(invalid="ignore"):
        return np.where(fresh, 0.0, np.where(molality <= HIGHEST_MOLALITY * (1.0 + 1e-9), molality, np.nan))


def absolute_salinity_from_molality(molality_mol_kg: ArrayLike) -> FloatArray:
    """Return grams of sodium chloride per kilogram of solution. [g/kg]"""
    grams = MOLAR_MASS_G_MOL * _floats(molality_mol_kg)
    return np.asarray(grams / (1.0 + 1e-3 * grams))


def molality_from_absolute_salinity(absolute_salinity_g_kg: ArrayLike) -> FloatArray:
    """Return molality [mol/kg water] from grams per kilogram of solution."""
    salinity = _floats(absolute_salinity_g_kg)
    return np.asarray(salinity / (MOLAR_MASS_G_MOL * (1.0 - 1e-3 * salinity)))


def density_from_molality(
    molality_mol_kg: ArrayLike, *, temperature_degC: ArrayLike, pressure_dbar: ArrayLike = 0.0
) -> FloatArray:
    """Return the density of a sodium chloride solution from its apparent molar volume.

    Parameters
    ----------
    molality_mol_kg : array_like
        0 to 2.1. [mol/kg water]
    temperature_degC : array_like
        [degC]
    pressure_dbar : array_like
        Sea pressure: compresses the water only, which is enough for tanks. [dbar]

    Returns
    -------
    ndarray of float64
        Within 0.03 kg/m3 of Rogers and Pitzer (0 to 30 degC, to 1 mol/kg), 0.3 of PHREEQC (0 to 45 degC). [kg/m3]

    References
    ----------
    P. S. Z. Rogers and K. S. Pitzer 1982, J. Phys. Chem. Ref. Data 11, 15 (values as in the CRC Handbook).
    """
    molality, temperature = _possible(molality_mol_kg), _floats(temperature_degC)
    tau = (temperature - 20.0) / 20.0
    root = np.sqrt(molality)
    volume_cm3_mol = _logarithm_of_ratio([_polynomial(row, tau) for row in _VOLUME_FIT], root)
    water = _floats(gsw.rho_t_exact(0.0, temperature, _floats(pressure_dbar)))
    litres = 1e6 / water + molality * volume_cm3_mol
    return np.asarray(1000.0 * (1000.0 + MOLAR_MASS_G_MOL * molality) / litres)
