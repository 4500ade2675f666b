"""Everything that readings of one sensor say of its water, in one go: for the terminal, the unit desk and files."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np

from analysis.flags import Flag
from analysis.water.compensation import Compensation, conductivity_from_specific_conductance
from analysis.water.freezing import freezing_point_from_osmolality
from analysis.water.osmotic_pressure import (
    osmotic_pressure_from_absolute_salinity,
    osmotic_pressure_from_osmolality,
)
from analysis.water.oxygen import oxygen_solubility_mg_L
from analysis.water.properties import Seawater, WaterKind
from analysis.water.uncertainty import SensorAccuracy, uncertainty_of_readings
from analysis.water.units import conductivity_mS_cm_from

if TYPE_CHECKING:
    from analysis.arrays import FlagArray, FloatArray

QUANTITIES = (
    "practical_salinity",
    "absolute_salinity_g_kg",
    "density_kg_m3",
    "osmolality_mOsm_kg",
    "osmolality_in_situ_mOsm_kg",
    "osmotic_pressure_kPa",
    "freezing_point_degC",
    "oxygen_solubility_mg_L",
)
"""Keys of the quantities, in the order in which they are shown."""


@dataclass(frozen=True, slots=True)
class Answers:
    """What readings say: arrays of one shape.

    Parameters
    ----------
    quantities : dict of str to ndarray
        By the keys of `QUANTITIES`; NaN where a quantity is not known or does not apply.
    uncertainties : dict of str to ndarray
        Plus or minus, for salinity (under the key of the quantity that is salinity in this kind of water) and
        for ``osmolality_mOsm_kg``.
    flags : ndarray of uint32
        Words of `analysis.flags.Flag`.
    """

    quantities: dict[str, FloatArray]
    uncertainties: dict[str, FloatArray]
    flags: FlagArray


@dataclass(frozen=True, slots=True)
class Conversion:
    """How a sensor reports and in which water it stands: everything that is decided before the first reading.

    Parameters
    ----------
    kind : WaterKind
        The kind of water.
    unit : str
        Unit of conductivity as sent.
    compensation : Compensation, optional
        How the meter compensates; None for raw conductivity.
    accuracy : SensorAccuracy
        Stated accuracy of the sensor.
    longitude, latitude : float
        Where sea water comes from; NaN where not known. [degrees]
    """

    kind: WaterKind
    unit: str = "mS/cm"
    compensation: Compensation | None = None
    accuracy: SensorAccuracy = field(default_factory=SensorAccuracy)
    longitude: float = math.nan
    latitude: float = math.nan

    def answers(self, conductivity: FloatArray, *, temperature_degC: FloatArray, pressure_dbar: FloatArray) -> Answers:
        """Return everything that the readings say.

        Parameters
        ----------
        conductivity : ndarray of float64
            As the sensor sends it, in its unit, compensated or not.
        temperature_degC, pressure_dbar : ndarray of float64
            [degC], [dbar]; of the same shape.
        """
        measured = conductivity_mS_cm_from(conductivity, unit=self.unit)
        if self.compensation is not None:
            measured = conductivity_from_specific_conductance(
                measured, temperature_degC=temperature_degC, compensation=self.compensation
            )
        found = self.kind.properties(
            measured,
            temperature_degC=temperature_degC,
            pressure_dbar=pressure_dbar,
            longitude=self.longitude,
            latitude=self.latitude,
        )
        flags = found.flags
        if self.compensation is not None:
            beyond = self.compensation.is_extrapolated(temperature_degC) & np.isfinite(found.osmolality_mOsm_kg)
            flags = flags | np.where(beyond, np.uint32(Flag.EXTRAPOLATED), np.uint32(0))
        # A null reading stays null in everything that follows from temperature alone.
        usable = np.where(np.isfinite(found.osmolality_mOsm_kg), temperature_degC, np.nan)
        quantities = {
            "practical_salinity": found.practical_salinity,
            "absolute_salinity_g_kg": found.absolute_salinity_g_kg,
            "density_kg_m3": found.density_kg_m3,
            "osmolality_mOsm_kg": found.osmolality_mOsm_kg,
            "osmolality_in_situ_mOsm_kg": found.osmolality_in_situ_mOsm_kg,
            "osmotic_pressure_kPa": self._osmotic_pressure(
                found.absolute_salinity_g_kg, found.osmolality_in_situ_mOsm_kg, usable
            ),
            "freezing_point_degC": freezing_point_from_osmolality(found.osmolality_mOsm_kg),
            "oxygen_solubility_mg_L": oxygen_solubility_mg_L(found.absolute_salinity_g_kg, temperature_degC=usable),
        }
        uncertainty = uncertainty_of_readings(
            np.where(np.isfinite(usable), measured, np.nan),
            temperature_degC=temperature_degC,
            accuracy=self.accuracy,
            kind=self.kind,
            pressure_dbar=pressure_dbar,
        )
        doubts = {self.salinity_key: uncertainty.salinity, "osmolality_mOsm_kg": uncertainty.osmolality_mOsm_kg}
        return Answers(quantities=quantities, uncertainties=doubts, flags=flags)

    def _osmotic_pressure(self, salinity: FloatArray, osmolality: FloatArray, temperature: FloatArray) -> FloatArray:
        if isinstance(self.kind, Seawater):
            return osmotic_pressure_from_absolute_salinity(salinity, temperature_degC=temperature)
        return osmotic_pressure_from_osmolality(osmolality, temperature_degC=temperature)

    @property
    def salinity_key(self) -> str:
        """The key of the quantity that is salinity in this kind of water."""
        return "practical_salinity" if isinstance(self.kind, Seawater) else "absolute_salinity_g_kg"
