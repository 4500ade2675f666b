"""Units of SenML: the registered ones, and the way to the unit that a sensor is declared to use.

References
----------
RFC 8428, Sensor Measurement Lists, section 12.1; RFC 8798, Additional Units for SenML, section 3.
"""

from __future__ import annotations

from typing import NamedTuple

PRIMARY_UNITS = frozenset({
    "m", "kg", "g", "s", "A", "K", "cd", "mol", "Hz", "rad", "sr", "N", "Pa", "J", "W", "C", "V",
    "F", "Ohm", "S", "Wb", "T", "H", "Cel", "lm", "lx", "Bq", "Gy", "Sv", "kat", "m2", "m3", "l",
    "m/s", "m/s2", "m3/s", "l/s", "W/m2", "cd/m2", "bit", "bit/s", "lat", "lon", "pH", "dB", "dBW",
    "Bspl", "count", "/", "%", "%RH", "%EL", "EL", "1/s", "1/min", "beat/min", "beats", "S/m", "B",
    "VA", "VAs", "var", "vars", "J/m", "kg/m3", "deg", "NTU",
})  # fmt: skip
"""Registered primary units (RFC 8428 section 12.1, RFC 8798 section 2)."""


class Scale(NamedTuple):
    """A linear way from one unit to another: ``value * factor + offset``."""

    factor: float
    offset: float = 0.0


SECONDARY_UNITS: dict[str, tuple[str, Scale]] = {
    "ms": ("s", Scale(1e-3)),
    "min": ("s", Scale(60)),
    "h": ("s", Scale(3600)),
    "MHz": ("Hz", Scale(1e6)),
    "kW": ("W", Scale(1e3)),
    "kVA": ("VA", Scale(1e3)),
    "kvar": ("var", Scale(1e3)),
    "Ah": ("C", Scale(3600)),
    "Wh": ("J", Scale(3600)),
    "kWh": ("J", Scale(3.6e6)),
    "mV": ("V", Scale(1e-3)),
    "mA": ("A", Scale(1e-3)),
    "dBm": ("dBW", Scale(1, -30)),
    "ug/m3": ("kg/m3", Scale(1e-9)),
    "mm/h": ("m/s", Scale(1 / 3_600_000)),
    "m/h": ("m/s", Scale(1 / 3600)),
    "ppm": ("/", Scale(1e-6)),
    "/100": ("/", Scale(1e-2)),
    "/1000": ("/", Scale(1e-3)),
    "hPa": ("Pa", Scale(1e2)),
    "mm": ("m", Scale(1e-3)),
    "cm": ("m", Scale(1e-2)),
    "km": ("m", Scale(1e3)),
    "km/h": ("m/s", Scale(1 / 3.6)),
    "%": ("/", Scale(1)),
}
"""Secondary units and their primary unit (RFC 8798 section 3); "%" is the ratio 0 to 1 (RFC 8428, note 2)."""

_DECLARED: dict[tuple[str, str], Scale] = {
    ("S/m", "S/m"): Scale(1),
    ("S/m", "mS/cm"): Scale(10),
    ("S/m", "uS/cm"): Scale(10_000),
    ("Cel", "degC"): Scale(1),
    ("Cel", "K"): Scale(1, 273.15),
    ("Cel", "degF"): Scale(1.8, 32),
    ("K", "K"): Scale(1),
    ("K", "degC"): Scale(1, -273.15),
    ("K", "degF"): Scale(1.8, -459.67),
    ("Pa", "dbar"): Scale(1e-4),
    ("Pa", "kPa"): Scale(1e-3),
    ("Pa", "hPa"): Scale(1e-2),
    ("Pa", "bar"): Scale(1e-5),
    ("/", "%"): Scale(100),
    ("%RH", "%"): Scale(1),
    ("kg/m3", "mg/L"): Scale(1000),
    ("kg/m3", "g/L"): Scale(1),
    ("m", "cm"): Scale(100),
    ("m", "mm"): Scale(1000),
    ("V", "mV"): Scale(1000),
    ("l/s", "L/s"): Scale(1),
    ("l/s", "L/min"): Scale(60),
    ("m3/s", "L/s"): Scale(1000),
    ("m3/s", "m3/h"): Scale(3600),
    ("pH", ""): Scale(1),
    ("count", ""): Scale(1),
    ("/", ""): Scale(1),
}
"""From a primary unit to a unit of the site file."""


def to_primary(value: float, unit: str) -> tuple[float, str]:
    """Return a value in the primary unit of its unit, and that unit; a primary unit stays as it is.

    Raises
    ------
    KeyError
        If the unit is not registered.
    """
    if unit in SECONDARY_UNITS:
        primary, scale = SECONDARY_UNITS[unit]
        return value * scale.factor + scale.offset, primary
    if unit not in PRIMARY_UNITS:
        raise KeyError(unit)
    return value, unit


def scale_to_declared(unit: str, declared: str) -> Scale | None:
    """Return the way from a SenML unit to the declared unit of a sensor; None where there is none.

    Without a unit (an empty text) the value is in the declared unit already, by agreement.
    """
    if not unit:
        return Scale(1)
    if unit not in PRIMARY_UNITS and unit not in SECONDARY_UNITS:
        return None
    if unit == declared and unit != "%":
        return Scale(1)
    primary, first = SECONDARY_UNITS.get(unit, (unit, Scale(1)))
    second = Scale(1) if primary == declared else _DECLARED.get((primary, declared))
    if second is None:
        return None
    return Scale(first.factor * second.factor, first.offset * second.factor + second.offset)


def registered_for(declared: str) -> str:
    """Return the SenML units that lead to a declared unit, in words."""
    units = [unit for unit in sorted(PRIMARY_UNITS | set(SECONDARY_UNITS)) if scale_to_declared(unit, declared)]
    return f"{' or '.join(units)}, or no unit (then {declared or 'the declared unit'} holds)" if units else "no unit"
