"""What stands beside the stress because the stress does not see it: oxygen, ammonia, nitrite, ions; and where it is a part only.

The further channels of a tank's sensors go by their names in the site file: `oxygen` [mg/L], `ph`, `ammonia` (total ammonia nitrogen)
[mg/L], `nitrite` (nitrite nitrogen) [mg/L].
"""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from analysis.animal.context import (
    chloride_mg_L,
    nitrite_verdict,
    osmotic_part_only,
    oxygen_saturation_percent,
    unionised_ammonia_mg_L,
)
from dashboard.browser.sights import Beside

if TYPE_CHECKING:
    from collections.abc import Mapping

    from dashboard.browser.sights import SensorSight, ShortOf
    from ingest.store.queries import LatestChannel

MILLIGRAMS = "mg/L"


def beside(
    shown: SensorSight | None,
    *,
    water: str,
    units: Mapping[str, str],
    channels: Mapping[str, LatestChannel],
    short_of: tuple[ShortOf, ...] = (),
) -> Beside:
    """Return what stands beside the stress of one tank.

    Parameters
    ----------
    shown : SensorSight or None
        The sensor that stands for the tank: its salinity and temperature are those of the water.
    water : str
        The tank's kind of water. In water that has no practical salinity its mass fraction stands for it (common practice).
    units : mapping of str to str
        The declared unit of each channel; one in another unit is left out.
    channels : mapping of str to LatestChannel
        The newest value of each channel of the tank's sensors.
    short_of : tuple of ShortOf
        What the water's laboratory analysis is short of.
    """
    is_part_only = osmotic_part_only(water)
    if shown is None or not (math.isfinite(shown.salinity) and math.isfinite(shown.temperature_degC)):
        return Beside(is_osmotic_part_only=is_part_only, short_of=short_of)
    salinity, temperature = shown.salinity, shown.temperature_degC

    def value(name: str, unit: str) -> float:
        known = channels.get(name)
        is_usable = known is not None and known.value is not None and units.get(name) == unit
        return float(known.value) if is_usable and known is not None and known.value is not None else math.nan

    oxygen, ammonia, nitrite, ph = (
        value("oxygen", MILLIGRAMS),
        value("ammonia", MILLIGRAMS),
        value("nitrite", MILLIGRAMS),
        value("ph", ""),
    )
    saturation = oxygen_saturation_percent(oxygen, practical_salinity=salinity, temperature_degC=temperature)
    toxic = unionised_ammonia_mg_L(ammonia, ph=ph, practical_salinity=salinity, temperature_degC=temperature)
    ratio = math.nan
    if math.isfinite(nitrite) and nitrite >= 0 and not is_part_only:
        chloride = float(chloride_mg_L(salinity, temperature_degC=temperature))
        ratio = nitrite_verdict(nitrite, chloride_mg_L=chloride).ratio
    return Beside(
        is_osmotic_part_only=is_part_only,
        oxygen_mg_L=oxygen,
        oxygen_saturation_percent=float(saturation),
        unionised_ammonia_mg_L=float(toxic),
        chloride_to_nitrite=ratio,
        short_of=short_of,
    )
