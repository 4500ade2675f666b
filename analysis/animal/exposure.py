"""Exposure: how much of the published median dose an interval in constant water adds.

E grows with the harder of two processes and E = 1 is the published median:

- *level*: the water lies beyond the incipient level; the rate is one decade higher for each further
  `Constants.decade_mOsm_kg`, and 1 / (length of the test) at the median lethal level;
- *shock*: the water lies further from what the animals are used to than a harmless part of the direct lethal
  jump; the same decade, and E = 1 at the end of the direct test. As they follow the water the shock passes.

The integral of the shock over an interval is closed: it is a difference of exponential integrals. Cold and heat
narrow the limits; cold slows settling, death and repair alike.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, fields
from typing import TYPE_CHECKING

import numpy as np
from scipy.special import expi

if TYPE_CHECKING:
    from analysis.animal.constants import Constants
    from analysis.animal.stage_arrays import StageArrays
    from analysis.arrays import FloatArray

LN10 = math.log(10.0)


MAX_EXPONENT = 6.0
"""Decades beyond which the rate of exposure no longer grows; far past any published time to death."""


@dataclass(frozen=True, slots=True)
class Limits:
    """The limits of the tanks at their temperature: cold and heat narrow them. [mOsm/kg]"""

    tolerable_low: FloatArray
    level_low: FloatArray
    incipient_low: FloatArray
    jump_low: FloatArray
    harmless_low: FloatArray
    tolerable_high: FloatArray
    level_high: FloatArray
    incipient_high: FloatArray
    jump_high: FloatArray
    harmless_high: FloatArray


def narrowing(figures: StageArrays, temperature_degC: FloatArray, model: Constants) -> FloatArray:
    """Return how far the tolerated range has narrowed on either side at this temperature. [mOsm/kg]"""
    cold = np.fmax(0.0, figures.optimal_low_degC - model.cold_onset_K - temperature_degC)
    return np.asarray(cold * model.cold_mOsm_kg_K)


def limits_at(figures: StageArrays, temperature_degC: FloatArray, model: Constants) -> Limits:
    """Return the limits at *temperature_degC*; at an unknown temperature those of the tables."""
    shift = narrowing(figures, temperature_degC, model)
    if not shift.any():
        return Limits(*(getattr(figures, member.name) for member in fields(Limits)))
    sides: dict[str, FloatArray] = {}
    for side, sign in (("low", 1.0), ("high", -1.0)):
        optimal, tolerable, level, incipient, jump, harmless = (
            getattr(figures, f"{name}_{side}")
            for name in ("optimal", "tolerable", "level", "incipient", "jump", "harmless")
        )
        inner = np.minimum(shift, 0.9 * np.abs(optimal - tolerable))
        moved = tolerable + sign * inner
        sides[f"tolerable_{side}"] = moved
        # The level keeps at least a quarter of its distance, so that the strain stays continuous and finite.
        sides[f"level_{side}"] = level + sign * np.minimum(shift, inner + 0.75 * np.abs(tolerable - level))
        share = np.divide(
            incipient - tolerable,
            level - tolerable,
            out=np.zeros_like(moved),
            where=np.isfinite(level) & (level != tolerable),
        )
        sides[f"incipient_{side}"] = moved + share * np.where(share == 0.0, 0.0, sides[f"level_{side}"] - moved)
        narrower = np.maximum(0.25 * jump, jump - shift)
        sides[f"jump_{side}"] = narrower
        sides[f"harmless_{side}"] = harmless * np.divide(narrower, jump, out=np.ones_like(narrower), where=jump > 0.0)
    return Limits(**sides)


def settling_factor(figures: StageArrays, temperature_degC: FloatArray, model: Constants) -> FloatArray:
    """Return by how much settling is slower than at the temperature of the figure; cold lengthens it, 1 if unknown."""
    decades = np.clip((figures.tau_degC - temperature_degC) / 10.0, -2.0, 2.0)
    return np.asarray(np.where(np.isnan(decades), 1.0, model.q10**decades))


def _decades(excess: FloatArray, decade: FloatArray) -> FloatArray:
    return np.asarray(10.0 ** np.clip(excess / decade, -MAX_EXPONENT, MAX_EXPONENT))


def level_rate_per_h(figures: StageArrays, limits: Limits, osmolality_mOsm_kg: FloatArray) -> FloatArray:
    """Return the rate of exposure by the level of the water alone, 0 inside the incipient level. [1/h]"""
    total = np.zeros(np.broadcast_shapes(osmolality_mOsm_kg.shape, figures.home.shape))
    for side, out in (("low", -1.0), ("high", 1.0)):
        level, incipient = getattr(limits, f"level_{side}"), getattr(limits, f"incipient_{side}")
        beyond = (osmolality_mOsm_kg - incipient) * out
        is_beyond = beyond > 0.0
        if not is_beyond.any():
            continue
        excess = (osmolality_mOsm_kg - level) * out
        rate = _decades(excess, figures.decade)
        floor = _decades(-np.abs(level - incipient), figures.decade)
        with np.errstate(invalid="ignore", divide="ignore"):  # both limits at fresh water: no exposure on that side
            curve = (rate - floor) / (1.0 - floor)
        timer = rate * np.clip(beyond / 30.0, 0.0, 1.0)
        chosen = np.where(figures.is_timer, timer, curve) / getattr(figures, f"level_{side}_h")
        total = np.where(is_beyond & np.isfinite(chosen), np.fmax(total, chosen), total)
    return total


def _shock_integral(
    x0: FloatArray, hours: FloatArray, tau: FloatArray, decade: FloatArray, jump: FloatArray, floor: FloatArray
) -> FloatArray:
    """Return the integral of (10**((x - jump) / decade) - floor) / (1 - floor) while x = x0 exp(-t / tau)."""
    start = LN10 * x0 / decade
    end = start * np.exp(-hours / tau)
    area = tau * (expi(start) - expi(end)) * np.exp(-LN10 * jump / decade)
    return np.asarray((area - floor * hours) / (1.0 - floor))


def _shock(
    figures: StageArrays,
    limits: Limits,
    *,
    acclimated: FloatArray,
    water: FloatArray,
    hours: FloatArray,
    tau: FloatArray,
    level_rate: FloatArray,
) -> tuple[FloatArray, FloatArray]:
    """Return the exposure added by the shock, and how long it outruns the level. One dimension, shapes equal."""
    gain, lasting = np.zeros(water.shape), np.zeros(water.shape)
    is_low = water < acclimated
    distance = np.abs(acclimated - water)
    harmless = np.where(is_low, limits.harmless_low, limits.harmless_high)
    index = np.nonzero(distance > harmless)[0]  # NaN: no published jump on that side, no shock
    if index.size == 0:
        return gain, lasting
    few = figures.take(index)
    low = is_low[index]
    one_stage = limits.jump_low.size == 1
    jump = np.where(low, *(side[0] if one_stage else side[index] for side in (limits.jump_low, limits.jump_high)))
    test_h = np.where(low, few.jump_low_h, few.jump_high_h)
    inside = harmless[index]
    x0 = np.minimum(distance[index], jump + MAX_EXPONENT * few.decade)
    floor = 10.0 ** ((inside - jump) / few.decade)
    # The shock yields to the level where its rate falls below the level's.
    threshold = jump + few.decade * np.log10(level_rate[index] * test_h * (1.0 - floor) + floor)
    is_active = x0 > threshold
    until = tau[index] * np.log(np.divide(x0, threshold, out=np.ones_like(x0), where=is_active))
    span = np.minimum(hours[index], until)
    area = _shock_integral(x0, span, tau[index], few.decade, jump, floor) / test_h
    gain[index] = np.where(is_active, np.fmax(0.0, area), 0.0)
    lasting[index] = np.where(is_active, span, 0.0)
    return gain, lasting


@dataclass(frozen=True, slots=True)
class ExposureSteps:
    """What each interval does to exposure: E becomes (E + shock) * kept + level."""

    shock: FloatArray
    kept: FloatArray
    level: FloatArray


def exposure_steps(
    figures: StageArrays,
    *,
    acclimated: FloatArray,
    water: FloatArray,
    temperature_degC: FloatArray,
    hours: FloatArray,
    model: Constants,
) -> ExposureSteps:
    """Return what *hours* in *water* do to the exposure of animals used to *acclimated*. One dimension, shapes equal."""
    limits = limits_at(figures, temperature_degC, model)
    tau = np.where(water < acclimated, figures.tau_down, figures.tau_up) + np.zeros(water.shape)
    # Cold slows settling, death and repair alike: all three run in the animals' own time.
    hours = hours / settling_factor(figures, temperature_degC, model)
    rate = level_rate_per_h(figures, limits, water)
    shock, lasting = _shock(figures, limits, acclimated=acclimated, water=water, hours=hours, tau=tau, level_rate=rate)
    rest = hours - lasting
    is_inside = (rate == 0.0) & ~(water < limits.tolerable_low) & ~(water > limits.tolerable_high)
    kept = np.where(is_inside, np.exp(-rest / model.repair_h), 1.0)
    return ExposureSteps(shock, kept, rate * rest)
