"""Options that several commands share: how a sensor reports, in which water it stands, where the answer goes."""

from __future__ import annotations

import sys
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, TextIO

from analysis.errors import EuryhaleError, InvalidInputError
from analysis.water.compensation import (
    DEFAULT_COEFFICIENT_PERCENT_PER_K,
    DEFAULT_REFERENCE_TEMPERATURE_DEGC,
    Compensation,
    CompensationMethod,
)
from analysis.water.properties import Seawater, WaterKind
from analysis.water.units import CONDUCTIVITY_UNITS

if TYPE_CHECKING:
    import argparse
    from collections.abc import Iterator


class UsageError(EuryhaleError):
    """Options that do not go together: exit status 2."""


def add_sensor_options(group: argparse._ArgumentGroup) -> None:
    """Add the options that say how a sensor reports conductivity."""
    group.add_argument("--unit", choices=tuple(CONDUCTIVITY_UNITS), default="mS/cm", help="default: mS/cm")
    group.add_argument(
        "--compensated", action="store_true", help="the reading was brought to a reference temperature by the meter"
    )
    group.add_argument(
        "--compensation",
        choices=tuple(method.value for method in CompensationMethod),
        help="how the meter compensates: linear (default) or natural-water (ISO 7888); implies --compensated",
    )
    group.add_argument("--coefficient", type=float, help="of linear compensation [%%/K] (default: 1.91)")
    group.add_argument("--reference-temperature", type=float, help="of the meter [degC] (default: 25)")


def add_water_option(group: argparse._ArgumentGroup) -> None:
    """Add the option that names the kind of water."""
    group.add_argument(
        "--water",
        default="seawater",
        metavar="seawater|sodium-chloride|FILE.yaml",
        help="kind of water; a file holds a laboratory analysis of major ions (default: seawater)",
    )


def compensation_of(args: argparse.Namespace) -> Compensation | None:
    """Return the compensation that the options describe, None for raw conductivity.

    Raises
    ------
    UsageError
        If they do not go together, or a value is out of range.
    """
    settings = (args.coefficient, args.reference_temperature)
    if not args.compensated and args.compensation is None:
        if settings != (None, None):
            raise UsageError("--coefficient and --reference-temperature need --compensated")
        return None
    method = CompensationMethod(args.compensation or CompensationMethod.LINEAR)
    if method is CompensationMethod.NATURAL_WATER and args.coefficient is not None:
        raise UsageError("--coefficient belongs to linear compensation")
    try:
        return Compensation(
            method=method,
            coefficient_percent_per_K=DEFAULT_COEFFICIENT_PERCENT_PER_K if settings[0] is None else settings[0],
            reference_temperature_degC=DEFAULT_REFERENCE_TEMPERATURE_DEGC if settings[1] is None else settings[1],
        )
    except InvalidInputError as error:
        raise UsageError(str(error)) from error


def water_kind_of(word: str) -> WaterKind:
    """Return the kind of water that `--water` names, or describes in a file.

    Raises
    ------
    UsageError
        If it names none.
    EuryhaleError, OSError, UnicodeDecodeError
        If the file cannot be used.
    """
    if word == "seawater":
        return Seawater()
    if word == "sodium-chloride":
        from analysis.water.sodium_chloride_water import SodiumChlorideWater

        return SodiumChlorideWater()
    if word.lower().endswith((".yaml", ".yml")):
        from dashboard.terminal.analysis_file import water_of_analysis_file

        return water_of_analysis_file(Path(word))
    raise UsageError(f"--water: found {word!r}; allowed: seawater, sodium-chloride, or a file that ends in .yaml")


@contextmanager
def destination(path: Path | None) -> Iterator[TextIO]:
    """Yield where to write: a file that appears under its name only when it is whole, or standard output."""
    if path is None:
        yield sys.stdout
        return
    part = path.with_name(path.name + ".part")
    try:
        with part.open("w", encoding="utf-8", newline="") as target:
            yield target
        part.replace(path)
    finally:
        part.unlink(missing_ok=True)
