"""The tanks as arrays: which sensors watch each, between which limits its water should be, and what the animals' table adds."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from analysis.alarm.conditions import LimitCondition, dry_limit
from analysis.alarm.kinds import ConditionKind
from analysis.alarm.nearest import sensor_places
from analysis.alarm.rationale import first_rules
from analysis.alarm.set_point import salinity_band, temperature_band
from analysis.alarm.timing import stale_after_s
from analysis.arrays import MICROSECONDS_PER_SECOND
from ingest.chain.roster import NO_TANK

if TYPE_CHECKING:
    from collections.abc import Mapping

    from analysis.alarm.nearest import SensorPlaces
    from analysis.alarm.rules import AlarmRules
    from analysis.alarm.set_point import SetPointBand
    from analysis.arrays import BoolArray, FloatArray, IntArray
    from ingest.chain.roster import Roster
    from ingest.site.models import Site
    from ingest.site.tanks import Tank

DEFAULT_INTERVAL_S = 60.0
DRY_DEADBAND = 0.2
"""A probe is back in the water when it reads this much above the limit. [practical salinity] Common practice."""

LIMIT_KINDS = (
    ConditionKind.SALINITY_LOW,
    ConditionKind.SALINITY_HIGH,
    ConditionKind.TEMPERATURE_LOW,
    ConditionKind.TEMPERATURE_HIGH,
    ConditionKind.PROBE_DRY_OR_TANK_EMPTY,
)


@dataclass(frozen=True, slots=True)
class TankRoster:
    """What the chain needs to know of every tank, one entry a tank in the order of the site file.

    Attributes
    ----------
    watchers : ndarray of int64
        Indices of the sensors that sit in tanks.
    watcher_of : ndarray of int64
        For each sensor its place in `watchers`; -1 for a sensor in a source water.
    places : SensorPlaces
        Tank and slot of each watcher.
    watchers_of : tuple of ndarray of int64
        For each tank the places of its sensors in `watchers`, in the order of the slots.
    sensors_of : tuple of tuple of str
        Their ids.
    interval_us, stale_after_us : ndarray of int64, one per watcher
    salinity, temperature : SetPointBand
        Between which limits the water alarms.
    conditions : tuple of LimitCondition
        The same as conditions, in the order of `LIMIT_KINDS`.
    rules : mapping
        Rules of every kind of alarm for every tank.
    """

    tanks: tuple[str, ...]
    watchers: IntArray
    watcher_of: IntArray
    places: SensorPlaces
    watchers_of: tuple[IntArray, ...]
    sensors_of: tuple[tuple[str, ...], ...]
    interval_us: IntArray
    stale_after_us: IntArray
    salinity: SetPointBand
    temperature: SetPointBand
    dry_below: FloatArray
    conditions: tuple[LimitCondition, ...]
    rules: Mapping[ConditionKind, tuple[AlarmRules, ...]]

    def __len__(self) -> int:
        return len(self.tanks)


def tank_roster(site: Site, roster: Roster, *, is_larva: BoolArray, tolerable: FloatArray) -> TankRoster:
    """Return the site's tanks as arrays.

    Parameters
    ----------
    site : Site
    roster : Roster
        Its sensors.
    is_larva : ndarray of bool, one per tank
        Whether larvae are in the tank.
    tolerable : ndarray of float64, shape (tanks, 2)
        Lowest and highest salinity that they tolerate, in the tank's own salinity; NaN where not known.
    """
    watchers = np.flatnonzero(roster.tank != NO_TANK)
    watcher_of = np.full(len(roster), NO_TANK, dtype=np.int64)
    watcher_of[watchers] = np.arange(len(watchers))
    watchers_of = tuple(np.flatnonzero(roster.tank[watchers] == tank) for tank in range(len(site.tanks)))
    point = _points(site, "salinity")
    tide = np.array([_tide(tank) for tank in site.tanks], dtype=np.float64).reshape(-1, 2)
    salinity = salinity_band(
        point,
        is_larva=is_larva,
        site_half_width=_points(site, "band"),
        tidal_low=tide[:, 0],
        tidal_high=tide[:, 1],
        tolerable_low=tolerable[:, 0],
        tolerable_high=tolerable[:, 1],
    )
    temperature = temperature_band(_points(site, "temperature_degC"), half_width_K=_points(site, "temperature_band_K"))
    dry_below = dry_limit(np.where(np.isnan(tide[:, 0]), point, tide[:, 0]))
    intervals = _intervals_s(site)
    kinds = (*LIMIT_KINDS, ConditionKind.UNWATCHED, ConditionKind.SENSOR_CLOCK_WRONG)
    return TankRoster(
        tanks=tuple(tank.id for tank in site.tanks),
        watchers=watchers,
        watcher_of=watcher_of,
        places=sensor_places(roster.tank[watchers], tank_count=len(site.tanks)),
        watchers_of=watchers_of,
        sensors_of=tuple(tuple(roster.sensors[sensor] for sensor in watchers[places]) for places in watchers_of),
        interval_us=roster.interval_us[watchers],
        stale_after_us=np.array(
            [
                round(stale_after_s(interval / MICROSECONDS_PER_SECOND) * MICROSECONDS_PER_SECOND)
                for interval in roster.interval_us[watchers].tolist()
            ],
            dtype=np.int64,
        ),
        salinity=salinity,
        temperature=temperature,
        dry_below=dry_below,
        conditions=_conditions(salinity, temperature, dry_below),
        rules={kind: tuple(first_rules(kind, interval_s=interval) for interval in intervals) for kind in kinds},
    )


def _conditions(salinity: SetPointBand, temperature: SetPointBand, dry_below: FloatArray) -> tuple[LimitCondition, ...]:
    low, high = ConditionKind.SALINITY_LOW, ConditionKind.SALINITY_HIGH
    cold, warm = ConditionKind.TEMPERATURE_LOW, ConditionKind.TEMPERATURE_HIGH
    return (
        LimitCondition(low, salinity.low, salinity.deadband, is_high=False),
        LimitCondition(high, salinity.high, salinity.deadband, is_high=True),
        LimitCondition(cold, temperature.low, temperature.deadband, is_high=False),
        LimitCondition(warm, temperature.high, temperature.deadband, is_high=True),
        LimitCondition(
            ConditionKind.PROBE_DRY_OR_TANK_EMPTY, dry_below, np.full_like(dry_below, DRY_DEADBAND), is_high=False
        ),
    )


def _points(site: Site, name: str) -> FloatArray:
    values = [None if tank.set_point is None else getattr(tank.set_point, name) for tank in site.tanks]
    return np.array([np.nan if value is None else value for value in values], dtype=np.float64)


def _tide(tank: Tank) -> tuple[float, float]:
    if tank.set_point is None or tank.set_point.tidal_band is None:
        return np.nan, np.nan
    return tank.set_point.tidal_band


def _intervals_s(site: Site) -> list[float]:
    """Return for each tank the longest interval of its sensors: a gap is judged by the slowest."""
    return [
        max((sensor.interval_s for sensor in site.sensors_of_tank(tank.id)), default=DEFAULT_INTERVAL_S)
        for tank in site.tanks
    ]
