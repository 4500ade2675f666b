"""What the stress figure does not see: the kind of water, oxygen, ammonia, nitrite, eggs, live feed."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from analysis.acclimation.ammonia import unionised_ammonia_fraction
from analysis.errors import InvalidInputError
from analysis.water.oxygen import oxygen_solubility_mg_L
from analysis.water.seawater import (
    density_from_absolute_salinity,
    practical_salinity_from_reference_salinity,
    reference_salinity_from_practical_salinity,
)

if TYPE_CHECKING:
    from numpy.typing import ArrayLike

    from analysis.arrays import FloatArray

CHLORINITY_RATIO = 1.80655
"""S = 1.80655 Cl (UNESCO 1962 definition; BOYD_SAL1)."""
NITRITE_NITROGEN_SHARE = 14.007 / 46.005
"""Nitrogen in nitrite, by mass (IUPAC atomic masses)."""
CHLORIDE_NITRITE_MIN = 10.0
"""Chloride to nitrite that protects freshwater fish, by mass (NITRITE_SRAC)."""
CHLORIDE_MIN_MG_L = 100.0
"""Chloride that should be there in any case. [mg/L] (NITRITE_SRAC)"""


def osmotic_part_only(kind_of_water: str, *, is_seawater_like: bool = False) -> bool:
    """Return True where the stress is the osmotic part only: water not shown to be seawater-like in K, Mg and Ca.

    Parameters
    ----------
    kind_of_water : str
        Name of the water kind; ``seawater`` and its dilutions need no proof.
    is_seawater_like : bool
        Whether a laboratory analysis showed K, Mg and Ca in the proportions of sea water.
    """
    return kind_of_water != "seawater" and not is_seawater_like


def oxygen_saturation_percent(
    oxygen_mg_L: ArrayLike,
    *,
    practical_salinity: ArrayLike,
    temperature_degC: ArrayLike,
    air_pressure_kPa: ArrayLike = 101.325,
) -> FloatArray:
    """Return dissolved oxygen as a share of what this water holds in balance with air. NaN in, NaN out. [%]

    Parameters
    ----------
    oxygen_mg_L : array_like
        Measured; negative values give NaN. [mg/L]
    practical_salinity, temperature_degC, air_pressure_kPa : array_like
        Of the tank itself. [1], [degC], [kPa]
    """
    measured = np.asarray(oxygen_mg_L, dtype=np.float64)
    full = oxygen_solubility_mg_L(
        practical_salinity, temperature_degC=temperature_degC, air_pressure_kPa=air_pressure_kPa
    )
    return np.asarray(np.where(measured >= 0.0, 100.0 * measured / full, np.nan))


def unionised_ammonia_mg_L(
    total_ammonia_nitrogen_mg_L: ArrayLike, *, ph: ArrayLike, practical_salinity: ArrayLike, temperature_degC: ArrayLike
) -> FloatArray:
    """Return the toxic, un-ionised part of total ammonia nitrogen at the tank's own salinity, pH and temperature.

    Bell and others 2008 in salt water, Emerson and others 1975 in fresh; pH on the scale of a glass electrode.
    NaN in, NaN out. [mg/L as N]
    """
    share = unionised_ammonia_fraction(ph=ph, salinity=practical_salinity, temperature_degC=temperature_degC)
    return np.asarray(np.asarray(total_ammonia_nitrogen_mg_L, dtype=np.float64) * share)


def chloride_mg_L(practical_salinity: ArrayLike, *, temperature_degC: ArrayLike) -> FloatArray:
    """Return chloride of sea water or its dilution by S = 1.80655 Cl and its density. [mg/L]"""
    salinity = np.asarray(practical_salinity, dtype=np.float64)
    absolute = reference_salinity_from_practical_salinity(salinity)
    density = density_from_absolute_salinity(absolute, temperature_degC=temperature_degC)
    return np.asarray(salinity / CHLORINITY_RATIO * density)


@dataclass(frozen=True, slots=True)
class NitriteVerdict:
    """Chloride against nitrite.

    Parameters
    ----------
    ratio : float
        Chloride to nitrite by mass, infinite without nitrite.
    is_protected : bool
        Whether there is at least `CHLORIDE_NITRITE_MIN` times as much and at least `CHLORIDE_MIN_MG_L`.
    chloride_short_mg_L : float
        Chloride to be added, 0 where enough. [mg/L]
    """

    ratio: float
    is_protected: bool
    chloride_short_mg_L: float


def nitrite_verdict(nitrite_nitrogen_mg_L: float, *, chloride_mg_L: float) -> NitriteVerdict:
    """Return whether chloride protects freshwater fish from this nitrite (NITRITE_SRAC).

    Raises
    ------
    InvalidInputError
        If a concentration is negative or not a number.
    """
    for name, value in (("nitrite_nitrogen_mg_L", nitrite_nitrogen_mg_L), ("chloride_mg_L", chloride_mg_L)):
        if not value >= 0.0:
            raise InvalidInputError(name, found=value, allowed="0 or more mg/L")
    nitrite = nitrite_nitrogen_mg_L / NITRITE_NITROGEN_SHARE
    wanted = max(CHLORIDE_MIN_MG_L, CHLORIDE_NITRITE_MIN * nitrite)
    ratio = chloride_mg_L / nitrite if nitrite > 0.0 else math.inf
    return NitriteVerdict(ratio, chloride_mg_L >= wanted, max(0.0, wanted - chloride_mg_L))


def neutral_buoyancy_salinity(egg_density_kg_m3: float, *, temperature_degC: float) -> float:
    """Return the practical salinity in which eggs of this density float at rest; NaN where there is none up to 42.

    Egg and sea water expand alike, so the salinity hardly moves with temperature (Sundby and Kristiansen 2015):
    give the temperature at which the density was measured.

    Raises
    ------
    InvalidInputError
        If the density is no density of an egg (900 to 1100 kg/m3).
    """
    if not 900.0 <= egg_density_kg_m3 <= 1100.0:
        raise InvalidInputError("egg density", found=egg_density_kg_m3, allowed="900 to 1100 kg/m3")
    absolute = np.linspace(0.0, 42.2, 4221)
    density = density_from_absolute_salinity(absolute, temperature_degC=temperature_degC)
    found = float(np.interp(egg_density_kg_m3, density, absolute, left=np.nan, right=np.nan))
    return float(practical_salinity_from_reference_salinity(found))


@dataclass(frozen=True, slots=True)
class FeedTransfer:
    """What a published transfer did to the swimming of live feed."""

    feed: str
    from_ppt: float
    to_ppt: float
    mobile: float
    source: str
    note: str


FEED_TRANSFERS = (
    FeedTransfer("rotifer", 20.0, 30.0, 0.95, "OIE1993", "slight loss of motion, read as 0.95"),
    FeedTransfer("rotifer", 20.0, 15.0, 0.50, "OIE1993", "half mobile, 20 degC"),
    FeedTransfer("rotifer", 20.0, 5.0, 0.05, "OIE1993", "20 degC"),
)
"""Published transfers; Fielder 2000: from 35 downward half swim after 1 h and three quarters after 6 h."""
FEED_WARNS_BELOW = 0.9
STEP_WITHOUT_FIGURE_PPT = 5.0


@dataclass(frozen=True, slots=True)
class FeedWarning:
    """A feed transfer that may stop the feed from swimming; the feed sinks and is lost, it need not be dead."""

    mobile: float
    source: str
    sentence: str


def feed_transfer_warning(feed: str, *, from_ppt: float, to_ppt: float) -> FeedWarning | None:
    """Return a warning where a direct transfer of live feed is known, or may be feared, to stop its swimming.

    The fraction mobile is read off between the published transfers of rotifers by the size of the step, down and
    up apart. Other feeds: no figure, a warning from a step of 5 ppt on.

    Returns
    -------
    FeedWarning or None
        None where the step is small or published as nearly harmless.
    """
    step = to_ppt - from_ppt
    if math.isnan(step) or step == 0.0:
        return None
    same_way = [row for row in FEED_TRANSFERS if row.feed == feed and (row.to_ppt - row.from_ppt) * step > 0.0]
    if not same_way:
        if abs(step) < STEP_WITHOUT_FIGURE_PPT:
            return None
        return FeedWarning(
            math.nan,
            "",
            f"No figure for {feed}: a step of {abs(step):.3g} ppt may stop it swimming; try a little first.",
        )
    sizes = [0.0, *sorted(abs(row.to_ppt - row.from_ppt) for row in same_way)]
    mobiles = [1.0, *(row.mobile for row in sorted(same_way, key=lambda row: abs(row.to_ppt - row.from_ppt)))]
    mobile = float(np.interp(abs(step), sizes, mobiles))
    if mobile >= FEED_WARNS_BELOW:
        return None
    way = f"{from_ppt:g} to {to_ppt:g} ppt"
    sentence = f"About {mobile:.0%} of the {feed}s keep swimming after {way}; acclimate them 6 h or more (FIELDER2000)."
    return FeedWarning(mobile, same_way[0].source, sentence)
