"""What follows from the site file alone, made once a revision: bands that the alarms judge, and what the animals tolerate."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from analysis.animal.fallbacks import resolved
from analysis.animal.tables import load
from analysis.errors import EuryhaleError
from analysis.water.ionic_ratios import verdicts
from dashboard.browser.sights import Animals, Band, ShortOf, SpeciesLimit
from ingest.chain.animal_roster import Stocked, animal_roster
from ingest.chain.roster import roster
from ingest.chain.tanks import tank_roster
from ingest.water_kinds import kinds_of

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence
    from pathlib import Path

    from analysis.animal.fallbacks import Resolved
    from analysis.animal.stage import Stage
    from analysis.water.properties import WaterKind
    from ingest.site.models import Site
    from ingest.site.waters import Analysis
    from ingest.store.plans import TankPlan
    from ingest.store.queries import Cohort


@dataclass(frozen=True, slots=True)
class Installed:
    """The site with its bands and animals, by the tank's id."""

    site: Site
    kinds: Mapping[str, WaterKind]
    salinity: Mapping[str, Band]
    temperature: Mapping[str, Band]
    animals: Mapping[str, Animals]
    stale_after_s: Mapping[str, float]
    short_of: Mapping[str, tuple[ShortOf, ...]]
    """What analysed waters are short of, by the id of the analysis."""


def installed(
    site: Site, cohorts: tuple[Cohort, ...], *, tables: Path, plans: Sequence[TankPlan] = (), now_us: int = 0
) -> Installed:
    """Return what follows from *site* and the animals in its tanks; the bands are the very ones that the chain judges."""
    kinds = kinds_of(site, tables=tables)
    stocked = stocked_tanks(site, cohorts)
    sensors = roster(site, kinds)
    stages = animal_roster(site, kinds, stocked)
    tanks = tank_roster(site, sensors, is_larva=stages.is_larva, tolerable=stages.tolerable_salinity)
    moved = np.full((3, len(site.tanks)), np.nan)
    for plan in plans:
        if plan.has_say and plan.tank in site.tank_index:
            moved[:, site.tank_index[plan.tank]] = plan.salinities(now_us)
    if not np.isnan(moved).all():
        tanks = tanks.under_plans(target=moved[0], low=moved[1], high=moved[2])
    numbers = {cohort.id: cohort.number for cohort in cohorts}
    numbers |= {tank.first_stock.id: tank.first_stock.number for tank in site.tanks if tank.first_stock and not cohorts}
    salinity, temperature, animals = {}, {}, {}
    for i, tank in enumerate(site.tanks):
        point = tank.set_point
        tide = point is not None and point.tidal_band is not None
        low, high = float(tanks.salinity.low[i]), float(tanks.salinity.high[i])
        target = math.nan if point is None or point.salinity is None else point.salinity
        if np.isfinite(moved[1, i]):
            target, tide = (low + high) / 2, False  # A plan runs: its band is what the alarms judge.
        elif np.isfinite(moved[0, i]):
            target, tide = float(moved[0, i]), False
        salinity[tank.id] = _band(target, low, high, is_tidal=tide)
        warm = math.nan if point is None or point.temperature_degC is None else point.temperature_degC
        temperature[tank.id] = _band(warm, float(tanks.temperature.low[i]), float(tanks.temperature.high[i]))
        here = stocked.get(tank.id, [])
        if here:
            # Of several cohorts the one that came last names the tank; the bands are made of all of them.
            stock = here[-1]
            found = _animals(stock, numbers.get(stock.cohort), stages.stages[i], kinds[tank.water])
            animals[tank.id] = replace(found, further=len(here) - 1)
    stale = {sensors.sensors[w]: float(us) / 1e6 for w, us in zip(tanks.watchers, tanks.stale_after_us, strict=True)}
    short_of = {analysis.id: _short_of(analysis) for analysis in site.analyses}
    return Installed(site, kinds, salinity, temperature, animals, stale, short_of)


def _short_of(analysis: Analysis) -> tuple[ShortOf, ...]:
    """Return the published thresholds that a laboratory analysis crosses."""
    return tuple(
        ShortOf(one.threshold.quantity, one.found, one.threshold.limit, one.threshold.is_upper, one.threshold.source)
        for one in verdicts(analysis.ion_analysis())
        if one.is_crossed
    )


def stocked_tanks(site: Site, cohorts: tuple[Cohort, ...]) -> dict[str, list[Stocked]]:
    """Return what is in which tank by the ledger, in the order of coming; before the worker's first run the site file says it."""
    if not cohorts:
        firsts = ((tank.id, tank.first_stock) for tank in site.tanks)
        return {tank: [Stocked(first.id, first.animal, first.used_to_salinity)] for tank, first in firsts if first}
    found: dict[str, list[Stocked]] = {}
    for cohort in sorted(cohorts, key=lambda c: (c.since, c.id)):
        if cohort.tank is not None and cohort.ended_at is None:
            used_to = cohort.body.get("used_to_salinity")
            proposed = cohort.body.get("proposed")
            stage = None if proposed is None else str(proposed["stage"])
            salinity = math.nan if used_to is None else float(used_to)
            found.setdefault(cohort.tank, []).append(Stocked(cohort.id, cohort.animal, salinity, stage))
    return found


def _band(target: float, low: float, high: float, *, is_tidal: bool = False) -> Band:
    half = math.nan if math.isnan(target) else max(target - low, high - target)
    return Band(target=target, half_width=half, low=low, high=high, is_tidal=is_tidal)


def animal_name(animal: str) -> str:
    """Return what people call ``genus-species/stage``: the common name and the stage; the id itself where no table knows it."""
    stage = load().get(animal)
    return animal if stage is None else f"{stage.common_name}, {stage.name}"


def _animals(stock: Stocked, number: int | None, stage: Stage | None, kind: WaterKind) -> Animals:
    name = animal_name(stock.animal)
    if stage is None:
        return Animals(cohort=stock.cohort, id=stock.animal, name=name, number=number)
    figures = resolved(stage)
    return Animals(
        cohort=stock.cohort,
        id=stock.animal,
        name=name,
        number=number,
        tolerated_mOsm_kg=_pair(figures, "tolerable_low", "tolerable_high"),
        optimal_mOsm_kg=_pair(figures, "optimal_low", "optimal_high"),
        limits=_salinity_limits(figures, kind),
        temperature_limits=_temperature_limits(figures),
    )


def blood_at_rest(animal: str, water_mOsm_kg: float) -> float | None:
    """Return the body fluid of animals that have settled in this water, by isosmotic point and slope; None where not known."""
    stage = load().get(animal)
    if stage is None or not math.isfinite(water_mOsm_kg):
        return None
    figures = resolved(stage)
    blood = figures.value("isosmotic") + figures.value("slope") * (water_mOsm_kg - figures.value("isosmotic"))
    return blood if math.isfinite(blood) else None


def _pair(figures: Resolved, low: str, high: str) -> tuple[float, float] | None:
    pair = figures.value(low), figures.value(high)
    return None if math.isnan(pair[0]) and math.isnan(pair[1]) else pair


def _salinity_limits(figures: Resolved, kind: WaterKind) -> tuple[SpeciesLimit, ...]:
    found = []
    for key, is_lower in (("tolerable_low", True), ("tolerable_high", False)):
        figure = figures.figures.get(key)
        if figure is None or not math.isfinite(figure.value):
            continue
        try:
            value = float(kind.salinity_from_osmolality(figure.value))
        except EuryhaleError:
            continue  # beyond the relation of this water: there is no place for it on the axis
        if math.isfinite(value) and value > 0:
            found.append(SpeciesLimit(value, is_lower, figure.mark))
    return tuple(found)


def _temperature_limits(figures: Resolved) -> tuple[SpeciesLimit, ...]:
    found = []
    for key, is_lower in (("tolerable_low_degC", True), ("tolerable_high_degC", False)):
        figure = figures.figures.get(key)
        if figure is not None and math.isfinite(figure.value):
            found.append(SpeciesLimit(figure.value, is_lower, figure.mark))
    return tuple(found)
