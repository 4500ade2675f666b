"""The worker as a command sees it: what a command changes is taken over only once it is committed."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from analysis.alarm.kinds import ConditionKind
from ingest.chain.chain import Happened, act
from ingest.chain.water import uncompensated
from ingest.clock import MICROSECONDS_PER_SECOND
from ingest.commands.context import Seen
from ingest.store import corrected, plans, restoring
from ingest.worker.committing import occurrence
from ingest.worker.registering import code_version
from ingest.worker.stock_book import StockBook

if TYPE_CHECKING:
    import sqlite3

    from analysis.alarm.events import Event as Act
    from analysis.alarm.transition import Transition
    from analysis.water.properties import WaterKind
    from ingest.chain.chain import ChainState
    from ingest.chain.services import Service
    from ingest.site.models import Site
    from ingest.store.block import AnimalRow, Occurrence
    from ingest.store.ledger import Event
    from ingest.store.plans import TankPlan
    from ingest.worker.plant import Plant


NEAR_INTERVALS = 3.0
NEAR_S = 60.0
"""A reading taken by hand is held against the stored one within three intervals and a minute."""


class Bench:
    """A copy of the chain's state on which one command works (`ingest.commands.context.Context`)."""

    def __init__(self, plant: Plant, state: ChainState, *, now_us: int, connection: sqlite3.Connection) -> None:
        self._plant = plant
        self._connection = connection
        self.state = state
        self._now_us = now_us
        self._stock_book: StockBook | None = None
        self.changed_plans: list[TankPlan] = []

    @property
    def now_us(self) -> int:
        """The time of this ruling. [us UTC]"""
        return self._now_us

    def act(self, subject: str, condition: str, event: Act) -> tuple[Transition, ...] | None:
        """Put a person's act to an alarm; None if there is no such alarm."""
        tank = self._plant.site.tank_index.get(subject.removeprefix("tank/"))
        kinds = {kind.value: kind for kind in self._plant.tanks.rules}
        if tank is None or condition not in kinds:
            return None
        output = act(self.state, tank=tank, kind=kinds[condition], event=event, now_us=self._now_us)
        self.state = output.state
        return tuple(item.transition for item in output.happened)

    def occurrences(self, subject: str, condition: str, transitions: tuple[Transition, ...]) -> tuple[Occurrence, ...]:
        """Return what *transitions* leave in the ledger."""
        tank = self._plant.site.tank_index[subject.removeprefix("tank/")]
        kind = ConditionKind(condition)
        return tuple(
            occurrence(self._plant, Happened(tank, kind, item), now_us=self._now_us, actor=item.who)
            for item in transitions
        )

    @property
    def stock_book(self) -> StockBook:
        """The animals on the site; a command works on them or on alarms, never on both."""
        if self._stock_book is None:
            self._stock_book = StockBook(self._plant, self.state, connection=self._connection, now_us=self._now_us)
        return self._stock_book

    def taken_up(self) -> tuple[Plant, ChainState, list[AnimalRow]]:
        """Return plant and chain after the command, and what it leaves of the animals as rows of the store."""
        book = self._stock_book
        return (self._plant, self.state, []) if book is None else (book.plant, book.state_of_chain, book.animal_rows())

    @property
    def site(self) -> Site:
        """The site as it is installed now."""
        return self._plant.site

    def services(self, sensor: str) -> tuple[Service, ...]:
        """Return the work done on a sensor so far, in order."""
        return self._plant.services.get(sensor, ())

    def water_kind(self, name: str) -> WaterKind:
        """Return a kind of water by its word in the site file."""
        return self._plant.kinds[name]

    def as_measured(self, sensor: str, shown: float, *, temperature_degC: float) -> float:
        """Return what a sensor measures when it shows *shown*: its unit converted, its compensation undone. [mS/cm]"""
        roster = self._plant.roster
        index = np.array([self._plant.site.sensor_index[sensor]])
        conductivity = np.array([shown]) * roster.conductivity_scale[index]
        return float(uncompensated(roster, index, conductivity, np.array([temperature_degC]))[0])

    def seen_near(self, sensor: str, at_us: int) -> Seen | None:
        """Return the stored reading nearest to a moment, if there is one within a few of the sensor's intervals."""
        within_s = NEAR_INTERVALS * self._plant.site.sensor(sensor).interval_s + NEAR_S
        row = corrected.nearest(
            self._connection,
            sensor=self.sensor_number(sensor),
            at_us=at_us,
            within_us=round(within_s * MICROSECONDS_PER_SECOND),
        )
        return None if row is None else Seen(*row)

    def newest_us(self, sensor: str) -> int | None:
        """Return when the newest reading of a sensor was measured; None if it has never spoken. [us UTC]"""
        return restoring.newest_times(self._connection).get(sensor)

    def sensor_number(self, sensor: str) -> int:
        """Return the store's number of a sensor."""
        return int(self._plant.numbers.sensor[self._plant.site.sensor_index[sensor]])

    def tank_number(self, tank: str) -> int:
        """Return the store's number of a tank."""
        return int(self._plant.numbers.tank[self._plant.site.tank_index[tank]])

    def species_in(self, tank: str) -> str | None:
        """Return the species in a tank, of several that which came last; None where none is known."""
        stage = self._plant.animals.stages[self._plant.site.tank_index[tank]]
        return None if stage is None else stage.id.partition("/")[0]

    def plan(self, tank: str) -> TankPlan | None:
        """Return the acclimation plan that runs on a tank, or that has led to what it is kept at; None if there is none."""
        return self._plant.plans.get(tank)

    def enter_plan(self, event: Event) -> None:
        """Take an event of a plan up into the plans that are followed; it raises InvalidInputError where that cannot be."""
        plan = plans.projected(self._plant.plans.get(event.subject.removeprefix("tank/")), event)
        self._plant = self._plant.after_plans({**self._plant.plans, plan.tank: plan}, now_us=self._now_us)
        self.changed_plans.append(plan)

    @property
    def derives_as(self) -> tuple[str, int]:
        """Code version and revision of the site file under which readings are derived."""
        return code_version(), self._plant.numbers.revision
