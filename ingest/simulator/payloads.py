"""Payloads as a sensor of the site file sends them: the writing side of the formats that the intake reads."""

from __future__ import annotations

import json
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any, Final, Protocol, TypeAlias

import cbor2
import numpy as np

from analysis.errors import InvalidInputError

if TYPE_CHECKING:
    from analysis.arrays import BoolArray, FloatArray, IntArray
    from ingest.site.sensors import Sensor

DECIMALS: Final = {
    "mS/cm": 3,
    "uS/cm": 0,
    "S/m": 4,
    "degC": 2,
    "degF": 2,
    "K": 2,
    "dbar": 3,
    "kPa": 2,
    "bar": 4,
}
"""Decimals that a sensor prints in each unit."""
CHANNEL_DECIMALS: Final = 2
SENML_UNITS: Final = {"S/m": "S/m", "degC": "Cel", "K": "K"}
"""Units of the SenML registry (RFC 8428, section 12.1). A record in another unit is sent without one."""
SENML_CBOR_LABELS: Final = {"bt": -3, "n": 0, "u": 1, "v": 2}
"""RFC 8428, table 4."""
QUANTITIES: Final = ("conductivity", "temperature", "pressure")
TIME: Final = "time"

Message: TypeAlias = tuple[str, bytes]
"""Topic and payload."""


@dataclass(frozen=True, slots=True)
class Readings:
    """Readings of one sensor in its own units, a row each; NaN where there is no value.

    Parameters
    ----------
    time_us : ndarray of int64
        The time that the payload states. [us since 1970, UTC]
    conductivity, temperature, pressure : ndarray of float64
        As sent: compensated if the sensor compensates.
    channels : dict of str to ndarray of float64
        Further channels, by `channel_key`.
    """

    time_us: IntArray
    conductivity: FloatArray
    temperature: FloatArray
    pressure: FloatArray
    channels: dict[str, FloatArray] = field(default_factory=dict)

    def where(self, is_kept: BoolArray) -> Readings:
        """Return the rows that are kept."""
        return Readings(
            self.time_us[is_kept],
            self.conductivity[is_kept],
            self.temperature[is_kept],
            self.pressure[is_kept],
            {key: values[is_kept] for key, values in self.channels.items()},
        )

    def column(self, key: str) -> FloatArray:
        """Return the values of one quantity or channel."""
        columns = {"conductivity": self.conductivity, "temperature": self.temperature, "pressure": self.pressure}
        return columns[key] if key in columns else self.channels[key]


class Encoder(Protocol):
    """Writes readings as messages."""

    def __call__(self, readings: Readings) -> list[list[Message]]:
        """Return the messages of each reading: one, or for plain numbers one a quantity."""
        ...


def channel_key(name: str) -> str:
    """Return the key under which `Readings` holds the further channel *name* of a sensor."""
    return f"channel/{name}"


def encoder_for(sensor: Sensor, *, has_channels: bool = False) -> Encoder:
    """Return what writes the payloads of *sensor*.

    Parameters
    ----------
    sensor : Sensor
        Its payload, names of fields, units and time.
    has_channels : bool
        Whether the readings hold the sensor's further channels; else those are left out of the payload.

    Raises
    ------
    InvalidInputError
        The sensor sends neither conductivity nor temperature, so there is nothing to write.
    """
    if not any(getattr(sensor.fields, name) for name in QUANTITIES):
        found = f"sensor {sensor.id}"
        raise InvalidInputError("fields", found=found, allowed="a sensor of conductivity, temperature or pressure")
    names = _names(sensor, has_channels=has_channels)
    if sensor.payload == "json":
        return _Json(sensor, names)
    return _Numbers(sensor, names) if sensor.payload == "number" else _SenML(sensor, names)


class _Json:
    """A JSON object with named fields, nested where a name has dots."""

    def __init__(self, sensor: Sensor, names: dict[str, str]) -> None:
        self._topic = str(sensor.topic)
        self._time_format = sensor.time_format
        self._decimals = _decimals(sensor)
        named = names | ({TIME: sensor.fields.time} if sensor.fields.time else {})
        tree: dict[str, Any] = {}
        for name, path in named.items():
            *branches, leaf = path.split(".")
            branch = tree
            for part in branches:
                branch = branch.setdefault(part, {})
            branch[leaf] = f"\x00{name}"
        # The object is written once, as a frame into which each reading's numbers go.
        frame = json.dumps(tree, separators=(",", ":"), ensure_ascii=False).replace("%", "%%")
        holes = {name: f'"\\u0000{name}"' for name in named}
        self._columns = sorted(holes, key=lambda name: frame.index(holes[name]))
        for hole in holes.values():
            frame = frame.replace(hole, "%s")
        self._frame = frame

    def __call__(self, readings: Readings) -> list[list[Message]]:
        """Return the one message of each reading."""
        texts = [
            _time_texts(readings.time_us, self._time_format)
            if name == TIME
            else _number_texts(readings.column(name), self._decimals.get(name, CHANNEL_DECIMALS))
            for name in self._columns
        ]
        topic, frame = self._topic, self._frame
        return [[(topic, (frame % row).encode())] for row in zip(*texts, strict=True)]


class _SenML:
    """A pack of SenML records (RFC 8428) that shares its base time."""

    def __init__(self, sensor: Sensor, names: dict[str, str]) -> None:
        self._topic = str(sensor.topic)
        self._is_cbor = sensor.payload == "senml-cbor"
        self._names = names
        self._units = {name: SENML_UNITS.get(unit) for name, unit in _units(sensor).items()}
        self._decimals = _decimals(sensor)

    def __call__(self, readings: Readings) -> list[list[Message]]:
        """Return the one message of each reading; one without any value is an empty pack."""
        times = (readings.time_us / 1e6).round(3).tolist()
        decimals = {name: self._decimals.get(name, CHANNEL_DECIMALS) for name in self._names}
        columns = {name: readings.column(name).round(decimals[name]).tolist() for name in self._names}
        rows = zip(times, *columns.values(), strict=True)
        return [[(self._topic, self._pack(self._records(time, values)))] for time, *values in rows]

    def _records(self, time: float, values: list[float]) -> list[dict[str, Any]]:
        records: list[dict[str, Any]] = []
        for (name, path), value in zip(self._names.items(), values, strict=True):
            if value == value:
                unit = self._units.get(name)
                records.append({"n": path, **({"u": unit} if unit else {}), "v": value})
        if records:
            records[0] = {"bt": time, **records[0]}
        return records

    def _pack(self, records: list[dict[str, Any]]) -> bytes:
        if not self._is_cbor:
            return json.dumps(records, separators=(",", ":"), ensure_ascii=False).encode()
        return cbor2.dumps([{SENML_CBOR_LABELS[key]: value for key, value in record.items()} for record in records])


class _Numbers:
    """A plain number on a topic of its own for each quantity; such a payload has no time."""

    def __init__(self, sensor: Sensor, names: dict[str, str]) -> None:
        keys = {topic: name if name in QUANTITIES else channel_key(name) for topic, name in sensor.topics().items()}
        self._topics = {key: topic for topic, key in keys.items() if key in names}
        self._decimals = _decimals(sensor)

    def __call__(self, readings: Readings) -> list[list[Message]]:
        """Return one message of each reading for each quantity that has a value."""
        columns = [
            _number_texts(readings.column(key), self._decimals.get(key, CHANNEL_DECIMALS)) for key in self._topics
        ]
        return [
            [(topic, text.encode()) for topic, text in zip(self._topics.values(), row, strict=True) if text != "null"]
            for row in zip(*columns, strict=True)
        ]


def _names(sensor: Sensor, *, has_channels: bool) -> dict[str, str]:
    """Return the field of each quantity and channel that is written, by its key."""
    names = {name: path for name in QUANTITIES if (path := getattr(sensor.fields, name))}
    if has_channels:
        names |= {channel_key(name): channel.field for name, channel in sensor.channels.items()}
    return names


def _units(sensor: Sensor) -> dict[str, str]:
    return {
        "conductivity": sensor.conductivity_unit,
        "temperature": sensor.temperature_unit,
        "pressure": sensor.pressure_unit,
    }


def _decimals(sensor: Sensor) -> dict[str, int]:
    return {name: DECIMALS[unit] for name, unit in _units(sensor).items()}


def _number_texts(values: FloatArray, decimals: int) -> list[str]:
    form = f"%.{decimals}f"
    return [form % value if value == value else "null" for value in values.tolist()]


def _time_texts(time_us: IntArray, time_format: str) -> list[str]:
    if time_format == "iso":
        return [f'"{text}Z"' for text in np.datetime_as_string(time_us.astype("datetime64[us]"), unit="ms").tolist()]
    if time_format == "unix_s":
        return [f"{time / 1e6:.3f}" for time in time_us.tolist()]
    whole = time_us // 1000 if time_format == "unix_ms" else time_us
    return [str(time) for time in whole.tolist()]
