"""Units in the names of columns, held against what the caller takes them to be."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

from ingest.tables.error import TableError, shown

if TYPE_CHECKING:
    from collections.abc import Mapping

_SPELLINGS = {
    "ms/cm": "mS/cm", "ms cm-1": "mS/cm", "ms_cm": "mS/cm", "mmho/cm": "mS/cm",
    "us/cm": "uS/cm", "µs/cm": "uS/cm", "μs/cm": "uS/cm", "us cm-1": "uS/cm", "us_cm": "uS/cm", "umho/cm": "uS/cm",
    "s/m": "S/m", "s m-1": "S/m", "s_m": "S/m",
    "ms/m": "mS/m",
    "degc": "degC", "°c": "degC", "ºc": "degC", "c": "degC", "deg c": "degC", "celsius": "degC",
    "degf": "degF", "°f": "degF", "ºf": "degF", "f": "degF", "deg f": "degF", "fahrenheit": "degF",
    "k": "K", "kelvin": "K",
    "dbar": "dbar", "kpa": "kPa", "bar": "bar", "mbar": "mbar", "hpa": "hPa", "psi": "psi",
    "psu": "practical salinity", "pss": "practical salinity", "ppt": "ppt", "‰": "ppt", "g/kg": "g/kg", "g/l": "g/L",
    "mg/l": "mg/L", "m": "m", "cm": "cm", "%": "%",
}  # fmt: skip
"""Spellings seen in headers. Common practice."""
_IN_BRACKETS = re.compile(r"[(\[]\s*([^()\[\]]*?)\s*[)\]]\s*\Z")
_AT_THE_END = re.compile(r"_(mS_cm|uS_cm|S_m|degC|degF|C|F|K|dbar|kPa|bar|psu|ppt)\Z")


def unit_in(name: str) -> str:
    """Return the unit that a column's name bears, an empty text if it bears none that is known."""
    match = _IN_BRACKETS.search(name) or _AT_THE_END.search(name)
    return _SPELLINGS.get(match[1].casefold(), "") if match else ""


def check_units(names: Mapping[str, str], *, expected: Mapping[str, str], file: str, line: int) -> dict[str, str]:
    """Return the unit of each quantity: as expected, else as its column's name says, else an empty text.

    Raises
    ------
    TableError
        If a name says another unit than is expected.
    """
    units: dict[str, str] = {}
    for quantity, name in names.items():
        said, wanted = unit_in(name), expected.get(quantity, "")
        if said and wanted and said != _SPELLINGS.get(wanted.casefold(), wanted):
            allowed = f"a column of {quantity} in {wanted}; or give the unit {said}"
            raise TableError(file, line=line, column=name, found=f"the unit {shown(said)}", allowed=allowed)
        units[quantity] = wanted or said
    return units
