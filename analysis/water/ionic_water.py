"""Water described by a laboratory analysis of its ions, as a kind of water: table look-up in the hot path."""

from __future__ import annotations

from functools import cached_property
from typing import TYPE_CHECKING, Final

import gsw
import numpy as np
from scipy.interpolate import CubicSpline, RectBivariateSpline

from analysis.errors import InvalidInputError
from analysis.flags import Flag
from analysis.water.ionic_table import IonicTable, tabulate
from analysis.water.properties import WaterProperties, has_plain_readings, mark, screened
from analysis.water.seawater import BELOW_RANGE_MS_CM

if TYPE_CHECKING:
    from numpy.typing import ArrayLike

    from analysis.arrays import FloatArray
    from analysis.water.ions import IonAnalysis

COLD_UNCERTAINTY_PERCENT: Final = 2.5
"""What the engine's conductivity adds at 0 degC (2 to 3 % before its correction), falling to 0 at 25 degC. [%]"""

CALIBRATION_RANGE: Final = (0.9, 1.1)
"""Within this a laboratory osmolality calibrates the model; beyond it the analysis is of another water."""

_INVERSE_POINTS = 48


def _floats(values: ArrayLike) -> FloatArray:
    return np.asarray(values, dtype=np.float64)


class IonicWater:
    """An inland saline water. Its salinity is grams of all ions per kilogram of solution.

    Parameters
    ----------
    table : IonicTable
        Made by `analysis.water.ionic_table.tabulate`, or read back from where it was kept.
    osmolality_factor : float
        Laboratory osmolality over computed, from `calibrated`. [1]

    Raises
    ------
    InvalidInputError
        If the factor is not within 0.9 to 1.1.
    """

    salinity_unit: Final = "g/kg"

    def __init__(self, table: IonicTable, *, osmolality_factor: float = 1.0) -> None:
        low, high = CALIBRATION_RANGE
        if not low <= osmolality_factor <= high:
            raise InvalidInputError(
                "laboratory osmolality over computed",
                found=osmolality_factor,
                allowed=f"{low} to {high}: otherwise the analysis is of another water",
                where=table.name,
            )
        self.table = table
        self.osmolality_factor = osmolality_factor

    @property
    def name(self) -> str:
        """The analysis' id."""
        return self.table.name

    @property
    def highest_salinity(self) -> float:
        """Grams per kilogram of solution at the end of the table."""
        return float(self._salinity(np.asarray(self._highest_factor)))

    @classmethod
    def from_analysis(cls, analysis: IonAnalysis) -> IonicWater:
        """Return the water of an analysis, calibrated by its own osmolality where the laboratory measured it.

        Raises
        ------
        MissingPackageError
            If the package `phreeqc` is not installed.
        InvalidInputError
            If the engine refuses the analysis, or the measured osmolality does not fit it.
        """
        return cls(tabulate(analysis)).fitted_to(analysis)

    def fitted_to(self, analysis: IonAnalysis) -> IonicWater:
        """Return this water calibrated by the osmolality of the analysis, or itself where there is none."""
        if analysis.osmolality_mOsm_kg is None:
            return self
        conductivity = analysis.conductivity_mS_cm
        if conductivity is None:
            conductivity = float(self._conductivity(np.ones(1), np.array([analysis.temperature_degC]))[0])
        return self.calibrated(
            conductivity_mS_cm=conductivity,
            temperature_degC=analysis.temperature_degC,
            osmolality_mOsm_kg=analysis.osmolality_mOsm_kg,
        )

    def calibrated(
        self, *, conductivity_mS_cm: float, temperature_degC: float, osmolality_mOsm_kg: float
    ) -> IonicWater:
        """Return this water with its osmolality brought to one laboratory value.

        Parameters
        ----------
        conductivity_mS_cm, temperature_degC : float
            Of the sample, raw. [mS/cm], [degC]
        osmolality_mOsm_kg : float
            Of the same sample, by freezing point. [mOsm/kg water]

        Raises
        ------
        InvalidInputError
            If laboratory and model differ by more than 10 %, or the sample lies outside the table.
        """
        uncalibrated = IonicWater(self.table)
        salinity = uncalibrated.salinity_from_conductivity(conductivity_mS_cm, temperature_degC=temperature_degC)
        computed = float(uncalibrated.osmolality_from_salinity(salinity))
        return IonicWater(self.table, osmolality_factor=osmolality_mOsm_kg / computed)

    def model_uncertainty_percent(self, temperature_degC: ArrayLike) -> FloatArray:
        """Return what the model adds to osmolality: more in the cold, where the engine is weaker. [%]"""
        cold = np.clip((25.0 - _floats(temperature_degC)) / 25.0, 0.0, 1.0) * COLD_UNCERTAINTY_PERCENT
        return np.hypot(self.table.model_uncertainty_percent, cold)

    def properties(
        self,
        conductivity_mS_cm: ArrayLike,
        *,
        temperature_degC: ArrayLike,
        pressure_dbar: ArrayLike = 0.0,
        longitude: ArrayLike = np.nan,
        latitude: ArrayLike = np.nan,
    ) -> WaterProperties:
        """Return what the readings say of the water; see `Seawater.properties` for arguments and flags.

        A reading saltier than the table is null, with `out_of_range` and `water_kind_doubted`; above the
        analysed concentration it is `extrapolated`. Position means nothing here.
        """
        conductivity, temperature, pressure = np.broadcast_arrays(
            _floats(conductivity_mS_cm), _floats(temperature_degC), _floats(pressure_dbar)
        )
        flags = np.zeros(conductivity.shape, dtype=np.uint32)
        if not has_plain_readings(conductivity, temperature, pressure):
            conductivity, flags = screened(conductivity, temperature, pressure)
        factor = self._factor(conductivity, temperature)
        beyond = np.isnan(factor) & np.isfinite(conductivity)
        mark(flags, beyond, Flag.OUT_OF_RANGE | Flag.WATER_KIND_DOUBTED)
        mark(flags, factor > 1.05, Flag.EXTRAPOLATED)
        mark(flags, (factor == 0.0), Flag.BELOW_RANGE)
        return WaterProperties(
            practical_salinity=np.full(factor.shape, np.nan),
            absolute_salinity_g_kg=self._salinity(factor),
            density_kg_m3=self._density(factor, temperature, pressure),
            osmolality_mOsm_kg=self._osmolality(factor),
            osmolality_in_situ_mOsm_kg=self._in_situ(factor, temperature),
            flags=flags,
        )

    def salinity_from_conductivity(
        self, conductivity_mS_cm: ArrayLike, *, temperature_degC: ArrayLike, pressure_dbar: ArrayLike = 0.0
    ) -> FloatArray:
        """Return grams of ions per kilogram of solution; NaN beyond the table. [g/kg]"""
        conductivity, temperature, _ = np.broadcast_arrays(
            _floats(conductivity_mS_cm), _floats(temperature_degC), _floats(pressure_dbar)
        )
        return self._salinity(self._factor(conductivity, temperature))

    def conductivity_mS_cm(
        self, *, salinity: ArrayLike, temperature_degC: ArrayLike, pressure_dbar: ArrayLike = 0.0
    ) -> FloatArray:
        """Return the conductivity that a true cell would measure. [mS/cm]"""
        factor, temperature, _ = np.broadcast_arrays(
            self._factor_from_salinity(salinity), _floats(temperature_degC), _floats(pressure_dbar)
        )
        return self._conductivity(factor, temperature)

    def osmolality_from_salinity(self, salinity: ArrayLike) -> FloatArray:
        """Return osmolality on the freezing-point basis. [mOsm/kg water]"""
        return self._osmolality(self._factor_from_salinity(salinity))

    def salinity_from_osmolality(self, osmolality_mOsm_kg: ArrayLike) -> FloatArray:
        """Return grams of ions per kilogram of solution from osmolality; NaN beyond the table. [g/kg]"""
        wanted = _floats(osmolality_mOsm_kg)
        factor = np.interp(
            np.where(wanted >= 0.0, wanted, np.nan), self._fine_osmolality, self._fine_factor, right=np.nan
        )
        for _ in range(3):
            slope = (self._osmolality(factor * 1.0001 + 1e-9) - self._osmolality(factor)) / (factor * 1e-4 + 1e-9)
            slope = np.where(np.isfinite(slope), slope, self._fine_osmolality[-1] / self._fine_factor[-1])
            factor = np.clip(factor - (self._osmolality(factor) - wanted) / slope, 0.0, self._fine_factor[-1])
        return self._salinity(factor)

    def absolute_salinity_from_salinity(self, salinity: ArrayLike) -> FloatArray:
        """Return the mass fraction of salt: in this water the salinity itself. [g/kg]"""
        return _floats(salinity)

    def salinity_from_absolute_salinity(self, absolute_salinity_g_kg: ArrayLike) -> FloatArray:
        """Return salinity: in this water the mass fraction itself. [g/kg]"""
        return _floats(absolute_salinity_g_kg)

    def density_kg_m3(self, *, salinity: ArrayLike, temperature_degC: ArrayLike) -> FloatArray:
        """Return density at the surface. [kg/m3]"""
        factor, temperature = np.broadcast_arrays(self._factor_from_salinity(salinity), _floats(temperature_degC))
        return self._density(factor, temperature, np.zeros(()))

    # Below, `factor` is the concentration over that of the analysis.

    @property
    def _highest_factor(self) -> float:
        return float(self.table.roots[-1] ** 2)

    def _salinity(self, factor: FloatArray) -> FloatArray:
        grams = self.table.grams_per_kg_water * factor
        return np.asarray(grams / (1.0 + 1e-3 * grams))

    def _factor_from_salinity(self, salinity: ArrayLike) -> FloatArray:
        fraction = _floats(salinity)
        factor = fraction / (1.0 - 1e-3 * fraction) / self.table.grams_per_kg_water
        return np.where((factor >= 0.0) & (factor <= self._highest_factor * (1.0 + 1e-9)), factor, np.nan)

    @cached_property
    def _osmolality_spline(self) -> CubicSpline:
        return CubicSpline(self.table.roots, self.table.osmolality_mOsm_kg)

    @cached_property
    def _fine_factor(self) -> FloatArray:
        return np.linspace(0.0, float(self.table.roots[-1]), 400) ** 2

    @cached_property
    def _fine_osmolality(self) -> FloatArray:
        return self._osmolality(self._fine_factor)

    @cached_property
    def _surfaces(self) -> dict[str, RectBivariateSpline]:
        table = self.table
        return {
            key: RectBivariateSpline(table.roots, table.temperatures_degC, getattr(table, key))
            for key in ("conductivity_mS_cm", "density_excess_kg_m3", "osmolality_in_situ_mOsm_kg")
        }

    def _surface(self, key: str, factor: FloatArray, temperature: FloatArray) -> FloatArray:
        """Return a tabulated property divided by the factor; NaN where an input is NaN."""
        known = np.isfinite(factor) & np.isfinite(temperature)
        root = np.sqrt(np.where(known, factor, 0.0))
        values = self._surfaces[key].ev(root, np.where(known, temperature, 20.0))
        return np.where(known, values, np.nan)

    def _conductivity(self, factor: FloatArray, temperature: FloatArray) -> FloatArray:
        return factor * self._surface("conductivity_mS_cm", factor, temperature)

    def _density(self, factor: FloatArray, temperature: FloatArray, pressure: FloatArray) -> FloatArray:
        pure = _floats(gsw.rho_t_exact(0.0, temperature, pressure))
        return np.asarray(pure + factor * self._surface("density_excess_kg_m3", factor, temperature))

    def _in_situ(self, factor: FloatArray, temperature: FloatArray) -> FloatArray:
        ratio = self._surface("osmolality_in_situ_mOsm_kg", factor, temperature)
        return np.asarray(self.osmolality_factor * factor * ratio)

    def _osmolality(self, factor: FloatArray) -> FloatArray:
        return np.asarray(self.osmolality_factor * factor * self._osmolality_spline(np.sqrt(factor)))

    @cached_property
    def _unit_conductivity(self) -> CubicSpline:
        """Conductivity of the analysed water over temperature: what makes the inverse table nearly flat."""
        table = self.table
        values = self._conductivity(np.ones(table.temperatures_degC.shape), table.temperatures_degC)
        return CubicSpline(table.temperatures_degC, values)

    @cached_property
    def _inverse(self) -> tuple[RectBivariateSpline, float]:
        """sqrt(f) / y over y = sqrt(conductivity / conductivity of the analysed water) and temperature; the last y."""
        temperatures = np.linspace(self.table.temperatures_degC[0], self.table.temperatures_degC[-1], 39)
        fine = np.linspace(0.0, self.table.roots[-1], 1200)[1:]
        unit = self._unit_conductivity(temperatures)
        curves = [
            fine * np.sqrt(self._surface("conductivity_mS_cm", fine**2, np.full(fine.shape, t)) / u)
            for t, u in zip(temperatures, unit, strict=True)
        ]
        last = min(curve[-1] for curve in curves)
        grid = np.linspace(0.0, last, _INVERSE_POINTS)
        # The ratio of roots is smooth; its limit in pure water follows from the first row of the table.
        limit = np.sqrt(unit / self._surface("conductivity_mS_cm", np.zeros(temperatures.shape), temperatures))
        ratios = np.array(
            [
                np.concatenate([[end], CubicSpline(curve, fine)(grid[1:]) / grid[1:]])
                for curve, end in zip(curves, limit, strict=True)
            ]
        )
        return RectBivariateSpline(grid, temperatures, ratios.T), float(last)

    def _factor(self, conductivity: FloatArray, temperature: FloatArray) -> FloatArray:
        surface, last = self._inverse
        known = np.isfinite(conductivity) & np.isfinite(temperature) & (conductivity >= 0.0)
        warmth = np.where(known, temperature, 20.0)
        y = np.sqrt(np.where(known, conductivity, 0.0) / self._unit_conductivity(warmth))
        root = y * surface.ev(np.minimum(y, last), warmth)
        factor = np.where(conductivity <= BELOW_RANGE_MS_CM, 0.0, root * root)
        return np.where(known & (y <= last * (1.0 + 1e-9)), factor, np.nan)
