"""Which stage a cohort has come to, by day and temperature: a proposal that a person confirms.

Until it is confirmed the stricter of the two stages governs, side by side: PL1 to PL7 of whiteleg shrimp moves
the lethal limit from 16.8 to 3.0 ppt within a week (SAMOCHA1998).
"""

from __future__ import annotations

import dataclasses
import math
from dataclasses import dataclass
from types import MappingProxyType
from typing import TYPE_CHECKING

from analysis.animal.fallbacks import resolved
from analysis.animal.stage import AgeGate, Figure, Stage

if TYPE_CHECKING:
    from collections.abc import Mapping

DEVELOPMENT_Q10 = 2.0
"""Ratio of rates of development ten kelvin apart. Assumed (practice notes, from memory)."""
PACE_LIMITS = (0.4, 1.5)
"""Heat beyond the optimum does not hasten development without end; cold does not stop it. Assumed."""
US_PER_DAY = 86_400_000_000


@dataclass(frozen=True, slots=True)
class StageProposal:
    """What age and temperature propose.

    Parameters
    ----------
    stage : str
        Id of the proposed stage.
    age_d : float
        Age by the calendar. [d]
    developed_d : float
        Age at the pace of the optimal temperature. [d]
    since : str
        ``hatch`` or ``metamorphosis``.
    """

    stage: str
    age_d: float
    developed_d: float
    since: str


def pace(stage: Stage, temperature_degC: float) -> float:
    """Return how fast animals develop against the middle of their optimal temperature; 1 where not known."""
    reference = resolved(stage).value("tau_degC")
    if math.isnan(reference) or math.isnan(temperature_degC):
        return 1.0
    return float(min(PACE_LIMITS[1], max(PACE_LIMITS[0], DEVELOPMENT_Q10 ** ((temperature_degC - reference) / 10.0))))


def proposed_stage(
    current: Stage,
    stages: Mapping[str, Stage],
    *,
    now_us: int,
    hatched_at_us: int | None = None,
    metamorphosed_at_us: int | None = None,
    mean_temperature_degC: float = math.nan,
) -> StageProposal | None:
    """Return the stage that the cohort's age points to, or None where no gate of the species is in days.

    Parameters
    ----------
    current : Stage
        The confirmed stage.
    stages : Mapping of str to Stage
        The tables.
    now_us, hatched_at_us, metamorphosed_at_us : int
        Times; an age is only counted from a known date. [us]
    mean_temperature_degC : float
        Of the cohort's life so far; NaN: the calendar alone. [degC]
    """
    species = current.id.split("/", 1)[0] + "/"
    since = {"hatch": hatched_at_us, "metamorphosis": metamorphosed_at_us}
    best: StageProposal | None = None
    for stage in stages.values():
        if not stage.id.startswith(species) or stage.age is None:
            continue
        start = since[stage.age.since]
        if start is None or now_us < start:
            continue
        age = (now_us - start) / US_PER_DAY
        developed = age * pace(current, mean_temperature_degC)
        if developed >= stage.age.from_d and (best is None or stage.age.from_d > _gate(stages[best.stage]).from_d):
            best = StageProposal(stage.id, age, developed, stage.age.since)
    return best


def _gate(stage: Stage) -> AgeGate:
    return stage.age or AgeGate("hatch", -math.inf, math.inf)


def governing_stage(confirmed: Stage, proposed: Stage) -> Stage:
    """Return a stage that holds, on each side of the salinity and of the temperature axis, the stricter of the two.

    Its id is that of the confirmed stage: a proposal changes no limit to the better by itself.
    """
    if confirmed is proposed:
        return confirmed
    figures: dict[str, Figure] = {key: figure for key, figure in confirmed.figures.items() if not _side(key)}
    for unit, suffix in (("ppt", ""), ("degC", "_degC")):
        for side in ("low", "high"):
            chosen = _stricter(confirmed, proposed, side=side, suffix=suffix)
            figures |= {key: figure for key, figure in chosen.figures.items() if _side(key) == (side, unit)}
    return dataclasses.replace(confirmed, figures=MappingProxyType(figures))


def _side(key: str) -> tuple[str, str] | None:
    """Return side and axis of a figure's key, None for one that has no side."""
    side = "low" if "_low" in key else "high" if "_high" in key else ""
    if not side:
        return None
    is_warmth = key.endswith("_degC") and key.split("_")[0] in ("lethal", "tolerable", "optimal")
    return side, "degC" if is_warmth and not key.startswith("direct") else "ppt"


def _stricter(confirmed: Stage, proposed: Stage, *, side: str, suffix: str) -> Stage:
    """Return the stage with the narrower limit; one that has no figure on this side is the stricter to believe less."""
    sign = 1.0 if side == "low" else -1.0
    limits = []
    for stage in (confirmed, proposed):
        ready = resolved(stage)
        names = (f"tolerable_{side}{suffix}", f"level_{side}" if not suffix else f"lethal_{side}{suffix}")
        known = [ready.value(name) * sign for name in names if not math.isnan(ready.value(name))]
        limits.append(tuple(known) if known else (-math.inf,))
    return proposed if limits[1] > limits[0] else confirmed
