"""`euryhale convert`: conductivity and temperature into salinity and osmolality, one value or a whole table."""

from __future__ import annotations

import csv
import json
import math
import sys
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from tqdm import tqdm

from analysis.errors import EuryhaleError, InvalidInputError
from analysis.flags import Flag, words
from analysis.water.conversion import Conversion
from analysis.water.uncertainty import SensorAccuracy
from dashboard.terminal.sensor_options import (
    UsageError,
    add_sensor_options,
    add_water_option,
    compensation_of,
    destination,
    water_kind_of,
)
from ingest.tables import Table, TableError

if TYPE_CHECKING:
    import argparse
    from collections.abc import Callable, Iterator

    from ingest.tables import CellRemark, Chunk, Layout


HELP = "turn conductivity and temperature into salinity, density and osmolality"

CAUTION = (
    "Estimated from conductivity: no laboratory measurement. The kind of water is declared, not measured; "
    "a fouled or drifted sensor is worse than its data sheet."
)

USAGE_ERROR = 2
OTHER_ERROR = 1
MOST_REMARKS = 5

SHOWN = {
    "practical_salinity": ("practical salinity", "", 4),
    "absolute_salinity_g_kg": ("absolute salinity", "g/kg", 4),
    "density_kg_m3": ("density", "kg/m3", 3),
    "osmolality_mOsm_kg": ("osmolality (freezing-point basis)", "mOsm/kg", 2),
    "osmolality_in_situ_mOsm_kg": ("osmolality at this temperature", "mOsm/kg", 2),
    "osmotic_pressure_kPa": ("osmotic pressure", "kPa", 1),
    "freezing_point_degC": ("freezing point", "degC", 4),
    "oxygen_solubility_mg_L": ("oxygen solubility", "mg/L", 3),
}
"""The answers in their order: key, and the words, unit and decimals in which a person reads them."""

INPUT_COLUMNS = ("conductivity", "temperature", "pressure")


def add_parser(subparsers: Any) -> None:
    """Add this command to the parser."""
    parser = subparsers.add_parser("convert", help=HELP, description=HELP, epilog=CAUTION)
    one = parser.add_argument_group("one value")
    one.add_argument("--conductivity", type=float, help="conductivity as read")
    one.add_argument("--temperature", type=float, help="temperature of the water [degC]")
    one.add_argument("--pressure", type=float, help="sea pressure [dbar] (default: 0)")
    one.add_argument("--json", action="store_true", help="print one JSON object")
    table = parser.add_argument_group("a table")
    table.add_argument("--input", type=Path, help="delimited file with one reading a row")
    table.add_argument("--output", type=Path, help="file to write (default: standard output)")
    table.add_argument(
        "--column",
        action="append",
        default=[],
        metavar="QUANTITY=NAME",
        help=f"which column holds {', '.join(INPUT_COLUMNS)}; once for each",
    )
    _add_sensor_options(parser.add_argument_group("the sensor"))
    _add_water_options(parser.add_argument_group("the water"))


def _add_sensor_options(group: argparse._ArgumentGroup) -> None:
    add_sensor_options(group)
    group.add_argument(
        "--conductivity-accuracy", type=float, default=0.5, help="stated accuracy [%% of reading] (default: 0.5)"
    )
    group.add_argument("--temperature-accuracy", type=float, default=0.1, help="stated accuracy [K] (default: 0.1)")


def _add_water_options(group: argparse._ArgumentGroup) -> None:
    add_water_option(group)
    group.add_argument("--latitude", type=float, help="where the sea water comes from [degrees north]")
    group.add_argument("--longitude", type=float, help="where the sea water comes from [degrees east]")


def run(args: argparse.Namespace) -> int:
    """Convert one value or a table."""
    try:
        conversion = _conversion(args)
        if args.input is None:
            return _convert_one(args, conversion)
        return _convert_table(args, conversion)
    except UsageError as error:
        print(f"euryhale convert: {error}", file=sys.stderr)
        return USAGE_ERROR
    except BrokenPipeError:
        raise  # the reader of our output has gone: the command says nothing more
    except UnicodeDecodeError as error:
        print(f"euryhale convert: {args.water}: found {error}; allowed: text in UTF-8", file=sys.stderr)
        return OTHER_ERROR
    except (EuryhaleError, OSError) as error:
        print(f"euryhale convert: {error}", file=sys.stderr)
        return OTHER_ERROR


def _conversion(args: argparse.Namespace) -> Conversion:
    if (args.latitude is None) != (args.longitude is None):
        raise UsageError("--latitude and --longitude go together")
    if args.latitude is not None and not (abs(args.latitude) <= 90.0 and abs(args.longitude) <= 360.0):
        raise UsageError("--latitude is from -90 to 90 and --longitude from -360 to 360 degrees")
    try:
        accuracy = SensorAccuracy(
            conductivity_percent=args.conductivity_accuracy, temperature_K=args.temperature_accuracy
        )
        compensation = compensation_of(args)
    except InvalidInputError as error:
        raise UsageError(str(error)) from error
    return Conversion(
        kind=water_kind_of(args.water),
        unit=args.unit,
        compensation=compensation,
        accuracy=accuracy,
        longitude=math.nan if args.longitude is None else args.longitude,
        latitude=math.nan if args.latitude is None else args.latitude,
    )


def _convert_one(args: argparse.Namespace, conversion: Conversion) -> int:
    if args.output is not None or args.column:
        raise UsageError("--output and --column need --input")
    if args.conductivity is None or args.temperature is None:
        raise UsageError("give --conductivity and --temperature, or --input with --column")
    found = conversion.answers(
        np.array([args.conductivity]),
        temperature_degC=np.array([args.temperature]),
        pressure_dbar=np.array([0.0 if args.pressure is None else args.pressure]),
    )
    answer: dict[str, Any] = {key: _or_null(float(values[0])) for key, values in found.quantities.items()}
    answer["flags"] = words(int(found.flags[0]))
    answer["uncertainty"] = {key: _or_null(float(values[0])) for key, values in found.uncertainties.items()}
    if args.json:
        print(json.dumps(answer, allow_nan=False))
    else:
        _print_for_a_person(answer, water=conversion.kind.name)
    return 0


def _or_null(value: float) -> float | None:
    return value if math.isfinite(value) else None


def _print_for_a_person(answer: dict[str, Any], *, water: str) -> None:
    print(f"{'kind of water':34s} {water}")
    for key, (name, unit, decimals) in SHOWN.items():
        value = answer[key]
        doubt = answer["uncertainty"].get(key)
        text = "not known" if value is None else f"{value:.{decimals}f}"
        plus_minus = "" if doubt is None or value is None else f" ± {doubt:.2g}"
        print(f"{name:34s} {text}{plus_minus}{'' if value is None else ' ' + unit}".rstrip())
    if answer["flags"]:
        print(f"{'flags':34s} {', '.join(answer['flags'])}")
    print(f"\n{CAUTION}")


def _convert_table(args: argparse.Namespace, conversion: Conversion) -> int:
    if args.json or args.conductivity is not None or args.temperature is not None or args.pressure is not None:
        raise UsageError("--json, --conductivity, --temperature and --pressure are for one value, not for --input")
    columns = _columns(args.column)
    if args.output is not None and args.output.resolve() == args.input.resolve():
        raise UsageError("--output must be another file than --input")
    table = _table(args.input, columns, unit=args.unit)
    separator = "," if table.layout.separator == " " else table.layout.separator
    remarks: list[CellRemark] = []
    with destination(args.output) as target, _progress() as progress:
        writer = csv.writer(target, delimiter=separator, lineterminator="\n")
        writer.writerow([*table.layout.names, *SHOWN, "flags", *_doubt_names(conversion)])
        for chunk in table.chunks(progress=progress, has_rows=True):
            writer.writerows(_answered(chunk, table.layout, conversion))
            remarks += chunk.remarks[: MOST_REMARKS + 1 - len(remarks)]
    _tell(remarks)
    return 0


def _columns(pairs: list[str]) -> dict[str, str]:
    columns: dict[str, str] = {}
    for pair in pairs:
        quantity, found, name = pair.partition("=")
        if not found or not name or quantity not in INPUT_COLUMNS:
            raise UsageError(f"--column: found {pair!r}; allowed: QUANTITY=NAME with {', '.join(INPUT_COLUMNS)}")
        if quantity in columns:
            raise UsageError(f"--column: {quantity} is given twice")
        columns[quantity] = name
    if not {"conductivity", "temperature"} <= set(columns):
        raise UsageError("--input needs --column conductivity=NAME and --column temperature=NAME")
    return columns


def _table(path: Path, columns: dict[str, str], *, unit: str) -> Table:
    try:
        return Table(path, columns=columns, units={"conductivity": unit, "temperature": "degC", "pressure": "dbar"})
    except TableError as error:
        if error.column in columns.values():
            raise UsageError(str(error)) from error
        raise


def _doubt_names(conversion: Conversion) -> list[str]:
    return [f"uncertainty_{key}" for key in (conversion.salinity_key, "osmolality_mOsm_kg")]


def _answered(chunk: Chunk, layout: Layout, conversion: Conversion) -> Iterator[list[str]]:
    """Yield each row as it was written, with the answers behind it."""
    given = chunk.values
    # A pressure that is missing costs a few thousandths of salinity near the surface, not the reading.
    pressure = np.nan_to_num(given["pressure"]) if "pressure" in given else np.zeros(len(chunk))
    found = conversion.answers(given["conductivity"], temperature_degC=given["temperature"], pressure_dbar=pressure)
    said = chunk.flags["conductivity"] | chunk.flags["temperature"]
    # Where the table knows why there is no number, "not finite" says nothing more.
    flags = np.where(said != 0, (found.flags & ~np.uint32(Flag.NOT_FINITE)) | said, found.flags)
    numbers = [*found.quantities.values()], [*found.uncertainties.values()]
    width = len(layout.names)
    for index, row in enumerate(chunk.rows):
        padded = (row + [""] * (width - len(row)))[:width]
        before, after = (
            [_cell(values[index], has_comma=layout.has_decimal_comma) for values in part] for part in numbers
        )
        yield [*padded, *before, " ".join(words(int(flags[index]))), *after]


def _cell(value: float, *, has_comma: bool) -> str:
    if not math.isfinite(value):
        return ""
    text = f"{value:.9g}"
    return text.replace(".", ",") if has_comma else text


def _tell(remarks: list[CellRemark]) -> None:
    """Name the first cells that hold no number; the table goes on without them."""
    for remark in remarks[:MOST_REMARKS]:
        place = f"line {remark.line}, column {remark.column}"
        print(f"euryhale convert: {place}: found {remark.found}; allowed: {remark.allowed}", file=sys.stderr)
    if len(remarks) > MOST_REMARKS:
        print("euryhale convert: and more; such rows are marked in the column flags", file=sys.stderr)


@contextmanager
def _progress() -> Iterator[Callable[[int, int], None]]:
    """Yield what shows how far the reading is, on a terminal only."""
    disable = not sys.stderr.isatty()
    with tqdm(unit="B", unit_scale=True, file=sys.stderr, disable=disable, leave=False) as bar:

        def show(done: int, total: int) -> None:
            bar.total = total
            bar.update(done - bar.n)

        yield show
