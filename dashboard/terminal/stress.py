"""`euryhale stress`: what a record of salinity and temperature did to the animals, row by row."""

from __future__ import annotations

import csv
import json
import math
import sys
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any, TextIO

import numpy as np

from analysis.animal import tables
from analysis.animal.constants import constants
from analysis.animal.context import osmotic_part_only
from analysis.animal.exposure import limits_at
from analysis.animal.fallbacks import resolved
from analysis.animal.forecast import minutes_to_limits
from analysis.animal.osmoregulation import CohortState, GapRule
from analysis.animal.stage_arrays import StageArrays
from analysis.animal.strains import BAND_WORDS, DRIVER_WORDS, Band, Driver
from analysis.animal.stress import Stress, advance_series, exposure_of_series
from analysis.animal.survival import estimate, survival_basis
from analysis.arrays import MICROSECONDS_PER_SECOND
from analysis.errors import EuryhaleError, InvalidInputError
from analysis.water.properties import WaterKind
from dashboard.terminal.sensor_options import UsageError, destination, water_kind_of
from dashboard.terminal.table_options import columns_of, progress_bar, table_of, tell_remarks
from ingest.tables import whole

if TYPE_CHECKING:
    import argparse
    from collections.abc import Callable

    from analysis.animal.stage import Stage
    from analysis.arrays import FloatArray, IntArray
    from ingest.tables import Chunk

HELP = "say what a record of salinity and temperature did to the animals"

CAUTION = (
    "A decision aid from published averages, no diagnosis. Estimated osmolality is no laboratory measurement. "
    "Test any schedule on a few animals first and ask the veterinarian."
)
USAGE_ERROR = 2
OTHER_ERROR = 1
ROLES = ("time", "salinity", "osmolality", "temperature")
COLUMNS = (
    "time", "stress", "range_strain", "change_strain", "exposure_strain", "thermal_strain", "driver", "band", "minutes_to_limit",
)  # fmt: skip
ROWS_AT_ONCE = 8192
DEFAULT_RESOLUTION_MOSM_KG = 0.3
"""Step of the readings for the time left: about 0.01 in salinity, as most meters print."""


def add_parser(subparsers: Any) -> None:
    """Add this command to the parser."""
    parser = subparsers.add_parser("stress", help=HELP, description=HELP, epilog=CAUTION)
    parser.add_argument("--input", type=Path, required=True, help="delimited file with one reading a row")
    parser.add_argument("--output", type=Path, help="CSV file to write (default: standard output, none with --json)")
    parser.add_argument(
        "--column", action="append", default=[], metavar="QUANTITY=NAME",
        help="which column holds time, salinity (or osmolality), temperature; once for each",
    )  # fmt: skip
    parser.add_argument("--animal", required=True, metavar="SPECIES/STAGE", help="as `euryhale species` lists them")
    parser.add_argument(
        "--acclimated-to", type=float, metavar="SP", help="salinity the animals are used to (default: not known)"
    )
    parser.add_argument(
        "--acclimated-to-temperature", type=float, metavar="DEGC", help="temperature the animals are used to"
    )
    parser.add_argument(
        "--water", default="seawater", metavar="seawater|sodium-chloride|FILE.yaml",
        help="kind of water; salinity is g/kg in every kind but sea water (default: seawater)",
    )  # fmt: skip
    parser.add_argument("--zone", help="IANA zone of times without offset, for example Europe/Lisbon")
    parser.add_argument(
        "--time-format", help="iso, unix_s, unix_ms, unix_us or a pattern such as '%%d.%%m.%%Y %%H:%%M'"
    )
    parser.add_argument("--json", action="store_true", help="print a summary as one JSON object")


def run(args: argparse.Namespace) -> int:
    """Judge a record."""
    try:
        return _run(args)
    except UsageError as error:
        print(f"euryhale stress: {error}", file=sys.stderr)
        return USAGE_ERROR
    except BrokenPipeError:
        raise  # the reader of our output has gone: the command says nothing more
    except (EuryhaleError, OSError) as error:
        print(f"euryhale stress: {error}", file=sys.stderr)
        return OTHER_ERROR


@dataclass(frozen=True, slots=True)
class Record:
    """The readings in order of time, and where each row stood in the file."""

    order: IntArray
    time_us: IntArray
    osmolality: FloatArray
    temperature: FloatArray


@dataclass(frozen=True, slots=True)
class Judged:
    """What the record did to the animals."""

    stress: Stress
    minutes: FloatArray
    exposure: FloatArray


def _run(args: argparse.Namespace) -> int:
    stage, kind = _stage(args.animal), water_kind_of(args.water)
    columns, times = _columns(args.column)
    if args.output is not None and args.output.resolve() == args.input.resolve():
        raise UsageError("--output must be another file than --input")
    state = _start(args, kind)
    table = table_of(args, columns, times, units={"temperature": "degC"})
    with progress_bar("reading", " B") as progress:
        chunk = whole(table, progress=progress)
    record = _record(chunk, kind)
    judged = _judged(stage, state, record)
    if args.output is not None or not args.json:
        with destination(args.output) as target, progress_bar("writing", " rows") as progress:
            _write(target, judged, record, has_decimal_comma=table.layout.has_decimal_comma, progress=progress)
    summary = _summary(stage, state, record, judged, kind)
    if args.json:
        print(json.dumps(summary, ensure_ascii=False))
    else:
        _tell(summary, chunk)
    return 0


def _stage(animal: str) -> Stage:
    try:
        return tables.find(animal)
    except InvalidInputError as error:
        raise UsageError(f"--animal: {error}") from error


def _columns(pairs: list[str]) -> tuple[dict[str, str], list[str]]:
    columns, times = columns_of(pairs, roles=ROLES)
    if ("salinity" in columns) == ("osmolality" in columns):
        raise UsageError("needs either --column salinity=NAME or --column osmolality=NAME")
    return columns, times


def _start(args: argparse.Namespace, kind: WaterKind) -> CohortState:
    warmth = math.nan if args.acclimated_to_temperature is None else args.acclimated_to_temperature
    if args.acclimated_to is None:
        state = CohortState.unknown(1)
        state.acclimated_degC[0] = warmth
        return state
    if not 0.0 <= args.acclimated_to <= 120.0:
        raise UsageError(f"--acclimated-to: found {args.acclimated_to:g}; allowed: 0 to 120")
    osmolality = np.array([float(kind.osmolality_from_salinity(args.acclimated_to))])
    return CohortState.used_to(osmolality, temperature_degC=np.array([warmth]))


def _record(chunk: Chunk, kind: WaterKind) -> Record:
    """Return the readings in order of time; water that cannot be is no reading."""
    times = chunk.time_us if chunk.time_us is not None else np.zeros(0, dtype=np.int64)
    order = np.argsort(times, kind="stable")
    temperature = chunk.values["temperature"][order] if "temperature" in chunk.values else np.full(order.size, np.nan)
    if "osmolality" in chunk.values:
        osmolality = chunk.values["osmolality"][order]
    else:
        salinity = chunk.values["salinity"][order]
        osmolality = np.asarray(kind.osmolality_from_salinity(np.where(salinity >= 0.0, salinity, np.nan)))
    osmolality = np.where(osmolality >= 0.0, osmolality, np.nan)
    temperature = np.where((temperature >= -2.5) & (temperature <= 50.0), temperature, np.nan)
    return Record(order, times[order], osmolality, temperature)


def _gap(time_us: IntArray) -> GapRule:
    """Return how long a reading may stand: six hours, or three of the record's own steps where these are longer."""
    steps = np.diff(time_us)
    usual_s = float(np.median(steps[steps > 0])) / MICROSECONDS_PER_SECOND if np.any(steps > 0) else 0.0
    usual = GapRule()
    return GapRule(max(usual.hold_s, 3.0 * usual_s), max(usual.unknown_after_s, 6.0 * usual_s))


def _judged(stage: Stage, state: CohortState, record: Record) -> Judged:
    figures, gap = StageArrays.from_stages([stage]), _gap(record.time_us)
    water, warmth = record.osmolality, record.temperature
    _, stress = advance_series(
        figures, state, times_us=record.time_us, osmolality_mOsm_kg=water, temperature_degC=warmth, gap=gap
    )
    exposure = exposure_of_series(
        figures, state, times_us=record.time_us, osmolality_mOsm_kg=water, temperature_degC=warmth, gap=gap
    )
    limits = limits_at(figures, warmth, constants())
    low, high = (np.broadcast_to(side, water.shape) for side in (limits.tolerable_low, limits.tolerable_high))
    # A tolerable limit at fresh water cannot be passed.
    low = np.where(low <= 0.0, np.nan, low)
    minutes = minutes_to_limits(record.time_us, water, low=low, high=high, resolution=DEFAULT_RESOLUTION_MOSM_KG)
    return Judged(stress, minutes, exposure)


def _write(
    target: TextIO,
    judged: Judged,
    record: Record,
    *,
    has_decimal_comma: bool,
    progress: Callable[[int, int], None] | None,
) -> None:
    writer = csv.writer(target, delimiter=";" if has_decimal_comma else ",", lineterminator="\n")
    writer.writerow(COLUMNS)
    rows = np.argsort(record.order)
    stress = judged.stress
    numbers = (
        (stress.stress, 1), (stress.range_strain, 3), (stress.change_strain, 3), (stress.exposure_strain, 3), (stress.thermal_strain, 3),
    )  # fmt: skip
    drivers, words = (
        {int(key): text for key, text in DRIVER_WORDS.items()},
        {int(key): text for key, text in BAND_WORDS.items()},
    )
    for start in range(0, rows.size, ROWS_AT_ONCE):
        part = rows[start : start + ROWS_AT_ONCE]
        times = np.datetime_as_string(record.time_us[part].astype("datetime64[us]"), unit="ms")
        cells = [_texts(values[part], decimals, has_decimal_comma=has_decimal_comma) for values, decimals in numbers]
        minutes = _texts(judged.minutes[part], 1, has_decimal_comma=has_decimal_comma)
        driver = [drivers[code] for code in stress.driver[part].tolist()]
        band = [words[code] for code in stress.band[part].tolist()]
        writer.writerows(zip((f"{time}Z" for time in times), *cells, driver, band, minutes, strict=True))
        if progress is not None:
            progress(min(start + ROWS_AT_ONCE, rows.size), rows.size)


def _texts(values: FloatArray, decimals: int, *, has_decimal_comma: bool) -> list[str]:
    texts = ["" if value != value else f"{value:.{decimals}f}" for value in values.tolist()]
    return [text.replace(".", ",") for text in texts] if has_decimal_comma else texts


def _summary(stage: Stage, state: CohortState, record: Record, judged: Judged, kind: WaterKind) -> dict[str, Any]:
    stress = judged.stress.stress
    known = np.nonzero(~np.isnan(stress))[0]
    summary: dict[str, Any] = {
        "animal": stage.id,
        "rows": int(record.time_us.size),
        "rows_judged": int(known.size),
        "worst_stress": None,
        "worst_at": None,
        "driver": DRIVER_WORDS[Driver.UNKNOWN],
        "band": BAND_WORDS[Band.UNKNOWN],
        "survival": _survival(stage, state, record, judged),
        "osmotic_part_only": osmotic_part_only(kind.name),
    }
    if known.size:
        worst = int(known[np.argmax(stress[known])])
        at = np.datetime_as_string(record.time_us[worst].astype("datetime64[us]"), unit="ms")
        summary |= {
            "worst_stress": round(float(stress[worst]), 1),
            "worst_at": f"{at}Z",
            "driver": DRIVER_WORDS[Driver(int(judged.stress.driver[worst]))],
            "band": BAND_WORDS[Band(int(judged.stress.band[worst]))],
        }
    return summary


def _survival(stage: Stage, state: CohortState, record: Record, judged: Judged) -> dict[str, Any] | None:
    """Return the survival that the highest exposure leaves, or None where it is not known."""
    exposure, water = judged.exposure, record.osmolality
    if not np.any(np.isfinite(exposure)) or np.isnan(resolved(stage).value("home")):
        return None
    home = float(state.acclimated[0])
    if math.isnan(home):
        return None
    basis = survival_basis(stage, lowest=float(np.nanmin(water)), highest=float(np.nanmax(water)), home=home)
    if basis is None:
        return None
    found = estimate(float(np.nanmax(exposure)), steepness=constants().steepness, certainty=basis[0], sources=basis[1])
    return {
        "alive": round(found.alive, 3),
        "low": round(found.low, 3),
        "high": round(found.high, 3),
        "certainty": found.certainty.value,
        "sources": list(found.sources),
    }


def _tell(summary: dict[str, Any], chunk: Chunk) -> None:
    """Say the summary on the error channel, beside the table on the output."""
    if summary["worst_stress"] is None:
        print(f"{summary['rows']} rows, none could be judged: not known", file=sys.stderr)
    else:
        print(
            f"worst stress {summary['worst_stress']:.0f} ({summary['band']}) at {summary['worst_at']}, by {summary['driver']}; "
            f"{summary['rows_judged']} of {summary['rows']} rows judged",
            file=sys.stderr,
        )
    survival = summary["survival"]
    if survival is None:
        print("survival: not known", file=sys.stderr)
    else:
        print(
            f"expected alive above control: {survival['alive']:.0%} ({survival['low']:.0%}-{survival['high']:.0%}; "
            f"{survival['certainty']}: {', '.join(survival['sources'])})",
            file=sys.stderr,
        )
    if summary["osmotic_part_only"]:
        print("osmotic part only: this water is not shown to be seawater-like in K, Mg and Ca", file=sys.stderr)
    tell_remarks(chunk)
    print(CAUTION, file=sys.stderr)
