"""`euryhale correct`: what to do with a tank that is off its target now."""

from __future__ import annotations

import json
import math
import sys
from typing import TYPE_CHECKING, Any

from analysis.acclimation.correction import FIRST_SOURCE, Correction, corrected, correction_summary
from analysis.errors import InvalidInputError
from dashboard.terminal.acclimate import CAUTION, OTHER_ERROR, USAGE_ERROR, plan_lines, write_pdf
from dashboard.terminal.transfer_options import add_options, limits_of, stage_of, task_of

if TYPE_CHECKING:
    import argparse
    from pathlib import Path

    from analysis.acclimation.plan import Plan

HELP = "say what to do with a tank that is off its target now"


def add_parser(subparsers: Any) -> None:
    """Add this command to the parser."""
    from pathlib import Path

    parser = subparsers.add_parser(
        "correct",
        help=HELP,
        description=f"{HELP}: --from-salinity is the water now, --to-salinity the target, --used-to-salinity what the "
        "animals are used to (default: the target).",
        epilog=CAUTION,
    )
    add_options(parser)
    parser.add_argument("--hours-away", type=float, default=0.0, help="how long the water has been as it is now [h]")
    parser.add_argument("--pdf", type=Path, metavar="FILE", help="write the sheet of the way to the target")


def run(args: argparse.Namespace) -> int:
    """Print what to do."""
    if args.used_to_salinity is None:
        args.used_to_salinity = args.to_salinity
    try:
        _check_hours(args.hours_away)
        stage = stage_of(args)
        found = corrected(task_of(args, stage), stage, limits_of(args, stage), hours_away=args.hours_away)
    except InvalidInputError as error:
        print(f"euryhale correct: {error}", file=sys.stderr)
        return USAGE_ERROR
    if args.json:
        print(json.dumps(correction_summary(found), ensure_ascii=False, allow_nan=False, indent=1))
    else:
        print("\n".join(correction_lines(found)))
    return _written(found, args.pdf)


def _check_hours(hours_away: float) -> None:
    if not (math.isfinite(hours_away) and hours_away >= 0.0):
        raise InvalidInputError("--hours-away", found=hours_away, allowed="0 h or more")


def _written(found: Correction, path: Path | None) -> int:
    plan = found.onward or found.back
    if path is None or plan is None:
        return 0
    try:
        write_pdf(plan, path)
    except OSError as error:
        print(f"euryhale correct: {error}", file=sys.stderr)
        return OTHER_ERROR
    return 0


def correction_lines(found: Correction) -> list[str]:
    """Return the card as a person reads it on a terminal."""
    lines = [
        f"Urgent: {found.urgency.value}. {found.why}",
        f"The animals are used to salinity {found.acclimated_salinity:.1f}; the water has been away from it for "
        f"{found.hours_away:g} h",
        "",
        "First:",
        *(f"  {number}. {words}" for number, words in enumerate(found.first, start=1)),
        f"  [{FIRST_SOURCE}]",
    ]
    for title, plan in (
        ("Then at once, back to what they are used to", found.back),
        ("Then slowly, to the target", found.onward),
    ):
        if plan is not None:
            lines += ["", *_without_cautions(plan, title)]
    if found.back is None and found.onward is None:
        lines += ["", "No water needs to be moved: it is within the tolerance of the target."]
    return [*lines, "", "Cautions:", *(f"  {caution}" for caution in found.cautions)]


def _without_cautions(plan: Plan, title: str) -> list[str]:
    lines = plan_lines(plan, title=title)
    return lines[: lines.index("Cautions:") - 1]
