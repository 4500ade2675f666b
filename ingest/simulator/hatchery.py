"""The true water of a simulated hatchery: stirred tanks with inflow, overflow, thermostat, evaporation and rain.

The water of all tanks is stepped together on a grid of moments that hangs on the scenario's anchor and on nothing
else: ten minutes apart in the history, half a minute from two hours before the anchor on. So whoever starts from
the same moment with the same seed finds the same water, and a live feed goes on where the history ended.
"""

from __future__ import annotations

from bisect import bisect_right
from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import numpy as np

from analysis.errors import InvalidInputError
from analysis.tank import Exchange, Inflow, TankWater, step, tank_water
from analysis.water.properties import Seawater
from analysis.water.sodium_chloride_water import SodiumChlorideWater
from ingest.simulator.scenario import Scenario, TankEvent, TankRun
from ingest.simulator.weather import US_PER_HOUR, Weather, smooth_noise
from ingest.site.waters import SEAWATER, SODIUM_CHLORIDE

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping

    from analysis.arrays import FloatArray
    from analysis.water.properties import WaterKind
    from ingest.site.models import Site
    from ingest.site.tanks import Tank

COARSE_S: Final = 600
FINE_S: Final = 30
FINE_FROM_S: Final = -7200
"""Seconds from the anchor at which the grid becomes fine."""
SECONDS_PER_HOUR: Final = 3600.0

FRESH_SALINITY: Final = 0.2
FRESH_TEMPERATURE_DEGC: Final = 17.0
BRINE_SALINITY: Final = 75.0
HALL_DEGC: Final = 21.0
EVAPORATION_MM_D: Final = 3.0
WALL_KW_K_M2: Final = 0.02
THERMOSTAT_S: Final = 3600.0
"""Time in which a working thermostat brings a tank two thirds of the way."""
DEFAULT_SALINITY: Final = 30.0
DEFAULT_TEMPERATURE_DEGC: Final = 24.0
BLEND_ERROR_PART: Final = 0.006
HEADER_PART_COLD: Final = 0.1
"""How far the header tanks' water is from the set point towards the intake's temperature."""
DAILY_CHANGE_LOCAL_H: Final = 8.5
DAYS_BEFORE: Final = 3660
"""The morning's water change has been done every day for ten years."""
DAILY_CHANGE_LASTS_H: Final = 1.0 / 3.0


@dataclass(frozen=True, slots=True)
class TrueWater:
    """The water at some moments in one place, before any sensor has looked at it.

    Parameters
    ----------
    salinity : ndarray
        Practical salinity in seawater, g/kg in other kinds of water.
    temperature_degC : ndarray
        [degC]
    """

    salinity: FloatArray
    temperature_degC: FloatArray


class Hatchery:
    """All tanks of a site, from *start_us* on.

    Parameters
    ----------
    site : Site
        Tanks, their volumes, waters and set points.
    scenario : Scenario
        How they are run and what goes wrong.
    seed : int
        Of everything that is by chance.
    anchor_us : int
        Zero of the scenario's hours.
    start_us : int
        From when on the water is asked for. The tanks start at their set points.
    """

    def __init__(self, site: Site, *, scenario: Scenario, seed: int, anchor_us: int, start_us: int) -> None:
        self.site = site
        self.scenario = scenario
        self.anchor_us = anchor_us
        self.kinds = _known_kinds(site)
        longitude = site.identity.position.longitude if site.identity.position else 0.0
        self.weather = Weather(seed, anchor_us, longitude, scenario.rains)
        self._plant = _Plant(self, seed=seed)
        self._second = _grid_floor(_seconds(start_us, anchor_us))
        self._water = self._plant.first_water(self._second)
        self._moments: list[int] = []
        self._salinities: list[FloatArray] = []
        self._temperatures: list[FloatArray] = []
        self._keep()

    def tank_water_at(self, tank: int, times_us: FloatArray) -> TrueWater:
        """Return the water of the tank number *tank* at *times_us*, straight between the moments of the grid."""
        seconds = _seconds(times_us, self.anchor_us)
        if np.size(seconds):
            self._advance(float(np.max(seconds)))
            first = max(0, bisect_right(self._moments, float(np.min(seconds))) - 1)
        else:
            first = len(self._moments) - 1
        moments = self._moments[first:]
        return TrueWater(
            np.interp(seconds, moments, [row[tank] for row in self._salinities[first:]]),
            np.interp(seconds, moments, [row[tank] for row in self._temperatures[first:]]),
        )

    def source_water_at(self, source: str, times_us: FloatArray) -> TrueWater:
        """Return the water of a source; one without a stated salinity is the tidal intake."""
        hours = _seconds(times_us, self.anchor_us) / SECONDS_PER_HOUR
        water = next(water for water in self.site.source_waters if water.id == source)
        same = np.zeros_like(hours)
        salinity = self.weather.intake_salinity(hours) if water.salinity is None else same + water.salinity
        degC = water.temperature_degC
        temperature = self.weather.intake_temperature_degC(hours) if degC is None else same + degC
        return TrueWater(salinity, temperature)

    def air_degC(self, tank: int | None, times_us: FloatArray) -> FloatArray:
        """Return the temperature of the air around a tank, or outdoors. [degC]"""
        hours = _seconds(times_us, self.anchor_us) / SECONDS_PER_HOUR
        outdoors = self.weather.air_degC(hours)
        return outdoors if tank is None or self._plant.is_outdoors[tank] else _indoors(outdoors)

    def forget_before(self, time_us: int) -> None:
        """Drop what is known of the water before *time_us*: a feed that runs for weeks need not grow."""
        second = float(_seconds(time_us, self.anchor_us))
        keep = max(0, bisect_right(self._moments, second) - 1)
        del self._moments[:keep], self._salinities[:keep], self._temperatures[:keep]

    def _advance(self, second: float) -> None:
        moments = [self._second]
        while moments[-1] < second:
            moments.append(moments[-1] + (COARSE_S if moments[-1] < FINE_FROM_S else FINE_S))
        for exchange, after in zip(self._plant.exchanges(moments), moments[1:], strict=True):
            self._water = step(self._water, exchange, duration_s=after - self._second, capacity_L=self._plant.volume_L)
            self._second = after
            self._keep()

    def _keep(self) -> None:
        self._moments.append(self._second)
        self._salinities.append(self._water.absolute_salinity_g_kg / self._plant.g_kg_per_salinity)
        self._temperatures.append(self._water.temperature_degC)


class _Plant:
    """Pipes, heaters and weather: what flows into and out of each tank in each span of time."""

    def __init__(self, hatchery: Hatchery, *, seed: int) -> None:
        site, scenario, weather = hatchery.site, hatchery.scenario, hatchery.weather
        runs = [scenario.run_of(tank.id) for tank in site.tanks]
        set_points = [_set_salinity(tank) for tank in site.tanks]
        set_temperatures = [tank.set_point.temperature_degC if tank.set_point else None for tank in site.tanks]
        self.g_kg_per_salinity = np.array(
            [float(hatchery.kinds[tank.water].absolute_salinity_from_salinity(1.0)) for tank in site.tanks]
        )
        self.is_outdoors = np.array([run.is_outdoors for run in runs])
        self._seed = seed
        self._weather = weather
        self.volume_L = np.array([tank.volume_L for tank in site.tanks])
        self._area_m2 = 1.5 * (self.volume_L / 1000.0) ** (2.0 / 3.0)
        self._exchange_L_h = self.volume_L * np.array([run.exchange_per_day for run in runs]) / 24.0
        self._is_from_intake = np.array([run.fed_by == "intake" for run in runs])
        self._set_salinity = np.array(set_points)
        self._set_degC = np.array([DEFAULT_TEMPERATURE_DEGC if degC is None else degC for degC in set_temperatures])
        has_heat = [run.has_thermostat and degC is not None for run, degC in zip(runs, set_temperatures, strict=True)]
        self._thermostat_kW_K = np.where(has_heat, self.volume_L * 4.05 / THERMOSTAT_S, 0.0)
        self._wall_kW_K = WALL_KW_K_M2 * self._area_m2
        index = site.tank_index
        self._acclimations = [(index[plan.tank], plan) for plan in scenario.acclimations if plan.tank in index]
        self._events = [(index[event.tank], event) for event in scenario.tank_events if event.tank in index]
        self._events += _daily_changes(site, runs, weather=weather)

    def first_water(self, second: float) -> TankWater:
        """Return the tanks at rest: at their set points, or full of the intake's water."""
        hours = np.asarray(second / SECONDS_PER_HOUR)
        salinity = np.where(self._is_from_intake, self._weather.intake_salinity(hours), self._blend_salinity(hours))
        has_heat = self._thermostat_kW_K > 0.0
        temperature = np.where(has_heat, self._set_degC, self._weather.intake_temperature_degC(hours))
        return tank_water(
            self.volume_L, absolute_salinity_g_kg=salinity * self.g_kg_per_salinity, temperature_degC=temperature
        )

    def exchanges(self, moments: list[int]) -> Iterator[Exchange]:
        """Yield what flows between each of the *moments* and the next, at its mean over the span. [s]"""
        edges_h = np.asarray(moments) / SECONDS_PER_HOUR
        hours = 0.5 * (edges_h[1:] + edges_h[:-1])
        outdoors = self._weather.air_degC(hours)[:, None]
        surroundings = np.where(self.is_outdoors, outdoors, _indoors(outdoors))
        thermostat = self._thermostat_kW_K * np.clip(1.0 - self._event_sizes("heater-off", edges_h), 0.0, 1.0)
        kept = self._kept_degC(hours, surroundings)
        evaporation = self._area_m2 * EVAPORATION_MM_D / 24.0 * (1.0 + 0.4 * self._weather.sun(hours))[:, None]
        exchange_kW_K = self._wall_kW_K + thermostat
        rest_degC = (self._wall_kW_K * surroundings + thermostat * kept) / exchange_kW_K
        rows = self._flows(edges_h, hours, surroundings_degC=surroundings)
        for number in range(hours.size):
            yield Exchange(
                inflows=tuple(
                    Inflow(flow[number], salinity[number], degC[number])
                    for flow, salinity, degC in rows
                    if flow[number].any()
                ),
                evaporation_L_h=evaporation[number],
                heat_exchange_kW_K=exchange_kW_K[number],
                surroundings_degC=rest_degC[number],
            )

    def _flows(
        self, edges_h: FloatArray, hours: FloatArray, *, surroundings_degC: FloatArray
    ) -> list[tuple[FloatArray, FloatArray, FloatArray]]:
        """Return flow [L/h], salinity [g/kg] and temperature of everything that runs in, each (spans, tanks)."""
        shape = surroundings_degC.shape
        intake_salinity = self._weather.intake_salinity(hours)[:, None]
        intake_degC = self._weather.intake_temperature_degC(hours)[:, None]
        header_degC = self._set_degC + HEADER_PART_COLD * (intake_degC - self._set_degC)
        salinity = np.where(self._is_from_intake, intake_salinity, self._blend_salinity(hours))
        temperature = np.where(self._is_from_intake, intake_degC, header_degC)
        flow = self._exchange_L_h + self._event_sizes("flushed", edges_h) * self.volume_L
        rain = np.where(self.is_outdoors, self._area_m2 * self._weather.rain_mm_h(hours)[:, None], 0.0)
        fresh = self._event_sizes("fresh-water-valve-stuck", edges_h) * 60.0
        brine = self._event_sizes("brine-valve-stuck", edges_h) * 60.0
        as_g_kg = self.g_kg_per_salinity
        return [
            (flow, salinity * as_g_kg, temperature),
            (rain, np.zeros(shape), surroundings_degC),
            (fresh, np.full(shape, FRESH_SALINITY) * as_g_kg, np.full(shape, FRESH_TEMPERATURE_DEGC)),
            (brine, np.full(shape, BRINE_SALINITY) * as_g_kg, np.full(shape, HALL_DEGC)),
        ]

    def _blend_salinity(self, hours: FloatArray) -> FloatArray:
        """Return what each tank's inflow is blended to: its set point, as well as people and valves manage."""
        hours = np.asarray(hours)
        target = np.broadcast_to(self._set_salinity, (*hours.shape, self._set_salinity.size)).copy()
        for tank, plan in self._acclimations:
            target[..., tank] = plan.salinity(hours)
        for tank in range(self._set_salinity.size):
            wander = smooth_noise(hours, seed=(self._seed, 5, tank), shortest_h=5.0, longest_h=60.0)
            target[..., tank] *= 1.0 + BLEND_ERROR_PART * wander
        return target

    def _kept_degC(self, hours: FloatArray, surroundings_degC: FloatArray) -> FloatArray:
        """Return what a thermostat aims at: the set point, and above it what the walls lose."""
        wander = smooth_noise(hours, seed=(self._seed, 6), shortest_h=0.7, longest_h=12.0)[:, None]
        lost = self._wall_kW_K / np.maximum(self._thermostat_kW_K, 1e-9) * (self._set_degC - surroundings_degC)
        return np.asarray(self._set_degC + np.where(self._thermostat_kW_K > 0.0, lost, 0.0) + 0.15 * wander)

    def _event_sizes(self, kind: str, edges_h: FloatArray) -> FloatArray:
        """Return the size of everything of a kind that goes on in each span and tank, shared over the span."""
        sizes = np.zeros((edges_h.size - 1, self.volume_L.size))
        for tank, event in self._events:
            if event.kind == kind:
                sizes[:, tank] += event.size * event.part_of(edges_h)
        return sizes


def _known_kinds(site: Site) -> Mapping[str, WaterKind]:
    """Return the kinds of water that the simulator has; a laboratory analysis is none of them."""
    kinds: dict[str, WaterKind] = {SEAWATER: Seawater(), SODIUM_CHLORIDE: SodiumChlorideWater()}
    places = [(f"tanks[{number}].water", tank.water) for number, tank in enumerate(site.tanks)]
    places += [(f"source_waters[{number}].kind", water.kind) for number, water in enumerate(site.source_waters)]
    for where, name in places:
        if name not in kinds:
            raise InvalidInputError("kind of a simulated water", found=name, allowed=", ".join(kinds), where=where)
    return kinds


def _seconds(times_us: FloatArray | int, anchor_us: int) -> FloatArray:
    return np.asarray((np.asarray(times_us) - anchor_us) / 1e6)


def _grid_floor(second: FloatArray) -> int:
    spacing = COARSE_S if float(second) < FINE_FROM_S else FINE_S
    return int(np.floor(float(second) / spacing)) * spacing


def _indoors(outdoors_degC: float | FloatArray) -> FloatArray:
    return np.asarray(HALL_DEGC + 0.2 * (np.asarray(outdoors_degC) - 16.0))


def _set_salinity(tank: Tank) -> float:
    if tank.set_point is None:
        return DEFAULT_SALINITY
    if tank.set_point.tidal_band is not None:
        return sum(tank.set_point.tidal_band) / 2.0
    return DEFAULT_SALINITY if tank.set_point.salinity is None else tank.set_point.salinity


def _daily_changes(site: Site, runs: list[TankRun], *, weather: Weather) -> list[tuple[int, TankEvent]]:
    """Return the morning's water changes as flushes that come every day."""
    longitude_h = weather.longitude / 15.0
    anchor_h_of_day = (weather.anchor_us / US_PER_HOUR + longitude_h) % 24.0
    return [
        (
            number,
            TankEvent(
                kind="flushed",
                tank=tank.id,
                start_h=DAILY_CHANGE_LOCAL_H + 0.4 * (number % 4) - anchor_h_of_day - 24.0 * DAYS_BEFORE,
                lasts_h=DAILY_CHANGE_LASTS_H,
                every_h=24.0,
                size=-np.log1p(-run.daily_change_part) / DAILY_CHANGE_LASTS_H,
            ),
        )
        for number, (tank, run) in enumerate(zip(site.tanks, runs, strict=True))
        if run.daily_change_part > 0.0
    ]
