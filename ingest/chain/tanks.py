"""The tanks as arrays: which sensors watch each, between which limits its water should be, and what the animals' table adds."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, NamedTuple

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


class Kept(NamedTuple):
    """At what the tanks are kept by the site file, and what their animals tolerate; one entry a tank, NaN where nothing is said."""

    point: FloatArray
    half_width: FloatArray
    tide_low: FloatArray
    tide_high: FloatArray
    is_larva: BoolArray
    tolerable: FloatArray
    """Shape (tanks, 2)."""


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
    kept : Kept
        From what the limits of salinity follow where no plan runs.
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
    kept: Kept
    salinity: SetPointBand
    temperature: SetPointBand
    dry_below: FloatArray
    conditions: tuple[LimitCondition, ...]
    rules: Mapping[ConditionKind, tuple[AlarmRules, ...]]

    def __len__(self) -> int:
        return len(self.tanks)

    def under_plans(self, *, target: FloatArray, low: FloatArray, high: FloatArray) -> TankRoster:
        """Return the same tanks with the salinities that plans bring.

        Parameters
        ----------
        target : ndarray of float64, one per tank
            What stands in the place of the site file's set point: where a plan has led; NaN: nothing.
        low, high : ndarray of float64, one per tank
            The band of the plan that runs; NaN: none. What the animals tolerate may tighten it, as it does a set point's band.
        """
        salinity, dry_below = _salinity(self.kept, target=target, low=low, high=high)
        conditions = _conditions(salinity, self.temperature, dry_below)
        return replace(self, salinity=salinity, dry_below=dry_below, conditions=conditions)


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
    tide = np.array([_tide(tank) for tank in site.tanks], dtype=np.float64).reshape(-1, 2)
    kept = Kept(_points(site, "salinity"), _points(site, "band"), tide[:, 0], tide[:, 1], is_larva, tolerable)
    nothing = np.full(len(site.tanks), np.nan)
    salinity, dry_below = _salinity(kept, target=nothing, low=nothing, high=nothing)
    temperature = temperature_band(_points(site, "temperature_degC"), half_width_K=_points(site, "temperature_band_K"))
    intervals = _intervals_s(site)
    kinds = (*LIMIT_KINDS, ConditionKind.UNWATCHED, ConditionKind.SENSOR_CLOCK_WRONG, ConditionKind.OFF_PLAN)
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
        kept=kept,
        salinity=salinity,
        temperature=temperature,
        dry_below=dry_below,
        conditions=_conditions(salinity, temperature, dry_below),
        rules={kind: tuple(first_rules(kind, interval_s=interval) for interval in intervals) for kind in kinds},
    )


def _salinity(kept: Kept, *, target: FloatArray, low: FloatArray, high: FloatArray) -> tuple[SetPointBand, FloatArray]:
    """Return between which salinities the tanks alarm, and below which nothing but air is at the probe."""
    has_target, has_plan = ~np.isnan(target), ~np.isnan(low)
    point = np.where(has_target, target, kept.point)
    # The band of a plan is taken as that of a tide: water that is meant to move.
    moving_low = np.where(has_plan, low, np.where(has_target, np.nan, kept.tide_low))
    moving_high = np.where(has_plan, high, np.where(has_target, np.nan, kept.tide_high))
    band = salinity_band(
        point,
        is_larva=kept.is_larva,
        site_half_width=kept.half_width,
        tidal_low=moving_low,
        tidal_high=moving_high,
        tolerable_low=kept.tolerable[:, 0],
        tolerable_high=kept.tolerable[:, 1],
    )
    return band, dry_limit(np.where(np.isnan(moving_low), point, moving_low))


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
