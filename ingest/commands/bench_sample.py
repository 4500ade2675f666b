"""Readings taken by hand (`reading.by_hand`): refractometer, hydrometer, osmometer, second meter, held against the sensor."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Any

import msgspec
import numpy as np

from analysis.errors import InvalidInputError
from analysis.sensor.health import COVERAGE, BenchSample, SampleKind
from analysis.water.compensation import Compensation
from analysis.water.uncertainty import uncertainty_of_readings
from analysis.water.unit_desk import SCALES, Circumstances, convert
from ingest.chain.uncertainty import accuracy_of
from ingest.commands.ruling import Ruling
from ingest.store.block import Occurrence, SensorWork
from ingest.store.calibrations import SampleRow
from ingest.store.ledger import Event

if TYPE_CHECKING:
    from analysis.water.properties import WaterKind
    from ingest.commands.context import Context
    from ingest.site.sensors import Sensor
    from ingest.store.inbox import Command

BY_HAND = "reading.by_hand"
NEEDED_ROLE = {BY_HAND: "operator"}
TAKEN = "reading.taken"
"""Kind of the ledger's event."""

FREE_OF_TEMPERATURE = frozenset(
    {
        "practical_salinity",
        "absolute_salinity_g_kg",
        "osmolality_mOsm_kg",
        "freezing_point_depression_K",
        "brine_refractometer_g_kg",
    }
)
"""Scales that mean the same at every temperature; a reading on any other needs the temperature of the sample."""

REASONS = ("no_such_place", "unusable_details", "in_the_future", "temperature_missing", "unusable_reading")
"""Why a sample may be refused."""


class SampleEntry(msgspec.Struct, frozen=True, kw_only=True, forbid_unknown_fields=True):
    """The body of the command.

    `scale` is a key of the unit desk's `SCALES`, `value` in its unit; `uncertainty` the standard uncertainty in units of
    salinity, by the kind of instrument where not given. `reference_temperature_degC` is that printed on a hydrometer;
    `coefficient_percent_per_K` and `compensated_to_degC` those of a meter that shows specific conductance.
    """

    instrument: SampleKind
    scale: str
    value: float
    temperature_degC: float | None = None
    taken_at_us: int | None = None
    uncertainty: float | None = None
    reference_temperature_degC: float = 25.0
    coefficient_percent_per_K: float | None = None
    compensated_to_degC: float | None = None
    note: str = ""


def rule(command: Command, context: Context) -> Ruling:
    """Carry out the command; `subject` is ``tank/<id>``, or ``sensor/<id>`` for a sample taken beside one probe."""
    found = _place(command.subject, context)
    if found is None:
        return Ruling.refused("no_such_place")
    tank, sensors, is_of_sensor = found
    try:
        entry = msgspec.convert(command.body, SampleEntry)
    except msgspec.ValidationError:
        return Ruling.refused("unusable_details")
    if entry.scale not in SCALES:
        return Ruling.refused("unusable_details")
    taken_at_us = context.now_us if entry.taken_at_us is None else entry.taken_at_us
    if taken_at_us > context.now_us:
        return Ruling.refused("in_the_future")
    if entry.temperature_degC is None and entry.scale not in FREE_OF_TEMPERATURE:
        return Ruling.refused("temperature_missing")
    water = context.site.water_of(sensors[0]) if tank is None else context.site.tank(tank).water
    kind = context.water_kind(water)
    try:
        salinity = _salinity(entry, kind)
    except InvalidInputError:
        return Ruling.refused("unusable_reading")
    if not math.isfinite(salinity) or (entry.uncertainty is not None and entry.uncertainty <= 0.0):
        return Ruling.refused("unusable_reading")
    sample = BenchSample(
        taken_at_us, salinity, entry.instrument, math.nan if entry.uncertainty is None else entry.uncertainty
    )
    body: dict[str, Any] = {
        **msgspec.to_builtins(entry),
        "taken_at_us": taken_at_us,
        "salinity": salinity,
        "beside": [seen for seen in (_beside(sensor, sample, kind, context) for sensor in sensors) if seen is not None],
    }
    event = Event(
        kind=TAKEN,
        subject=command.subject,
        measured_at=taken_at_us,
        recorded_at=context.now_us,
        actor=command.actor,
        body=body,
    )
    row = SampleRow(
        taken_at=taken_at_us,
        tank=None if tank is None else context.tank_number(tank),
        sensor=context.sensor_number(sensors[0].id) if is_of_sensor else None,
        actor=command.actor,
        body=body,
    )
    return Ruling("applied", occurrences=(Occurrence(event),), work=SensorWork(samples=(row,)))


def _place(subject: str, context: Context) -> tuple[str | None, tuple[Sensor, ...], bool] | None:
    """Return tank, sensors and whether one probe is meant, for a subject; None where there is no such thing."""
    what, _, name = subject.partition("/")
    if what == "tank" and name in context.site.tank_index:
        return name, context.site.sensors_of_tank(name), False
    if what == "sensor" and name in context.site.sensor_index:
        sensor = context.site.sensor(name)
        return sensor.tank, (sensor,), True
    return None


def _salinity(entry: SampleEntry, kind: WaterKind) -> float:
    """Return the sample's salinity in the scale of the sensors in this kind of water."""
    to = "practical_salinity" if kind.salinity_unit == "1" else "absolute_salinity_g_kg"
    meter = Compensation()
    if entry.coefficient_percent_per_K is not None or entry.compensated_to_degC is not None:
        coefficient, reference = entry.coefficient_percent_per_K, entry.compensated_to_degC
        meter = Compensation(
            coefficient_percent_per_K=meter.coefficient_percent_per_K if coefficient is None else coefficient,
            reference_temperature_degC=meter.reference_temperature_degC if reference is None else reference,
        )
    at = Circumstances(
        kind=kind,
        temperature_degC=25.0 if entry.temperature_degC is None else entry.temperature_degC,
        reference_temperature_degC=entry.reference_temperature_degC,
        compensation=meter,
    )
    return float(convert(entry.value, scale=entry.scale, to=to, at=at).value)


def _beside(sensor: Sensor, sample: BenchSample, kind: WaterKind, context: Context) -> dict[str, Any] | None:
    """Return what a sensor said at the moment of the sample, and whether the two agree; None if it said nothing."""
    seen = context.seen_near(sensor.id, sample.measured_at_us)
    if seen is None or seen.salinity is None:
        return None
    accuracy, _ = accuracy_of(sensor)
    stated = uncertainty_of_readings(
        np.array([seen.conductivity_mS_cm], dtype=np.float64),
        temperature_degC=np.array([seen.temperature_degC], dtype=np.float64),
        accuracy=accuracy,
        kind=kind,
    ).salinity
    # The data sheet's limits, taken as a rectangle (JCGM 100:2008, 4.3.7).
    own = float(stated[0]) / math.sqrt(3.0)
    allowed = COVERAGE * math.hypot(own if math.isfinite(own) else 0.0, sample.standard_uncertainty)
    difference = seen.salinity - sample.salinity
    return {
        "sensor": sensor.id,
        "measured_at": seen.measured_at,
        "salinity": seen.salinity,
        "difference": difference,
        "allowed_difference": allowed,
        "agrees": abs(difference) <= allowed,
        "quality": seen.quality,
    }
