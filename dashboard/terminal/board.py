"""`euryhale board`: the board in a browser, in a process of its own."""

from __future__ import annotations

import signal
import subprocess
import sys
from pathlib import Path
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    import argparse

HELP = "show the tanks in a browser"
STOP_WITHIN_S = 10.0


def add_parser(subparsers: Any) -> None:
    """Add this command to the parser."""
    parser = subparsers.add_parser("board", help=HELP, description=HELP)
    parser.add_argument("--site", type=Path, default=Path("site.yaml"), help="the site file (default: site.yaml)")
    parser.add_argument(
        "--host", help="address to listen on (default: the site file's, else 127.0.0.1: this machine alone)"
    )
    parser.add_argument("--port", type=int, help="port (default: the site file's, else 8501)")


def command(args: argparse.Namespace) -> list[str]:
    """Return the command line of the process that serves the board; the terminal itself never loads the browser's packages."""
    line = [sys.executable, "-P", "-m", "dashboard.browser.serve", "--site", str(args.site)]
    if args.host is not None:
        line += ["--host", args.host]
    if args.port is not None:
        line += ["--port", str(args.port)]
    return line


def run(args: argparse.Namespace) -> int:
    """Serve the board until told to stop, and take its process along."""
    board = subprocess.Popen(command(args))
    for number in (signal.SIGINT, signal.SIGTERM):
        signal.signal(number, lambda *_: board.terminate())
    try:
        return board.wait()
    finally:
        if board.poll() is None:
            board.terminate()
            try:
                board.wait(STOP_WITHIN_S)
            except subprocess.TimeoutExpired:
                board.kill()
