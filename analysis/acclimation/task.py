"""A task: which animals, from which water to which, in what vessel, with what, when, and how exactly."""

from __future__ import annotations

from dataclasses import dataclass, field
from datetime import datetime, time
from enum import StrEnum
from typing import Final

import numpy as np

from analysis.acclimation.ammonia import PackedWater
from analysis.acclimation.source import SEAWATER, Salt, SourceWater
from analysis.errors import InvalidInputError

NAN: Final = float("nan")
NEAR: Final = 0.25
NEAR_LOW: Final = 0.1
LOW: Final = 2.5
"""Below this salinity, but for fresh water itself, a plan comes nearer to its target."""


class Method(StrEnum):
    """How the water is changed."""

    STEPS = "steps"
    """Drain some, fill up again: partial exchange in steps."""
    FLOW = "flow"
    """Source water runs in, as much runs over: continuous flow-through."""
    ADD = "add"
    """Add without draining: bags and buckets, whose volume may grow."""
    DOSE = "dose"
    """Dissolved salt, or brine, into the tank."""


@dataclass(frozen=True, slots=True)
class Water:
    """What the water is, or is to be.

    Parameters
    ----------
    salinity : float
        Practical salinity in sea water, g/kg in other kinds.
    temperature_degC : float
        NaN in a target: whatever comes of it within the limits. [degC]
    ph : float
        NaN where not known.
    """

    salinity: float
    temperature_degC: float = NAN
    ph: float = NAN

    def __post_init__(self) -> None:
        if not (np.isfinite(self.salinity) and 0.0 <= self.salinity <= 119.0):
            raise InvalidInputError("salinity", found=self.salinity, allowed="0 to 119")
        if not (np.isnan(self.temperature_degC) or -2.0 <= self.temperature_degC <= 45.0):
            raise InvalidInputError("temperature", found=self.temperature_degC, allowed="-2 to 45 degC")


@dataclass(frozen=True, slots=True)
class Vessel:
    """Where the animals are during the journey.

    Parameters
    ----------
    volume_L : float
        Water in it now. [L]
    max_volume_L : float
        What it holds; the same as `volume_L` for a tank that is full. [L]
    word : str
        ``tank``, ``bag`` or ``bucket``: a bag's hours are counted.
    """

    volume_L: float
    max_volume_L: float = NAN
    word: str = "tank"

    def __post_init__(self) -> None:
        if not (np.isfinite(self.volume_L) and self.volume_L > 0.0):
            raise InvalidInputError("volume", found=self.volume_L, allowed="more than 0 L")
        if np.isnan(self.max_volume_L):
            object.__setattr__(self, "max_volume_L", self.volume_L)
        if self.max_volume_L < self.volume_L:
            raise InvalidInputError(
                "largest volume", found=self.max_volume_L, allowed=f"at least the volume now, {self.volume_L:g} L"
            )


@dataclass(frozen=True, slots=True)
class Allowances:
    """How wrong things may be without a limit being broken: a plan keeps every limit for all of them at once.

    Parameters
    ----------
    volume_share : float
        Error of the tank's volume. [1]
    source_salinity : float
        Error of each source's salinity, in its unit.
    late_min : float
        An operator may be this late with any step, and on time with the next. [min]
    """

    volume_share: float = 0.10
    source_salinity: float = 1.0
    late_min: float = 20.0

    def __post_init__(self) -> None:
        if not 0.0 <= self.volume_share <= 0.5:
            raise InvalidInputError("allowance for volume", found=self.volume_share, allowed="0 to 0.5")
        if not 0.0 <= self.source_salinity <= 5.0:
            raise InvalidInputError("allowance for a source", found=self.source_salinity, allowed="0 to 5")
        if not 0.0 <= self.late_min <= 120.0:
            raise InvalidInputError("allowance for lateness", found=self.late_min, allowed="0 to 120 min")


@dataclass(frozen=True, slots=True)
class Rest:
    """A time of day at which nobody does a step."""

    begins: time
    ends: time

    def covers(self, moment: time) -> bool:
        """Return True where *moment* lies in the rest; a rest may run over midnight."""
        if self.begins <= self.ends:
            return self.begins <= moment < self.ends
        return moment >= self.begins or moment < self.ends


@dataclass(frozen=True, slots=True)
class Grid:
    """How finely a person is asked to work.

    Parameters
    ----------
    litres : float
        Litres are rounded to this; NaN: by the volume. [L]
    clock_min : float
        Steps begin at multiples of this after the start. [min]
    longest_step_min : float
        A step is done within this; what a source cannot give in it waits for the next. [min]
    """

    litres: float = NAN
    clock_min: float = 5.0
    longest_step_min: float = 30.0

    def __post_init__(self) -> None:
        if not (np.isnan(self.litres) or self.litres > 0.0):
            raise InvalidInputError("rounding of litres", found=self.litres, allowed="more than 0 L")
        if not 1.0 <= self.clock_min <= 240.0:
            raise InvalidInputError("rounding of clock times", found=self.clock_min, allowed="1 to 240 min")
        if not 1.0 <= self.longest_step_min <= 240.0:
            raise InvalidInputError("longest step", found=self.longest_step_min, allowed="1 to 240 min")


@dataclass(frozen=True, slots=True)
class Past:
    """A reading of the hours before the start: the windows of the limits reach back to it.

    Parameters
    ----------
    minutes_before : float
        [min]
    water : Water
        What it was then.
    """

    minutes_before: float
    water: Water


@dataclass(frozen=True, slots=True)
class AcclimationTask:
    """Everything that a plan is made from, besides the limits.

    Parameters
    ----------
    animal : str
        ``genus-species/stage``.
    start, target : Water
        The water they are in and the water they go to.
    vessel : Vessel
        Its volume may grow with the method ``add``.
    sources : tuple of SourceWater
        One or more; none for salt alone.
    begins_at : datetime
        Aware, in the site's zone: clock times and working hours are read in that zone.
    method : Method
        How the water is changed.
    salt : Salt, optional
        For the method ``dose``.
    used_to_salinity : float
        The water the animals are used to; NaN: the start.
    working_hours : tuple of time, optional
        From and to, each day; none: day and night.
    rests : tuple of Rest
        Times of day without a step.
    tolerance_salinity, tolerance_K : float
        How near is arrived. NaN: 0.25, and 0.1 for targets from 0.25 to 2.5, where every tenth counts.
    allowances : Allowances
        Errors that may happen without breaking a limit.
    grid : Grid
        Rounding.
    past : tuple of Past
        Readings of the last hours.
    packed : PackedWater, optional
        The water they travelled in, for bags.
    water_kind : str
        Of the vessel.
    plain_salt_reason : str
        Who allows plain sodium chloride for raising sea water, and why; empty: it is refused.
    """

    animal: str
    start: Water
    target: Water
    vessel: Vessel
    sources: tuple[SourceWater, ...]
    begins_at: datetime
    method: Method = Method.STEPS
    salt: Salt | None = None
    used_to_salinity: float = NAN
    working_hours: tuple[time, time] | None = None
    rests: tuple[Rest, ...] = ()
    tolerance_salinity: float = NAN
    tolerance_K: float = 0.5
    allowances: Allowances = field(default_factory=Allowances)
    grid: Grid = field(default_factory=Grid)
    past: tuple[Past, ...] = ()
    packed: PackedWater | None = None
    water_kind: str = SEAWATER
    plain_salt_reason: str = ""

    def __post_init__(self) -> None:
        if self.begins_at.tzinfo is None:
            raise InvalidInputError("start time", found=self.begins_at, allowed="a time with its zone")
        if np.isnan(self.start.temperature_degC):
            raise InvalidInputError("temperature at the start", found="not given", allowed="-2 to 45 degC")
        if not self.sources and self.salt is None:
            raise InvalidInputError("source waters", found="none", allowed="at least one, or a salt")
        names = [source.name for source in self.sources]
        if len(set(names)) != len(names):
            raise InvalidInputError("names of source waters", found=names, allowed="each name once")
        if np.isnan(self.tolerance_salinity):
            near = NEAR_LOW if NEAR <= self.target.salinity < LOW else NEAR
            object.__setattr__(self, "tolerance_salinity", near)
        if not self.tolerance_salinity > 0.0 or not self.tolerance_K > 0.0:
            raise InvalidInputError(
                "tolerance at the target", found=(self.tolerance_salinity, self.tolerance_K), allowed="more than 0"
            )

    @property
    def home_salinity(self) -> float:
        """The salinity that the animals are used to."""
        return self.start.salinity if np.isnan(self.used_to_salinity) else self.used_to_salinity

    @property
    def litre_step(self) -> float:
        """The rounding of litres: as asked, or about a 200th of the volume in 1, 2, 5 and their tens. [L]"""
        if np.isfinite(self.grid.litres):
            return self.grid.litres
        return nice_step(self.vessel.volume_L / 200.0)

    def clock(self, minutes: float) -> datetime:
        """Return the clock time *minutes* after the start, in the site's zone."""
        zone = self.begins_at.tzinfo
        moment = self.begins_at.timestamp() + 60.0 * minutes
        return datetime.fromtimestamp(moment, tz=zone)

    def is_working(self, minutes: float) -> bool:
        """Return True where a person may begin a step *minutes* after the start."""
        moment = self.clock(minutes).time()
        if self.working_hours is not None and not Rest(*self.working_hours).covers(moment):
            return False
        return not any(rest.covers(moment) for rest in self.rests)


def nice_step(about: float) -> float:
    """Return the number of the series 1, 2, 5 times a power of ten that lies at or below *about*."""
    power = 10.0 ** np.floor(np.log10(about))
    for factor in (5.0, 2.0, 1.0):
        if factor * power <= about * (1.0 + 1e-9):
            return float(factor * power)
    return float(power)


__all__ = ["AcclimationTask", "Allowances", "Grid", "Method", "Past", "Rest", "Vessel", "Water"]
