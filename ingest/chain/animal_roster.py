"""Which animals are in which tank, as arrays: a row for each cohort, with the figures that govern it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from analysis.animal.ageing import governing_stage
from analysis.animal.fallbacks import resolved
from analysis.animal.osmoregulation import StageArrays
from analysis.animal.overrides import with_overrides
from analysis.animal.stage import Certainty
from analysis.animal.tables import load

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from analysis.animal.stage import Stage
    from analysis.arrays import BoolArray, FloatArray, IntArray
    from analysis.water.properties import WaterKind
    from ingest.site.models import Site

NO_ANIMALS = -1

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


class Stocked(NamedTuple):
    """A cohort in a tank: its id, ``genus-species/stage``, and the salinity it was used to when it came, NaN where not known.

    `proposed` is the stage to which its age points, until a person confirms one.
    """

    cohort: str
    animal: str
    used_to_salinity: float
    proposed: str | None = None


@dataclass(frozen=True, slots=True)
class AnimalRoster:
    """The animals of every tank.

    Attributes
    ----------
    stages : tuple of Stage or None
        One a tank: of several cohorts the stage of the one that came last; None where no animals are, or none that a table knows.
    is_larva : ndarray of bool, one a tank
        Whether larvae are among them.
    tolerable_salinity : ndarray of float64, shape (tanks, 2)
        Lowest and highest salinity that published figures call tolerable for all of them, in the tank's own salinity; NaN where
        there is none. Assumed figures are left out: a limit that nobody has measured wakes nobody.
    tanks : ndarray of int64
        Index of the tank of each row of `figures` and of the cohorts' state; rows of one tank stand together.
    first_row, row_count : ndarray of int64
        For each tank its first row (-1 where there is none) and how many it has.
    cohorts : tuple of str
        Id of the cohort of each row.
    row_of : mapping of str to int
        The row of each cohort.
    figures : StageArrays
    used_to_mOsm_kg : ndarray of float64
        What each row's animals were used to when they came; NaN where not known.
    """

    stages: tuple[Stage | None, ...]
    is_larva: BoolArray
    tolerable_salinity: FloatArray
    tanks: IntArray
    first_row: IntArray
    row_count: IntArray
    cohorts: tuple[str, ...]
    row_of: Mapping[str, int]
    figures: StageArrays
    used_to_mOsm_kg: FloatArray

    def rows_of(self, tank: int) -> range:
        """Return the rows of one tank."""
        first = int(self.first_row[tank])
        return range(first, first + int(self.row_count[tank]))


def known_stages(site: Site) -> Mapping[str, Stage]:
    """Return the packaged species tables with the site's own figures laid over them.

    Raises
    ------
    InvalidInputError
        If one of them is not what such a figure may be.
    """
    entries = [entry for override in site.species for entry in override.entries()]
    return with_overrides(load(), entries, where="species") if entries else load()


class OwnFigure(NamedTuple):
    """A figure of one animal that the site has set itself; `value` None: declared not known. `before` is what stood there, in words."""

    animal: str
    figure: str
    value: float | None
    before: str
    author: str
    reason: str


def own_figures(site: Site) -> tuple[OwnFigure, ...]:
    """Return the figures that the site has set itself, in the order of the site file."""
    packaged = load()
    found = []
    for override in site.species:
        stage = packaged.get(override.animal)
        for key, value in override.figures.items():
            before = None if stage is None else stage.figures.get(key)
            words = "" if before is None else f"{before.value:g} {before.unit} ({before.mark})"
            found.append(OwnFigure(override.animal, key, value, words, override.author, override.reason))
    return tuple(found)


def governing(stock: Stocked, stages: Mapping[str, Stage]) -> Stage | None:
    """Return the stage whose figures govern a cohort: the confirmed one, made stricter by one that its age proposes."""
    confirmed = stages.get(stock.animal)
    proposed = None if stock.proposed is None else stages.get(stock.proposed)
    return confirmed if confirmed is None or proposed is None else governing_stage(confirmed, proposed)


def animal_roster(
    site: Site,
    kinds: Mapping[str, WaterKind],
    stocked: Mapping[str, Sequence[Stocked]],
    stages: Mapping[str, Stage] | None = None,
) -> AnimalRoster:
    """Return the animals of every tank.

    Parameters
    ----------
    site : Site
    kinds : mapping of str to WaterKind
        Every kind of water that the site names.
    stocked : mapping of str to sequence of Stocked
        The cohorts in each tank, by the tank's id, in the order in which they came.
    stages : mapping of str to Stage, optional
        The species tables; by default those of the site (`known_stages`).
    """
    known = known_stages(site) if stages is None else stages
    tank_stages: list[Stage | None] = []
    limits: list[tuple[float, float]] = []
    tanks: list[int] = []
    rows: list[Stocked] = []
    row_stages: list[Stage] = []
    larval: list[bool] = []
    for index, tank in enumerate(site.tanks):
        here = [(stock, governing(stock, known)) for stock in stocked.get(tank.id, ())]
        found = [(stock, stage) for stock, stage in here if stage is not None]
        tank_stages.append(found[-1][1] if found else None)
        larval.append(any(is_larva(stage) for _, stage in found))
        limits.append(_tolerable([stage for _, stage in found]))
        tanks += [index] * len(found)
        rows += [stock for stock, _ in found]
        row_stages += [stage for _, stage in found]
    row_tanks = np.array(tanks, dtype=np.int64)
    count = np.bincount(row_tanks, minlength=len(site.tanks)).astype(np.int64)
    used_to = [
        float(kinds[site.tanks[index].water].osmolality_from_salinity(stock.used_to_salinity))
        for index, stock in zip(tanks, rows, strict=True)
    ]
    return AnimalRoster(
        stages=tuple(tank_stages),
        is_larva=np.array(larval, dtype=np.bool_),
        tolerable_salinity=_salinities(site, kinds, np.array(limits, dtype=np.float64).reshape(-1, 2)),
        tanks=row_tanks,
        first_row=np.where(count > 0, np.cumsum(count) - count, NO_ANIMALS),
        row_count=count,
        cohorts=tuple(stock.cohort for stock in rows),
        row_of={stock.cohort: row for row, stock in enumerate(rows)},
        figures=figures_of(row_stages),
        used_to_mOsm_kg=np.array(used_to, dtype=np.float64),
    )


def figures_of(stages: Sequence[Stage]) -> StageArrays:
    """Return the figures of *stages*, worked out once for each different stage: a site has few, and many tanks."""
    places: dict[int, int] = {}
    different: list[Stage] = []
    for stage in stages:
        if id(stage) not in places:
            places[id(stage)] = len(different)
            different.append(stage)
    return StageArrays.from_stages(different).take(np.array([places[id(stage)] for stage in stages], dtype=np.int64))


def is_larva(stage: Stage | None) -> bool:
    """Return whether the animals of *stage* are larvae."""
    return stage is not None and not LARVAL_WORDS.isdisjoint(stage.id.partition("/")[2].split("-"))


def _tolerable(stages: Sequence[Stage]) -> tuple[float, float]:
    """Return the range that all *stages* tolerate, on either side the narrowest published limit; NaN where there is none. [mOsm/kg]"""
    found = []
    for key, narrowest in (("tolerable_low", max), ("tolerable_high", min)):
        published = [resolved(stage).figures.get(key) for stage in stages]
        values = [
            figure.value for figure in published if figure is not None and figure.certainty is not Certainty.ASSUMED
        ]
        found.append(narrowest(values) if values else np.nan)
    return found[0], found[1]


def _salinities(site: Site, kinds: Mapping[str, WaterKind], osmolality_mOsm_kg: FloatArray) -> FloatArray:
    """Return the limits of each tank, shape (tanks, 2), in the salinity of its own kind of water."""
    salinity = np.full(osmolality_mOsm_kg.shape, np.nan)
    water = np.array([tank.water for tank in site.tanks], dtype=np.str_)
    for name in np.unique(water).tolist():
        place = (water == name)[:, None] & ~np.isnan(osmolality_mOsm_kg)
        if place.any():
            salinity[place] = kinds[name].salinity_from_osmolality(osmolality_mOsm_kg[place])
    return salinity
