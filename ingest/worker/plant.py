"""A site file at work: all that follows from it, built once and exchanged as a whole at a reload."""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING, Any

import numpy as np

from ingest.chain.animal_roster import animal_roster, known_stages
from ingest.chain.calibrated import in_force
from ingest.chain.roster import roster
from ingest.chain.services import Rules, periods
from ingest.chain.tanks import tank_roster
from ingest.chain.trust import thresholds
from ingest.payloads.decoder import Decoder
from ingest.payloads.pairing import Pairing
from ingest.site.identity import Horizon
from ingest.water_kinds import kinds_of

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence
    from pathlib import Path

    from analysis.animal.stage import Stage
    from analysis.arrays import FloatArray
    from analysis.sensor.quality.thresholds import Thresholds
    from analysis.water.properties import WaterKind
    from ingest.chain.animal_roster import AnimalRoster, Stocked
    from ingest.chain.roster import Roster
    from ingest.chain.services import Period, Service
    from ingest.chain.tanks import TankRoster
    from ingest.site.models import Site
    from ingest.store.plans import TankPlan
    from ingest.worker.registering import Numbers


@dataclass(frozen=True, slots=True)
class Plant:
    """What is installed, in the forms in which the worker needs it.

    `stages` are the species tables with the site's own figures. `services` holds the work done on each sensor; `periods`
    what it says of their records, where these are corrected. `plans` holds for tanks the acclimation plan from which their
    limits of salinity follow, `moved` those limits: target, low and high of every tank, NaN where no plan says anything.
    """

    site: Site
    text: str
    numbers: Numbers
    roster: Roster
    limits: Thresholds
    tanks: TankRoster
    animals: AnimalRoster
    decoder: Decoder
    kinds: Mapping[str, WaterKind]
    stages: Mapping[str, Stage]
    services: Mapping[str, tuple[Service, ...]]
    periods: Mapping[str, tuple[Period, ...]]
    plans: Mapping[str, TankPlan] = field(default_factory=dict)
    moved: FloatArray | None = None

    def after_services(self, services: Mapping[str, tuple[Service, ...]], *, derivation: int) -> Plant:
        """Return the same plant after more work on its sensors.

        Parameters
        ----------
        services : mapping
            All work on each sensor, in order, by the sensor's id.
        derivation : int
            The store's number of the way in which values are derived from now on.
        """
        return replace(
            self,
            numbers=replace(self.numbers, derivation=derivation),
            roster=replace(self.roster, in_force=in_force(self.roster.sensors, services)),
            services=services,
            periods=_periods(self.site, services),
        )

    def after_stock(self, stocked: Mapping[str, Sequence[Stocked]]) -> Plant:
        """Return the same plant with other animals in its tanks, and the limits that follow from them.

        Parameters
        ----------
        stocked : mapping of str to sequence of Stocked
            The cohorts in each tank, by the tank's id.
        """
        animals = animal_roster(self.site, self.kinds, stocked, self.stages)
        tanks = tank_roster(self.site, self.roster, is_larva=animals.is_larva, tolerable=animals.tolerable_salinity)
        return replace(self, animals=animals, tanks=_moved(tanks, self.moved))

    def after_plans(self, plans: Mapping[str, TankPlan], *, now_us: int) -> Plant:
        """Return the same plant with other plans on its tanks, or at another time, and the limits that follow from them.

        Parameters
        ----------
        plans : mapping of str to TankPlan
            By the tank's id; those that have no say any more are let go.
        now_us : int
            [us UTC]
        """
        index = self.site.tank_index
        plans = {tank: plan for tank, plan in plans.items() if plan.has_say and tank in index}
        if not plans and self.moved is None:
            return self
        moved = np.full((3, len(self.tanks)), np.nan)
        for tank, plan in plans.items():
            moved[:, index[tank]] = plan.salinities(now_us)
        if self.moved is not None and np.array_equal(moved, self.moved, equal_nan=True):
            return replace(self, plans=plans)
        return replace(self, plans=plans, moved=moved, tanks=_moved(self.tanks, moved))

    @property
    def topics(self) -> tuple[str, ...]:
        """Every topic that a sensor of the site sends to."""
        return self.decoder.topics

    @property
    def roles(self) -> Mapping[str, str]:
        """The role of every person known here, by name."""
        actor = self.site.identity.default_actor
        return {**{person.name: person.role for person in self.site.people}, actor.name: actor.role}


def plant(
    site: Site,
    *,
    text: str,
    numbers: Numbers,
    stocked: Mapping[str, Sequence[Stocked]],
    tables: Path,
    waiting_halves: Mapping[str, Any],
    services: Mapping[str, tuple[Service, ...]] | None = None,
    has_horizon: bool = True,
    least_interval_s: float = 0.0,
) -> Plant:
    """Build a plant.

    Parameters
    ----------
    site : Site
    text : str
        The site file it was read from.
    numbers : Numbers
        The store's numbers.
    stocked : mapping of str to sequence of Stocked
        Which cohorts are in which tank, by the tank's id.
    tables : Path
        Folder in which tables of laboratory analyses are kept.
    waiting_halves : mapping
        Halves of readings that wait for their partner, as last committed.
    services : mapping of str to tuple of Service, optional
        Work done on each sensor, in order, by the sensor's id.
    has_horizon : bool
        Whether measured times far in the past are refused; a replayed record may be of any age.
    least_interval_s : float
        No sensor is expected to send more often than this: for a record that has been thinned.
    """
    if least_interval_s:
        sensors_as = [
            sensor.model_copy(update={"interval_s": max(sensor.interval_s, least_interval_s)})
            for sensor in site.sensors
        ]
        site = site.model_copy(update={"sensors": tuple(sensors_as)})
    kinds = kinds_of(site, tables=tables)
    services = services or {}
    sensors = roster(site, kinds, services)
    stages = known_stages(site)
    animals = animal_roster(site, kinds, stocked, stages)
    read_as = site
    if not has_horizon:
        identity = site.identity.model_copy(update={"horizon": Horizon(past_h=1_000_000)})
        read_as = site.model_copy(update={"identity": identity})
    return Plant(
        site=site,
        text=text,
        numbers=numbers,
        roster=sensors,
        limits=thresholds(site, sensors),
        tanks=tank_roster(site, sensors, is_larva=animals.is_larva, tolerable=animals.tolerable_salinity),
        animals=animals,
        decoder=Decoder(read_as, pairing=Pairing.restored(site, dict(waiting_halves))),
        kinds=kinds,
        stages=stages,
        services=services,
        periods=_periods(site, services),
    )


def _moved(tanks: TankRoster, moved: FloatArray | None) -> TankRoster:
    return tanks if moved is None else tanks.under_plans(target=moved[0], low=moved[1], high=moved[2])


def _periods(site: Site, services: Mapping[str, tuple[Service, ...]]) -> Mapping[str, tuple[Period, ...]]:
    """Return what services say of the records, of sensors whose record is corrected at all."""
    rules = Rules.of(site.records)
    found = {sensor: tuple(periods(own, rules)) for sensor, own in services.items()}
    return {sensor: own for sensor, own in found.items() if any(one.found.is_corrected for one in own)}
