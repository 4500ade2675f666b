"""`euryhale quality`: the quality tests on a logger's file, flags per test written beside each reading."""

from __future__ import annotations

import sys
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any, TextIO
from zoneinfo import ZoneInfo, ZoneInfoNotFoundError

import numpy as np
from tqdm import tqdm

from analysis.arrays import MICROSECONDS_PER_SECOND
from analysis.errors import EuryhaleError, InvalidInputError
from analysis.flags import Flag, Quality
from analysis.sensor.compensation_check import check_compensation
from analysis.sensor.quality.evaluation import evaluate
from analysis.sensor.quality.limits import DEFAULT_SUSPECT_SPAN, Surroundings, default_limits
from analysis.sensor.quality.state import QualityState
from analysis.sensor.quality.thresholds import Thresholds
from analysis.sensor.quality.words import QualityTest
from analysis.water.compensation import (
    DEFAULT_COEFFICIENT_PERCENT_PER_K,
    DEFAULT_REFERENCE_TEMPERATURE_DEGC,
    Compensation,
    CompensationMethod,
    conductivity_from_specific_conductance,
)
from analysis.water.properties import Seawater, WaterKind
from analysis.water.units import CONDUCTIVITY_UNITS, conductivity_mS_cm_from
from dashboard.terminal.flag_table import write_flags
from ingest.tables import Table, TableError, whole

if TYPE_CHECKING:
    import argparse
    from collections.abc import Iterator

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


class UsageError(EuryhaleError):
    """Options that do not go together."""


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
    _add_sensor_options(parser.add_argument_group("the sensor and the water"))


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


def _add_sensor_options(group: argparse._ArgumentGroup) -> None:
    group.add_argument("--unit", choices=tuple(CONDUCTIVITY_UNITS), default="mS/cm", help="default: mS/cm")
    group.add_argument(
        "--compensated", action="store_true", help="the meter brought its reading to a reference temperature"
    )
    group.add_argument(
        "--compensation",
        choices=tuple(method.value for method in CompensationMethod),
        help="how: linear (default) or natural-water (ISO 7888); implies --compensated",
    )
    group.add_argument("--coefficient", type=float, help="of linear compensation [%%/K] (default: 1.91)")
    group.add_argument("--reference-temperature", type=float, help="of the meter [degC] (default: 25)")
    group.add_argument(
        "--water",
        default="seawater",
        metavar="seawater|sodium-chloride|FILE.yaml",
        help="kind of water; a file holds a laboratory analysis of major ions (default: seawater)",
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
    compensation, kind = _compensation(args), _water_kind(args.water)
    if args.output is not None and args.output.resolve() == args.input.resolve():
        raise UsageError("--output must be another file than --input")
    table = _table(args, columns, times)
    with _progress("reading", " B") as progress:
        chunk = whole(table, progress=progress)
    readings = _readings(chunk, args.unit, compensation, kind)
    result = _judged(args, readings)
    is_comma = table.layout.has_decimal_comma
    with _destination(args.output) as target, _progress("writing", " rows") as progress:
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
    columns: dict[str, str] = {}
    times: list[str] = []
    for pair in pairs:
        role, found, name = pair.partition("=")
        if not found or not name or role not in ROLES:
            raise UsageError(f"--column: found {pair!r}; allowed: QUANTITY=NAME with {', '.join(ROLES)}")
        if role == "time":
            times.append(name)
        elif role in columns:
            raise UsageError(f"--column: {role} is given twice")
        else:
            columns[role] = name
    missing = [role for role in ("conductivity", "temperature") if role not in columns]
    if not times:
        missing.insert(0, "time")
    if missing or len(times) > 2:
        wanted = " and ".join(f"--column {role}=NAME" for role in missing) or "--column time=NAME once or twice"
        raise UsageError(f"needs {wanted}")
    return columns, times


def _compensation(args: argparse.Namespace) -> Compensation | None:
    settings = (args.coefficient, args.reference_temperature)
    if not args.compensated and args.compensation is None:
        if settings != (None, None):
            raise UsageError("--coefficient and --reference-temperature need --compensated")
        return None
    try:
        return Compensation(
            method=CompensationMethod(args.compensation or CompensationMethod.LINEAR),
            coefficient_percent_per_K=DEFAULT_COEFFICIENT_PERCENT_PER_K if settings[0] is None else settings[0],
            reference_temperature_degC=DEFAULT_REFERENCE_TEMPERATURE_DEGC if settings[1] is None else settings[1],
        )
    except InvalidInputError as error:
        raise UsageError(str(error)) from error


def _water_kind(word: str) -> WaterKind:
    if word == "seawater":
        return Seawater()
    if word == "sodium-chloride":
        from analysis.water.sodium_chloride_water import SodiumChlorideWater

        return SodiumChlorideWater()
    if word.lower().endswith((".yaml", ".yml")):
        from dashboard.terminal.analysis_file import water_of_analysis_file

        return water_of_analysis_file(Path(word))
    raise UsageError(f"--water: found {word!r}; allowed: seawater, sodium-chloride, or a file that ends in .yaml")


def _table(args: argparse.Namespace, columns: dict[str, str], times: list[str]) -> Table:
    try:
        zone = ZoneInfo(args.zone) if args.zone else None
    except (ZoneInfoNotFoundError, ValueError) as error:
        raise UsageError(f"--zone: found {args.zone!r}; allowed: an IANA zone such as Europe/Lisbon") from error
    try:
        return Table(
            args.input,
            columns=columns,
            time=times,
            time_format=args.time_format,
            zone=zone,
            units={"conductivity": args.unit, "temperature": "degC", "pressure": "dbar"},
        )
    except TableError as error:
        if error.column in {*columns.values(), *times} and error.found == "no such column":
            raise UsageError(str(error)) from error
        raise


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
    for remark in chunk.remarks[:3]:
        print(f"line {remark.line}, {remark.column}: found {remark.found}; allowed: {remark.allowed}", file=sys.stderr)
    if len(chunk.remarks) > 3:
        print(f"and {len(chunk.remarks) - 3} more such cells", file=sys.stderr)
    evidence = check_compensation(
        readings.reported,
        temperature_degC=readings.temperature,
        measured_at_us=readings.time_us,
        is_declared_compensated=compensation is not None,
        compensation=compensation,
    )
    print(f"compensation: {evidence.sentence}", file=sys.stderr)


@contextmanager
def _progress(what: str, unit: str) -> Iterator[Any]:
    """Yield a function of (done, in all) that moves a bar on the error channel, where that is a terminal."""
    bar = tqdm(desc=what, unit=unit, unit_scale=True, file=sys.stderr, disable=not sys.stderr.isatty(), leave=False)
    with bar:

        def moved(done: int, total: int) -> None:
            bar.total = total
            bar.update(done - bar.n)

        yield moved


@contextmanager
def _destination(path: Path | None) -> Iterator[TextIO]:
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
