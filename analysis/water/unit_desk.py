"""The unit desk: every scale on which people read the salt of a water, any to any.

Each conversion goes through the salinity of a declared kind of water, and is true only under the condition that
stands with its scale: a temperature, a reference, a kind of salt.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from types import MappingProxyType
from typing import TYPE_CHECKING, Final, NamedTuple

import gsw
import numpy as np

from analysis.errors import InvalidInputError
from analysis.water.compensation import Compensation, specific_conductance_from_conductivity
from analysis.water.freezing import freezing_point_depression_from_osmolality
from analysis.water.properties import Seawater, WaterKind
from analysis.water.refraction import (
    seawater_refractive_index,
    sodium_chloride_refractive_index_20,
    sodium_chloride_salinity_from_refractive_index_20,
)
from analysis.water.sodium_chloride_water import SodiumChlorideWater

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping

    from numpy.typing import ArrayLike

    from analysis.arrays import FloatArray


@dataclass(frozen=True, slots=True)
class Circumstances:
    """What makes a conversion true.

    Parameters
    ----------
    kind : WaterKind
        The kind of water.
    temperature_degC : float
        Of the sample when it is read. [degC]
    reference_temperature_degC : float
        Of the pure water to which a specific gravity refers. [degC]
    compensation : Compensation
        Of the meter that shows a specific conductance.

    Raises
    ------
    InvalidInputError
        If a temperature is not within -2 to 45 degC.
    """

    kind: WaterKind = field(default_factory=Seawater)
    temperature_degC: float = 25.0
    reference_temperature_degC: float = 25.0
    compensation: Compensation = field(default_factory=Compensation)

    def __post_init__(self) -> None:
        for what, found in (
            ("temperature of the sample", self.temperature_degC),
            ("reference temperature", self.reference_temperature_degC),
        ):
            if not -2.0 <= found <= 45.0:
                raise InvalidInputError(what, found=found, allowed="-2 to 45 degC")


class Scale(NamedTuple):
    """One way to read the salt of a water.

    Parameters
    ----------
    name : str
        In words.
    unit : str
        Of the reading.
    condition : str
        Under which a reading on this scale means what it says.
    from_salinity : callable
        Salinity and circumstances to the reading; rising with salinity.
    kinds : tuple of str
        Kinds of water for which a relation is published; empty for all.
    """

    name: str
    unit: str
    condition: str
    from_salinity: Callable[[FloatArray, Circumstances], FloatArray]
    kinds: tuple[str, ...] = ()


def _practical_salinity(salinity: FloatArray, at: Circumstances) -> FloatArray:
    del at
    return salinity


def _mass_fraction(salinity: FloatArray, at: Circumstances) -> FloatArray:
    return at.kind.absolute_salinity_from_salinity(salinity)


def _density(salinity: FloatArray, at: Circumstances) -> FloatArray:
    return at.kind.density_kg_m3(salinity=salinity, temperature_degC=at.temperature_degC)


def _grams_per_litre(salinity: FloatArray, at: Circumstances) -> FloatArray:
    return np.asarray(_mass_fraction(salinity, at) * _density(salinity, at) / 1000.0)


def _specific_gravity(salinity: FloatArray, at: Circumstances) -> FloatArray:
    return np.asarray(_density(salinity, at) / float(gsw.rho_t_exact(0.0, at.reference_temperature_degC, 0.0)))


def _conductivity(salinity: FloatArray, at: Circumstances) -> FloatArray:
    # The relation of sea water leaves 0.001 mS/cm at salinity 0: below that there is no salt to speak of.
    conductivity = at.kind.conductivity_mS_cm(salinity=salinity, temperature_degC=at.temperature_degC)
    return np.where(salinity > 0.0, conductivity, 0.0 * conductivity)


def _specific_conductance(salinity: FloatArray, at: Circumstances) -> FloatArray:
    return specific_conductance_from_conductivity(
        _conductivity(salinity, at), temperature_degC=at.temperature_degC, compensation=at.compensation
    )


def _osmolality(salinity: FloatArray, at: Circumstances) -> FloatArray:
    return at.kind.osmolality_from_salinity(salinity)


def _freezing_point_depression(salinity: FloatArray, at: Circumstances) -> FloatArray:
    return freezing_point_depression_from_osmolality(_osmolality(salinity, at))


def _refractive_index(salinity: FloatArray, at: Circumstances) -> FloatArray:
    if isinstance(at.kind, SodiumChlorideWater):
        return sodium_chloride_refractive_index_20(salinity)
    return seawater_refractive_index(salinity, temperature_degC=at.temperature_degC)


def _brine_scale(salinity: FloatArray, at: Circumstances) -> FloatArray:
    """Return what a refractometer made for sodium chloride brine shows."""
    index = _refractive_index(salinity, Circumstances(kind=at.kind, temperature_degC=20.0))
    return sodium_chloride_salinity_from_refractive_index_20(index)


SCALES: Final[Mapping[str, Scale]] = MappingProxyType(
    {
        "practical_salinity": Scale(
            "practical salinity",
            "",
            "sea water and its dilutions only (PSS-78)",
            _practical_salinity,
            ("seawater",),
        ),
        "absolute_salinity_g_kg": Scale(
            "salt by mass", "g/kg", "grams of all dissolved salt in a kilogram of solution", _mass_fraction
        ),
        "salt_g_L": Scale("salt by volume", "g/L", "a litre at the temperature of the sample", _grams_per_litre),
        "density_kg_m3": Scale("density", "kg/m3", "at the temperature of the sample", _density),
        "specific_gravity": Scale(
            "specific gravity",
            "",
            "density at the sample's temperature over that of pure water at the reference temperature, "
            "as printed on the hydrometer",
            _specific_gravity,
        ),
        "conductivity_mS_cm": Scale(
            "conductivity", "mS/cm", "at the temperature of the sample, not compensated", _conductivity
        ),
        "specific_conductance_mS_cm": Scale(
            "specific conductance",
            "mS/cm",
            "brought to the meter's reference temperature by the meter's own method and coefficient",
            _specific_conductance,
        ),
        "osmolality_mOsm_kg": Scale(
            "osmolality",
            "mOsm/kg",
            "by freezing point; a vapour-pressure osmometer reads up to 1.4 % more",
            _osmolality,
        ),
        "freezing_point_depression_K": Scale(
            "freezing-point depression", "K", "below pure water under the same conditions", _freezing_point_depression
        ),
        "refractive_index": Scale(
            "refractive index",
            "",
            "sodium light; sea water at the temperature of the sample (0 to 30 degC, salinity to 35), "
            "sodium chloride at 20 degC",
            _refractive_index,
            ("seawater", "sodium-chloride"),
        ),
        "brine_refractometer_g_kg": Scale(
            "refractometer with a sodium chloride scale",
            "g/kg",
            "20 degC, or temperature compensation; a sea water scale reads practical salinity itself",
            _brine_scale,
            ("seawater", "sodium-chloride"),
        ),
    }
)
"""Scales by key. All of them rise with salinity, so that each can be read backwards."""


class Converted(NamedTuple):
    """A reading on another scale, and what makes it true.

    Parameters
    ----------
    value : ndarray of float64
        NaN where the reading means no water of this kind.
    unit : str
        Of the value.
    conditions : tuple of str
        Those of the two scales and of the kind of water.
    """

    value: FloatArray
    unit: str
    conditions: tuple[str, ...]


def convert(reading: ArrayLike, *, scale: str, to: str, at: Circumstances | None = None) -> Converted:
    """Return a reading on another scale.

    Parameters
    ----------
    reading : array_like
        In the unit of its scale.
    scale, to : str
        Keys of `SCALES`.
    at : Circumstances, optional
        Kind of water, temperatures and compensation; sea water at 25 degC where not given.

    Returns
    -------
    Converted

    Raises
    ------
    InvalidInputError
        If a scale is not known, or has no published relation for this kind of water.
    """
    at = Circumstances() if at is None else at
    source, target = _scale(scale, at.kind), _scale(to, at.kind)
    readings = np.asarray(reading, dtype=np.float64)
    salinity = _bisected(readings, lambda s: source.from_salinity(s, at), highest=at.kind.highest_salinity)
    conditions = (
        f"kind of water: {at.kind.name}; temperature of the sample: {at.temperature_degC:g} degC",
        f"{source.name}: {source.condition}",
        f"{target.name}: {target.condition}",
    )
    return Converted(np.asarray(target.from_salinity(salinity, at)), target.unit, conditions)


def _scale(key: str, kind: WaterKind) -> Scale:
    if key not in SCALES:
        raise InvalidInputError("scale", found=key, allowed=", ".join(SCALES))
    scale = SCALES[key]
    if scale.kinds and kind.name not in scale.kinds:
        raise InvalidInputError(scale.name, found=f"in {kind.name}", allowed=f"in {', '.join(scale.kinds)}")
    return scale


def _bisected(wanted: FloatArray, relation: Callable[[FloatArray], FloatArray], *, highest: float) -> FloatArray:
    """Return x from 0 to *highest* with relation(x) = wanted, for a rising relation; NaN where there is none.

    The relation may end (NaN) before the highest x. Below its first value only rounding counts as 0.
    """
    low, high = np.zeros(wanted.shape), np.full(wanted.shape, highest)
    for _ in range(60):
        middle = 0.5 * (low + high)
        is_below = relation(middle) <= wanted
        low = np.where(is_below, middle, low)
        high = np.where(is_below, high, middle)
    found = 0.5 * (low + high)
    slack = 1e-9 * np.abs(wanted) + 1e-12
    with np.errstate(invalid="ignore"):
        is_met = np.abs(relation(found) - wanted) <= slack
        is_nothing = (found < 1e-9 * highest) & (wanted >= relation(np.zeros(wanted.shape)) - slack)
    return np.where(is_met, found, np.where(is_nothing, 0.0, np.nan))
