"""From a sensor's stated accuracy to the uncertainty of salinity and osmolality.

Small changes are carried through the relation of the water itself, one for conductivity and one for
temperature, and added as independent (root of the sum of squares), as in JCGM 100:2008, section 5.1. The
result has the coverage of the accuracy that went in. A fouled or drifted sensor is worse than its data sheet:
that is for the quality tests to say.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from analysis.errors import InvalidInputError

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import ArrayLike

    from analysis.arrays import FloatArray, IntArray
    from analysis.water.properties import WaterKind

_CONDUCTIVITY_STEP = 1e-4  # relative; the relations are smooth, so one side is enough (2e-5 of the slope)
_LEAST_CONDUCTIVITY_STEP_MS_CM = 5e-3  # beyond the dead zone of the relation in nearly pure water
_TEMPERATURE_STEP_K = -1e-2  # downwards, so that a reading at the warm end of the range stays within it
_SALINITY_STEP = 1e-4


@dataclass(frozen=True, slots=True)
class SensorAccuracy:
    """What a data sheet states for a sensor, each as plus or minus.

    Parameters
    ----------
    conductivity_percent : float
        Of the reading. [%]
    conductivity_mS_cm : float
        At least this; the greater of the two counts. [mS/cm]
    temperature_K : float
        [K]

    Raises
    ------
    InvalidInputError
        If a value is negative, not finite, or beyond 100 %, 100 mS/cm, 20 K.
    """

    conductivity_percent: float = 0.5
    conductivity_mS_cm: float = 0.0
    temperature_K: float = 0.1

    def __post_init__(self) -> None:
        for what, found, highest, unit in (
            ("conductivity accuracy", self.conductivity_percent, 100.0, "%"),
            ("conductivity accuracy", self.conductivity_mS_cm, 100.0, "mS/cm"),
            ("temperature accuracy", self.temperature_K, 20.0, "K"),
        ):
            if not (math.isfinite(found) and 0.0 <= found <= highest):
                raise InvalidInputError(what, found=found, allowed=f"0 to {highest:g} {unit}")


class AccuracyArrays(NamedTuple):
    """Stated accuracies side by side: one value a sensor, or one a reading.

    Parameters
    ----------
    conductivity_percent, conductivity_mS_cm, temperature_K : ndarray of float64
        As `SensorAccuracy`; broadcast with the readings.
    """

    conductivity_percent: FloatArray
    conductivity_mS_cm: FloatArray
    temperature_K: FloatArray

    @classmethod
    def of(cls, sensors: Sequence[SensorAccuracy]) -> AccuracyArrays:
        """Return the accuracies of *sensors* in their order."""
        return cls(
            conductivity_percent=np.array([sensor.conductivity_percent for sensor in sensors], dtype=np.float64),
            conductivity_mS_cm=np.array([sensor.conductivity_mS_cm for sensor in sensors], dtype=np.float64),
            temperature_K=np.array([sensor.temperature_K for sensor in sensors], dtype=np.float64),
        )

    def at(self, sensor: IntArray) -> AccuracyArrays:
        """Return the accuracies of each reading, from the index of its sensor."""
        return AccuracyArrays(*(column[sensor] for column in self))


@dataclass(frozen=True, slots=True)
class Uncertainty:
    """Plus or minus, in the coverage of the accuracy that was stated: arrays of one shape.

    Parameters
    ----------
    salinity : ndarray of float64
        In the unit of the kind of water. [1 or g/kg]
    osmolality_mOsm_kg : ndarray of float64
        With the part of the water model, where the kind of water has one. [mOsm/kg water]
    salinity_from_conductivity, salinity_from_temperature : ndarray of float64
        The two shares of `salinity`.
    """

    salinity: FloatArray
    osmolality_mOsm_kg: FloatArray
    salinity_from_conductivity: FloatArray
    salinity_from_temperature: FloatArray


def uncertainty_of_readings(
    conductivity_mS_cm: ArrayLike,
    *,
    temperature_degC: ArrayLike,
    accuracy: SensorAccuracy | AccuracyArrays | None = None,
    kind: WaterKind,
    pressure_dbar: ArrayLike = 0.0,
    salinity: FloatArray | None = None,
) -> Uncertainty:
    """Return the uncertainty of salinity and osmolality of readings.

    Parameters
    ----------
    conductivity_mS_cm : array_like
        At the water's own temperature. [mS/cm]
    temperature_degC : array_like
        [degC]
    accuracy : SensorAccuracy or AccuracyArrays, optional
        Of the sensor, or of each reading's sensor; 0.5 % of the reading and 0.1 K where nothing is stated (common practice).
    kind : WaterKind
        The kind of water.
    pressure_dbar : array_like
        [dbar]
    salinity : ndarray of float64, optional
        The salinity of the same readings where it is known already: saves one pass of the relation.

    Returns
    -------
    Uncertainty
        NaN where the reading cannot be used.

    References
    ----------
    JCGM 100:2008, Guide to the expression of uncertainty in measurement, section 5.1.2.
    """
    stated = SensorAccuracy() if accuracy is None else accuracy
    conductivity = np.asarray(conductivity_mS_cm, dtype=np.float64)
    temperature = np.asarray(temperature_degC, dtype=np.float64)
    if salinity is None:
        salinity = kind.salinity_from_conductivity(
            conductivity, temperature_degC=temperature, pressure_dbar=pressure_dbar
        )
    by_conductivity, by_temperature = _salinity_shares(
        conductivity, temperature, np.asarray(pressure_dbar, dtype=np.float64), salinity, stated, kind
    )
    total = np.hypot(by_conductivity, by_temperature)
    osmolality = kind.osmolality_from_salinity(salinity)
    step = np.where(salinity > 1e-3, -_SALINITY_STEP * salinity, 1e-6)
    slope = (kind.osmolality_from_salinity(salinity + step) - osmolality) / step
    model = 0.01 * kind.model_uncertainty_percent(temperature) * osmolality
    return Uncertainty(
        salinity=total,
        osmolality_mOsm_kg=np.hypot(total * slope, model),
        salinity_from_conductivity=by_conductivity,
        salinity_from_temperature=by_temperature,
    )


def _salinity_shares(
    conductivity: FloatArray,
    temperature: FloatArray,
    pressure: FloatArray,
    salinity: FloatArray,
    stated: SensorAccuracy | AccuracyArrays,
    kind: WaterKind,
) -> tuple[FloatArray, FloatArray]:
    stated_mS_cm = np.maximum(conductivity * (0.01 * stated.conductivity_percent), stated.conductivity_mS_cm)
    step = np.maximum(_CONDUCTIVITY_STEP * conductivity, _LEAST_CONDUCTIVITY_STEP_MS_CM)
    more = kind.salinity_from_conductivity(conductivity + step, temperature_degC=temperature, pressure_dbar=pressure)
    by_conductivity = np.abs((more - salinity) * (stated_mS_cm / step))
    colder = kind.salinity_from_conductivity(
        conductivity, temperature_degC=temperature + _TEMPERATURE_STEP_K, pressure_dbar=pressure
    )
    by_temperature = np.abs((colder - salinity) * (stated.temperature_K / _TEMPERATURE_STEP_K))
    return by_conductivity, by_temperature
