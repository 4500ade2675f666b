"""Un-ionised ammonia in the water that travels with the animals, and the hours it leaves."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import numpy as np

from analysis.errors import InvalidInputError

if TYPE_CHECKING:
    from numpy.typing import ArrayLike

    from analysis.arrays import FloatArray

CELSIUS_ZERO_K: Final = 273.15
FRESH_BELOW_SALINITY: Final = 0.5
"""Below it the fresh-water relation is used, above it the one for sea water; at 25 degC they differ by 0.007."""

LEAST_HOURS: Final = 1.0 / 60.0


def ammonium_pka(*, salinity: ArrayLike, temperature_degC: ArrayLike) -> FloatArray:
    """Return the stoichiometric pKa of ammonium.

    Sea water and its dilutions: pKa = 10.0423 - 0.0315536 t + 0.003071 S [1]_; fresh water (salinity below
    0.5): pKa = 0.09018 + 2729.92 / T [2]_.

    Parameters
    ----------
    salinity : array_like
        Practical salinity. [1]
    temperature_degC : array_like
        [degC]

    Returns
    -------
    ndarray of float64
        [1]

    References
    ----------
    .. [1] Bell, Johnson, Jickells and Liss 2008, Environ. Chem. 5, 258 (corrigendum to 4, 183).
    .. [2] Emerson, Russo, Lund and Thurston 1975, J. Fish. Res. Board Can. 32, 2379.
    """
    salt = np.asarray(salinity, dtype=np.float64)
    temperature = np.asarray(temperature_degC, dtype=np.float64)
    sea = 10.0423 - 0.0315536 * temperature + 0.003071 * salt
    fresh = 0.09018 + 2729.92 / (temperature + CELSIUS_ZERO_K)
    return np.where(salt < FRESH_BELOW_SALINITY, fresh, sea)


def unionised_ammonia_fraction(*, ph: ArrayLike, salinity: ArrayLike, temperature_degC: ArrayLike) -> FloatArray:
    """Return the share of total ammonia that is un-ionised (the toxic form). [1]

    Parameters
    ----------
    ph : array_like
        As a glass electrode reads it. [1]
    salinity : array_like
        Practical salinity. [1]
    temperature_degC : array_like
        [degC]
    """
    pka = ammonium_pka(salinity=salinity, temperature_degC=temperature_degC)
    return np.asarray(1.0 / (1.0 + 10.0 ** (pka - np.asarray(ph, dtype=np.float64))))


@dataclass(frozen=True, slots=True)
class PackedWater:
    """The water in which animals travelled, as found on arrival.

    Parameters
    ----------
    hours_packed : float
        Since the bag or tank was closed. [h]
    total_ammonia_mg_L : float
        Total ammonia nitrogen measured now; NaN where not measured. [mg N/L]
    ph : float
        Measured now; NaN where not measured.
    oxygen_mg_L : float
        Measured now; NaN where not measured. [mg/L]
    animals_per_L : float
        Packing density; NaN where not known.
    is_aerated : bool
        True once the water is aerated: carbon dioxide leaves and the pH rises.
    """

    hours_packed: float
    total_ammonia_mg_L: float = float("nan")
    ph: float = float("nan")
    oxygen_mg_L: float = float("nan")
    animals_per_L: float = float("nan")
    is_aerated: bool = False

    def __post_init__(self) -> None:
        if not self.hours_packed >= 0.0:
            raise InvalidInputError("hours packed", found=self.hours_packed, allowed="0 h or more")


@dataclass(frozen=True, slots=True)
class PackedCaps:
    """What the packed water may reach before the animals must leave it."""

    unionised_ammonia_mg_L: float = 0.1
    oxygen_mg_L: float = 4.0
    animals_per_L: float = 500.0
    hours_packed: float = 24.0


CAPS_SOURCE: Final = {
    "un-ionised ammonia": "common practice; 0.13 mg N/L for Penaeus monodon postlarvae in Chin and Chen 1987, "
    "Aquaculture 66, 247 (from memory)",
    "oxygen": "common practice (from memory)",
    "density": "common practice: 300-500 postlarvae a litre during acclimation (from memory)",
    "hours packed": "common practice (from memory)",
}


def unionised_ammonia_mg_L(water: PackedWater, *, salinity: float, temperature_degC: float, ph: float) -> float:
    """Return un-ionised ammonia nitrogen at *ph*, with the total ammonia found now. [mg N/L]"""
    share = float(unionised_ammonia_fraction(ph=ph, salinity=salinity, temperature_degC=temperature_degC))
    return water.total_ammonia_mg_L * share


def hours_until_ammonia_cap(
    water: PackedWater, *, salinity: float, temperature_degC: float, ph: float, cap_mg_L: float
) -> float:
    """Return the hours until un-ionised ammonia reaches its cap if nothing is exchanged.

    Total ammonia is taken to go on rising as fast as it has since packing (first-order chemistry of the bag:
    the animals' excretion is steady over hours). The exchange of water itself lowers it; that is left out, so
    the answer errs to the safe side.

    Parameters
    ----------
    water : PackedWater
        As found.
    salinity, temperature_degC, ph : float
        Conditions during the acclimation; pH is the higher of the bag's and the receiving water's.
    cap_mg_L : float
        [mg N/L un-ionised]

    Returns
    -------
    float
        0 when it is reached already; infinite when nothing accumulates; NaN when ammonia or pH is not known.
        [h]
    """
    if not np.isfinite(water.total_ammonia_mg_L) or not np.isfinite(ph):
        return float("nan")
    share = float(unionised_ammonia_fraction(ph=ph, salinity=salinity, temperature_degC=temperature_degC))
    highest_total = cap_mg_L / share
    if water.total_ammonia_mg_L >= highest_total:
        return 0.0
    rise_per_h = water.total_ammonia_mg_L / max(water.hours_packed, LEAST_HOURS)
    return float("inf") if rise_per_h == 0.0 else (highest_total - water.total_ammonia_mg_L) / rise_per_h


@dataclass(frozen=True, slots=True)
class TimeLeft:
    """How long the packed water still serves, and what ends it.

    Parameters
    ----------
    hours : float
        Infinite where nothing known limits it; NaN where nothing is known. [h]
    reason : str
        What ends it, in words.
    source : str
        Where the cap comes from.
    unknown : tuple of str
        What was not measured, so not judged.
    """

    hours: float
    reason: str
    source: str
    unknown: tuple[str, ...]


def packed_time_left(
    water: PackedWater,
    *,
    salinity: float,
    temperature_degC: float,
    receiving_ph: float = float("nan"),
    caps: PackedCaps | None = None,
) -> TimeLeft:
    """Return how many hours the packed water still serves.

    Parameters
    ----------
    water : PackedWater
        As found on arrival.
    salinity, temperature_degC : float
        Of the bag; the higher temperature of bag and receiving water is the safe choice.
    receiving_ph : float
        Of the water that will be added: aeration and exchange bring the bag's low pH up to it, and with it
        the toxic share of the ammonia.
    caps : PackedCaps, optional
        Limits other than the default ones.
    """
    caps = caps or PackedCaps()
    unknown: list[str] = []
    ends: list[tuple[float, str, str]] = []
    ph = _highest(water.ph, receiving_ph)
    ammonia_h = hours_until_ammonia_cap(
        water, salinity=salinity, temperature_degC=temperature_degC, ph=ph, cap_mg_L=caps.unionised_ammonia_mg_L
    )
    if np.isnan(ammonia_h):
        unknown.append("total ammonia or pH")
    else:
        words = f"un-ionised ammonia reaches {caps.unionised_ammonia_mg_L:g} mg N/L at pH {ph:.1f}"
        ends.append((ammonia_h, words, CAPS_SOURCE["un-ionised ammonia"]))
    if np.isnan(water.oxygen_mg_L):
        unknown.append("oxygen")
    elif water.oxygen_mg_L < caps.oxygen_mg_L and not water.is_aerated:
        ends.append((0.0, f"oxygen is below {caps.oxygen_mg_L:g} mg/L", CAPS_SOURCE["oxygen"]))
    if np.isnan(water.animals_per_L):
        unknown.append("density")
    elif water.animals_per_L > caps.animals_per_L:
        ends.append((0.0, f"more than {caps.animals_per_L:g} animals a litre", CAPS_SOURCE["density"]))
    if not water.is_aerated:
        left = max(0.0, caps.hours_packed - water.hours_packed)
        ends.append((left, f"{caps.hours_packed:g} h in a closed bag", CAPS_SOURCE["hours packed"]))
    if not ends:
        return TimeLeft(float("inf"), "nothing known limits it", "", tuple(unknown))
    hours, reason, source = min(ends, key=lambda end: end[0])
    return TimeLeft(hours, reason, source, tuple(unknown))


def _highest(first: float, second: float) -> float:
    known = [value for value in (first, second) if np.isfinite(value)]
    return max(known) if known else float("nan")
