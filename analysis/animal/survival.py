"""How many live through a transfer or an exposure, with its range, where the literature has the data."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from analysis.animal.constants import Constants, constants
from analysis.animal.exposure import exposure_steps, settling_factor
from analysis.animal.fallback_rules import osmolality_from_ppt
from analysis.animal.fallbacks import resolved
from analysis.animal.stage import Certainty, Figure, Stage, Supports
from analysis.animal.stage_arrays import StageArrays
from analysis.arrays import FloatArray
from analysis.errors import InvalidInputError

EXPOSURE_FACTOR = 4.0
"""Factor by which exposure is uncertain either way: about two of three predicted cases of VALIDATION.md lie within it."""
NOT_KNOWN = "not known"


@dataclass(frozen=True, slots=True)
class SurvivalEstimate:
    """Expected fraction alive above control, with its range.

    Parameters
    ----------
    alive, low, high : float
        Fraction alive, 0 to 1; its range for an exposure known within `EXPOSURE_FACTOR`.
    exposure : float
        Highest exposure on the way, 1 at the published median.
    certainty : Certainty
        The weakest of the figures that it rests on.
    sources : tuple of str
        Keys of those figures.
    """

    alive: float
    low: float
    high: float
    exposure: float
    certainty: Certainty
    sources: tuple[str, ...]


def alive_from_exposure(exposure: FloatArray, *, steepness: float) -> FloatArray:
    """Return the fraction alive above control from exposure: log-logistic, 0.5 at exposure 1."""
    return np.asarray(1.0 / (1.0 + np.maximum(exposure, 0.0) ** steepness))


def peak_exposure(
    figures: StageArrays,
    *,
    acclimated_mOsm_kg: FloatArray,
    hours: FloatArray,
    osmolality_mOsm_kg: FloatArray,
    temperature_degC: FloatArray,
    model: Constants | None = None,
) -> FloatArray:
    """Return the highest exposure that each of many schedules reaches.

    Parameters
    ----------
    figures : StageArrays
        One stage a schedule, shape (n,).
    acclimated_mOsm_kg : FloatArray
        What the animals are used to before, shape (n,). [mOsm/kg]
    hours, osmolality_mOsm_kg, temperature_degC : FloatArray
        Pieces of constant water, one row a piece, shape (pieces, n); a piece of 0 hours is skipped. [h], [mOsm/kg], [degC]
    model : Constants, optional
        Other constants than those in use.
    """
    chosen = model or constants()
    home = np.array(acclimated_mOsm_kg, dtype=np.float64)
    exposure = np.zeros(home.shape)
    peak = exposure.copy()
    for lasting, water, warmth in zip(hours, osmolality_mOsm_kg, temperature_degC, strict=True):
        steps = exposure_steps(
            figures, acclimated=home, water=water, temperature_degC=warmth, hours=lasting, model=chosen
        )
        peak = np.maximum(peak, exposure + steps.shock + steps.level)
        exposure = (exposure + steps.shock) * steps.kept + steps.level
        tau = np.where(water < home, figures.tau_down, figures.tau_up) * settling_factor(figures, warmth, chosen)
        home = water + (home - water) * np.exp(-lasting / tau)
    return peak


def survival_of_schedule(
    stage: Stage,
    *,
    acclimated_mOsm_kg: float,
    hours: FloatArray,
    osmolality_mOsm_kg: FloatArray,
    temperature_degC: FloatArray | None = None,
) -> SurvivalEstimate | None:
    """Return the expected survival of one schedule, or None where it is not known.

    Parameters
    ----------
    stage : Stage
        The animals.
    acclimated_mOsm_kg : float
        What they are used to before. [mOsm/kg]
    hours, osmolality_mOsm_kg, temperature_degC : FloatArray
        Pieces of constant water, shape (pieces,); no temperature: that of the figures. [h], [mOsm/kg], [degC]

    Returns
    -------
    SurvivalEstimate or None
        None where no time to death has been published for the stage on the side that the schedule goes to.

    Raises
    ------
    InvalidInputError
        If the pieces have different lengths, or a duration is negative.
    """
    water = np.asarray(osmolality_mOsm_kg, dtype=np.float64)
    lasting = np.asarray(hours, dtype=np.float64)
    warmth = (
        np.full(water.shape, np.nan) if temperature_degC is None else np.asarray(temperature_degC, dtype=np.float64)
    )
    if not water.shape == lasting.shape == warmth.shape:
        raise InvalidInputError(
            "schedule", found=(lasting.shape, water.shape, warmth.shape), allowed="pieces of one length"
        )
    if np.any(lasting < 0.0):
        raise InvalidInputError("hours", found=float(lasting.min()), allowed="0 or more hours")
    basis = survival_basis(
        stage, lowest=float(np.nanmin(water)), highest=float(np.nanmax(water)), home=acclimated_mOsm_kg
    )
    if basis is None:
        return None
    figures = StageArrays.from_stages([stage])
    exposure = float(
        peak_exposure(
            figures,
            acclimated_mOsm_kg=np.array([acclimated_mOsm_kg]),
            hours=lasting[:, None],
            osmolality_mOsm_kg=water[:, None],
            temperature_degC=warmth[:, None],
        )[0]
    )
    return estimate(exposure, steepness=figures.steepness, certainty=basis[0], sources=basis[1])


def estimate(exposure: float, *, steepness: float, certainty: Certainty, sources: tuple[str, ...]) -> SurvivalEstimate:
    """Return the estimate that belongs to an exposure, with its range."""
    alive, high, low = (
        float(alive_from_exposure(np.array(exposure * factor), steepness=steepness))
        for factor in (1.0, 1.0 / EXPOSURE_FACTOR, EXPOSURE_FACTOR)
    )
    return SurvivalEstimate(alive, low, high, exposure, certainty, sources)


_WEAKER = tuple(Certainty[name] for name in ("SITE", "LOOKED_UP", "DERIVED", "PROXY", "MEMORY", "ASSUMED"))


def survival_basis(
    stage: Stage, *, lowest: float, highest: float, home: float
) -> tuple[Certainty, tuple[str, ...]] | None:
    """Return how sure the times to death are, and their sources, on the sides that the water goes to; None: not known.

    Parameters
    ----------
    stage : Stage
        The animals.
    lowest, highest, home : float
        The water that they meet, and what they are used to. [mOsm/kg]
    """
    if not stage.supports & Supports.EXPOSURE:
        return None
    ready = resolved(stage)
    used: list[Figure] = []
    low_edge, high_edge = ready.value("optimal_low"), ready.value("optimal_high")
    is_low, is_high = lowest < home or lowest < low_edge, highest > home or highest > high_edge
    if not is_low and not is_high:
        used = [
            figure
            for side in ("low", "high")
            for figure in _published_harmless(stage, side, lowest=lowest, highest=highest)
        ]
    for side, is_used in (("low", is_low), ("high", is_high)):
        if not is_used:
            continue
        times = [ready.figures.get(f"{kind}_{side}_h") for kind in ("level", "jump")]
        timed = [figure for figure in times if figure is not None and figure.certainty is not Certainty.ASSUMED]
        if not timed:
            timed = _published_harmless(stage, side, lowest=lowest, highest=highest)
        if not timed:
            return None
        used += timed
    if not used:
        return None
    weakest = max((figure.certainty for figure in used), key=_WEAKER.index)
    return weakest, tuple(dict.fromkeys(name for figure in used for name in figure.sources))


def _published_harmless(stage: Stage, side: str, *, lowest: float, highest: float) -> list[Figure]:
    """Return the published figure that calls this water harmless: a transfer without loss, or the optimum."""
    for limit in ("harmless", "optimal"):
        figure = stage.figures.get(f"{limit}_{side}_ppt")
        if figure is None:
            continue
        edge = osmolality_from_ppt(figure.value)
        if (lowest >= edge) if side == "low" else (highest <= edge):
            return [figure]
    return []
