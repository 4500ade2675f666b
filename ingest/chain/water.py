"""From values as sent to the water: units, compensation undone, calibration, the water's properties, flags."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from analysis.flags import Flag
from analysis.water.compensation import linear_factor, natural_water_factor
from analysis.water.properties import WaterProperties

if TYPE_CHECKING:
    from analysis.arrays import BoolArray, FlagArray, FloatArray, IntArray
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


class Measured(NamedTuple):
    """What the sensors measured, units converted and compensation undone: arrays of the block's length."""

    conductivity_mS_cm: FloatArray
    temperature_degC: FloatArray
    pressure_dbar: FloatArray


def water(roster: Roster, block: RawBlock) -> Water:
    """Return what *block* says of the water, each sensor by its declaration, its calibration and the kind of water it sits in."""
    said = measured(roster, block)
    if roster.in_force is None:
        return water_of(roster, block, said)
    conductivity, temperature, is_corrected = roster.in_force.apply(
        block.sensor,
        measured_at_us=block.measured_at_us,
        conductivity_mS_cm=said.conductivity_mS_cm,
        temperature_degC=said.temperature_degC,
    )
    return water_of(roster, block, Measured(conductivity, temperature, said.pressure_dbar), is_corrected=is_corrected)


def measured(roster: Roster, block: RawBlock) -> Measured:
    """Return what the sensors of *block* measured by their declarations, before any calibration of ours."""
    sensor = block.sensor
    temperature = block.temperature * roster.temperature_scale[sensor] + roster.temperature_offset[sensor]
    conductivity = block.conductivity * roster.conductivity_scale[sensor]
    # A sensor compensates with its own thermometer, right or wrong: its compensation is undone with the same.
    conductivity = uncompensated(roster, sensor, conductivity, temperature)
    pressure = np.where(roster.has_pressure[sensor], block.pressure * roster.pressure_scale[sensor], 0.0)
    # A pressure that is expected and missing costs a few thousandths in salinity, not the reading.
    pressure = np.where(np.isnan(pressure), 0.0, pressure)
    return Measured(conductivity, temperature, pressure)


def water_of(roster: Roster, block: RawBlock, said: Measured, *, is_corrected: BoolArray | None = None) -> Water:
    """Return what measured values say of the water; *is_corrected* tells which have been corrected."""
    conductivity, temperature, pressure = said
    properties = _properties(roster, block.sensor, conductivity, temperature, pressure)
    flags = block.flags | properties.flags
    # The decoder knows why a value is absent; "not finite" stands for values that came and were not numbers.
    explained = (block.flags & np.uint32(Flag.MISSING | Flag.FILLER)) != 0
    flags = np.where(explained, flags & ~np.uint32(Flag.NOT_FINITE), flags)
    if is_corrected is not None:
        flags = np.where(is_corrected, flags | np.uint32(Flag.CORRECTED), flags)
    salinity = properties.practical_salinity
    if len(roster.kinds) > 1:
        salinity = np.where(np.isnan(salinity), properties.absolute_salinity_g_kg, salinity)
    return Water(conductivity, temperature, properties, salinity, flags)


def uncompensated(roster: Roster, sensor: IntArray, conductivity: FloatArray, temperature: FloatArray) -> FloatArray:
    """Return conductivity at the water's own temperature, of sensors that compensate and of those that do not. [mS/cm]"""
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
