"""What the animals of a tank are used to, and how it follows the water: state, figures as arrays, exact integration.

Water is taken as constant between two readings: a reading holds until the next valid one. So the state at any
moment does not depend on how the time before was cut. Three things follow the water with their own settling
times: the acclimated osmolality A, the body fluid and the temperature the animals are used to. Exposure E grows
with the harder of two processes and E = 1 is the published median:

- *level*: the water lies beyond the incipient level; the rate is one decade higher for each further
  `Constants.decade_mOsm_kg`, and 1 / (length of the test) at the median lethal level;
- *shock*: the water lies further from A than a harmless part of the direct lethal jump; the same decade, and
  E = 1 at the end of the direct test. As A follows the water the shock passes.

The integral of the shock over an interval is closed: it is a difference of exponential integrals.
"""

from __future__ import annotations

import dataclasses
import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, fields
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.special import expi

from analysis.animal.constants import Constants, constants
from analysis.animal.fallbacks import Resolved, resolved
from analysis.animal.stage import Certainty, Stage
from analysis.arrays import BoolArray, FloatArray, IntArray
from analysis.errors import InvalidInputError

LN10 = math.log(10.0)
THERMAL_TAU_H = 24.0
"""Settling time of the temperature that animals are used to. Assumed: hours to days, as acclimation in trials."""
SPREAD_MOSM_KG = 300.0
"""Standard uncertainty of the acclimated osmolality where nothing is known: about 10 ppt. Assumed."""
UNKNOWN_ABOVE_MOSM_KG = 100.0
"""Above this uncertainty change and exposure are "not known". Assumed: about 3 ppt."""
MAX_EXPONENT = 6.0
"""Decades beyond which the rate of exposure no longer grows; far past any published time to death."""


@dataclass(frozen=True, slots=True)
class GapRule:
    """How long a reading may stand for the water.

    Parameters
    ----------
    hold_s : float
        Up to here the last reading holds without remark. [s]
    unknown_after_s : float
        After this what the animals are used to is unknown. Between the two its uncertainty grows. [s]
    """

    hold_s: float = 6 * 3600.0
    unknown_after_s: float = 24 * 3600.0


@dataclass(frozen=True, slots=True)
class StageArrays:
    """The figures of the stages in a row of tanks, one element a tank; mOsm/kg, h, degC. NaN where not known."""

    optimal_low: FloatArray
    tolerable_low: FloatArray
    level_low: FloatArray
    incipient_low: FloatArray
    level_low_h: FloatArray
    jump_low: FloatArray
    jump_low_h: FloatArray
    jump_low_to: FloatArray
    harmless_low: FloatArray
    range_cap_low: FloatArray
    optimal_high: FloatArray
    tolerable_high: FloatArray
    level_high: FloatArray
    incipient_high: FloatArray
    level_high_h: FloatArray
    jump_high: FloatArray
    jump_high_h: FloatArray
    jump_high_to: FloatArray
    harmless_high: FloatArray
    range_cap_high: FloatArray
    tau_up: FloatArray
    tau_down: FloatArray
    tau_degC: FloatArray
    tau_internal: FloatArray
    isosmotic: FloatArray
    slope: FloatArray
    optimal_low_degC: FloatArray
    tolerable_low_degC: FloatArray
    lethal_low_degC: FloatArray
    optimal_high_degC: FloatArray
    tolerable_high_degC: FloatArray
    lethal_high_degC: FloatArray
    decade: FloatArray
    home: FloatArray
    is_timer: BoolArray
    supports: NDArray[np.uint8]
    steepness: float

    @classmethod
    def from_stages(cls, stages: Sequence[Stage], *, model: Constants | None = None) -> StageArrays:
        """Return the figures of *stages*, gaps filled by `analysis.animal.fallbacks.RULES`.

        Parameters
        ----------
        stages : sequence of Stage
            One a tank, in the order of the tanks; the same stage may stand for many.
        model : Constants, optional
            Other constants than those in use, for fitting.
        """
        chosen = model or constants()
        rows = {id(stage): _row(resolved(stage), chosen) for stage in stages}
        columns: dict[str, Any] = {
            name: np.array([rows[id(stage)][name] for stage in stages], dtype=np.float64)
            for name in (member.name for member in fields(cls))
            if name not in ("is_timer", "supports", "steepness")
        }
        arrays = cls(
            **columns,
            is_timer=np.array([resolved(stage).is_timer for stage in stages], dtype=np.bool_),
            supports=np.array([int(resolved(stage).supports) for stage in stages], dtype=np.uint8),
            steepness=chosen.steepness,
        )
        return _with_calibrated_jumps(arrays, chosen)

    def __len__(self) -> int:
        return int(self.home.size)

    def take(self, index: NDArray[np.intp]) -> StageArrays:
        """Return the elements at *index*; an array of one element stands for every index."""
        if len(self) == 1:
            index = np.zeros(index.shape, dtype=np.intp)
        columns: dict[str, Any] = {
            member.name: getattr(self, member.name)[index] for member in fields(self) if member.name != "steepness"
        }
        return dataclasses.replace(self, **columns)


def _row(stage: Resolved, model: Constants) -> dict[str, float]:
    row = {
        member.name: stage.value(member.name)
        for member in fields(StageArrays)
        if member.name not in ("is_timer", "supports", "steepness")
    }
    for side in ("low", "high"):
        jump, harmless = row[f"jump_{side}"], stage.value(f"harmless_jump_{side}")
        fraction = model.shock_fraction
        if math.isfinite(harmless) and math.isfinite(jump):
            fraction = min(0.95, max(fraction, harmless / jump))
        row[f"harmless_{side}"] = jump * fraction
        if math.isnan(stage.value(f"incipient_{side}")):
            tolerable, level = row[f"tolerable_{side}"], row[f"level_{side}"]
            toward = model.incipient_fraction * (level - tolerable) if math.isfinite(level) else 0.0
            row[f"incipient_{side}"] = tolerable + toward
        hours = stage.figures.get(f"level_{side}_h")
        is_timed = hours is not None and hours.certainty is not Certainty.ASSUMED
        row[f"range_cap_{side}"] = 0.6 if is_timed else 1.0
        for kind in ("level", "jump"):
            row[f"{kind}_{side}_h"] *= hours_to_median(stage.value(f"{kind}_{side}_alive"), model.steepness)
    row["decade"] = model.decade_timer_mOsm_kg if stage.is_timer else model.decade_mOsm_kg
    return row


def hours_to_median(fraction_alive: float, steepness: float) -> float:
    """Return by how much the median comes later than a moment at which *fraction_alive* lived; 1 for NaN or 0.5."""
    if math.isnan(fraction_alive):
        return 1.0
    return float((fraction_alive / (1.0 - fraction_alive)) ** (1.0 / steepness))


@dataclass(frozen=True, slots=True)
class CohortState:
    """What a row of cohorts carries from one reading to the next, one element a cohort.

    Parameters
    ----------
    acclimated : FloatArray
        Osmolality the animals are used to. [mOsm/kg]
    internal : FloatArray
        Modelled osmolality of the body fluid, NaN where not known. [mOsm/kg]
    exposure : FloatArray
        Part of the published median dose, 1 at the median. Not capped.
    acclimated_degC : FloatArray
        Temperature the animals are used to: the thermal load is their distance from it. [degC]
    osmolality, temperature : FloatArray
        The last valid reading, which holds until the next. [mOsm/kg], [degC]
    uncertainty : FloatArray
        Standard uncertainty of *acclimated*. [mOsm/kg]
    pending_s : FloatArray
        Time since the last valid reading that has not been integrated yet. [s]
    updated_at_us : IntArray
        Time of the last advance, microseconds UTC; the caller's own clock.
    """

    acclimated: FloatArray
    internal: FloatArray
    exposure: FloatArray
    acclimated_degC: FloatArray
    osmolality: FloatArray
    temperature: FloatArray
    uncertainty: FloatArray
    pending_s: FloatArray
    updated_at_us: IntArray

    @classmethod
    def unknown(cls, count: int, *, at_us: int = 0) -> CohortState:
        """Return the state of *count* cohorts of which nothing is known yet."""
        empty = [np.full(count, np.nan) for _ in range(6)]
        return cls(
            acclimated=empty[0], internal=empty[1], exposure=np.zeros(count), acclimated_degC=empty[2], osmolality=empty[3],
            temperature=empty[4], uncertainty=np.full(count, SPREAD_MOSM_KG), pending_s=np.zeros(count),
            updated_at_us=np.full(count, at_us, dtype=np.int64),
        )  # fmt: skip

    @classmethod
    def used_to(
        cls,
        osmolality_mOsm_kg: FloatArray,
        *,
        temperature_degC: FloatArray | None = None,
        uncertainty_mOsm_kg: float = 0.0,
        at_us: int = 0,
    ) -> CohortState:
        """Return the state of cohorts that have lived in water of this osmolality (and temperature) until now."""
        water = np.asarray(osmolality_mOsm_kg, dtype=np.float64)
        warmth = (
            np.full(water.shape, np.nan) if temperature_degC is None else np.asarray(temperature_degC, dtype=np.float64)
        )
        state = cls.unknown(water.size, at_us=at_us)
        return dataclasses.replace(
            state, acclimated=water.copy(), osmolality=water.copy(), temperature=warmth.copy(), acclimated_degC=warmth.copy(),
            uncertainty=np.full(water.shape, uncertainty_mOsm_kg),
        )  # fmt: skip

    def __len__(self) -> int:
        return int(self.acclimated.size)

    def to_dicts(self) -> list[dict[str, float | int | None]]:
        """Return one mapping a cohort that JSON can hold; NaN becomes None."""
        names = [member.name for member in fields(self)]
        columns = [getattr(self, name).tolist() for name in names]
        return [
            {
                name: (None if isinstance(value, float) and math.isnan(value) else value)
                for name, value in zip(names, row, strict=True)
            }
            for row in zip(*columns, strict=True)
        ]

    @classmethod
    def from_dicts(cls, rows: Sequence[Mapping[str, Any]]) -> CohortState:
        """Return the state that `to_dicts` wrote.

        Raises
        ------
        InvalidInputError
            If a row lacks a member.
        """
        columns: dict[str, Any] = {}
        for member in fields(cls):
            missing = [number for number, row in enumerate(rows) if member.name not in row]
            if missing:
                raise InvalidInputError(
                    member.name, found=f"rows {missing} without it", allowed="every member of CohortState"
                )
            if member.name == "updated_at_us":
                columns[member.name] = np.array([int(row[member.name]) for row in rows], dtype=np.int64)
            else:
                values = [np.nan if row[member.name] is None else float(row[member.name]) for row in rows]
                columns[member.name] = np.array(values, dtype=np.float64)
        return cls(**columns)

    def take(self, index: NDArray[np.intp]) -> CohortState:
        """Return the cohorts at *index*, for tanks that were added, emptied or put in another order."""
        columns: dict[str, Any] = {member.name: getattr(self, member.name)[index] for member in fields(self)}
        return CohortState(**columns)


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
    cold = np.fmax(0.0, figures.optimal_low_degC - temperature_degC)
    warm = np.fmax(0.0, temperature_degC - figures.optimal_high_degC)
    return np.asarray(cold * model.cold_mOsm_kg_K + warm * model.warm_mOsm_kg_K)


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
    tau = np.where(water < acclimated, figures.tau_down, figures.tau_up) * settling_factor(
        figures, temperature_degC, model
    )
    rate = level_rate_per_h(figures, limits, water)
    shock, lasting = _shock(figures, limits, acclimated=acclimated, water=water, hours=hours, tau=tau, level_rate=rate)
    rest = hours - lasting
    is_inside = (rate == 0.0) & ~(water < limits.tolerable_low) & ~(water > limits.tolerable_high)
    kept = np.where(is_inside, np.exp(-rest / model.repair_h), 1.0)
    return ExposureSteps(shock, kept, rate * rest)


def _replaced(figures: StageArrays, name: str, values: FloatArray) -> StageArrays:
    columns: dict[str, Any] = {name: values}
    return dataclasses.replace(figures, **columns)


def _with_calibrated_jumps(figures: StageArrays, model: Constants) -> StageArrays:
    """Scale the length of every direct test so that exposure is 1 at its end: the published median is kept.

    Where the level alone already gives 1 by then (no figure after slow acclimation), the printed length stays.
    """
    calibrated = figures
    for side, up in (("low", 1.0), ("high", -1.0)):
        printed_h: FloatArray = getattr(figures, f"jump_{side}_h")
        water: FloatArray = getattr(figures, f"jump_{side}_to")
        start = water + up * getattr(figures, f"jump_{side}")
        shortest, longest = printed_h * 1e-4, printed_h.copy()
        for _ in range(40):
            middle = np.sqrt(shortest * longest)
            tried = _replaced(calibrated, f"jump_{side}_h", middle)
            step = exposure_steps(
                tried,
                acclimated=start,
                water=water,
                temperature_degC=np.full(water.shape, np.nan),
                hours=printed_h,
                model=model,
            )
            is_too_weak = step.shock + step.level < 1.0
            longest, shortest = np.where(is_too_weak, middle, longest), np.where(is_too_weak, shortest, middle)
        calibrated = _replaced(calibrated, f"jump_{side}_h", np.sqrt(shortest * longest))
    return calibrated


def steady_internal(figures: StageArrays, osmolality_mOsm_kg: FloatArray) -> FloatArray:
    """Return the body fluid that animals settle to in this water, NaN where not known. [mOsm/kg]"""
    return np.asarray(figures.isosmotic + figures.slope * (osmolality_mOsm_kg - figures.isosmotic))
