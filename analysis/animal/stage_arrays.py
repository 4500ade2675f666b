"""The figures of many stages as arrays, one element a tank, ready for the model."""

from __future__ import annotations

import dataclasses
import math
from dataclasses import dataclass, fields
from typing import TYPE_CHECKING, Any

import numpy as np

from analysis.animal.constants import FISH_GROUPS, Constants, constants
from analysis.animal.exposure import exposure_steps
from analysis.animal.fallbacks import Resolved, resolved
from analysis.animal.stage import Certainty

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    from analysis.animal.stage import Stage
    from analysis.arrays import BoolArray, FloatArray


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
        """Return the figures of *stages*, gaps filled by `analysis.animal.fallback_rules.RULES`.

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
    usual = model.decade_fish_mOsm_kg if stage.stage.group in FISH_GROUPS else model.decade_mOsm_kg
    row["decade"] = model.decade_timer_mOsm_kg if stage.is_timer else usual
    return row


def hours_to_median(fraction_alive: float, steepness: float) -> float:
    """Return by how much the median comes later than a moment at which *fraction_alive* lived; 1 for NaN or 0.5."""
    if math.isnan(fraction_alive):
        return 1.0
    return float((fraction_alive / (1.0 - fraction_alive)) ** (1.0 / steepness))


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
        for _ in range(30):
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
