"""The site as arrays: what the chain needs to know of every sensor and tank, looked up by index."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import msgspec
import numpy as np

from analysis.arrays import MICROSECONDS_PER_SECOND
from analysis.water.units import CONDUCTIVITY_UNITS, PRESSURE_UNITS, TEMPERATURE_UNITS
from ingest.chain.calibrated import in_force

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from analysis.arrays import BoolArray, FloatArray, IntArray
    from analysis.water.properties import WaterKind
    from ingest.chain.calibrated import InForce
    from ingest.chain.services import Service
    from ingest.site import Site
    from ingest.site.sensors import Sensor

NO_TANK = -1


@dataclass(frozen=True, slots=True)
class Roster:
    """Sensors and their declarations, one entry a sensor in the order of the site file.

    Attributes
    ----------
    tank : ndarray of int64
        Index of the tank the sensor sits in; -1 where it sits in a source water.
    kind : ndarray of int64
        Index into `kinds`.
    conductivity_scale, pressure_scale : ndarray of float64
        Into mS/cm and dbar.
    temperature_scale, temperature_offset : ndarray of float64
        Into degC.
    is_compensated, is_natural_water : ndarray of bool
        Whether, and after which curve, the sensor compensates.
    coefficient_percent_per_K, reference_temperature_degC : ndarray of float64
        Of linear compensation.
    has_pressure : ndarray of bool
        Whether a pressure is expected; without one the probe is taken to be near the surface.
    in_force : InForce or None
        The calibrations; None where no sensor has one.
    """

    sensors: tuple[str, ...]
    tank: IntArray
    kinds: tuple[WaterKind, ...]
    kind: IntArray
    conductivity_scale: FloatArray
    temperature_scale: FloatArray
    temperature_offset: FloatArray
    pressure_scale: FloatArray
    is_compensated: BoolArray
    is_natural_water: BoolArray
    coefficient_percent_per_K: FloatArray
    reference_temperature_degC: FloatArray
    has_pressure: BoolArray
    interval_us: IntArray
    longitude: float
    latitude: float
    in_force: InForce | None = None

    def __len__(self) -> int:
        return len(self.sensors)


def roster(
    site: Site, kinds: Mapping[str, WaterKind], services: Mapping[str, Sequence[Service]] | None = None
) -> Roster:
    """Return the site's sensors as arrays.

    Parameters
    ----------
    site : Site
    kinds : mapping of str to WaterKind
        Every kind of water that the site names, by its word in the site file.
    services : mapping of str to sequence of Service, optional
        Work done on each sensor, in order, by its id.
    """
    sensors = site.sensors
    names = tuple(kinds)
    position = site.identity.position
    return Roster(
        sensors=tuple(sensor.id for sensor in sensors),
        tank=_ints([NO_TANK if sensor.tank is None else site.tank_index[sensor.tank] for sensor in sensors]),
        kinds=tuple(kinds.values()),
        kind=_ints([names.index(site.water_of(sensor)) for sensor in sensors]),
        conductivity_scale=_floats([CONDUCTIVITY_UNITS[sensor.conductivity_unit].scale for sensor in sensors]),
        temperature_scale=_floats([TEMPERATURE_UNITS[sensor.temperature_unit].scale for sensor in sensors]),
        temperature_offset=_floats([TEMPERATURE_UNITS[sensor.temperature_unit].offset for sensor in sensors]),
        pressure_scale=_floats([PRESSURE_UNITS[sensor.pressure_unit].scale for sensor in sensors]),
        is_compensated=np.array([sensor.reports == "compensated" for sensor in sensors], dtype=np.bool_),
        is_natural_water=np.array([_is_natural(sensor) for sensor in sensors], dtype=np.bool_),
        coefficient_percent_per_K=_floats([_coefficient(sensor) for sensor in sensors]),
        reference_temperature_degC=_floats(
            [25.0 if s.compensation is None else s.compensation.reference_temperature_degC for s in sensors]
        ),
        has_pressure=np.array([sensor.fields.pressure is not None for sensor in sensors], dtype=np.bool_),
        interval_us=_ints([round(sensor.interval_s * MICROSECONDS_PER_SECOND) for sensor in sensors]),
        longitude=np.nan if position is None else position.longitude,
        latitude=np.nan if position is None else position.latitude,
        in_force=in_force([sensor.id for sensor in sensors], services or {}),
    )


def declaration(sensor: Sensor) -> str:
    """Return the sensor's declaration as text: what is needed to read its stored values again years later."""
    compensation = None
    if sensor.reports == "compensated" and sensor.compensation is not None:
        compensation = sensor.compensation.model_dump()
    body = {
        "conductivity_unit": sensor.conductivity_unit,
        "temperature_unit": sensor.temperature_unit,
        "pressure_unit": sensor.pressure_unit,
        "reports": sensor.reports,
        "compensation": compensation,
    }
    return msgspec.json.encode(body, order="deterministic").decode()


def _is_natural(sensor: Sensor) -> bool:
    return sensor.compensation is not None and sensor.compensation.method == "natural-water"


def _coefficient(sensor: Sensor) -> float:
    if sensor.reports != "compensated" or sensor.compensation is None:
        return 0.0
    return sensor.compensation.coefficient_percent_per_K or 0.0


def _ints(values: list[int]) -> IntArray:
    return np.array(values, dtype=np.int64)


def _floats(values: list[float]) -> FloatArray:
    return np.array(values, dtype=np.float64)
