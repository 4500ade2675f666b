"""From the true water to what a sensor says of it: cell and thermometer with their errors, faults, units.

The way back from water to conductivity is the relations' own inverse; nothing here knows how a fault is found.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Final

import numpy as np

from analysis.water.compensation import Compensation, CompensationMethod, specific_conductance_from_conductivity
from analysis.water.oxygen import oxygen_solubility_mg_L
from analysis.water.units import CONDUCTIVITY_UNITS, PRESSURE_UNITS, TEMPERATURE_UNITS, LinearUnit
from ingest.simulator.chance import normal, uniform
from ingest.simulator.hatchery import TrueWater
from ingest.simulator.payloads import Readings, channel_key
from ingest.simulator.weather import US_PER_HOUR, smooth_noise

if TYPE_CHECKING:
    from analysis.arrays import BoolArray, FloatArray, IntArray
    from ingest.simulator.hatchery import Hatchery
    from ingest.simulator.scenario import SensorEvent
    from ingest.site.sensors import Sensor

CONDUCTIVITY_NOISE_PART: Final = 0.0006
TEMPERATURE_NOISE_K: Final = 0.012
PRESSURE_NOISE_DBAR: Final = 0.004
LOST_PER_DAY_PART: Final = 0.0003
"""What a film of growth takes from the reading of a probe that is wiped once a week."""
DAYS_BETWEEN_WIPES: Final = 7.0
DRY_MS_CM: Final = 0.004
OXYGEN: Final = "oxygen"
OXYGEN_PART: Final = 0.92
"""Oxygen of an aerated tank, as part of saturation: more by day, less by night. Common practice."""
CHANNEL_NOISE_PART: Final = 0.004
FILLER: Final = -99.9
FILLER_PART: Final = 0.4
LAYERS: Final = (0.93, 1.02)
"""Salinity near the surface and near the bottom, over the mean, while fresh water runs in."""


@dataclass(frozen=True, slots=True)
class Sent:
    """What a sensor sends: one row a reading.

    Parameters
    ----------
    sent_at_us : ndarray of int64
        When it is sent. [us since 1970, UTC]
    readings : Readings
        What it claims, in the sensor's own units.
    is_readable : ndarray of bool
        False where the payload is cut short on its way.
    """

    sent_at_us: IntArray
    readings: Readings
    is_readable: BoolArray

    def where(self, is_kept: BoolArray) -> Sent:
        """Return the rows that are kept."""
        return Sent(self.sent_at_us[is_kept], self.readings.where(is_kept), self.is_readable[is_kept])


@dataclass(frozen=True, slots=True)
class _Felt:
    """What cell and thermometer feel, before compensation and units; and the true water around them."""

    water: TrueWater
    conductivity_mS_cm: FloatArray
    temperature_degC: FloatArray
    pressure_dbar: FloatArray


class SimulatedSensor:
    """One sensor of a site in a simulated hatchery.

    Parameters
    ----------
    sensor : Sensor
        What the site file says of it.
    number : int
        Its place in the site file; seeds its noise.
    hatchery : Hatchery
        The water.
    seed : int
        Of everything that is by chance.
    """

    def __init__(self, sensor: Sensor, *, number: int, hatchery: Hatchery, seed: int) -> None:
        self.sensor = sensor
        self._hatchery = hatchery
        self._seed = (seed, 7, number)
        site = hatchery.site
        self._tank = None if sensor.tank is None else site.tank_index[sensor.tank]
        self._kind = hatchery.kinds[site.water_of(sensor)]
        self._depth_dbar = 0.0 if sensor.tank is None else hatchery.scenario.run_of(sensor.tank).depth_dbar
        self._events = list(hatchery.scenario.events_of_sensor(sensor.id))
        self._layer = self._find_layer()
        accuracy = sensor.accuracy
        errors = np.random.default_rng(self._seed).normal(size=2)
        self._gain = 1.0 + errors[0] * accuracy.conductivity_percent / 300.0
        self._offset_K = errors[1] * accuracy.temperature_K / 3.0
        self._compensation = _compensation(sensor)

    def sent(self, times_us: IntArray) -> Sent:
        """Return what the sensor sends at *times_us*; where it is silent there is no row."""
        if not times_us.size:
            nothing = np.empty(0)
            channels = {channel_key(name): nothing for name in self.sensor.channels}
            return Sent(times_us, Readings(times_us, nothing, nothing, nothing, channels), np.empty(0, dtype=bool))
        felt = self._felt(times_us)
        time_us = times_us.copy()
        is_sent, is_readable = np.ones(times_us.size, dtype=bool), np.ones(times_us.size, dtype=bool)
        for event in self._events:
            is_on = event.is_on(self._hours(times_us))
            if not is_on.any():
                continue
            if event.kind == "silent":
                is_sent &= ~is_on
            elif event.kind == "unreadable":
                is_readable &= ~is_on
            elif event.kind == "clock-wrong":
                time_us[is_on] += round(event.size * US_PER_HOUR)
            else:
                felt = self._with_fault(felt, event, times_us=times_us)
        return self._in_units(felt, times_us=times_us, time_us=time_us, is_readable=is_readable).where(is_sent)

    def _hours(self, times_us: IntArray) -> FloatArray:
        return np.asarray((times_us - self._hatchery.anchor_us) / US_PER_HOUR)

    def _water(self, times_us: FloatArray) -> TrueWater:
        if self._tank is None:
            return self._hatchery.source_water_at(str(self.sensor.source_water), times_us)
        return self._hatchery.tank_water_at(self._tank, times_us)

    def _felt(self, times_us: IntArray) -> _Felt:
        water = self._water(np.asarray(times_us, dtype=np.float64))
        salinity = water.salinity * self._layering(times_us)
        pressure = self._depth_dbar + PRESSURE_NOISE_DBAR * normal(times_us, seed=(*self._seed, 3))
        true = self._kind.conductivity_mS_cm(
            salinity=salinity, temperature_degC=water.temperature_degC, pressure_dbar=self._depth_dbar
        )
        days = self._hours(times_us) / 24.0 + self._seed[2]
        film = 1.0 - LOST_PER_DAY_PART * np.mod(days, DAYS_BETWEEN_WIPES)
        noise = CONDUCTIVITY_NOISE_PART * normal(times_us, seed=(*self._seed, 1))
        temperature = water.temperature_degC + self._offset_K
        return _Felt(
            water,
            np.asarray(true * self._gain * film * (1.0 + noise)),
            np.asarray(temperature + TEMPERATURE_NOISE_K * normal(times_us, seed=(*self._seed, 2))),
            np.asarray(pressure),
        )

    def _with_fault(self, felt: _Felt, event: SensorEvent, *, times_us: IntArray) -> _Felt:
        into_h = event.hours_into(self._hours(times_us))
        is_on = np.isfinite(into_h)
        chance = normal(times_us, seed=(*self._seed, 4))
        conductivity, temperature = felt.conductivity_mS_cm, felt.temperature_degC
        if event.kind == "probe-dry":
            air = self._hatchery.air_degC(self._tank, np.asarray(times_us, dtype=np.float64))
            conductivity = np.where(is_on, DRY_MS_CM * np.abs(chance), conductivity)
            temperature = np.where(is_on, air + TEMPERATURE_NOISE_K * chance, temperature)
        elif event.kind == "fouling":
            conductivity = np.where(is_on, conductivity * (1.0 - event.size * into_h / event.lasts_h), conductivity)
        elif event.kind == "noisy":
            conductivity = np.where(is_on, conductivity * (1.0 + event.size * chance), conductivity)
        elif event.kind == "thermometer-stuck":
            temperature = np.where(is_on, self._stuck_degC(times_us, into_h=into_h), temperature)
        elif event.kind == "filler":
            is_filled = is_on & (uniform(times_us, seed=(*self._seed, 5)) < FILLER_PART)
            temperature = np.where(is_filled, FILLER, temperature)
        return replace(felt, conductivity_mS_cm=conductivity, temperature_degC=temperature)

    def _stuck_degC(self, times_us: IntArray, *, into_h: FloatArray) -> FloatArray:
        """Return the temperature at which the thermometer stuck: that of the occurrence's first moment."""
        since_us = np.asarray(times_us - np.nan_to_num(into_h) * US_PER_HOUR)
        return np.asarray(self._water(since_us).temperature_degC + self._offset_K)

    def _layering(self, times_us: IntArray) -> FloatArray:
        factor = np.ones(times_us.size)
        if self._layer is not None:
            for event in self._hatchery.scenario.tank_events:
                if event.tank == self.sensor.tank and event.kind == "fresh-water-valve-stuck":
                    factor[event.is_on(self._hours(times_us))] = LAYERS[self._layer]
        return factor

    def _find_layer(self) -> int | None:
        """Return 0 for the upper and 1 for the lower of two sensors in one tank; their order is that of the file."""
        if self.sensor.tank is None:
            return None
        beside = [other.id for other in self._hatchery.site.sensors_of_tank(self.sensor.tank)]
        return beside.index(self.sensor.id) if len(beside) == len(LAYERS) else None

    def _in_units(self, felt: _Felt, *, times_us: IntArray, time_us: IntArray, is_readable: BoolArray) -> Sent:
        conductivity = felt.conductivity_mS_cm
        if self._compensation is not None:
            conductivity = specific_conductance_from_conductivity(
                conductivity, temperature_degC=felt.temperature_degC, compensation=self._compensation
            )
        is_filler = felt.temperature_degC == FILLER
        temperature = _as_sent(felt.temperature_degC, TEMPERATURE_UNITS[self.sensor.temperature_unit])
        readings = Readings(
            time_us,
            _as_sent(conductivity, CONDUCTIVITY_UNITS[self.sensor.conductivity_unit]),
            np.where(is_filler, FILLER, temperature),
            _as_sent(felt.pressure_dbar, PRESSURE_UNITS[self.sensor.pressure_unit]),
            {channel_key(name): self._channel(name, felt.water, times_us) for name in self.sensor.channels},
        )
        return Sent(times_us, readings, is_readable)

    def _channel(self, name: str, water: TrueWater, times_us: IntArray) -> FloatArray:
        """Return the values of a further channel: oxygen from the water, anything else quiet between its limits."""
        channel, seed = self.sensor.channels[name], (*self._seed, 8, sum(name.encode()))
        hours = self._hours(times_us)
        wander = smooth_noise(hours, seed=seed, shortest_h=2.0, longest_h=30.0)
        noise = CHANNEL_NOISE_PART * normal(times_us, seed=seed)
        if name == OXYGEN:
            by_day = 0.04 * self._hatchery.weather.sun(hours - 3.0)
            part = np.asarray(OXYGEN_PART + by_day + 0.015 * wander + noise)
            salt_g_kg = self._kind.absolute_salinity_from_salinity(water.salinity)
            solubility = oxygen_solubility_mg_L(salt_g_kg, temperature_degC=water.temperature_degC)
            return 100.0 * part if channel.unit == "%" else np.asarray(part * solubility)
        low = 0.0 if channel.low is None else channel.low
        high = low + 2.0 if channel.high is None else channel.high
        return np.asarray((low + high) / 2.0 + (high - low) * (0.08 * wander + noise))


def _as_sent(values: FloatArray, unit: LinearUnit) -> FloatArray:
    return np.asarray((values - unit.offset) / unit.scale)


def _compensation(sensor: Sensor) -> Compensation | None:
    if sensor.reports != "compensated" or sensor.compensation is None:
        return None
    stated = sensor.compensation
    if stated.method == "natural-water":
        return Compensation(
            method=CompensationMethod.NATURAL_WATER, reference_temperature_degC=stated.reference_temperature_degC
        )
    if stated.coefficient_percent_per_K is None:
        return Compensation(reference_temperature_degC=stated.reference_temperature_degC)
    return Compensation(
        coefficient_percent_per_K=stated.coefficient_percent_per_K,
        reference_temperature_degC=stated.reference_temperature_degC,
    )
