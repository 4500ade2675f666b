"""What every kind of water can be asked, and what it answers; sea water as the first kind."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Final, Protocol

import numpy as np

from analysis.flags import Flag
from analysis.water.seawater import (
    HIGHEST_PRACTICAL_SALINITY,
    absolute_salinity_from_osmolality,
    absolute_salinity_from_practical_salinity,
    conductivity_from_practical_salinity,
    density_from_absolute_salinity,
    osmolality_from_absolute_salinity,
    osmolality_in_situ_from_absolute_salinity,
    practical_salinity_from_conductivity,
    practical_salinity_from_reference_salinity,
    reference_salinity_from_practical_salinity,
)

if TYPE_CHECKING:
    from numpy.typing import ArrayLike

    from analysis.arrays import BoolArray, FlagArray, FloatArray

PUBLISHED_TEMPERATURE_DEGC: Final = (-2.0, 35.0)
"""Temperatures for which PSS-78 is published; beyond them the flag says `extrapolated`."""

PHYSICAL_TEMPERATURE_DEGC: Final = (-2.0, 45.0)
"""Temperatures that a hatchery's water can have; beyond them the value is null."""

PUBLISHED_PRESSURE_DBAR: Final = (0.0, 10_000.0)
PHYSICAL_PRESSURE_DBAR: Final = (-10.1325, 12_000.0)
"""From no air at all above the water to the deepest trench; a probe in air reads a little below 0."""

HIGHEST_PUBLISHED_PRACTICAL_SALINITY: Final = 42.0

_CLEARLY_SALT_MS_CM = 0.01  # above this no reading can be below the range of the relation


@dataclass(frozen=True, slots=True)
class WaterProperties:
    """What is known of the water behind a block of readings: arrays of one shape.

    Parameters
    ----------
    practical_salinity : ndarray of float64
        PSS-78; NaN throughout where the kind of water has none. [1]
    absolute_salinity_g_kg : ndarray of float64
        Mass fraction of dissolved salt. [g/kg solution]
    density_kg_m3 : ndarray of float64
        At the water's own temperature and pressure. [kg/m3]
    osmolality_mOsm_kg : ndarray of float64
        Freezing-point basis: what a laboratory osmometer reads. [mOsm/kg water]
    osmolality_in_situ_mOsm_kg : ndarray of float64
        At the water's own temperature and pressure. [mOsm/kg water]
    flags : ndarray of uint32
        Words of `analysis.flags.Flag`.
    """

    practical_salinity: FloatArray
    absolute_salinity_g_kg: FloatArray
    density_kg_m3: FloatArray
    osmolality_mOsm_kg: FloatArray
    osmolality_in_situ_mOsm_kg: FloatArray
    flags: FlagArray


class WaterKind(Protocol):
    """A kind of water: declared by the site, never guessed from a reading.

    `salinity` is practical salinity in sea water and its dilutions, and g/kg in every other kind of water.
    """

    @property
    def name(self) -> str:
        """The word of the site file: ``seawater``, ``sodium-chloride``, or the analysis' id."""

    @property
    def salinity_unit(self) -> str:
        """The unit of `salinity` in this kind of water: ``1`` (practical salinity) or ``g/kg``."""

    @property
    def highest_salinity(self) -> float:
        """The saltiest water that the model knows, in the unit of `salinity`."""

    def model_uncertainty_percent(self, temperature_degC: ArrayLike) -> FloatArray:
        """Return what the water model itself adds to the uncertainty of osmolality. [%]"""

    def properties(
        self,
        conductivity_mS_cm: ArrayLike,
        *,
        temperature_degC: ArrayLike,
        pressure_dbar: ArrayLike = 0.0,
        longitude: ArrayLike = np.nan,
        latitude: ArrayLike = np.nan,
    ) -> WaterProperties:
        """Return what the readings say of the water."""

    def salinity_from_conductivity(
        self, conductivity_mS_cm: ArrayLike, *, temperature_degC: ArrayLike, pressure_dbar: ArrayLike = 0.0
    ) -> FloatArray:
        """Return salinity alone, without flags: NaN where the reading cannot be used."""

    def conductivity_mS_cm(
        self, *, salinity: ArrayLike, temperature_degC: ArrayLike, pressure_dbar: ArrayLike = 0.0
    ) -> FloatArray:
        """Return the conductivity that a true cell would measure. [mS/cm]"""

    def osmolality_from_salinity(self, salinity: ArrayLike) -> FloatArray:
        """Return osmolality on the freezing-point basis. [mOsm/kg water]"""

    def salinity_from_osmolality(self, osmolality_mOsm_kg: ArrayLike) -> FloatArray:
        """Return salinity from osmolality on the freezing-point basis."""

    def absolute_salinity_from_salinity(self, salinity: ArrayLike) -> FloatArray:
        """Return the mass fraction of salt. [g/kg solution]"""

    def salinity_from_absolute_salinity(self, absolute_salinity_g_kg: ArrayLike) -> FloatArray:
        """Return salinity from the mass fraction of salt."""

    def density_kg_m3(self, *, salinity: ArrayLike, temperature_degC: ArrayLike) -> FloatArray:
        """Return density at the surface. [kg/m3]"""


def has_plain_readings(conductivity: FloatArray, temperature: FloatArray, pressure: FloatArray) -> bool:
    """Return True where no reading of the block needs a closer look: six sweeps instead of thirty.

    Comparisons with NaN are false, so one missing value sends the block the long way.
    """
    if not (conductivity.size and temperature.size and pressure.size):
        return False
    return bool(
        conductivity.min() > _CLEARLY_SALT_MS_CM
        and conductivity.max() < np.inf
        and temperature.min() >= PUBLISHED_TEMPERATURE_DEGC[0]
        and temperature.max() <= PUBLISHED_TEMPERATURE_DEGC[1]
        and pressure.min() >= PUBLISHED_PRESSURE_DBAR[0]
        and pressure.max() <= PUBLISHED_PRESSURE_DBAR[1]
    )


def screened(conductivity: FloatArray, temperature: FloatArray, pressure: FloatArray) -> tuple[FloatArray, FlagArray]:
    """Return conductivity with NaN where the reading cannot be used, and the flags that say why.

    Parameters
    ----------
    conductivity, temperature, pressure : ndarray of float64
        [mS/cm], [degC], [dbar]

    Returns
    -------
    tuple of ndarray
        Conductivity and flags, both of the broadcast shape.
    """
    shape = np.broadcast_shapes(conductivity.shape, temperature.shape, pressure.shape)
    flags = np.zeros(shape, dtype=np.uint32)
    finite = np.isfinite(conductivity) & np.isfinite(temperature) & np.isfinite(pressure)
    mark(flags, ~finite, Flag.NOT_FINITE)
    mark(flags, np.isfinite(conductivity) & (conductivity < 0.0), Flag.NEGATIVE)
    unphysical = _is_outside(temperature, PHYSICAL_TEMPERATURE_DEGC) | _is_outside(pressure, PHYSICAL_PRESSURE_DBAR)
    mark(flags, unphysical & finite, Flag.OUT_OF_RANGE)
    unpublished = _is_outside(temperature, PUBLISHED_TEMPERATURE_DEGC) | (pressure > PUBLISHED_PRESSURE_DBAR[1])
    mark(flags, unpublished & ~unphysical & finite, Flag.EXTRAPOLATED)
    usable = finite & ~unphysical & (conductivity >= 0.0)
    return np.where(usable, conductivity, np.nan), flags


def mark(flags: FlagArray, where: BoolArray, flag: Flag) -> None:
    """Add *flag* to *flags*, in place, where *where* is true."""
    flags |= np.multiply(where, np.uint32(flag), dtype=np.uint32)


def _is_outside(values: FloatArray, span: tuple[float, float]) -> BoolArray:
    return np.asarray((values < span[0]) | (values > span[1]))


def _array(values: ArrayLike) -> FloatArray:
    return np.asarray(values, dtype=np.float64)


@dataclass(frozen=True, slots=True)
class Seawater:
    """Sea water and its dilutions with fresh water: PSS-78 and TEOS-10.

    Examples
    --------
    >>> float(round(Seawater().osmolality_from_salinity(35.0), 1))
    1033.7
    """

    name: str = "seawater"
    salinity_unit: str = "1"

    @property
    def highest_salinity(self) -> float:
        """Practical salinity at the end of the equation of state."""
        return HIGHEST_PRACTICAL_SALINITY

    def model_uncertainty_percent(self, temperature_degC: ArrayLike) -> FloatArray:
        """Return 0: the relation is that of the reference composition; its 0.1 to 0.3 % is stated, not added."""
        return np.zeros(np.shape(temperature_degC))

    def properties(
        self,
        conductivity_mS_cm: ArrayLike,
        *,
        temperature_degC: ArrayLike,
        pressure_dbar: ArrayLike = 0.0,
        longitude: ArrayLike = np.nan,
        latitude: ArrayLike = np.nan,
    ) -> WaterProperties:
        """Return what the readings say of the water.

        Parameters
        ----------
        conductivity_mS_cm : array_like
            Conductivity at the water's own temperature, any compensation undone. [mS/cm]
        temperature_degC : array_like
            ITS-90 temperature. [degC]
        pressure_dbar : array_like
            Sea pressure; 0 for a probe near the surface of a tank. NaN gives NaN. [dbar]
        longitude, latitude : array_like
            Position of the sea that the water came from; NaN where not known. [degrees]

        Returns
        -------
        WaterProperties
            Arrays of the broadcast shape. A reading that cannot be used is NaN in every array, with
            `not_finite`, `negative` or `out_of_range`; one outside the published range keeps its values with
            `extrapolated` (SP above 42, above 35 to 45 degC); from 0 to 0.002 mS/cm practical salinity is 0,
            with `below_range`.
        """
        conductivity, temperature, pressure = (
            _array(conductivity_mS_cm),
            _array(temperature_degC),
            _array(pressure_dbar),
        )
        if has_plain_readings(conductivity, temperature, pressure):
            salinity = practical_salinity_from_conductivity(
                conductivity, temperature_degC=temperature, pressure_dbar=pressure
            )
            flags = np.zeros(salinity.shape, dtype=np.uint32)
        else:
            usable, flags = screened(conductivity, temperature, pressure)
            salinity = practical_salinity_from_conductivity(
                usable, temperature_degC=temperature, pressure_dbar=pressure
            )
            mark(flags, salinity == 0.0, Flag.BELOW_RANGE)
        salinity = _judged_salinity(salinity, flags)
        absolute = absolute_salinity_from_practical_salinity(
            salinity, pressure_dbar=pressure, longitude=longitude, latitude=latitude
        )
        if absolute.shape != flags.shape:  # positions may widen the shape of the readings
            flags = np.array(np.broadcast_to(flags, absolute.shape))
            salinity = np.array(np.broadcast_to(salinity, absolute.shape))
        return WaterProperties(
            practical_salinity=salinity,
            absolute_salinity_g_kg=absolute,
            density_kg_m3=density_from_absolute_salinity(
                absolute, temperature_degC=temperature, pressure_dbar=pressure
            ),
            osmolality_mOsm_kg=osmolality_from_absolute_salinity(absolute),
            osmolality_in_situ_mOsm_kg=osmolality_in_situ_from_absolute_salinity(
                absolute, temperature_degC=temperature, pressure_dbar=pressure
            ),
            flags=flags,
        )

    def salinity_from_conductivity(
        self, conductivity_mS_cm: ArrayLike, *, temperature_degC: ArrayLike, pressure_dbar: ArrayLike = 0.0
    ) -> FloatArray:
        """Return practical salinity alone, without flags. [1]"""
        return practical_salinity_from_conductivity(
            conductivity_mS_cm, temperature_degC=temperature_degC, pressure_dbar=pressure_dbar
        )

    def conductivity_mS_cm(
        self, *, salinity: ArrayLike, temperature_degC: ArrayLike, pressure_dbar: ArrayLike = 0.0
    ) -> FloatArray:
        """Return the conductivity that a true cell would measure in water of this practical salinity. [mS/cm]"""
        return conductivity_from_practical_salinity(
            salinity, temperature_degC=temperature_degC, pressure_dbar=pressure_dbar
        )

    def osmolality_from_salinity(self, salinity: ArrayLike) -> FloatArray:
        """Return osmolality on the freezing-point basis from practical salinity. [mOsm/kg water]"""
        return osmolality_from_absolute_salinity(reference_salinity_from_practical_salinity(salinity))

    def salinity_from_osmolality(self, osmolality_mOsm_kg: ArrayLike) -> FloatArray:
        """Return practical salinity from osmolality on the freezing-point basis. [1]"""
        return practical_salinity_from_reference_salinity(absolute_salinity_from_osmolality(osmolality_mOsm_kg))

    def absolute_salinity_from_salinity(self, salinity: ArrayLike) -> FloatArray:
        """Return Reference Salinity from practical salinity. [g/kg]"""
        return reference_salinity_from_practical_salinity(salinity)

    def salinity_from_absolute_salinity(self, absolute_salinity_g_kg: ArrayLike) -> FloatArray:
        """Return practical salinity from Reference Salinity. [1]"""
        return practical_salinity_from_reference_salinity(absolute_salinity_g_kg)

    def density_kg_m3(self, *, salinity: ArrayLike, temperature_degC: ArrayLike) -> FloatArray:
        """Return density at the surface from practical salinity. [kg/m3]"""
        return density_from_absolute_salinity(
            reference_salinity_from_practical_salinity(salinity), temperature_degC=temperature_degC
        )


def _judged_salinity(salinity: FloatArray, flags: FlagArray) -> FloatArray:
    """Mark salinity above the published range and null what no equation covers; *flags* change in place."""
    if salinity.size and bool(salinity.max() <= HIGHEST_PUBLISHED_PRACTICAL_SALINITY):
        return salinity
    with np.errstate(invalid="ignore"):
        impossible = salinity > HIGHEST_PRACTICAL_SALINITY
        beyond = (salinity > HIGHEST_PUBLISHED_PRACTICAL_SALINITY) & ~impossible
    mark(flags, beyond, Flag.EXTRAPOLATED)
    mark(flags, impossible, Flag.OUT_OF_RANGE)
    return np.where(impossible, np.nan, salinity)
