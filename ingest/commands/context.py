"""What a command may reach: the alarms of the running chain, the sensors and what was done to them, and the time."""

from __future__ import annotations

from typing import TYPE_CHECKING, NamedTuple, Protocol

if TYPE_CHECKING:
    from analysis.alarm.events import Event as Act
    from analysis.alarm.transition import Transition
    from analysis.water.properties import WaterKind
    from ingest.chain.services import Service
    from ingest.commands.stock_book import StockBook
    from ingest.site.models import Site
    from ingest.store.block import Occurrence
    from ingest.store.ledger import Event
    from ingest.store.plans import TankPlan


class Seen(NamedTuple):
    """A stored reading as it was seen; None where a value is unknown."""

    measured_at: int
    conductivity_mS_cm: float | None
    temperature_degC: float | None
    salinity: float | None
    quality: int


class Context(Protocol):
    """The worker as a command sees it."""

    @property
    def now_us(self) -> int:
        """The time of this ruling. [us UTC]"""
        ...

    def act(self, subject: str, condition: str, event: Act) -> tuple[Transition, ...] | None:
        """Put a person's act to an alarm; None if there is no such alarm."""
        ...

    def occurrences(self, subject: str, condition: str, transitions: tuple[Transition, ...]) -> tuple[Occurrence, ...]:
        """Return what *transitions* leave in the ledger."""
        ...

    @property
    def site(self) -> Site:
        """The site as it is installed now."""
        ...

    def services(self, sensor: str) -> tuple[Service, ...]:
        """Return the work done on a sensor so far, in order."""
        ...

    def water_kind(self, name: str) -> WaterKind:
        """Return a kind of water by its word in the site file."""
        ...

    def as_measured(self, sensor: str, shown: float, *, temperature_degC: float) -> float:
        """Return what a sensor measures when it shows *shown*: its unit converted, its compensation undone. [mS/cm]"""
        ...

    def seen_near(self, sensor: str, at_us: int) -> Seen | None:
        """Return the stored reading nearest to a moment, if there is one within a few of the sensor's intervals."""
        ...

    def newest_us(self, sensor: str) -> int | None:
        """Return when the newest reading of a sensor was measured; None if it has never spoken. [us UTC]"""
        ...

    def sensor_number(self, sensor: str) -> int:
        """Return the store's number of a sensor."""
        ...

    def tank_number(self, tank: str) -> int:
        """Return the store's number of a tank."""
        ...

    @property
    def stock_book(self) -> StockBook:
        """The animals on the site."""
        ...

    def species_in(self, tank: str) -> str | None:
        """Return the species in a tank, of several that which came last; None where none is known."""
        ...

    def plan(self, tank: str) -> TankPlan | None:
        """Return the acclimation plan that runs on a tank, or that has led to what it is kept at; None if there is none."""
        ...

    def enter_plan(self, event: Event) -> None:
        """Take an event of a plan up into the plans that are followed; it raises InvalidInputError where that cannot be."""
        ...

    @property
    def derives_as(self) -> tuple[str, int]:
        """Code version and revision of the site file under which readings are derived."""
        ...
