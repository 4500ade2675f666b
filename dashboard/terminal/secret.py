"""`euryhale secret set NAME`: keep a password beside the site file, where only its owner can read it."""

from __future__ import annotations

import getpass
import sys
from pathlib import Path
from typing import TYPE_CHECKING, Any

from ingest.secrets import write_secret

if TYPE_CHECKING:
    import argparse

HELP = "keep a password that the site file names"


def add_parser(subparsers: Any) -> None:
    """Add this command to the parser."""
    parser = subparsers.add_parser("secret", help=HELP, description=HELP)
    parser.add_argument("action", choices=("set",))
    parser.add_argument("name", help="the name that the site file uses")
    parser.add_argument("--site", type=Path, default=Path("site.yaml"), help="the site file (default: site.yaml)")


def run(args: argparse.Namespace) -> int:
    """Read the secret from the keyboard, or from a pipe, and keep it."""
    value = getpass.getpass(f"{args.name}: ") if sys.stdin.isatty() else sys.stdin.readline().rstrip("\n")
    if not value:
        print("nothing was entered; nothing is kept", file=sys.stderr)
        return 1
    path = write_secret(args.name, value, site_file=args.site)
    print(f"kept in {path}, readable by you only")
    return 0
