"""`euryhale quality`: the quality tests on a logger's file, flags per test written beside each reading."""

from __future__ import annotations

import sys
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from analysis.arrays import MICROSECONDS_PER_SECOND
from analysis.errors import EuryhaleError, InvalidInputError
from analysis.flags import Flag, Quality
from analysis.sensor.compensation_check import check_compensation
from analysis.sensor.quality.evaluation import evaluate
from analysis.sensor.quality.limits import DEFAULT_SUSPECT_SPAN, Surroundings, default_limits
from analysis.sensor.quality.state import QualityState
from analysis.sensor.quality.thresholds import Thresholds
from analysis.sensor.quality.words import QualityTest
from analysis.water.compensation import Compensation, conductivity_from_specific_conductance
from analysis.water.properties import Seawater, WaterKind
from analysis.water.units import conductivity_mS_cm_from
from dashboard.terminal.flag_table import write_flags
from dashboard.terminal.sensor_options import (
    UsageError,
    add_sensor_options,
    add_water_option,
    compensation_of,
    destination,
    water_kind_of,
)
from dashboard.terminal.table_options import columns_of, progress_bar, table_of, tell_remarks
from ingest.tables import whole

if TYPE_CHECKING:
    import argparse

    from analysis.arrays import FlagArray, FloatArray, IntArray
    from analysis.sensor.quality.result import QualityResult
    from ingest.tables import Chunk

HELP = "say of each reading in a table whether it can be believed, test by test"

CAUTION = (
    "A flag is a reason to look, not a verdict: suspect (3) is of high interest and may be the water itself; "
    "a passed reading (1) can still be wrong by what no test sees, such as slow fouling of a single sensor."
)

USAGE_ERROR = 2
OTHER_ERROR = 1

QUANTITIES = ("conductivity", "temperature", "pressure")
ROLES = ("time", *QUANTITIES)


def add_parser(subparsers: Any) -> None:
    """Add this command to the parser."""
    parser = subparsers.add_parser("quality", help=HELP, description=HELP, epilog=CAUTION)
    parser.add_argument("--input", type=Path, required=True, help="delimited file with one reading a row")
    parser.add_argument("--output", type=Path, help="CSV file to write (default: standard output)")
    parser.add_argument(
        "--column",
        action="append",
        default=[],
        metavar="QUANTITY=NAME",
        help=f"which column holds {', '.join(ROLES)}; once for each, twice for a date and a time of day",
    )
    parser.add_argument("--zone", help="IANA zone of times without offset, for example Europe/Lisbon")
    parser.add_argument(
        "--time-format", help="iso, unix_s, unix_ms, unix_us or a pattern such as '%%d.%%m.%%Y %%H:%%M'"
    )
    parser.add_argument(
        "--as-arrived",
        action="store_true",
        help="flags as they were given when each reading came, without what later readings revealed",
    )
    _add_place_options(parser.add_argument_group("where the sensor hangs"))
    group = parser.add_argument_group("the sensor and the water")
    add_sensor_options(group)
    add_water_option(group)


def _add_place_options(group: argparse._ArgumentGroup) -> None:
    group.add_argument(
        "--surroundings",
        choices=tuple(place.value for place in Surroundings),
        default=Surroundings.OPEN_TANK.value,
        help="sets the thresholds (default: open-tank)",
    )
    group.add_argument("--interval", type=float, metavar="S", help="between readings (default: the median of the file)")
    group.add_argument(
        "--expected-salinity", type=float, help="set point of the tank: tells a dry probe from fresh water"
    )
    for variable, unit in (("conductivity", "mS/cm"), ("temperature", "degC"), ("salinity", "salinity")):
        group.add_argument(
            f"--expect-{variable}",
            nargs=2,
            type=float,
            metavar=("LOW", "HIGH"),
            help=f"what the site expects: outside is suspect [{unit}]",
        )


@dataclass(frozen=True, slots=True)
class Readings:
    """What is judged, in order of time, and where each row stood in the file."""

    order: IntArray
    time_us: IntArray
    conductivity: FloatArray
    temperature: FloatArray
    salinity: FloatArray
    flags: FlagArray
    reported: FloatArray


def run(args: argparse.Namespace) -> int:
    """Judge a table."""
    try:
        return _run(args)
    except UsageError as error:
        print(f"euryhale quality: {error}", file=sys.stderr)
        return USAGE_ERROR
    except BrokenPipeError:
        raise  # the reader of our output has gone: the command says nothing more
    except (EuryhaleError, OSError) as error:
        print(f"euryhale quality: {error}", file=sys.stderr)
        return OTHER_ERROR


def _run(args: argparse.Namespace) -> int:
    columns, times = _columns(args.column)
    compensation, kind = compensation_of(args), water_kind_of(args.water)
    if args.output is not None and args.output.resolve() == args.input.resolve():
        raise UsageError("--output must be another file than --input")
    units = {"conductivity": args.unit, "temperature": "degC", "pressure": "dbar"}
    table = table_of(args, columns, times, units=units)
    with progress_bar("reading", " B") as progress:
        chunk = whole(table, progress=progress)
    readings = _readings(chunk, args.unit, compensation, kind)
    result = _judged(args, readings)
    is_comma = table.layout.has_decimal_comma
    with destination(args.output) as target, progress_bar("writing", " rows") as progress:
        write_flags(
            target,
            result,
            rows=np.argsort(readings.order),
            numbers={
                "conductivity_mS_cm": readings.conductivity,
                "temperature_degC": readings.temperature,
                "salinity": readings.salinity,
            },
            has_decimal_comma=is_comma,
            progress=progress,
        )
    _tell(chunk, readings, result, compensation)
    return 0


def _columns(pairs: list[str]) -> tuple[dict[str, str], list[str]]:
    columns, times = columns_of(pairs, roles=ROLES)
    missing = [role for role in ("conductivity", "temperature") if role not in columns]
    if missing:
        raise UsageError("needs " + " and ".join(f"--column {role}=NAME" for role in missing))
    return columns, times


def _readings(chunk: Chunk, unit: str, compensation: Compensation | None, kind: WaterKind) -> Readings:
    """Return readings in order of time, conductivity as the cell measured it, salinity derived."""
    assert chunk.time_us is not None  # noqa: S101 - a time column was asked for
    order = np.argsort(chunk.time_us, kind="stable")
    reported = conductivity_mS_cm_from(chunk.values["conductivity"][order], unit=unit)
    temperature = chunk.values["temperature"][order]
    pressure = np.nan_to_num(chunk.values["pressure"][order]) if "pressure" in chunk.values else 0.0
    measured = reported
    if compensation is not None:
        measured = conductivity_from_specific_conductance(
            reported, temperature_degC=temperature, compensation=compensation
        )
    water = kind.properties(measured, temperature_degC=temperature, pressure_dbar=pressure)
    salinity = water.practical_salinity if isinstance(kind, Seawater) else water.absolute_salinity_g_kg
    said = (chunk.flags["conductivity"] | chunk.flags["temperature"])[order]
    # Where the table knows why there is no number, "not finite" says nothing more.
    flags = np.where(said != 0, (water.flags & ~np.uint32(Flag.NOT_FINITE)) | said, water.flags)
    return Readings(order, chunk.time_us[order], measured, temperature, salinity, flags, reported)


def _judged(args: argparse.Namespace, readings: Readings) -> QualityResult:
    expected = (args.expect_conductivity, args.expect_temperature, args.expect_salinity)
    span = tuple(tuple(own) if own else usual for own, usual in zip(expected, DEFAULT_SUSPECT_SPAN, strict=True))
    try:
        limits = default_limits(
            Surroundings(args.surroundings),
            interval_s=args.interval if args.interval is not None else _usual_interval_s(readings.time_us),
            expected_salinity=np.nan if args.expected_salinity is None else args.expected_salinity,
            suspect_span=span,
        )
    except InvalidInputError as error:
        raise UsageError(str(error)) from error
    _, live = evaluate(
        QualityState.fresh(1),
        Thresholds.from_limits([limits]),
        sensor=np.zeros(readings.time_us.shape, dtype=np.int64),
        measured_at_us=readings.time_us,
        conductivity=readings.conductivity,
        temperature=readings.temperature,
        salinity=readings.salinity,
        flags=readings.flags,
    )
    return live if args.as_arrived else live.amended()


def _usual_interval_s(time_us: IntArray) -> float:
    steps = np.diff(time_us)
    steps = steps[steps > 0]
    return float(np.median(steps)) / MICROSECONDS_PER_SECOND if steps.shape[0] else 60.0


def _tell(chunk: Chunk, readings: Readings, result: QualityResult, compensation: Compensation | None) -> None:
    """Say on the error channel what was found: counts, cells that held no number, the compensation."""
    count = len(chunk)
    by_quality = ", ".join(
        f"{int((result.quality == quality).sum())} {word}"
        for quality, word in (
            (Quality.PASS, "passed"),
            (Quality.SUSPECT, "suspect"),
            (Quality.FAIL, "failed"),
            (Quality.MISSING, "missing"),
            (Quality.NOT_EVALUATED, "not evaluated"),
        )
    )
    print(f"{count} readings: {by_quality}", file=sys.stderr)
    for test in QualityTest:
        flags = result.by_test[test]
        spoken = int(((flags == Quality.SUSPECT) | (flags == Quality.FAIL)).any(axis=0).sum())
        if spoken:
            print(f"  {test.name.lower().replace('_', ' ')}: {spoken}", file=sys.stderr)
    tell_remarks(chunk)
    evidence = check_compensation(
        readings.reported,
        temperature_degC=readings.temperature,
        measured_at_us=readings.time_us,
        is_declared_compensated=compensation is not None,
        compensation=compensation,
    )
    print(f"compensation: {evidence.sentence}", file=sys.stderr)
