"""The kinds of water a site names, each made once."""

from __future__ import annotations

from typing import TYPE_CHECKING

from analysis.water.properties import Seawater, WaterKind
from analysis.water.sodium_chloride_water import SodiumChlorideWater
from ingest.site.waters import SEAWATER, SODIUM_CHLORIDE

if TYPE_CHECKING:
    from collections.abc import Mapping

    from ingest.site.models import Site


def kinds_of(site: Site) -> Mapping[str, WaterKind]:
    """Return every kind of water that the site's tanks and source waters name, by its word in the site file; seawater first."""
    named = {tank.water for tank in site.tanks} | {water.kind for water in site.source_waters}
    kinds: dict[str, WaterKind] = {SEAWATER: Seawater()}
    if SODIUM_CHLORIDE in named:
        kinds[SODIUM_CHLORIDE] = SodiumChlorideWater()
    return kinds
