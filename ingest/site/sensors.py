"""Sensors: where they sit, what they send, in which units, and how it is to be read."""

from __future__ import annotations

import datetime
import re
from typing import Annotated, Literal

from pydantic import Field

from ingest.site.section import Section, Slug, Words, one_of, optional_pair, positive, quantity, slug, words

Payload = Literal["json", "senml-json", "senml-cbor", "number"]
TimeFormat = Literal["iso", "unix_s", "unix_ms", "unix_us"]
ConductivityUnit = Literal["mS/cm", "uS/cm", "S/m"]
TemperatureUnit = Literal["degC", "degF", "K"]
PressureUnit = Literal["dbar", "kPa", "bar"]
Surroundings = Literal["thermostated-tank", "open-tank", "tidal-intake", "pond"]

QUANTITIES = ("conductivity", "temperature", "pressure")

SENML_NAME = re.compile(r"[A-Za-z0-9][A-Za-z0-9\-:./_]*\Z")
"""Full names of SenML records: RFC 8428 section 4.5.1."""

FieldPath = Annotated[str, Field(min_length=1, max_length=200)]
FIELD_WORDS = "the name of a field, nested names joined by dots; or null"


class Fields(Section):
    """Which field of the payload holds which quantity; a SenML name, or a topic of its own for plain numbers."""

    conductivity: FieldPath | None = Field(None, description=FIELD_WORDS)
    temperature: FieldPath | None = Field(None, description=FIELD_WORDS)
    pressure: FieldPath | None = Field(None, description=FIELD_WORDS)
    time: FieldPath | None = Field(None, description=FIELD_WORDS)


class Compensation(Section):
    """How a sensor that reports specific conductance has compensated for temperature."""

    method: Literal["linear", "natural-water"] = one_of("linear", "natural-water")
    coefficient_percent_per_K: float | None = quantity(0.1, 5, "%/K", None)
    reference_temperature_degC: float = quantity(0, 40, "degC", 25)


class Accuracy(Section):
    """What the sensor's data sheet states."""

    conductivity_percent: float = quantity(0, 50, "% of reading", 0)
    conductivity_mS_cm: float = quantity(0, 10, "mS/cm", 0)
    temperature_K: float = quantity(0, 5, "K", 0)


class Span(Section):
    """Gross range: what the sensor can measure at all."""

    conductivity_mS_cm: tuple[float, float] | None = optional_pair("conductivity", "mS/cm")
    temperature_degC: tuple[float, float] | None = optional_pair("temperature", "degC")


class Channel(Section):
    """A further quantity in the same payload: oxygen, pH, level, flow, mains power, pump running."""

    field: FieldPath = Field(description="the name of a field, nested names joined by dots")
    unit: str = Field("", max_length=20, description="a unit, such as mg/L; empty for none")
    name: Words | None = words("name of the quantity", None)
    low: float | None = Field(None, description="a number: below it an alarm is raised; or null")
    high: float | None = Field(None, description="a number: above it an alarm is raised; or null")


class Sensor(Section):
    """One sensor: conductivity and temperature, either alone, or further channels."""

    id: Slug = slug("id of the sensor")
    name: Words | None = words("name of the sensor", None)
    tank: Slug | None = slug("id of a tank", None)
    source_water: Slug | None = slug("id of a source water", None)
    since: datetime.date | None = Field(None, description="a date as 2026-01-31")
    topic: Words | None = words("MQTT topic without wildcards", None)
    payload: Payload = one_of("json", "senml-json", "senml-cbor", "number", default="json")
    fields: Fields = Field(description="conductivity, temperature, pressure, time: names of fields")
    time_format: TimeFormat = one_of("iso", "unix_s", "unix_ms", "unix_us", default="iso")
    conductivity_unit: ConductivityUnit = one_of("mS/cm", "uS/cm", "S/m", default="mS/cm")
    temperature_unit: TemperatureUnit = one_of("degC", "degF", "K", default="degC")
    pressure_unit: PressureUnit = one_of("dbar", "kPa", "bar", default="dbar")
    reports: Literal["raw", "compensated"] = one_of("raw", "compensated", default="raw")
    compensation: Compensation | None = Field(None, description="method, coefficient, reference temperature")
    interval_s: float = positive(86_400 * 31, "s", 60)
    pair_within_s: float | None = positive(3600, "s", None)
    surroundings: Surroundings | None = one_of("thermostated-tank", "open-tank", "tidal-intake", "pond", default=None)
    accuracy: Accuracy = Field(Accuracy(), description="what the data sheet states")
    span: Span = Field(Span(), description="conductivity_mS_cm and temperature_degC as [low, high]")
    channels: dict[Slug, Channel] = Field({}, description="name: {field, unit, low, high}")

    @property
    def pairing_window_s(self) -> float:
        """Return how far apart the halves of one reading may be: `pair_within_s`, else half an interval."""
        return self.pair_within_s if self.pair_within_s is not None else self.interval_s / 2

    def topics(self) -> dict[str, str]:
        """Return every topic that this sensor sends to, and the quantity or channel expected there.

        Returns
        -------
        dict of str to str
            One topic and "" where one payload holds all; for plain numbers a topic for each field.
        """
        if self.payload != "number":
            return {self.topic or "": ""}
        prefix = f"{self.topic}/" if self.topic else ""
        named = {name: getattr(self.fields, name) for name in QUANTITIES}
        named |= {name: channel.field for name, channel in self.channels.items()}
        return {prefix + field: name for name, field in named.items() if field}
