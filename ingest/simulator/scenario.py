"""The scenario of a simulated hatchery: how each tank is run, and what goes wrong when.

A YAML file beside the site file. Hours count from the scenario's own start (its anchor), so negative hours are the
history that a demo brings along; what has `every_h` comes again and again after its first start.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Annotated, Literal, TypeAlias

import numpy as np
from pydantic import BaseModel, ConfigDict, Field, ValidationError, model_validator
from ruamel.yaml import YAML
from ruamel.yaml.error import YAMLError

from analysis.errors import InvalidInputError

if TYPE_CHECKING:
    from collections.abc import Iterator
    from pathlib import Path

    from analysis.arrays import BoolArray, FloatArray

TankEventKind: TypeAlias = Literal["fresh-water-valve-stuck", "brine-valve-stuck", "heater-off", "flushed"]
SensorEventKind: TypeAlias = Literal[
    "probe-dry", "fouling", "thermometer-stuck", "silent", "noisy", "filler", "unreadable", "clock-wrong"
]


class _Part(BaseModel):
    model_config = ConfigDict(extra="forbid", frozen=True, allow_inf_nan=False)


class _Timed(_Part):
    """Something that lasts for a while, once or again and again."""

    start_h: float
    lasts_h: Annotated[float, Field(gt=0)]
    every_h: Annotated[float, Field(gt=0)] | None = None

    @model_validator(mode="after")
    def _ends_before_it_comes_again(self) -> _Timed:
        if self.every_h is not None and self.every_h < self.lasts_h:
            raise ValueError(f"every_h {self.every_h} is shorter than lasts_h {self.lasts_h}")
        return self

    def hours_since_start(self, hours: FloatArray) -> FloatArray:
        """Return the hours since the latest start at each moment, negative before the first. [h]"""
        since = np.asarray(hours, dtype=np.float64) - self.start_h
        if self.every_h is None:
            return since
        return np.where(since >= 0.0, np.mod(since, self.every_h), since)

    def hours_into(self, hours: FloatArray) -> FloatArray:
        """Return how far into its occurrence each moment is, NaN where it does not go on. [h]"""
        since = self.hours_since_start(hours)
        return np.where((since >= 0.0) & (since < self.lasts_h), since, np.nan)

    def is_on(self, hours: FloatArray) -> BoolArray:
        """Return whether it goes on at each moment."""
        return np.isfinite(self.hours_into(hours))

    def part_of(self, edges_h: FloatArray) -> FloatArray:
        """Return the part of each span between two of the rising *edges_h* during which it goes on. [0 to 1]"""
        edges = np.asarray(edges_h, dtype=np.float64)
        return np.asarray(np.diff(self._hours_on(edges)) / np.diff(edges))

    def _hours_on(self, hours: FloatArray) -> FloatArray:
        """Return for how many hours it has gone on since its first start."""
        since = np.maximum(hours - self.start_h, 0.0)
        if self.every_h is None:
            return np.minimum(since, self.lasts_h)
        turns, into = np.divmod(since, self.every_h)
        return np.asarray(turns * self.lasts_h + np.minimum(into, self.lasts_h))


class TankEvent(_Timed):
    """Something that happens to the water of a tank.

    `size` is litres per minute through a stuck valve, volumes per hour of a flush, the part of the heating lost.
    """

    kind: TankEventKind
    tank: str
    size: Annotated[float, Field(gt=0)] = 1.0


class SensorEvent(_Timed):
    """Something that happens to a sensor; `size` is the part lost to fouling, the noise, or hours of clock error."""

    kind: SensorEventKind
    sensor: str
    size: float = 0.1


class Rain(_Timed):
    """A rain over hatchery and catchment."""

    depth_mm: Annotated[float, Field(gt=0)]


class Acclimation(_Part):
    """A tank whose water is brought from one salinity to another, by equal fractions in equal times."""

    tank: str
    from_salinity: Annotated[float, Field(gt=0)]
    to_salinity: Annotated[float, Field(gt=0)]
    start_h: float
    lasts_h: Annotated[float, Field(gt=0)]

    def salinity(self, hours: FloatArray) -> FloatArray:
        """Return the salinity that the inflow is blended to."""
        part = np.clip((hours - self.start_h) / self.lasts_h, 0.0, 1.0)
        return np.asarray(self.from_salinity * (self.to_salinity / self.from_salinity) ** part)


class TankRun(_Part):
    """How a tank is run. What is left out is taken from volume and set point."""

    fed_by: Literal["blend", "intake"] = "blend"
    exchange_per_day: Annotated[float, Field(ge=0)] = 0.6
    daily_change_part: Annotated[float, Field(ge=0, lt=0.9)] = 0.0
    is_outdoors: bool = False
    has_thermostat: bool = True
    depth_dbar: float = 0.0


class Scenario(_Part):
    """Everything that a scenario file says; the default is a quiet hatchery."""

    tanks: dict[str, TankRun] = Field(default_factory=dict)
    acclimations: tuple[Acclimation, ...] = ()
    tank_events: tuple[TankEvent, ...] = ()
    sensor_events: tuple[SensorEvent, ...] = ()
    rains: tuple[Rain, ...] = ()

    def run_of(self, tank_id: str) -> TankRun:
        """Return how a tank is run."""
        return self.tanks.get(tank_id, TankRun())

    def events_of_sensor(self, sensor_id: str) -> Iterator[SensorEvent]:
        """Yield what happens to a sensor."""
        return (event for event in self.sensor_events if event.sensor == sensor_id)


def load(path: Path) -> Scenario:
    """Return the scenario described by the YAML file at *path*.

    Raises
    ------
    InvalidInputError
        The file is no YAML, or a value in it is wrong; it names the first one.
    """
    try:
        data = YAML(typ="safe", pure=True).load(path.read_text(encoding="utf-8"))
    except YAMLError as error:
        raise InvalidInputError("scenario", found=str(error), allowed="a YAML file", where=path.name) from error
    try:
        return Scenario.model_validate(data or {})
    except ValidationError as error:
        first = error.errors(include_url=False)[0]
        key = ".".join(str(part) for part in first["loc"])
        raise InvalidInputError(key, found=first["input"], allowed=first["msg"], where=path.name) from error
