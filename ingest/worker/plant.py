"""A site file at work: all that follows from it, built once and exchanged as a whole at a reload."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from ingest.chain.animals import animal_roster
from ingest.chain.roster import roster
from ingest.chain.tanks import tank_roster
from ingest.chain.trust import thresholds
from ingest.payloads.decoder import Decoder
from ingest.payloads.pairing import Pairing
from ingest.site.identity import Horizon
from ingest.water_kinds import kinds_of

if TYPE_CHECKING:
    from collections.abc import Mapping
    from pathlib import Path

    from analysis.sensor.quality.thresholds import Thresholds
    from ingest.chain.animals import AnimalRoster, Stocked
    from ingest.chain.roster import Roster
    from ingest.chain.tanks import TankRoster
    from ingest.site.models import Site
    from ingest.worker.registering import Numbers


@dataclass(frozen=True, slots=True)
class Plant:
    """What is installed, in the forms in which the worker needs it."""

    site: Site
    text: str
    numbers: Numbers
    roster: Roster
    limits: Thresholds
    tanks: TankRoster
    animals: AnimalRoster
    decoder: Decoder

    @property
    def topics(self) -> tuple[str, ...]:
        """Every topic that a sensor of the site sends to."""
        return self.decoder.topics

    @property
    def roles(self) -> Mapping[str, str]:
        """The role of every person known here, by name."""
        actor = self.site.identity.default_actor
        return {actor.name: actor.role}


def plant(
    site: Site,
    *,
    text: str,
    numbers: Numbers,
    stocked: Mapping[str, Stocked],
    tables: Path,
    waiting_halves: Mapping[str, Any],
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
    stocked : mapping of str to Stocked
        Which animals are in which tank, by the tank's id.
    tables : Path
        Folder in which tables of laboratory analyses are kept.
    waiting_halves : mapping
        Halves of readings that wait for their partner, as last committed.
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
    sensors = roster(site, kinds)
    animals = animal_roster(site, kinds, stocked)
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
    )
