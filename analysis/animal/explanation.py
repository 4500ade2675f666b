"""The stress in one sentence that a hatchery hand understands, and which way water moves."""

from __future__ import annotations

import math

from analysis.animal.strains import BAND_WORDS, Band, Driver

GAP_WORTH_SAYING_MOSM_KG = 30.0

_REASONS = {
    Driver.NONE: "the water suits them",
    Driver.RANGE: "the water itself is {side} than they like",
    Driver.CHANGE: "the water is {step} than what they are used to",
    Driver.EXPOSURE: "they have been in water that harms them for too long",
    Driver.TEMPERATURE: "the temperature strains them",
}


def one_sentence(
    *,
    band: Band,
    driver: Driver,
    water_mOsm_kg: float,
    acclimated_mOsm_kg: float = math.nan,
    optimal_low_mOsm_kg: float = math.nan,
    gap_mOsm_kg: float = math.nan,
) -> str:
    """Return what the stress is and why, and which way water moves, in one sentence.

    Parameters
    ----------
    band, driver : Band, Driver
        From `analysis.animal.stress`.
    water_mOsm_kg, acclimated_mOsm_kg, optimal_low_mOsm_kg : float
        The water, what the animals are used to, and the fresh edge of the optimum. [mOsm/kg]
    gap_mOsm_kg : float
        Body fluid minus water; NaN: not known, and nothing is said of it. [mOsm/kg]
    """
    if band is Band.UNKNOWN:
        return "Not known: too little is published about these animals, or about what they are used to."
    side = "fresher" if water_mOsm_kg < optimal_low_mOsm_kg else "saltier"
    step = "much fresher" if water_mOsm_kg < acclimated_mOsm_kg else "much saltier"
    reason = _REASONS[driver].format(side=side, step=step)
    return f"{BAND_WORDS[band].capitalize()}: {reason}{movement(gap_mOsm_kg)}."


def movement(gap_mOsm_kg: float) -> str:
    """Return which way water moves through gills and skin, as a clause; empty where it is not known or slight."""
    if math.isnan(gap_mOsm_kg) or abs(gap_mOsm_kg) < GAP_WORTH_SAYING_MOSM_KG:
        return ""
    if gap_mOsm_kg > 0.0:
        return f", and their bodies take up water (body {gap_mOsm_kg:.0f} mOsm/kg above the water)"
    return f", and their bodies lose water (body {-gap_mOsm_kg:.0f} mOsm/kg below the water)"
