"""`euryhale acclimate`: plan a move of animals from one water to another."""

from __future__ import annotations

import csv
import json
import math
import sys
from pathlib import Path
from typing import TYPE_CHECKING, Any

from analysis.acclimation.arrival import DispatchSheet
from analysis.acclimation.plan import planned
from analysis.acclimation.summary import plan_summary
from analysis.acclimation.task import Water
from analysis.errors import InvalidInputError, MissingPackageError
from dashboard.terminal.transfer_options import add_options, limits_of, moment_of, stage_of, task_of, zone_of

if TYPE_CHECKING:
    import argparse
    from collections.abc import Sequence

    from analysis.acclimation.plan import Plan, PlannedStep

HELP = "plan a move of animals from one water to another"
CAUTION = (
    "Test a schedule on a few animals first. The stress score is a decision aid from published averages, no diagnosis; "
    "salt and brine have their own rules: follow local codes, the veterinarian and the site's procedures."
)
USAGE_ERROR = 2
OTHER_ERROR = 1
BAR = 24

COLUMNS = ("step", "start", "drain_L", "add", "salinity", "between", "degC", "mOsm/kg", "stress")
CSV_COLUMNS = (
    "number", "start", "duration_min", "drain_L", "add", "salt", "dissolve_L", "flow_L_min", "practical_salinity", "salinity_g_kg",
    "temperature_degC", "osmolality_mOsm_kg", "ph", "volume_L", "stress", "journey_stress", "driver",
)  # fmt: skip


def add_parser(subparsers: Any) -> None:
    """Add this command to the parser."""
    parser = subparsers.add_parser("acclimate", help=HELP, description=HELP, epilog=CAUTION)
    add_options(parser)
    parser.add_argument("--pdf", type=Path, metavar="FILE", help="write the sheet for the wall")
    parser.add_argument("--csv", type=Path, metavar="FILE", help="write the table of steps")
    sheet = parser.add_argument_group("arrival and dispatch sheet")
    sheet.add_argument("--arrival-pdf", type=Path, metavar="FILE", help="write it; needs --since and --hours-packed")
    sheet.add_argument("--since", metavar="TIME", help="since when they are used to the water they come from")
    sheet.add_argument("--number", type=int, default=0, help="of animals")
    sheet.add_argument("--bags", type=int, default=1, help="in which they travel")
    sheet.add_argument("--sender", default="", help="name")
    sheet.add_argument("--receiver", default="", help="name")
    parser.add_argument("--released-only", action="store_true", help="leave out sources that nobody has released")


def run(args: argparse.Namespace) -> int:
    """Plan, print, and write what was asked for."""
    try:
        stage = stage_of(args)
        plan = planned(task_of(args, stage), stage, limits_of(args, stage), needs_release=args.released_only)
        sheet = None if args.arrival_pdf is None else _arrival_sheet(args, plan)
    except InvalidInputError as error:
        print(f"euryhale acclimate: {error}", file=sys.stderr)
        return USAGE_ERROR
    if args.json:
        print(json.dumps(plan_summary(plan), ensure_ascii=False, allow_nan=False, indent=1))
    else:
        print("\n".join(plan_lines(plan)))
    try:
        if args.csv is not None:
            write_csv(plan, args.csv)
        if args.pdf is not None:
            write_pdf(plan, args.pdf)
        if sheet is not None:
            _write_arrival_pdf(sheet, args.arrival_pdf)
    except (OSError, MissingPackageError) as error:
        print(f"euryhale acclimate: {error}", file=sys.stderr)
        return OTHER_ERROR
    return 0


def _arrival_sheet(args: argparse.Namespace, plan: Plan) -> DispatchSheet:
    """Return the sheet that goes with the animals, from the options and the task."""
    task = plan.task
    if args.since is None or task.packed is None:
        raise InvalidInputError("--arrival-pdf", found="no --since or no --hours-packed", allowed="both")
    source = task.sources[0] if task.sources else None
    warmth, ph = (math.nan, math.nan) if source is None else (source.temperature_degC, source.ph)
    return DispatchSheet(
        animal=task.animal,
        number=args.number,
        acclimated_to=Water(task.home_salinity, task.start.temperature_degC, task.start.ph),
        since=moment_of(args.since, zone_of(args.zone), where="--since"),
        packed_at=task.clock(-60.0 * task.packed.hours_packed),
        packed=task.packed,
        bags=args.bags,
        litres_per_bag=task.vessel.volume_L / max(args.bags, 1),
        receiving=Water(task.target.salinity, warmth, ph),
        sender=args.sender,
        receiver=args.receiver,
    )


def _write_arrival_pdf(sheet: DispatchSheet, path: Path) -> None:
    try:
        from dashboard.reports.acclimation_sheet import dispatch_sheet_pdf
    except ModuleNotFoundError as error:
        raise MissingPackageError("fpdf2", extra="all", need="--arrival-pdf") from error
    path.write_bytes(dispatch_sheet_pdf(sheet))


def plan_lines(plan: Plan, *, title: str = "Plan") -> list[str]:
    """Return a plan as a person reads it on a terminal."""
    task = plan.task
    lines = [
        f"{title}: {task.animal}, salinity {task.start.salinity:g} to {task.target.salinity:g}, {task.vessel.volume_L:g} L "
        f"{task.vessel.word}, by {task.method.value}; used to {task.home_salinity:g}"
    ]
    if not plan.is_feasible:
        lines.append(f"No plan: {plan.reason}")
    elif plan.steps:
        lines += [*_totals(plan), "", *_table(plan.steps), "", *_chart(plan)]
    else:
        lines.append(f"Nothing to do: {plan.reason}")
    if plan.is_feasible and plan.needs_yes:
        lines += ["", "A named person agrees before the start:", *(f"  {need}" for need in plan.needs_yes)]
    if plan.time_left is not None:
        left = plan.time_left
        lines.append(f"The {task.vessel.word} serves {left.hours:.1f} h: {left.reason}")
    lines += ["", "Limits:"]
    lines += [
        f"  {limit.name}: {limit.value} [{limit.source}; {limit.certainty}]{_override(limit)}" for limit in plan.limits
    ]
    if plan.costs:
        lines += ["", "What the choices cost:", *(f"  {cost}" for cost in plan.costs)]
    for other in plan.alternatives:
        lines.append(f"  fewer steps: {other.steps} in {other.total_hours:.1f} h (ask for a coarser --clock-min)")
    return [*lines, "", "Cautions:", *(f"  {caution}" for caution in plan.cautions)]


def _override(limit: Any) -> str:
    return f" set by {limit.overridden_by}: {limit.reason}" if limit.overridden_by else ""


def _totals(plan: Plan) -> list[str]:
    used = [f"{litres:g} L {name}" for name, litres in plan.water_used_L.items() if litres]
    used += [f"{kilograms:g} kg {name}" for name, kilograms in plan.salt_used_kg.items() if kilograms]
    lines = [
        f"{plan.task.begins_at:%Y-%m-%d %H:%M} to {plan.ends_at:%Y-%m-%d %H:%M %Z}: {plan.total_hours:.1f} h, "
        f"{len(plan.steps)} steps; {', '.join(used)}; drained {plan.drained_L:g} L",
        survival_words(plan),
    ]
    if plan.standing is not None and plan.standing.range_strain == plan.standing.range_strain:
        standing = plan.standing
        lines.append(
            f"The destination's own strain: {standing.range_strain:.2f} (0.5 is the tolerable limit); stress "
            f"{standing.stress_after_h:.0f} after {standing.hours:g} h there"
        )
    else:
        lines.append("The destination's own strain: not known")
    return lines


def survival_words(plan: Plan) -> str:
    """Return the survival estimate in words, or that it is not known."""
    if plan.survival is None:
        return "Expected survival: not known"
    found = plan.survival
    return (
        f"Expected survival above control, two days after: {100 * found.alive:.0f} % ({100 * found.low:.0f} to "
        f"{100 * found.high:.0f} %) [{', '.join(found.sources)}; {found.certainty.value}]"
    )


def _table(steps: Sequence[PlannedStep]) -> list[str]:
    rows = [COLUMNS, *(_cells(step) for step in steps)]
    widths = [max(len(row[column]) for row in rows) for column in range(len(COLUMNS))]
    return ["  ".join(cell.rjust(width) for cell, width in zip(row, widths, strict=True)) for row in rows]


def _cells(step: PlannedStep) -> tuple[str, ...]:
    parts = [f"{litres:g} L {name}" for name, litres in step.add.items()]
    parts += [f"{kilograms:g} kg {name} dissolved in {step.dissolve_L:g} L" for name, kilograms in step.salt.items()]
    if step.flow_L_min == step.flow_L_min:
        parts.append(f"at {step.flow_L_min:.3g} L/min for {step.duration_min:.0f} min")
    return (
        str(step.number),
        f"{step.start:%m-%d %H:%M}",
        f"{step.drain_L:g}",
        ", ".join(parts),
        f"{step.salinity:.2f}",
        f"{step.salinity_low:.1f}-{step.salinity_high:.1f}",
        f"{step.temperature_degC:.1f}",
        f"{step.osmolality_mOsm_kg:.0f}",
        "?" if step.stress != step.stress else f"{step.stress:.0f} {step.driver}",
    )


def _chart(plan: Plan) -> list[str]:
    """Return salinity over time as bars, at most twenty lines."""
    highest = max(plan.task.start.salinity, *(step.salinity for step in plan.steps), 1e-9)
    points = [(0.0, plan.task.start.salinity)]
    points += [((step.minute + step.duration_min) / 60.0, step.salinity) for step in plan.steps]
    every = -(-len(points) // 20)
    chosen = sorted({*points[::every], points[-1]})
    return [f"{hours:7.1f} h  {salinity:6.2f}  {'█' * round(BAR * salinity / highest)}" for hours, salinity in chosen]


def write_csv(plan: Plan, path: Path) -> None:
    """Write the table of steps as CSV."""
    with path.open("w", newline="", encoding="utf-8") as file:
        writer = csv.writer(file)
        writer.writerow(CSV_COLUMNS)
        for step in plan_summary(plan)["steps"]:
            writer.writerow([_flat(step[column]) for column in CSV_COLUMNS])


def _flat(value: Any) -> Any:
    if isinstance(value, dict):
        return "; ".join(f"{amount:g} {name}" for name, amount in value.items())
    return "" if value is None else value


def write_pdf(plan: Plan, path: Path) -> None:
    """Write the sheet for the wall.

    Raises
    ------
    MissingPackageError
        If the package that writes PDF is not installed.
    """
    try:
        from dashboard.reports.acclimation_sheet import acclimation_sheet_pdf
    except ModuleNotFoundError as error:
        raise MissingPackageError("fpdf2", extra="all", need="--pdf") from error
    path.write_bytes(acclimation_sheet_pdf(plan))
