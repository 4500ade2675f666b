"""The four strains, 0 to 1 each, and what they make together: salinity itself, change, exposure, temperature.

One fall is not counted three times: ``stress = 100 (1 - (1 - max(range, change, exposure)) (1 - thermal))``.
"""

from __future__ import annotations

from enum import IntEnum
from typing import TYPE_CHECKING

import numpy as np

from analysis.animal.constants import Constants, constants
from analysis.animal.exposure import limits_at
from analysis.animal.stage import Supports

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from analysis.animal.stage_arrays import StageArrays
    from analysis.arrays import FloatArray

CHANGE_CAP = 0.6
"""Change alone never says more: published schedules go most of the lethal jump in hours without loss."""


WARM_STEP_K = 5.0
"""Change of temperature that counts 0.5: smolts should not meet more than 4-6 K at sea entry (STAURNES2001)."""


DANGER_LOSS = 0.1
"""Expected loss above control at which the band "in danger" begins."""


BAND_EDGES = (20.0, 40.0, 70.0)


DANGER_STRAIN = BAND_EDGES[-1] / 100.0


class Driver(IntEnum):
    """The strain that makes the stress."""

    UNKNOWN = -1
    NONE = 0
    RANGE = 1
    CHANGE = 2
    EXPOSURE = 3
    TEMPERATURE = 4


class Band(IntEnum):
    """Words for the stress, tied to expected loss above control; "in danger" from about 10 %."""

    UNKNOWN = -1
    SETTLED = 0
    ADJUSTING = 1
    STRAINED = 2
    IN_DANGER = 3


BAND_WORDS = {
    Band.UNKNOWN: "not known",
    Band.SETTLED: "settled",
    Band.ADJUSTING: "adjusting",
    Band.STRAINED: "strained",
    Band.IN_DANGER: "in danger",
}


DRIVER_WORDS = {
    Driver.UNKNOWN: "not known",
    Driver.NONE: "none",
    Driver.RANGE: "salinity itself",
    Driver.CHANGE: "change",
    Driver.EXPOSURE: "exposure",
    Driver.TEMPERATURE: "temperature",
}


def _piecewise(value: FloatArray, *, inner: FloatArray, tolerable: FloatArray, lethal: FloatArray) -> FloatArray:
    """Return 0 at *inner*, 0.5 at *tolerable*, 1 at *lethal*, linear between, for limits that grow outward."""
    to_tolerable = 0.5 * (value - inner) / (tolerable - inner)
    beyond = 0.5 + 0.5 * (value - tolerable) / (lethal - tolerable)
    return np.asarray(np.where(value <= tolerable, to_tolerable, np.minimum(beyond, 1.0)))


def range_strain(
    figures: StageArrays,
    *,
    osmolality_mOsm_kg: FloatArray,
    temperature_degC: FloatArray,
    model: Constants | None = None,
) -> FloatArray:
    """Return the strain by the salinity itself: 0 in the optimum, 0.5 at the tolerable limit, 1 at the lethal level.

    Where the time to death is published it stops at 0.6, and exposure carries the rest: a dip is not death.
    NaN beyond an optimum outside which nothing is known.
    """
    limits = limits_at(figures, temperature_degC, model or constants())
    water = osmolality_mOsm_kg
    total = np.zeros(np.broadcast_shapes(water.shape, figures.home.shape))
    with np.errstate(invalid="ignore", divide="ignore"):
        for side, sign in (("low", -1.0), ("high", 1.0)):
            inner = getattr(figures, f"optimal_{side}")
            strain = _piecewise(
                sign * water,
                inner=sign * inner,
                tolerable=sign * getattr(limits, f"tolerable_{side}"),
                lethal=sign * getattr(limits, f"level_{side}"),
            )
            capped = np.where(np.isnan(strain), np.nan, np.minimum(strain, getattr(figures, f"range_cap_{side}")))
            total = np.where((water - inner) * sign > 0.0, capped, total)
    is_judged = (figures.supports & int(Supports.RANGE)) != 0
    return np.where(is_judged & ~np.isnan(water), total, np.nan)


def change_strain(
    figures: StageArrays,
    *,
    osmolality_mOsm_kg: FloatArray,
    acclimated_mOsm_kg: FloatArray,
    temperature_degC: FloatArray,
    model: Constants | None = None,
) -> FloatArray:
    """Return the strain by being far from home: 0.6 at the harmless part of the direct lethal jump, and no more.

    NaN where no lethal jump is known on that side although the stage has one on the other; 0 at home.
    """
    limits = limits_at(figures, temperature_degC, model or constants())
    distance = np.abs(osmolality_mOsm_kg - acclimated_mOsm_kg)
    harmless = np.where(osmolality_mOsm_kg < acclimated_mOsm_kg, limits.harmless_low, limits.harmless_high)
    strain = np.minimum(CHANGE_CAP, CHANGE_CAP * distance / harmless)
    # A side without a jump: fresh water sets no limit, or nothing is known; the other strains speak there.
    strain = np.where(np.isnan(harmless) & ~np.isnan(distance), 0.0, strain)
    is_judged = (figures.supports & int(Supports.CHANGE)) != 0
    return np.where(is_judged, strain, np.nan)


def exposure_strain(figures: StageArrays, exposure: FloatArray) -> FloatArray:
    """Return the strain by exposure: 0.7 at 10 % expected loss, 1 at the published median, linear between."""
    at_danger = (DANGER_LOSS / (1.0 - DANGER_LOSS)) ** (1.0 / figures.steepness)
    low = DANGER_STRAIN * exposure / at_danger
    high = DANGER_STRAIN + (1.0 - DANGER_STRAIN) * (exposure - at_danger) / (1.0 - at_danger)
    strain = np.minimum(1.0, np.where(exposure <= at_danger, low, high))
    is_judged = (figures.supports & int(Supports.EXPOSURE)) != 0
    return np.where(is_judged, strain, np.nan)


def thermal_strain(figures: StageArrays, *, temperature_degC: FloatArray, acclimated_degC: FloatArray) -> FloatArray:
    """Return the strain by temperature: its level as the range strain, and its distance from what they are used to."""
    total = np.zeros(np.broadcast_shapes(temperature_degC.shape, figures.home.shape))
    with np.errstate(invalid="ignore"):
        for side, sign in (("low", -1.0), ("high", 1.0)):
            inner = getattr(figures, f"optimal_{side}_degC")
            strain = _piecewise(
                sign * temperature_degC,
                inner=sign * inner,
                tolerable=sign * getattr(figures, f"tolerable_{side}_degC"),
                lethal=sign * getattr(figures, f"lethal_{side}_degC"),
            )
            is_beyond = (temperature_degC - inner) * sign > 0.0
            total = np.where(is_beyond & ~np.isnan(strain), strain, total)
    step = np.minimum(CHANGE_CAP, 0.5 * np.abs(temperature_degC - acclimated_degC) / WARM_STEP_K)
    is_judged = (figures.supports & int(Supports.THERMAL)) != 0
    return np.where(is_judged, np.fmax(total, step) + 0.0 * temperature_degC, np.nan)


def combined_stress(*, osmotic: FloatArray, thermal: FloatArray) -> FloatArray:
    """Return stress 0-100 from the largest osmotic strain and the thermal strain; NaN where no osmotic strain is known."""
    return np.asarray(100.0 * (1.0 - (1.0 - osmotic) * (1.0 - np.where(np.isnan(thermal), 0.0, thermal))))


def bands(stress: FloatArray) -> NDArray[np.int8]:
    """Return the code of `Band` of each stress."""
    code = np.digitize(stress, BAND_EDGES).astype(np.int8)
    return np.where(np.isnan(stress), np.int8(Band.UNKNOWN), code)
