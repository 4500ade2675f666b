"""Stress 0-100 with its reason, for many tanks or for many rows of one.

`advance` moves all tanks one reading on; `advance_series` takes one tank through many readings.
"""

from __future__ import annotations

import dataclasses
from dataclasses import dataclass, fields
from typing import TYPE_CHECKING, Any

import numpy as np

from analysis.animal.constants import Constants, constants
from analysis.animal.osmoregulation import UNKNOWN_ABOVE_MOSM_KG, CohortState, GapRule
from analysis.animal.stage import Supports
from analysis.animal.strains import BAND_WORDS as BAND_WORDS
from analysis.animal.strains import DRIVER_WORDS as DRIVER_WORDS
from analysis.animal.strains import Band as Band
from analysis.animal.strains import Driver as Driver
from analysis.animal.strains import (
    bands,
    change_strain,
    combined_stress,
    exposure_strain,
    thermal_strain,
)
from analysis.animal.strains import range_strain as range_strain
from analysis.animal.track import moved, tracked
from analysis.arrays import MICROSECONDS_PER_SECOND
from analysis.errors import InvalidInputError

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

    from analysis.animal.stage_arrays import StageArrays
    from analysis.arrays import FloatArray, IntArray


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
    there = moved(figures, state, water=water, warmth=warmth, hours=pending / 3600.0, gap=rule, model=chosen)
    is_valid = ~np.isnan(water)
    updated = state.updated_at_us + np.rint(elapsed * MICROSECONDS_PER_SECOND).astype(np.int64)
    columns: dict[str, Any] = {
        member.name: np.where(is_valid, getattr(there, member.name), getattr(state, member.name))
        for member in fields(CohortState)
    }
    after = CohortState(**columns | {"pending_s": np.where(is_valid, 0.0, pending), "updated_at_us": updated})
    return after, _assembled(figures, water=water, temperature=warmth, state=after, model=chosen)


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
    track = tracked(
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
    track = tracked(
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
