"""Potassium chloride in water: the solutions that conductivity cells are calibrated with."""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import ArrayLike

    from analysis.arrays import FloatArray

MOLAR_MASS_G_MOL: Final = 74.5513
"""Molar mass of potassium chloride (IUPAC atomic weights)."""

HIGHEST_MOLALITY: Final = 4.5
"""The equation is used to 4.5 mol/kg, a little short of saturation at 20 degC. [mol/kg]"""

_RANGE_DEGC = (0.0, 55.0)


def conductivity_from_molality(molality_mol_kg: ArrayLike, *, temperature_degC: ArrayLike) -> FloatArray:
    """Return the conductivity of a potassium chloride solution by McKee's equation [1]_.

    Within 0.07 % of the values of Pratt and others (0.01 to 1 mol/kg, 0 to 40 degC). The water's own
    conductivity (carbon dioxide of the air: about 0.001 mS/cm at 25 degC) is not in it.

    Parameters
    ----------
    molality_mol_kg : array_like
        0 to 4.5. [mol/kg water]
    temperature_degC : array_like
        ITS-90, 0 to 55. [degC]

    Returns
    -------
    ndarray of float64
        NaN outside those ranges. [mS/cm]

    References
    ----------
    .. [1] C. B. McKee 2009, J. Solution Chem. 38, 1155 (equation as transcribed in a public electrolyte library).
    """
    molality = np.asarray(molality_mol_kg, dtype=np.float64)
    temperature = np.asarray(temperature_degC, dtype=np.float64)
    m = np.where((molality >= 0.0) & (molality <= HIGHEST_MOLALITY), molality, np.nan)
    t = np.where((temperature >= _RANGE_DEGC[0]) & (temperature <= _RANGE_DEGC[1]), temperature, np.nan)
    alpha, beta_a, beta_b = _temperature_terms(t)
    size = _size_of_temperature_effect(m)
    return np.asarray(m * _molar_conductivity_25(m) * (1.0 + alpha * 0.321662 + (beta_a + beta_b * m) * size))


def _molar_conductivity_25(m: FloatArray) -> FloatArray:
    strong = 111.732 * np.exp(-6.01942e-2 * m - 2.03830e-3 * m * m) + 34.5286 * np.exp(-2.25008 * np.sqrt(m))
    dilute = 1.45667 * np.exp(-19.5946 * m) + 0.960521 * np.exp(-96.4192 * m) + 0.587725 * np.exp(-570.452 * m)
    return np.asarray(strong + dilute)


def _size_of_temperature_effect(m: FloatArray) -> FloatArray:
    strong = 0.165123 * np.exp(-0.265938 * m) + 1.57042e-2 * np.exp(-2.16681 * m)
    dilute = 8.26838e-3 * np.exp(-26.7895 * m) + 2.99403e-3 * np.exp(-525.162 * m)
    return np.asarray(strong + dilute)


def _temperature_terms(t: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
    from_25, from_50 = t - 25.0, t - 50.0
    alpha = from_25 * (0.04 + from_50 * (-6.35249e-4 + 4.60006e-4 * np.exp(-4.97223e-3 * t - 6.85638e-4 * t * t)))
    beta_a = from_25 * (0.04 + from_50 * (1.21005e-3 - 6.64169e-4 * np.exp(-2.64072e-3 * t - 7.78958e-4 * t * t)))
    beta_b = from_25 * from_50 * (4.44279e-4 - 3.35363e-4 * np.exp(-3.04164e-3 * t - 6.99205e-4 * t * t))
    return np.asarray(alpha), np.asarray(beta_a), np.asarray(beta_b)


def molality_from_mass_fraction(mass_fraction_g_kg: ArrayLike) -> FloatArray:
    """Return molality [mol/kg water] from grams of potassium chloride per kilogram of solution."""
    grams = np.asarray(mass_fraction_g_kg, dtype=np.float64)
    return np.asarray(grams / (MOLAR_MASS_G_MOL * (1.0 - 1e-3 * grams)))


def molality_from_conductivity(conductivity_mS_cm: ArrayLike, *, temperature_degC: ArrayLike) -> FloatArray:
    """Return the molality of a potassium chloride solution from its conductivity, by bisection.

    Parameters
    ----------
    conductivity_mS_cm : array_like
        For instance what a bottle's label gives at 25 degC. [mS/cm]
    temperature_degC : array_like
        [degC]

    Returns
    -------
    ndarray of float64
        NaN where there is no such solution. [mol/kg water]
    """
    conductivity, temperature = np.broadcast_arrays(
        np.asarray(conductivity_mS_cm, dtype=np.float64), np.asarray(temperature_degC, dtype=np.float64)
    )
    low, high = np.zeros(conductivity.shape), np.full(conductivity.shape, HIGHEST_MOLALITY)
    for _ in range(60):
        middle = 0.5 * (low + high)
        is_stronger = conductivity_from_molality(middle, temperature_degC=temperature) > conductivity
        high = np.where(is_stronger, middle, high)
        low = np.where(is_stronger, low, middle)
    reachable = conductivity <= conductivity_from_molality(HIGHEST_MOLALITY, temperature_degC=temperature)
    return np.where(reachable & (conductivity >= 0.0), 0.5 * (low + high), np.nan)


def conductivity_of_labelled_standard(label_mS_cm: ArrayLike, *, temperature_degC: ArrayLike) -> FloatArray:
    """Return what a bottle labelled at 25 degC conducts at another temperature. [mS/cm]

    Parameters
    ----------
    label_mS_cm : array_like
        Conductivity on the label, at 25 degC. [mS/cm]
    temperature_degC : array_like
        Of the standard when it is measured. [degC]
    """
    molality = molality_from_conductivity(label_mS_cm, temperature_degC=25.0)
    return conductivity_from_molality(molality, temperature_degC=temperature_degC)
