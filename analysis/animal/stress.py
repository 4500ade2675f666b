"""Stress 0-100 with its reason: four strains, their sum, the driver and the band, for many tanks or many rows.

The strains are salinity itself (range), change, exposure and temperature; each is 0 to 1. One fall is not
counted three times: ``stress = 100 (1 - (1 - max(range, change, exposure)) (1 - thermal))``.
`advance` moves all tanks one reading on; `advance_series` takes one tank through many readings. Both use the
same functions and agree to rounding.
"""

from __future__ import annotations

import dataclasses
from dataclasses import dataclass, fields
from enum import IntEnum
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from analysis.animal.constants import Constants, constants
from analysis.animal.osmoregulation import (
    SPREAD_MOSM_KG,
    THERMAL_TAU_H,
    UNKNOWN_ABOVE_MOSM_KG,
    CohortState,
    GapRule,
    StageArrays,
    exposure_steps,
    limits_at,
    settling_factor,
    steady_internal,
)
from analysis.animal.stage import Supports
from analysis.arrays import MICROSECONDS_PER_SECOND, BoolArray, FloatArray, IntArray
from analysis.errors import InvalidInputError

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


@dataclass(frozen=True, slots=True)
class Stress:
    """Stress of a row of tanks, or of one tank over time: arrays of one shape. NaN where not known.

    Parameters
    ----------
    stress : FloatArray
        0 to 100.
    range_strain, change_strain, exposure_strain, thermal_strain : FloatArray
        0 to 1.
    driver, band : IntArray
        Codes of `Driver` and `Band`.
    internal_mOsm_kg : FloatArray
        Modelled osmolality of the body fluid. [mOsm/kg]
    gap_mOsm_kg : FloatArray
        Body fluid minus water, the osmoregulatory capacity. Positive: the body is saltier and water moves in;
        negative: water is drawn out. [mOsm/kg]
    supports : ndarray of uint8
        Bits of `Supports`: which parts could be told at this moment.
    """

    stress: FloatArray
    range_strain: FloatArray
    change_strain: FloatArray
    exposure_strain: FloatArray
    thermal_strain: FloatArray
    driver: NDArray[np.int8]
    band: NDArray[np.int8]
    internal_mOsm_kg: FloatArray
    gap_mOsm_kg: FloatArray
    supports: NDArray[np.uint8]


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


def _assembled(
    figures: StageArrays, *, water: FloatArray, temperature: FloatArray, state: CohortState, model: Constants
) -> Stress:
    """Return the stress at a reading; *state* has been brought to its moment."""
    is_known = state.uncertainty <= UNKNOWN_ABOVE_MOSM_KG
    in_range = range_strain(figures, osmolality_mOsm_kg=water, temperature_degC=state.temperature, model=model)
    change = change_strain(
        figures,
        osmolality_mOsm_kg=water,
        acclimated_mOsm_kg=state.acclimated,
        temperature_degC=state.temperature,
        model=model,
    )
    change = np.where(is_known, change, np.nan)
    exposure = np.where(is_known & ~np.isnan(water), exposure_strain(figures, state.exposure), np.nan)
    warmth = np.where(np.isnan(water), np.nan, temperature)
    thermal = thermal_strain(figures, temperature_degC=warmth, acclimated_degC=state.acclimated_degC)
    osmotic = np.fmax(np.fmax(in_range, change), exposure)
    # Beyond an optimum outside which nothing is known, the other strains alone would say too little.
    is_judged = (figures.supports & int(Supports.RANGE)) != 0
    osmotic = np.where(is_judged & np.isnan(in_range), np.nan, osmotic)
    stress = combined_stress(osmotic=osmotic, thermal=thermal)
    driver = np.select(
        [np.isnan(stress), stress <= 0.0, np.fmax(thermal, -1.0) > osmotic, exposure == osmotic, in_range == osmotic],
        [Driver.UNKNOWN, Driver.NONE, Driver.TEMPERATURE, Driver.EXPOSURE, Driver.RANGE],
        default=Driver.CHANGE,
    ).astype(np.int8)
    internal = np.where(np.isnan(water), np.nan, state.internal)
    supports = (
        np.where(np.isnan(in_range), 0, int(Supports.RANGE))
        | np.where(np.isnan(change), 0, int(Supports.CHANGE))
        | np.where(np.isnan(exposure), 0, int(Supports.EXPOSURE))
        | np.where(np.isnan(thermal), 0, int(Supports.THERMAL))
        | np.where(np.isnan(internal), 0, int(Supports.INTERNAL))
    ).astype(np.uint8)
    return Stress(
        stress, in_range, change, exposure, thermal, driver, bands(stress), internal, np.asarray(internal - water), supports
    )  # fmt: skip


@dataclass(frozen=True, slots=True)
class _Intervals:
    """What the time between two valid readings does to the state, before the new reading is judged."""

    toward_down: FloatArray
    toward_up: FloatArray
    internal: FloatArray
    warmth: FloatArray
    uncertainty: FloatArray
    gap_spread: FloatArray
    is_lost: BoolArray


def _intervals(
    figures: StageArrays, *, temperature: FloatArray, hours: FloatArray, gap: GapRule, model: Constants
) -> _Intervals:
    factor = settling_factor(figures, temperature, model)
    slow = np.maximum(figures.tau_up, figures.tau_down) * factor
    over_h = np.maximum(0.0, hours - gap.hold_s / 3600.0)
    return _Intervals(
        toward_down=np.exp(-hours / (figures.tau_down * factor)),
        toward_up=np.exp(-hours / (figures.tau_up * factor)),
        internal=np.exp(-hours / (figures.tau_internal * factor)),
        warmth=np.exp(-hours / THERMAL_TAU_H),
        uncertainty=np.exp(-hours / slow),
        gap_spread=SPREAD_MOSM_KG * -np.expm1(-over_h / slow),
        is_lost=hours > gap.unknown_after_s / 3600.0,
    )


def advance(
    figures: StageArrays,
    state: CohortState,
    *,
    osmolality_mOsm_kg: ArrayLike,
    temperature_degC: ArrayLike,
    elapsed_s: ArrayLike,
    gap: GapRule | None = None,
    model: Constants | None = None,
) -> tuple[CohortState, Stress]:
    """Move all tanks on by one reading.

    The water between two readings is that of the earlier one; the strains are those of the new reading. A tank
    whose reading is NaN keeps its state: its time is counted until the next valid reading, NaN comes out.

    Parameters
    ----------
    figures : StageArrays
        Figures of the tanks' stages, shape (n,).
    state : CohortState
        State of the tanks, shape (n,).
    osmolality_mOsm_kg, temperature_degC : array_like
        The new reading, shape (n,). [mOsm/kg], [degC]
    elapsed_s : array_like
        Time since the state's last advance, 0 or more, broadcast to (n,). [s]
    gap : GapRule, optional
        How long a reading may stand for the water.
    model : Constants, optional
        Other constants than those in use.

    Returns
    -------
    CohortState, Stress
        The state at the reading, and the stress. Shape (n,).

    Raises
    ------
    InvalidInputError
        If time runs backwards.
    """
    chosen, rule = model or constants(), gap or GapRule()
    water = np.asarray(osmolality_mOsm_kg, dtype=np.float64)
    warmth = np.asarray(temperature_degC, dtype=np.float64)
    elapsed = np.broadcast_to(np.asarray(elapsed_s, dtype=np.float64), water.shape)
    if np.any(elapsed < 0.0):
        raise InvalidInputError("elapsed_s", found=float(elapsed.min()), allowed="0 or more seconds")
    pending = state.pending_s + elapsed
    moved = _moved(figures, state, water=water, warmth=warmth, hours=pending / 3600.0, gap=rule, model=chosen)
    is_valid = ~np.isnan(water)
    updated = state.updated_at_us + np.rint(elapsed * MICROSECONDS_PER_SECOND).astype(np.int64)
    columns: dict[str, Any] = {
        member.name: np.where(is_valid, getattr(moved, member.name), getattr(state, member.name))
        for member in fields(CohortState)
    }
    after = CohortState(**columns | {"pending_s": np.where(is_valid, 0.0, pending), "updated_at_us": updated})
    return after, _assembled(figures, water=water, temperature=warmth, state=after, model=chosen)


def _moved(
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
    interval = _intervals(figures, temperature=state.temperature, hours=hours, gap=gap, model=model)
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


def advance_series(
    figures: StageArrays,
    state: CohortState,
    *,
    times_us: IntArray,
    osmolality_mOsm_kg: ArrayLike,
    temperature_degC: ArrayLike,
    gap: GapRule | None = None,
    model: Constants | None = None,
) -> tuple[CohortState, Stress]:
    """Take one tank through many readings; the same as `advance` row by row, to rounding, and much faster.

    Parameters
    ----------
    figures : StageArrays
        Figures of the one stage, shape (1,).
    state : CohortState
        State before the first row, shape (1,); its ``updated_at_us`` 0 means "at the first row".
    times_us : ndarray of int64
        Times of the rows, never falling. Shape (rows,). [us]
    osmolality_mOsm_kg, temperature_degC : array_like
        Readings, shape (rows,). [mOsm/kg], [degC]
    gap, model
        As in `advance`.

    Returns
    -------
    CohortState, Stress
        State after the last row, shape (1,); stress, shape (rows,).

    Raises
    ------
    InvalidInputError
        If times fall, or a shape is wrong.
    """
    chosen, rule = model or constants(), gap or GapRule()
    water = np.asarray(osmolality_mOsm_kg, dtype=np.float64)
    warmth = np.asarray(temperature_degC, dtype=np.float64)
    times = np.asarray(times_us, dtype=np.int64)
    _check_series(figures, state, times=times, shapes=(water.shape, warmth.shape))
    before_us = int(state.updated_at_us[0]) or (int(times[0]) if times.size else 0)
    valid = np.nonzero(~np.isnan(water))[0]
    track = _tracked(
        figures, state, seconds=_seconds_between(times[valid], before_us, float(state.pending_s[0])),
        water=water[valid], warmth=warmth[valid], gap=rule, model=chosen,
    )  # fmt: skip
    stress = _assembled(figures, water=water[valid], temperature=warmth[valid], state=track, model=chosen)
    last_us = int(times[-1]) if times.size else before_us
    final = track.take(np.array([-1])) if valid.size else state
    since_s = (last_us - (int(times[valid[-1]]) if valid.size else before_us)) / MICROSECONDS_PER_SECOND
    pending = np.array([since_s + (0.0 if valid.size else float(state.pending_s[0]))])
    final = dataclasses.replace(final, pending_s=pending, updated_at_us=np.array([last_us], dtype=np.int64))
    return final, _scattered(stress, valid, rows=times.size)


def exposure_of_series(
    figures: StageArrays,
    state: CohortState,
    *,
    times_us: IntArray,
    osmolality_mOsm_kg: ArrayLike,
    temperature_degC: ArrayLike,
    gap: GapRule | None = None,
    model: Constants | None = None,
) -> FloatArray:
    """Return the exposure of one tank at every row, 1 at the published median, not capped; NaN where the water is.

    Parameters and errors as `advance_series`.
    """
    water, warmth = (np.asarray(values, dtype=np.float64) for values in (osmolality_mOsm_kg, temperature_degC))
    times = np.asarray(times_us, dtype=np.int64)
    _check_series(figures, state, times=times, shapes=(water.shape, warmth.shape))
    valid = np.nonzero(~np.isnan(water))[0]
    before_us = int(state.updated_at_us[0]) or (int(times[0]) if times.size else 0)
    track = _tracked(
        figures, state, seconds=_seconds_between(times[valid], before_us, float(state.pending_s[0])),
        water=water[valid], warmth=warmth[valid], gap=gap or GapRule(), model=model or constants(),
    )  # fmt: skip
    found = np.full(times.shape, np.nan)
    found[valid] = track.exposure
    return found


def _check_series(
    figures: StageArrays, state: CohortState, *, times: IntArray, shapes: tuple[tuple[int, ...], ...]
) -> None:
    if len(figures) != 1 or len(state) != 1:
        raise InvalidInputError("figures and state", found=(len(figures), len(state)), allowed="one tank")
    if any(shape != times.shape for shape in shapes) or times.ndim != 1:
        raise InvalidInputError("rows", found=[times.shape, *shapes], allowed="times and readings of one length")
    if times.size and (
        np.any(np.diff(times) < 0) or (int(state.updated_at_us[0]) and times[0] < state.updated_at_us[0])
    ):
        raise InvalidInputError("times_us", found="a time before the one above it", allowed="times that never fall")


def _seconds_between(times: IntArray, before_us: int, pending_s: float) -> FloatArray:
    if times.size == 0:
        return np.zeros(0)
    seconds = np.diff(times, prepend=before_us) / MICROSECONDS_PER_SECOND
    seconds[0] += pending_s
    return np.asarray(seconds)


def _held(values: FloatArray, before: float) -> FloatArray:
    """Return the last known value before each row."""
    padded = np.concatenate([[before], values])[:-1]
    index = np.where(np.isnan(padded), 0, np.arange(padded.size))
    return np.asarray(padded[np.maximum.accumulate(index)])


def _tracked(
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
    interval = _intervals(figures, temperature=lived_degC, hours=hours, gap=gap, model=model)
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
    state: CohortState, held: FloatArray, *, water: FloatArray, interval: _Intervals, is_lost: BoolArray
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


def _uncertain(before: float, interval: _Intervals, is_lost: BoolArray) -> FloatArray:
    if before == 0.0 and not interval.gap_spread.any() and not is_lost.any():
        return np.zeros(is_lost.size)
    values, value = [], before
    for keep, more, lost in zip(
        interval.uncertainty.tolist(), interval.gap_spread.tolist(), is_lost.tolist(), strict=True
    ):
        value = SPREAD_MOSM_KG if lost else float(np.hypot(value * keep, more)) if more else value * keep
        values.append(value)
    return np.array(values)


def _scattered(stress: Stress, valid: NDArray[np.intp], *, rows: int) -> Stress:
    """Put the rows that were judged back among those that were NaN."""
    if valid.size == rows:
        return stress
    empty: dict[str, Any] = {"driver": Driver.UNKNOWN, "band": Band.UNKNOWN, "supports": 0}
    columns: dict[str, Any] = {}
    for member in fields(Stress):
        values = getattr(stress, member.name)
        column = np.full(rows, empty.get(member.name, np.nan), dtype=values.dtype)
        column[valid] = values
        columns[member.name] = column
    return Stress(**columns)
