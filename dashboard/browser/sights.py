"""What the board shows, as plain frozen data: one snapshot of the whole site a second serves every screen."""

from __future__ import annotations

import math
from dataclasses import dataclass
from datetime import tzinfo
from typing import TYPE_CHECKING, Any

import numpy as np

from dashboard.browser.glyphs import Balance
from ingest.words.alarms import AlarmFacts

if TYPE_CHECKING:
    from collections.abc import Mapping

    from analysis.arrays import FloatArray

PRIORITY_RANK = {"urgent": 0, "soon": 1, "note": 2}
HIDDEN_STATES = frozenset({"shelved", "suppressed_by_design", "out_of_service"})
WAITING_STATES = frozenset({"unacknowledged", "returned_unacknowledged", "latched_unacknowledged"})
MOST_BELIEVABLE_QUALITY = 3
"""QARTOD: pass 1, not evaluated 2, suspect 3 still count; fail 4 and missing 9 do not."""


@dataclass(frozen=True, slots=True)
class Band:
    """A set point with the limits that the alarms judge; NaN where there is none."""

    target: float = math.nan
    half_width: float = math.nan
    low: float = math.nan
    high: float = math.nan
    is_tidal: bool = False

    @property
    def limits(self) -> tuple[float, float] | None:
        """Return (low, high), or None without a band."""
        return None if math.isnan(self.low) or math.isnan(self.high) else (self.low, self.high)


@dataclass(frozen=True, slots=True)
class SpeciesLimit:
    """A limit of the animals on the tank's own axis, and where the figure comes from."""

    value: float
    is_lower: bool
    mark: str


@dataclass(frozen=True, slots=True)
class Animals:
    """The animals in a tank. Osmolalities are on the freezing-point basis, None where not known; `further` counts other cohorts."""

    cohort: str
    id: str
    name: str
    number: int | None
    tolerated_mOsm_kg: tuple[float, float] | None = None
    optimal_mOsm_kg: tuple[float, float] | None = None
    blood_mOsm_kg: float | None = None
    is_blood_sampled: bool = False
    limits: tuple[SpeciesLimit, ...] = ()
    temperature_limits: tuple[SpeciesLimit, ...] = ()
    further: int = 0


@dataclass(frozen=True, slots=True)
class SensorSight:
    """One sensor and its newest reading; None and NaN where nothing is known."""

    id: str
    name: str
    tank: str | None
    source_water: str | None
    interval_s: float
    stale_after_s: float
    measured_at_us: int | None = None
    received_at_us: int | None = None
    conductivity_mS_cm: float = math.nan
    temperature_degC: float = math.nan
    salinity: float = math.nan
    osmolality_mOsm_kg: float = math.nan
    density_kg_m3: float = math.nan
    flags: int = 0
    quality: int = 9
    salinity_uncertainty: float = math.nan
    """Plus or minus, from the accuracy that the data sheet states and the water model."""
    belief: int | None = None
    """Of `analysis.sensor.health.Belief`, as last assessed; None before the first time."""
    reasons: tuple[Mapping[str, Any], ...] = ()
    """Why: each with `finding` and `figures`, as the store keeps them, the weightiest first."""

    def is_fresh(self, now_us: int) -> bool:
        """Return whether its newest reading came within the time in which the next is due."""
        return self.measured_at_us is not None and now_us - self.measured_at_us <= self.stale_after_s * 1e6

    @property
    def is_believable(self) -> bool:
        """Return whether its newest salinity may be judged."""
        return self.quality <= MOST_BELIEVABLE_QUALITY and math.isfinite(self.salinity)


@dataclass(frozen=True, slots=True)
class StressSight:
    """What the animals feel: the sum, its parts, and the driver."""

    measured_at_us: int
    stress: float
    strains: dict[str, float]
    driver: str
    gap_mOsm_kg: float


@dataclass(frozen=True, slots=True)
class AlarmSight:
    """One alarm as it stands."""

    subject: str
    condition: str
    state: str
    priority: str
    occurrence: int
    raised_at_us: int | None
    updated_at_us: int
    acknowledged_by: str
    acknowledged_at_us: int | None
    facts: AlarmFacts

    @property
    def is_hidden(self) -> bool:
        """Return whether it is shelved, suppressed by design or out of service."""
        return self.state in HIDDEN_STATES

    @property
    def is_waiting(self) -> bool:
        """Return whether nobody has taken it yet."""
        return self.state in WAITING_STATES

    @property
    def is_present(self) -> bool:
        """Return whether it stands on the board: raised, and not hidden."""
        return self.state != "normal" and not self.is_hidden

    @property
    def rank(self) -> tuple[int, bool, int]:
        """Return the order in which people should see it: the most pressing, then the unattended, then the oldest."""
        return PRIORITY_RANK[self.priority], not self.is_waiting, self.raised_at_us or 0

    @property
    def key(self) -> str:
        """Return a name for this very occurrence."""
        return f"{self.subject} {self.condition} {self.occurrence}"


@dataclass(frozen=True, slots=True, eq=False)
class DayLine:
    """A tank's last day in quarter hours, for the small line on its card. Equal only to itself: drawings are kept by it."""

    times_s: FloatArray
    values: FloatArray


NO_DAY = DayLine(np.empty(0), np.empty(0))


@dataclass(frozen=True, slots=True)
class ShortOf:
    """One published threshold that an analysed water crosses: quantity (an ion in mg/L, or a ratio), found, limit, source."""

    quantity: str
    found: float
    limit: float
    is_upper: bool
    source: str


@dataclass(frozen=True, slots=True)
class Beside:
    """What stands beside the stress because the stress does not see it; NaN where no channel says it."""

    is_osmotic_part_only: bool = False
    """In water not shown to be like sea water in K, Mg and Ca."""
    oxygen_mg_L: float = math.nan
    oxygen_saturation_percent: float = math.nan
    unionised_ammonia_mg_L: float = math.nan
    """As nitrogen."""
    chloride_to_nitrite: float = math.nan
    """By mass."""
    short_of: tuple[ShortOf, ...] = ()
    """Published thresholds that the laboratory analysis of this water crosses."""


@dataclass(frozen=True, slots=True)
class TankSight:
    """One tank with all that is known about it now."""

    id: str
    name: str
    hall: str
    hall_name: str
    volume_L: float
    water: str
    salinity_unit: str
    salinity: Band
    temperature: Band
    animals: Animals | None
    sensors: tuple[SensorSight, ...]
    shown: SensorSight | None
    stress: StressSight | None
    alarms: tuple[AlarmSight, ...]
    day: DayLine
    is_unwatched: bool
    beside: Beside = Beside()

    @property
    def salinity_kind(self) -> str:
        """Return in which quantity its salinity is said: practical salinity, or salt in g/kg where the water is not of the sea."""
        return "g_kg" if self.salinity_unit else "salinity"

    @property
    def priority(self) -> str:
        """Return the most pressing priority of its present alarms; empty when there is none."""
        return self.alarms[0].priority if self.alarms else ""

    @property
    def needs_somebody(self) -> bool:
        """Return whether it stands first on the board."""
        return self.priority in ("urgent", "soon") or self.is_unwatched or self.is_outside

    @property
    def is_doubted(self) -> bool:
        """Return whether the value that stands for the tank is suspect: it is judged, and it may be wrong."""
        return self.shown is not None and not self.is_unwatched and self.shown.quality == MOST_BELIEVABLE_QUALITY

    @property
    def is_outside(self) -> bool:
        """Return whether a believable value lies outside the band that alarms judge, alarm or not: an alarm waits for its delay."""
        if self.is_unwatched or self.shown is None:
            return False
        pairs = ((self.shown.salinity, self.salinity.limits), (self.shown.temperature_degC, self.temperature.limits))
        return any(
            limits is not None and not limits[0] <= value <= limits[1]
            for value, limits in pairs
            if math.isfinite(value)
        )

    @property
    def balance(self) -> Balance:
        """Return its osmotic balance, in whole mOsm/kg: more is not true, and equal pictures are drawn once."""
        animals = self.animals
        water = self.shown.osmolality_mOsm_kg if self.shown is not None and self.shown.is_believable else math.nan
        return Balance(
            water=float(round(water)) if math.isfinite(water) else None,
            blood=None if animals is None or animals.blood_mOsm_kg is None else float(round(animals.blood_mOsm_kg)),
            tolerated=None if animals is None else animals.tolerated_mOsm_kg,
            optimal=None if animals is None else animals.optimal_mOsm_kg,
        )


@dataclass(frozen=True, slots=True)
class Snapshot:
    """The whole site at one moment."""

    now_us: int
    site_name: str
    zone: tzinfo
    zone_name: str
    salinity_label: str
    is_worker_running: bool
    has_store: bool
    alive_at_us: int | None
    tanks: tuple[TankSight, ...] = ()
    waters: tuple[SensorSight, ...] = ()
    """Sensors that sit in source waters, not in tanks."""
    alarms: tuple[AlarmSight, ...] = ()
    """Present alarms, the most pressing first."""
    hidden_alarms: tuple[AlarmSight, ...] = ()
    today: tuple[tuple[int, str], ...] = ()
    """(raised at, priority) of what was raised since the site's midnight."""

    @property
    def is_watching(self) -> bool:
        """Return whether somebody judges what comes in."""
        return self.has_store and self.is_worker_running

    def tank(self, tank_id: str) -> TankSight | None:
        """Return the tank of this id."""
        return next((tank for tank in self.tanks if tank.id == tank_id), None)

    def subject_name(self, subject: str) -> str:
        """Return what people call the subject of an alarm: the tank's name, or the site's."""
        kind, _, name = subject.partition("/")
        tank = self.tank(name) if kind == "tank" else None
        return tank.name if tank is not None else (name or self.site_name)
