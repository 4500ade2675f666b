"""From values as sent to the water: units, compensation undone, calibration, the water's properties, flags."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from analysis.flags import Flag
from analysis.water.compensation import linear_factor, natural_water_factor
from analysis.water.properties import WaterProperties

if TYPE_CHECKING:
    from analysis.arrays import FlagArray, FloatArray, IntArray
    from ingest.chain.block import RawBlock
    from ingest.chain.roster import Roster


@dataclass(frozen=True, slots=True)
class Water:
    """What a block of readings says of the water: arrays of the block's length.

    `salinity` is practical salinity in seawater, g/kg in every other kind of water. `flags` are words of
    `analysis.flags.Flag` that follow from the values and the kind of water alone.
    """

    conductivity_mS_cm: FloatArray
    temperature_degC: FloatArray
    properties: WaterProperties
    salinity: FloatArray
    flags: FlagArray


def water(roster: Roster, block: RawBlock) -> Water:
    """Return what *block* says of the water, each sensor by its declaration and the kind of water it sits in."""
    sensor = block.sensor
    temperature = block.temperature * roster.temperature_scale[sensor] + roster.temperature_offset[sensor]
    conductivity = block.conductivity * roster.conductivity_scale[sensor]
    conductivity = _uncompensated(roster, sensor, conductivity, temperature)
    pressure = np.where(roster.has_pressure[sensor], block.pressure * roster.pressure_scale[sensor], 0.0)
    # A pressure that is expected and missing costs a few thousandths in salinity, not the reading.
    pressure = np.where(np.isnan(pressure), 0.0, pressure)
    properties = _properties(roster, sensor, conductivity, temperature, pressure)
    flags = block.flags | properties.flags
    # The decoder knows why a value is absent; "not finite" stands for values that came and were not numbers.
    explained = (block.flags & np.uint32(Flag.MISSING | Flag.FILLER)) != 0
    flags = np.where(explained, flags & ~np.uint32(Flag.NOT_FINITE), flags)
    salinity = properties.practical_salinity
    if len(roster.kinds) > 1:
        salinity = np.where(np.isnan(salinity), properties.absolute_salinity_g_kg, salinity)
    return Water(conductivity, temperature, properties, salinity, flags)


def _uncompensated(roster: Roster, sensor: IntArray, conductivity: FloatArray, temperature: FloatArray) -> FloatArray:
    compensated = roster.is_compensated[sensor]
    if not compensated.any():
        return conductivity
    reference = roster.reference_temperature_degC[sensor]
    factor = linear_factor(
        temperature,
        coefficient_percent_per_K=roster.coefficient_percent_per_K[sensor],
        reference_temperature_degC=reference,
    )
    natural = roster.is_natural_water[sensor]
    if natural.any():
        factor = np.where(natural, natural_water_factor(temperature, reference_temperature_degC=reference), factor)
    return np.where(compensated, conductivity * factor, conductivity)


def _properties(
    roster: Roster, sensor: IntArray, conductivity: FloatArray, temperature: FloatArray, pressure: FloatArray
) -> WaterProperties:
    kind = roster.kind[sensor]
    present = np.unique(kind).tolist() if len(roster.kinds) > 1 else [0]
    if len(present) == 1:
        return roster.kinds[present[0]].properties(
            conductivity,
            temperature_degC=temperature,
            pressure_dbar=pressure,
            longitude=roster.longitude,
            latitude=roster.latitude,
        )
    count = len(sensor)
    columns = {name: np.full(count, np.nan) for name in _PROPERTY_NAMES}
    flags = np.zeros(count, dtype=np.uint32)
    for index in present:
        rows = np.flatnonzero(kind == index)
        part = roster.kinds[index].properties(
            conductivity[rows],
            temperature_degC=temperature[rows],
            pressure_dbar=pressure[rows],
            longitude=roster.longitude,
            latitude=roster.latitude,
        )
        for name, column in columns.items():
            column[rows] = getattr(part, name)
        flags[rows] = part.flags
    return WaterProperties(**columns, flags=flags)


_PROPERTY_NAMES = (
    "practical_salinity",
    "absolute_salinity_g_kg",
    "density_kg_m3",
    "osmolality_mOsm_kg",
    "osmolality_in_situ_mOsm_kg",
)
