"""Sodium chloride water as a kind of water, and the dose of salt for a wanted osmolality."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from analysis.flags import Flag
from analysis.water.properties import WaterProperties, has_plain_readings, mark, screened
from analysis.water.sodium_chloride import (
    HIGHEST_FITTED_MOLALITY,
    HIGHEST_MOLALITY,
    MOLAR_MASS_G_MOL,
    absolute_salinity_from_molality,
    conductivity_from_molality,
    density_from_molality,
    molality_from_absolute_salinity,
    molality_from_conductivity,
    molality_from_osmolality,
    osmolality_from_molality,
    osmolality_in_situ_from_molality,
)

if TYPE_CHECKING:
    from numpy.typing import ArrayLike

    from analysis.arrays import FloatArray


def _floats(values: ArrayLike) -> FloatArray:
    return np.asarray(values, dtype=np.float64)


@dataclass(frozen=True, slots=True)
class SodiumChlorideWater:
    """Plain salt in fresh water. Its salinity is grams of sodium chloride per kilogram of solution."""

    name: str = "sodium-chloride"
    salinity_unit: str = "g/kg"

    @property
    def highest_salinity(self) -> float:
        """Grams per kilogram of solution at the end of the conductivity relation."""
        return float(absolute_salinity_from_molality(HIGHEST_MOLALITY))

    def model_uncertainty_percent(self, temperature_degC: ArrayLike) -> FloatArray:
        """Return what the model adds to osmolality: 0.6 % from 15 degC, 1.1 % to 10 degC, between them between."""
        return np.asarray(np.interp(_floats(temperature_degC), [10.0, 15.0], [1.1, 0.6]))

    def properties(
        self,
        conductivity_mS_cm: ArrayLike,
        *,
        temperature_degC: ArrayLike,
        pressure_dbar: ArrayLike = 0.0,
        longitude: ArrayLike = np.nan,
        latitude: ArrayLike = np.nan,
    ) -> WaterProperties:
        """Return what the readings say of the water; see `Seawater.properties` for arguments and flags."""
        conductivity, temperature, pressure = (
            _floats(conductivity_mS_cm),
            _floats(temperature_degC),
            _floats(pressure_dbar),
        )
        shape = np.broadcast_shapes(conductivity.shape, temperature.shape, pressure.shape)
        flags = np.zeros(shape, dtype=np.uint32)
        if not has_plain_readings(conductivity, temperature, pressure):
            conductivity, flags = screened(conductivity, temperature, pressure)
        molality = np.array(
            np.broadcast_to(molality_from_conductivity(conductivity, temperature_degC=temperature), shape)
        )
        mark(flags, molality == 0.0, Flag.BELOW_RANGE)
        mark(flags, molality > HIGHEST_FITTED_MOLALITY, Flag.EXTRAPOLATED)
        mark(flags, np.isnan(molality) & (flags & ~np.uint32(Flag.EXTRAPOLATED) == 0), Flag.OUT_OF_RANGE)
        return WaterProperties(
            practical_salinity=np.full(shape, np.nan),
            absolute_salinity_g_kg=absolute_salinity_from_molality(molality),
            density_kg_m3=density_from_molality(molality, temperature_degC=temperature, pressure_dbar=pressure),
            osmolality_mOsm_kg=osmolality_from_molality(molality),
            osmolality_in_situ_mOsm_kg=osmolality_in_situ_from_molality(molality, temperature_degC=temperature),
            flags=flags,
        )

    def salinity_from_conductivity(
        self, conductivity_mS_cm: ArrayLike, *, temperature_degC: ArrayLike, pressure_dbar: ArrayLike = 0.0
    ) -> FloatArray:
        """Return grams of salt per kilogram of solution. [g/kg]"""
        molality = molality_from_conductivity(conductivity_mS_cm, temperature_degC=temperature_degC)
        return np.asarray(absolute_salinity_from_molality(molality) + 0.0 * _floats(pressure_dbar))

    def conductivity_mS_cm(
        self, *, salinity: ArrayLike, temperature_degC: ArrayLike, pressure_dbar: ArrayLike = 0.0
    ) -> FloatArray:
        """Return the conductivity that a true cell would measure. [mS/cm]"""
        molality = molality_from_absolute_salinity(salinity)
        conductivity = conductivity_from_molality(molality, temperature_degC=temperature_degC)
        return np.asarray(conductivity + 0.0 * _floats(pressure_dbar))

    def osmolality_from_salinity(self, salinity: ArrayLike) -> FloatArray:
        """Return osmolality on the freezing-point basis. [mOsm/kg water]"""
        return osmolality_from_molality(molality_from_absolute_salinity(salinity))

    def salinity_from_osmolality(self, osmolality_mOsm_kg: ArrayLike) -> FloatArray:
        """Return grams of salt per kilogram of solution from osmolality. [g/kg]"""
        return absolute_salinity_from_molality(molality_from_osmolality(osmolality_mOsm_kg))

    def absolute_salinity_from_salinity(self, salinity: ArrayLike) -> FloatArray:
        """Return the mass fraction of salt: in this water the salinity itself. [g/kg]"""
        return _floats(salinity)

    def salinity_from_absolute_salinity(self, absolute_salinity_g_kg: ArrayLike) -> FloatArray:
        """Return salinity: in this water the mass fraction itself. [g/kg]"""
        return _floats(absolute_salinity_g_kg)

    def density_kg_m3(self, *, salinity: ArrayLike, temperature_degC: ArrayLike) -> FloatArray:
        """Return density at the surface. [kg/m3]"""
        return density_from_molality(molality_from_absolute_salinity(salinity), temperature_degC=temperature_degC)


@dataclass(frozen=True, slots=True)
class SaltDose:
    """How much sodium chloride makes a wanted osmolality, in the three ways people weigh it.

    Parameters
    ----------
    grams_per_kg_water : float
        [g/kg water]
    grams_per_L_water : float
        Into a litre of fresh water at that temperature. [g/L water]
    grams_per_L : float
        In a litre of the finished solution. [g/L]
    conductivity_mS_cm : float
        What a raw conductivity meter should then show. [mS/cm]
    """

    grams_per_kg_water: float
    grams_per_L_water: float
    grams_per_L: float
    conductivity_mS_cm: float


def dose_for_osmolality(osmolality_mOsm_kg: float, *, temperature_degC: float = 25.0) -> SaltDose:
    """Return the dose of pure, dry sodium chloride for an osmolality on the freezing-point basis.

    Every number of the result is NaN where the osmolality is beyond 2.1 mol/kg. For a damp or impure salt divide
    the grams by its dry fraction.
    """
    molality = float(molality_from_osmolality(osmolality_mOsm_kg))
    grams = MOLAR_MASS_G_MOL * molality
    water = float(density_from_molality(0.0, temperature_degC=temperature_degC))
    solution = float(density_from_molality(molality, temperature_degC=temperature_degC))
    return SaltDose(
        grams_per_kg_water=grams,
        grams_per_L_water=grams * water / 1000.0,
        grams_per_L=float(absolute_salinity_from_molality(molality)) * solution / 1000.0,
        conductivity_mS_cm=float(conductivity_from_molality(molality, temperature_degC=temperature_degC)),
    )
