"""A recorded logger file as the readings that a sensor of the site would have sent."""

from __future__ import annotations

import re
from dataclasses import dataclass
from itertools import product
from typing import TYPE_CHECKING, Final

import numpy as np

from analysis.errors import InvalidInputError
from analysis.water.units import CONDUCTIVITY_UNITS, PRESSURE_UNITS, TEMPERATURE_UNITS
from ingest.simulator.payloads import QUANTITIES, TIME, Readings
from ingest.tables import Hints, Table, TableError
from ingest.tables.layout import SEPARATORS

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping, Sequence
    from pathlib import Path
    from zoneinfo import ZoneInfo

    from analysis.arrays import FloatArray
    from analysis.water.units import LinearUnit
    from ingest.site.sensors import Sensor

ROWS_AT_ONCE: Final = 1024

USUAL_NAMES: Final = {
    TIME: ("time", "time_utc", "datetime", "datetime_utc", "date_time", "date time", "timestamp", "measured_at"),
    "raw": ("conductivity", "cond", "actual conductivity", "raw conductivity"),
    "compensated": ("specific conductance", "specific conductivity", "spcond", "sp cond", "conductivity"),
    "temperature": ("temperature", "temp", "water temperature", "water temp"),
    "pressure": ("pressure", "press", "water pressure"),
}
"""Names under which loggers write a quantity, without unit, in lower case. Common practice."""
UNITS: Final[dict[str, Mapping[str, LinearUnit]]] = {
    "conductivity": CONDUCTIVITY_UNITS,
    "temperature": TEMPERATURE_UNITS,
    "pressure": PRESSURE_UNITS,
}
_UNIT_TAIL: Final = re.compile(r"[\s_]*([(\[].*[)\]]|(ms|us)[\s_/]cm|s[\s_/]m|deg[\s_]?[cf]|[cfk]|dbar|kpa|bar)\s*\Z")


@dataclass(frozen=True, slots=True)
class Survey:
    """What a record holds, found by reading it once.

    Parameters
    ----------
    rows : int
        Rows with a time.
    first_us, last_us : int
        Oldest and newest time. [us since 1970, UTC]
    """

    rows: int
    first_us: int
    last_us: int


@dataclass(frozen=True, slots=True)
class Block:
    """Some rows of a record.

    Parameters
    ----------
    readings : Readings
        Rows that hold at least one value, in the sensor's units.
    blank : int
        Rows with a time and no value.
    refused : int
        Rows without a time that can be read.
    """

    readings: Readings
    blank: int
    refused: int


class Record:
    """A delimited file and the sensor that it could come from.

    Parameters
    ----------
    path : pathlib.Path
        The file.
    sensor : Sensor
        Which quantities it sends and in which units.
    columns : mapping of str to sequence of str
        Names of columns for time (date and time of day may be two) and quantities; what is not given is looked for
        under its usual names.
    zone : ZoneInfo
        Zone of times that bear no offset.

    Raises
    ------
    TableError, InvalidInputError
        A column is not there, or not sent by this sensor; or its unit is none of the quantity.
    """

    def __init__(self, path: Path, sensor: Sensor, *, columns: Mapping[str, Sequence[str]], zone: ZoneInfo) -> None:
        self._sensor = sensor
        self._sent = tuple(name for name in QUANTITIES if getattr(sensor.fields, name))
        _check_quantities(columns, sensor=sensor, sent=self._sent)
        found = self._with_usual_names(path, columns)
        self.columns: dict[str, tuple[str, ...]] = found
        self._table = Table(
            path,
            columns={name: found[name][0] for name in self._sent if name in found},
            time=found[TIME],
            zone=zone,
        )
        self.units = {name: self._unit(name, said) for name, said in self._table.units.items()}

    def survey(self) -> Survey:
        """Read the record once for its extent.

        Raises
        ------
        InvalidInputError
            No row has a time that can be read.
        """
        rows, first_us, last_us = 0, 2**63 - 1, -(2**63)
        for chunk in self._table.chunks():
            if chunk.time_us is not None and len(chunk):
                rows += len(chunk)
                first_us = min(first_us, int(chunk.time_us.min()))
                last_us = max(last_us, int(chunk.time_us.max()))
        if not rows:
            where = self._table.path.name
            raise InvalidInputError("rows", found="no row with a time", allowed="at least one", where=where)
        return Survey(rows, first_us, last_us)

    def blocks(self) -> Iterator[Block]:
        """Yield the record from its first row to its last."""
        for chunk in self._table.chunks(rows=ROWS_AT_ONCE):
            times = np.empty(0, dtype=np.int64) if chunk.time_us is None else chunk.time_us
            columns = {name: self._as_sent(name, values) for name, values in chunk.values.items()}
            nothing = np.full(times.size, np.nan)
            conductivity, temperature, pressure = (columns.get(name, nothing) for name in QUANTITIES)
            readings = Readings(times, conductivity, temperature, pressure)
            has_value = np.any([np.isfinite(values) for values in columns.values()], axis=0)
            lost = sum(remark.line not in chunk.lines for remark in chunk.remarks)
            yield Block(readings.where(has_value), int(np.sum(~has_value)), lost)

    def _with_usual_names(self, path: Path, columns: Mapping[str, Sequence[str]]) -> dict[str, tuple[str, ...]]:
        found = {name: tuple(given) for name, given in columns.items() if given}
        if {TIME, *self._sent} <= found.keys():
            return found
        known = _header_names(path, [name for given in found.values() for name in given])
        for name in (TIME, *self._sent):
            usual = USUAL_NAMES[self._sensor.reports if name == "conductivity" else name]
            if name not in found and (there := _first_of(usual, known)):
                found[name] = (there,)
        missing = [name for name in (TIME, "conductivity") if name not in found and name in (TIME, *self._sent)]
        if missing:
            allowed = f"--column {missing[0]}=NAME with one of: {', '.join(known)}"
            raise InvalidInputError(f"column of {missing[0]}", found="none by a usual name", allowed=allowed)
        return found

    def _unit(self, name: str, said: str) -> str:
        declared = str(getattr(self._sensor, f"{name}_unit"))
        if said and said not in UNITS[name]:
            where = f"column {self.columns[name][0]}"
            raise InvalidInputError(f"unit of {name}", found=said, allowed=", ".join(UNITS[name]), where=where)
        return said or declared

    def _as_sent(self, name: str, values: FloatArray) -> FloatArray:
        written = UNITS[name][self.units[name]]
        declared = UNITS[name][getattr(self._sensor, f"{name}_unit")]
        if written == declared:
            return values
        return np.asarray((values * written.scale + written.offset - declared.offset) / declared.scale)


def _check_quantities(columns: Mapping[str, Sequence[str]], *, sensor: Sensor, sent: Sequence[str]) -> None:
    for name, given in columns.items():
        if name not in (TIME, *sent):
            allowed = f"{', '.join((TIME, *sent))}: what sensor {sensor.id} sends"
            raise InvalidInputError("--column", found=name, allowed=allowed)
        if name != TIME and len(given) > 1:
            raise InvalidInputError("--column", found=f"{name} twice", allowed=f"one column of {name}")


def _header_names(path: Path, wanted: Sequence[str]) -> tuple[str, ...]:
    """Return the names of all columns: the header is the line that has the wanted ones, or a usual name of the time."""
    tries = [wanted] if wanted else [[name] for name in USUAL_NAMES[TIME]]
    # One separator after the other, blanks last: a header such as "Time (UTC),Conductivity (mS/cm)" has both.
    for separator, names in product(SEPARATORS, tries):
        try:
            texts = {name: name for name in names}
            return Table(path, columns={}, texts=texts, hints=Hints(separator=separator)).layout.names
        except TableError as error:
            if not error.line:
                raise  # not these names: the file itself cannot be read
            if wanted and separator == SEPARATORS[-1]:
                raise
            if separator == SEPARATORS[0]:
                found = error.found
    allowed = f"--column time=NAME, or a usual name: {', '.join(USUAL_NAMES[TIME])}"
    raise InvalidInputError("column of time", found=found, allowed=allowed, where=path.name)


def _first_of(usual: Sequence[str], known: Sequence[str]) -> str | None:
    bare = {_bare(name): name for name in reversed(known)}
    return next((bare[_bare(name)] for name in usual if _bare(name) in bare), None)


def _bare(name: str) -> str:
    """Return a column's name in lower case, without its unit, words parted by single blanks."""
    return re.sub(r"[\s_-]+", " ", _UNIT_TAIL.sub("", name.strip().casefold())).strip()
