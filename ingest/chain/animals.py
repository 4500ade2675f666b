"""The animals in the tanks as arrays: stages, tolerated salinities, and what the water does to them."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from analysis.animal.fallbacks import resolved
from analysis.animal.stage import Certainty
from analysis.animal.tables import load

if TYPE_CHECKING:
    from collections.abc import Mapping

    from analysis.animal.stage import Stage
    from analysis.arrays import BoolArray, FloatArray
    from analysis.water.properties import WaterKind
    from ingest.site.models import Site

LARVAL_WORDS = frozenset(
    {
        "egg",
        "embryo",
        "nauplius",
        "zoea",
        "mysis",
        "larva",
        "megalopa",
        "phyllosoma",
        "trochophore",
        "veliger",
        "alevin",
    }
)
"""Words in a stage's id that make its animals larvae for the alarm band. Common practice."""


@dataclass(frozen=True, slots=True)
class AnimalRoster:
    """The animals of every tank, one entry a tank in the order of the site file.

    Attributes
    ----------
    stages : tuple of Stage or None
        None where no animals are.
    is_larva : ndarray of bool
    tolerable_salinity : ndarray of float64, shape (tanks, 2)
        Lowest and highest salinity that a published figure calls tolerable, in the tank's own salinity; NaN where there is none.
        Assumed figures are left out: a limit that nobody has measured wakes nobody.
    """

    stages: tuple[Stage | None, ...]
    is_larva: BoolArray
    tolerable_salinity: FloatArray


def animal_roster(site: Site, kinds: Mapping[str, WaterKind], animals_in: Mapping[str, str]) -> AnimalRoster:
    """Return the animals of every tank.

    Parameters
    ----------
    site : Site
    kinds : mapping of str to WaterKind
        Every kind of water that the site names.
    animals_in : mapping of str to str
        ``genus-species/stage`` by the tank's id; an animal that no table knows counts as no figures.
    """
    known = load()
    stages = tuple(known.get(animals_in.get(tank.id, "")) for tank in site.tanks)
    limits = [_tolerable(stage, kinds[tank.water]) for stage, tank in zip(stages, site.tanks, strict=True)]
    return AnimalRoster(
        stages=stages,
        is_larva=np.array([is_larva(stage) for stage in stages], dtype=np.bool_),
        tolerable_salinity=np.array(limits, dtype=np.float64).reshape(-1, 2),
    )


def is_larva(stage: Stage | None) -> bool:
    """Return whether the animals of *stage* are larvae."""
    return stage is not None and not LARVAL_WORDS.isdisjoint(stage.id.partition("/")[2].split("-"))


def _tolerable(stage: Stage | None, kind: WaterKind) -> tuple[float, float]:
    if stage is None:
        return np.nan, np.nan
    figures = resolved(stage).figures
    found = []
    for key in ("tolerable_low", "tolerable_high"):
        figure = figures.get(key)
        is_measured = figure is not None and figure.certainty is not Certainty.ASSUMED
        found.append(float(kind.salinity_from_osmolality(figure.value)) if is_measured and figure else np.nan)
    return found[0], found[1]
