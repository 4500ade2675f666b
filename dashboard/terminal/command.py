"""The euryhale command: one room a command; only the room that is asked for is opened."""

from __future__ import annotations

import argparse
import sys
from importlib import import_module
from typing import TYPE_CHECKING, Any

from analysis.errors import EuryhaleError

if TYPE_CHECKING:
    from collections.abc import Sequence

ROOMS = (
    "demo",
    "check",
    "watch",
    "board",
    "convert",
    "quality",
    "species",
    "stress",
    "acclimate",
    "correct",
    "replay",
    "secret",
)
"""The commands, in the order in which a newcomer meets them; each is a module here with HELP, add_parser and run."""

USAGE_ERROR = 2
OTHER_ERROR = 1


def _room(name: str) -> Any:
    return import_module(f"dashboard.terminal.{name}")


def parser(rooms: Sequence[str]) -> argparse.ArgumentParser:
    """Return the parser with the given rooms."""
    top = argparse.ArgumentParser(
        prog="euryhale",
        description="Salinity, osmolality and osmotic stress for people who keep aquatic animals.",
        epilog="Estimated osmolality is no laboratory measurement and the stress figure no diagnosis. "
        "A monitor does not replace a person's rounds.",
    )
    subparsers = top.add_subparsers(dest="command", metavar="COMMAND", required=True)
    for name in rooms:
        _room(name).add_parser(subparsers)
    return top


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the command in *arguments* (default: of the process) and return its exit status."""
    given = list(sys.argv[1:] if arguments is None else arguments)
    rooms = [given[0]] if given and given[0] in ROOMS else ROOMS
    args = parser(rooms).parse_args(given)
    try:
        return int(_room(args.command).run(args))
    except EuryhaleError as error:
        print(f"euryhale {args.command}: {error}", file=sys.stderr)
        return OTHER_ERROR
    except KeyboardInterrupt:
        return 130
    except BrokenPipeError:
        # The reader of our output has gone: nothing more to say.
        sys.stderr.close()
        return OTHER_ERROR


if __name__ == "__main__":
    sys.exit(main())
