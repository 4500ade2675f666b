"""The constants of the stress model that are not figures of a stage: fitted, published or assumed, each with its reason."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

from analysis.animal.stage import Certainty


@dataclass(frozen=True, slots=True)
class Constants:
    """What all stages share. Fitted members are fitted on published outcomes, see VALIDATION.md.

    Parameters
    ----------
    decade_mOsm_kg : float
        Further osmolality beyond the median lethal level that shortens the time to death ten times. Fitted;
        it lies at the upper end of the published two-point figures (snow crab zoeae, CHIONOECETES).
    decade_fish_mOsm_kg : float
        The same for fish. Fitted.
    decade_timer_mOsm_kg : float
        The same for animals that shut their valves. Derived: Perna perna, 191 h at 0 and 335 h at 10 ppt (HICKS2000).
    steepness : float
        Slope of the log-logistic survival over exposure: alive = 1 / (1 + E**steepness). Derived: about 10 within
        one test (two levels at one time: KAU1988, BRINGOLF2005, HOSSAIN2021), but stocks and studies differ by a
        factor of two to three in exposure, and for a stock that nobody tested about 3 holds.
    shock_fraction : float
        Part of the direct lethal jump below which a jump adds no exposure. Fitted.
    incipient_fraction : float
        How far from the tolerable limit toward the median lethal level deaths begin. Fitted.
    cold_mOsm_kg_K : float
        How far the tolerated range narrows per kelvin of cold beyond the onset. Fitted. Heat quickens settling,
        death and repair, but no narrowing by heat could be found in the outcomes.
    cold_onset_K : float
        How far below the optimal temperature cold begins to narrow the range: tilapia stand at 20 degC what
        they stand at 25, but not at 15; trout at 8 degC, but not at 1. Fitted.
    q10 : float
        Ratio of the rates of settling, of exposure and of repair ten kelvin apart: cold slows all three.
        Derived: channel catfish, 48 h at 27 degC and over 13 d at 9 degC, at least 2.8 (CATFISH_PLASMA).
    repair_h : float
        Time constant with which exposure fades inside the tolerated range. Assumed.
    """

    decade_mOsm_kg: float = 740.0
    decade_fish_mOsm_kg: float = 358.0
    decade_timer_mOsm_kg: float = 1200.0
    steepness: float = 3.0
    shock_fraction: float = 0.645
    incipient_fraction: float = 0.382
    cold_mOsm_kg_K: float = 47.0
    cold_onset_K: float = 5.0
    q10: float = 2.8
    repair_h: float = 48.0


@dataclass(frozen=True, slots=True)
class GroupDefaults:
    """Settling times of a kind of animal that has no figure of its own."""

    tau_h: float
    tau_internal_h: float
    slope: float
    certainty: Certainty
    reason: str


GROUP_DEFAULTS = {
    "penaeid": GroupDefaults(
        16.0, 6.0, 0.35, Certainty.ASSUMED,
        "settles within a day to five days (P. chinensis 120 h an upper bound, P. monodon one day after moult); slope 0.2-0.5 in shrimps",
    ),
    "decapod": GroupDefaults(
        24.0, 8.0, 0.4, Certainty.ASSUMED, "Scylla and Portunus settle by 72 h, a third of it; slope as in shrimps",
    ),
    "euryhaline-fish": GroupDefaults(
        24.0, 6.0, 0.05, Certainty.ASSUMED, "tilapia, snapper, flounder settle in 2-8 d, near a third of it; slope 0.02-0.1 in bony fish",
    ),
    "freshwater-fish": GroupDefaults(
        16.0, 6.0, 0.1, Certainty.ASSUMED, "channel catfish settle in 48 h at 27 degC, a third of it; slope at the upper end of bony fish",
    ),
    "bivalve": GroupDefaults(
        24.0, 16.0, 1.0, Certainty.ASSUMED, "blood follows the water in 48 h, the limits move over days (MEPS_CVIRG, ATRINA)",
    ),
    "conformer": GroupDefaults(
        24.0, 0.5, 1.0, Certainty.ASSUMED, "blood follows the water in about 1 h, the limits move over days (ABALONE_DIV)",
    ),
    "larval-conformer": GroupDefaults(
        12.0, 1.0, 1.0, Certainty.ASSUMED, "small body, no regulation; acclimated larvae reach further (KASHENKO2000): half of the adults",
    ),
    "live-feed": GroupDefaults(
        2.7, 2.7, 1.0, Certainty.ASSUMED, "rotifers recover in about 8 h, a third of it; rotifer fluid follows the water",
    ),
}  # fmt: skip
"""Defaults by kind of animal; the figures behind the reasons are in the species tables and in VALIDATION.md."""

TIMER_GROUPS = frozenset({"bivalve"})
"""Kinds of animal that shut their valves: exposure runs as a timer from a threshold, not along a curve."""

FISH_GROUPS = frozenset({"euryhaline-fish", "freshwater-fish"})

CONFORMER_GROUPS = frozenset({"bivalve", "conformer", "larval-conformer"})


@lru_cache(maxsize=1)
def constants() -> Constants:
    """Return the constants in use."""
    return Constants()
