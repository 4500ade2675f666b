"""How the state of cohorts moves: all tanks by one reading, or one tank through many.

Both use the same formulas on the same arrays and agree to rounding; only what depends on the row before is
taken row by row.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from analysis.animal.exposure import exposure_steps, settling_factor
from analysis.animal.osmoregulation import SPREAD_MOSM_KG, CohortState, GapRule, steady_internal

if TYPE_CHECKING:
    from analysis.animal.constants import Constants
    from analysis.animal.stage_arrays import StageArrays
    from analysis.arrays import BoolArray, FloatArray

THERMAL_TAU_H = 24.0
"""Settling time of the temperature that animals are used to. Assumed: hours to days, as acclimation in trials."""


@dataclass(frozen=True, slots=True)
class Intervals:
    """What the time between two valid readings does to the state, before the new reading is judged."""

    toward_down: FloatArray
    toward_up: FloatArray
    internal: FloatArray
    warmth: FloatArray
    uncertainty: FloatArray
    gap_spread: FloatArray
    is_lost: BoolArray


def intervals(
    figures: StageArrays, *, temperature: FloatArray, hours: FloatArray, gap: GapRule, model: Constants
) -> Intervals:
    """Return what each interval does to what settles; `temperature` is that of the held water."""
    factor = settling_factor(figures, temperature, model)
    slow = np.maximum(figures.tau_up, figures.tau_down) * factor
    over_h = np.maximum(0.0, hours - gap.hold_s / 3600.0)
    return Intervals(
        toward_down=np.exp(-hours / (figures.tau_down * factor)),
        toward_up=np.exp(-hours / (figures.tau_up * factor)),
        internal=np.exp(-hours / (figures.tau_internal * factor)),
        warmth=np.exp(-hours / THERMAL_TAU_H),
        uncertainty=np.exp(-hours / slow),
        gap_spread=SPREAD_MOSM_KG * -np.expm1(-over_h / slow),
        is_lost=hours > gap.unknown_after_s / 3600.0,
    )


def moved(
    figures: StageArrays,
    state: CohortState,
    *,
    water: FloatArray,
    warmth: FloatArray,
    hours: FloatArray,
    gap: GapRule,
    model: Constants,
) -> CohortState:
    """Return the state after *hours* in the held water, holding the new reading."""
    held = state.osmolality
    is_first = np.isnan(held)
    held = np.where(is_first, water, held)
    interval = intervals(figures, temperature=state.temperature, hours=hours, gap=gap, model=model)
    is_lost = interval.is_lost & ~is_first
    home = np.where(np.isnan(state.acclimated), water, state.acclimated)
    steps = exposure_steps(
        figures,
        acclimated=home,
        water=held,
        temperature_degC=state.temperature,
        hours=np.where(is_first, 0.0, hours),
        model=model,
    )
    toward = np.where(held < home, interval.toward_down, interval.toward_up)
    steady = steady_internal(figures, held)
    inside = np.where(np.isnan(state.internal), steady, state.internal)
    inside = steady + (inside - steady) * interval.internal
    used_to = np.where(np.isnan(state.acclimated_degC), warmth, state.acclimated_degC)
    lived = np.where(np.isnan(state.temperature), used_to, state.temperature)
    uncertainty = np.hypot(state.uncertainty * interval.uncertainty, interval.gap_spread)
    return CohortState(
        acclimated=np.where(is_lost, water, held + (home - held) * toward),
        internal=np.where(is_lost, steady_internal(figures, water), inside),
        exposure=np.where(is_lost, 0.0, (state.exposure + steps.shock) * steps.kept + steps.level),
        acclimated_degC=np.where(is_lost, warmth, lived + (used_to - lived) * interval.warmth),
        osmolality=water,
        temperature=np.where(np.isnan(warmth), state.temperature, warmth),
        uncertainty=np.where(is_lost, SPREAD_MOSM_KG, uncertainty),
        pending_s=np.zeros(water.shape),
        updated_at_us=state.updated_at_us,
    )


def _held(values: FloatArray, before: float) -> FloatArray:
    """Return the last known value before each row."""
    padded = np.concatenate([[before], values])[:-1]
    index = np.where(np.isnan(padded), 0, np.arange(padded.size))
    return np.asarray(padded[np.maximum.accumulate(index)])


def tracked(
    figures: StageArrays,
    state: CohortState,
    *,
    seconds: FloatArray,
    water: FloatArray,
    warmth: FloatArray,
    gap: GapRule,
    model: Constants,
) -> CohortState:
    """Return the state at every row, as a CohortState with one element a row."""
    rows = water.size
    if rows == 0:
        return state.take(np.zeros(0, dtype=np.intp))
    hours = seconds / 3600.0
    lived_degC = _held(warmth, float(state.temperature[0]))
    held = _held(water, float(state.osmolality[0]))
    is_first = np.isnan(held)
    held = np.where(is_first, water, held)
    interval = intervals(figures, temperature=lived_degC, hours=hours, gap=gap, model=model)
    is_lost = interval.is_lost & ~is_first
    homes = _acclimated_before(state, held, water=water, interval=interval, is_lost=is_lost)
    steps = exposure_steps(
        figures,
        acclimated=homes[:-1],
        water=held,
        temperature_degC=lived_degC,
        hours=np.where(is_first, 0.0, hours),
        model=model,
    )
    steady, steady_now = steady_internal(figures, held), steady_internal(figures, water)
    used_to = np.where(np.isnan(lived_degC), np.nan, lived_degC)
    return CohortState(
        acclimated=homes[1:],
        internal=_followed(float(state.internal[0]), steady, interval.internal, reset=steady_now, is_lost=is_lost),
        exposure=_exposures(float(state.exposure[0]), steps.shock, steps.kept, steps.level, is_lost),
        acclimated_degC=_warmed(float(state.acclimated_degC[0]), used_to, warmth, interval.warmth, is_lost),
        osmolality=water,
        temperature=np.where(np.isnan(warmth), lived_degC, warmth),
        uncertainty=_uncertain(float(state.uncertainty[0]), interval, is_lost),
        pending_s=np.zeros(rows),
        updated_at_us=np.zeros(rows, dtype=np.int64),
    )


def _acclimated_before(
    state: CohortState, held: FloatArray, *, water: FloatArray, interval: Intervals, is_lost: BoolArray
) -> FloatArray:
    """Return the acclimated osmolality before the first row and after each row: one more than rows."""
    used_to = float(state.acclimated[0])
    if used_to != used_to:  # NaN: nothing known yet
        used_to = float(water[0])
    homes = [used_to]
    rows = zip(
        held.tolist(),
        water.tolist(),
        interval.toward_down.tolist(),
        interval.toward_up.tolist(),
        is_lost.tolist(),
        strict=True,
    )
    for lived, now, down, up, lost in rows:
        used_to = now if lost else lived + (used_to - lived) * (down if lived < used_to else up)
        homes.append(used_to)
    return np.array(homes)


def _followed(
    before: float, target: FloatArray, kept: FloatArray, *, reset: FloatArray, is_lost: BoolArray
) -> FloatArray:
    """Return a value that follows *target* from row to row; NaN before means "at the target"."""
    values, value = [], before
    for goal, keep, now, lost in zip(target.tolist(), kept.tolist(), reset.tolist(), is_lost.tolist(), strict=True):
        if value != value:
            value = goal
        value = now if lost else goal + (value - goal) * keep
        values.append(value)
    return np.array(values)


def _warmed(before: float, lived: FloatArray, warmth: FloatArray, kept: FloatArray, is_lost: BoolArray) -> FloatArray:
    """As `_followed` for temperature, where the thermometer may come and go."""
    values, value = [], before
    for goal, now, keep, lost in zip(lived.tolist(), warmth.tolist(), kept.tolist(), is_lost.tolist(), strict=True):
        if value != value:
            value = now
        at = value if goal != goal else goal
        value = now if lost else at + (value - at) * keep
        values.append(value)
    return np.array(values)


def _exposures(before: float, shock: FloatArray, kept: FloatArray, level: FloatArray, is_lost: BoolArray) -> FloatArray:
    if before == 0.0 and not shock.any() and not level.any():
        return np.zeros(shock.size)
    values, value = [], before
    for jump, keep, more, lost in zip(shock.tolist(), kept.tolist(), level.tolist(), is_lost.tolist(), strict=True):
        value = 0.0 if lost else (value + jump) * keep + more
        values.append(value)
    return np.array(values)


def _uncertain(before: float, interval: Intervals, is_lost: BoolArray) -> FloatArray:
    if before == 0.0 and not interval.gap_spread.any() and not is_lost.any():
        return np.zeros(is_lost.size)
    values, value = [], before
    for keep, more, lost in zip(
        interval.uncertainty.tolist(), interval.gap_spread.tolist(), is_lost.tolist(), strict=True
    ):
        value = SPREAD_MOSM_KG if lost else float(np.hypot(value * keep, more)) if more else value * keep
        values.append(value)
    return np.array(values)
