"""Animals that come into other water by a person's hand: what they carry with them, and what the water there has done to them since."""

from __future__ import annotations

import math
from dataclasses import replace
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from analysis.animal.osmoregulation import SPREAD_MOSM_KG, CohortState, GapRule
from analysis.animal.strains import DANGER_LOSS, DANGER_STRAIN
from analysis.animal.stress import advance, advance_series
from analysis.arrays import MICROSECONDS_PER_SECOND
from ingest.chain.animals import EVERY_US

if TYPE_CHECKING:
    from analysis.animal.stage_arrays import StageArrays
    from analysis.arrays import FloatArray, IntArray


class WaterRecord(NamedTuple):
    """What was measured in a tank, in the order of time. [us UTC], [mOsm/kg], [degC]"""

    measured_at_us: IntArray
    osmolality_mOsm_kg: FloatArray
    temperature_degC: FloatArray


def brought_to(figures: StageArrays, state: CohortState, at_us: int) -> CohortState:
    """Return the state of one cohort at a later moment, in the water that it is in; an earlier moment changes nothing.

    In water that nobody has measured what they are used to becomes doubtful with its settling time, and unknown after a day.
    """
    updated_at_us = int(state.updated_at_us[0])
    if not 0 < updated_at_us < at_us:
        return state
    elapsed_s = (at_us - updated_at_us) / MICROSECONDS_PER_SECOND
    if np.isnan(state.osmolality[0]):
        unseen_s = elapsed_s + float(state.pending_s[0])
        if unseen_s > GapRule().unknown_after_s:
            return CohortState.unknown(1, at_us=at_us)
        settling_h = np.maximum(figures.tau_up, figures.tau_down)
        doubt = SPREAD_MOSM_KG * -np.expm1(-unseen_s / 3600.0 / settling_h)
        return replace(
            state,
            uncertainty=np.hypot(state.uncertainty, np.nan_to_num(doubt, nan=SPREAD_MOSM_KG)),
            pending_s=np.zeros(1),
            updated_at_us=np.array([at_us], dtype=np.int64),
        )
    after, _ = advance(
        figures,
        state,
        osmolality_mOsm_kg=state.osmolality,
        temperature_degC=state.temperature,
        elapsed_s=np.array([elapsed_s]),
    )
    return replace(after, updated_at_us=np.array([at_us], dtype=np.int64))


def put_into(
    figures: StageArrays, state: CohortState, *, at_us: int, water: tuple[float, float], record: WaterRecord
) -> CohortState:
    """Return the state of one cohort that came into other water at *at_us*, after all that was measured there since.

    Parameters
    ----------
    figures : StageArrays
        Of its stage, one element.
    state : CohortState
        When it came, one element.
    at_us : int
        [us UTC]
    water : tuple of (float, float)
        Osmolality and temperature there when it came; NaN where nobody measured. [mOsm/kg], [degC]
    record : WaterRecord
        What was measured there after that.
    """
    moved = replace(
        state,
        osmolality=np.array([water[0]]),
        # Without a thermometer there the warmth that they are used to is the best guess.
        temperature=np.array([state.temperature[0] if np.isnan(water[1]) else water[1]]),
        pending_s=np.zeros(1),
        updated_at_us=np.array([at_us], dtype=np.int64),
    )
    times = record.measured_at_us
    if not times.size:
        return moved
    after, _ = advance_series(
        figures,
        moved,
        times_us=times,
        osmolality_mOsm_kg=record.osmolality_mOsm_kg,
        temperature_degC=record.temperature_degC,
    )
    return after


def exposure_from_strain(strain: float, *, steepness: float) -> float:
    """Return the exposure behind a recorded exposure strain, the inverse of `analysis.animal.strains.exposure_strain`; NaN from 1 on."""
    at_danger = math.pow(DANGER_LOSS / (1.0 - DANGER_LOSS), 1.0 / steepness)
    if strain <= DANGER_STRAIN:
        return at_danger * strain / DANGER_STRAIN
    share = (strain - DANGER_STRAIN) / (1.0 - DANGER_STRAIN)
    return at_danger + (1.0 - at_danger) * share if strain < 1.0 else math.nan


def farthest_record(
    measured_at_us: IntArray, osmolality: FloatArray, temperature: FloatArray, *, from_mOsm_kg: float
) -> WaterRecord:
    """Return a tank's readings, of all its sensors in the order of time, as a record of one reading a slice of `EVERY_US`.

    Of several readings of a slice the one farthest from *from_mOsm_kg* counts, as in the chain.
    """
    if not measured_at_us.size:
        return WaterRecord(measured_at_us, osmolality, temperature)
    distance = np.abs(osmolality - (0.0 if np.isnan(from_mOsm_kg) else from_mOsm_kg))
    slices = measured_at_us // EVERY_US
    order = np.lexsort((-distance, slices))
    _, first = np.unique(slices[order], return_index=True)
    chosen = order[first]
    return WaterRecord(measured_at_us[chosen], osmolality[chosen], temperature[chosen])
