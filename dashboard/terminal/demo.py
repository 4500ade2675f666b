"""`euryhale demo`: an invented hatchery, live in the browser. Everything it starts ends with it, however it ends."""

from __future__ import annotations

import logging
import re
import shutil
import signal
import sys
import threading
import time
from datetime import UTC, datetime, timedelta
from pathlib import Path
from typing import IO, TYPE_CHECKING, Any, NamedTuple

from tqdm import tqdm

from analysis.errors import EuryhaleError, InvalidInputError
from ingest import logs, tether
from ingest.broker import Broker, free_port, is_listening
from ingest.clock import SystemClock
from ingest.simulator import scenario as scenarios
from ingest.simulator.history import write_history
from ingest.simulator.live import run_live
from ingest.site.loading import load
from ingest.store.lock import is_held

if TYPE_CHECKING:
    import argparse
    import subprocess

HELP = "show an invented hatchery, live in the browser"
SEED = 7
HISTORY_DAYS = 14.0
BOARD_PORT = 8501
MARK = "made-by-euryhale-demo"
LOOPBACK = "127.0.0.1"
READY_LIMIT_S = 120.0
LOOK_EVERY_S = 0.2
STOP_LIMIT_S = 15.0
_DATE = re.compile(r"since: \d{4}-\d{2}-\d{2}")


class Part(NamedTuple):
    """A part of the demo: a process on a tether."""

    name: str
    process: subprocess.Popen[bytes]
    pid: int


def add_parser(subparsers: Any) -> None:
    """Add this command to the parser."""
    parser = subparsers.add_parser("demo", help=HELP, description=HELP)
    parser.add_argument("--folder", type=Path, default=Path("demo_run"), help="where its files go (default: demo_run)")
    parser.add_argument("--days", type=float, default=HISTORY_DAYS, help="days of history (default: 14)")
    parser.add_argument("--port", type=int, help="port of the board (default: 8501, or a free one)")
    parser.add_argument("--part", choices=("sensors",), help="run one part of the demo; used by the demo itself")
    parser.add_argument("--anchor", type=int, help="when the demo began, microseconds UTC; used by the demo itself")


def run(args: argparse.Namespace) -> int:
    """Run the demo until Ctrl-C, or one part of it."""
    if args.part == "sensors":
        return _run_sensors(args.folder, args.anchor)
    logs.set_up(level=logging.WARNING)
    for number in (signal.SIGINT, signal.SIGTERM):
        signal.signal(number, signal.default_int_handler)
    try:
        return _run_all(args)
    except KeyboardInterrupt:
        print("stopped; nothing of it runs any more")
        return 0


def _run_all(args: argparse.Namespace) -> int:
    """Start everything and look after it until it is interrupted."""
    folder = args.folder.resolve()
    _prepare(folder, board_port=args.port or _board_port())
    site = load(folder / "site.yaml")
    with Broker(folder=folder / "broker", port=site.broker.port) as broker, (folder / "parts.log").open("ab") as log:
        print(f"broker    {broker.kind} on {broker.host}:{broker.port}")
        anchor_us = SystemClock().now_us()
        _write_history(folder, anchor_us, args.days)
        parts: list[Part] = []
        site_file, began = str(folder / "site.yaml"), str(anchor_us)
        try:
            for name, arguments in (
                ("worker", ["watch", "--site", site_file, "--health-port", str(free_port())]),
                ("sensors", ["demo", "--part", "sensors", "--folder", str(folder), "--anchor", began]),
                ("board", ["board", "--site", site_file]),
            ):
                parts.append(_start(name, arguments, log))
            return _watch_over(parts, site.board.port)
        finally:
            for part in reversed(parts):
                _end(part)


def _prepare(folder: Path, *, board_port: int) -> None:
    """Lay the demo's files anew: last time's history would have a hole up to now."""
    _check_ours(folder)
    shutil.rmtree(folder, ignore_errors=True)
    folder.mkdir(parents=True)
    (folder / MARK).write_text(
        "Made by euryhale demo, which empties this folder each time it starts.\n", encoding="utf-8"
    )
    source = _demo_data()
    text = (source / "site.yaml").read_text(encoding="utf-8")
    # The animals came when the history begins.
    came = (datetime.now(UTC) - timedelta(days=HISTORY_DAYS)).date().isoformat()
    text = _DATE.sub(f"since: {came}", text)
    text = text.replace("port: 1883", f"port: {free_port()}").replace("port: 8501", f"port: {board_port}")
    (folder / "site.yaml").write_text(text, encoding="utf-8")
    shutil.copy(source / "scenario.yaml", folder / "scenario.yaml")


def _check_ours(folder: Path) -> None:
    """Refuse a folder that holds anything but a demo that has ended: it is going to be emptied."""
    if not folder.exists():
        return
    if not folder.is_dir() or (any(folder.iterdir()) and not (folder / MARK).is_file()):
        allowed = "a folder that is not there yet, is empty, or was made by the demo: it is emptied at each start"
        raise InvalidInputError("--folder", found=str(folder), allowed=allowed)
    if any(is_held(lock.parent) for lock in folder.rglob("worker.lock")):
        raise InvalidInputError("--folder", found=str(folder), allowed="a folder in which no demo is running")


def _demo_data() -> Path:
    """Return the folder of the demo's data: in the source tree, or packed with the installed command."""
    here = Path(__file__).resolve()
    for folder in (here.parents[2] / "demo_data", here.parent / "demo_data"):
        if (folder / "site.yaml").is_file():
            return folder
    raise EuryhaleError("the demo's data are not installed; run it from the source tree with: make demo")


def _board_port() -> int:
    return free_port() if is_listening(LOOPBACK, BOARD_PORT) else BOARD_PORT


def _write_history(folder: Path, end_us: int, days: float) -> None:
    began_s = time.monotonic()
    with tqdm(
        total=100, desc="history", unit="%", bar_format="{desc}   {bar} {percentage:3.0f} %", disable=None
    ) as bar:

        def progress(part: float) -> None:
            bar.update(round(100 * part) - bar.n)

        count = write_history(
            folder / "site.yaml",
            end_us=end_us,
            days=days,
            seed=SEED,
            scenario=scenarios.load(folder / "scenario.yaml"),
            progress=progress,
        )
    print(f"history   {days:g} days, {count:,} messages through the chain in {time.monotonic() - began_s:.0f} s")


def _start(name: str, arguments: list[str], log: IO[bytes]) -> Part:
    process, pid = tether.start([sys.executable, "-P", "-m", "dashboard.terminal.command", *arguments], log=log)
    return Part(name, process, pid)


def _watch_over(parts: list[Part], board_port: int) -> int:
    """Say when the board is there, then look after the parts; returns only when one of them is gone."""
    limit_s = time.monotonic() + READY_LIMIT_S
    has_said = False
    while True:
        time.sleep(LOOK_EVERY_S)
        for part in parts:
            if part.process.poll() is not None:
                print(f"the {part.name} has ended by itself; see parts.log", file=sys.stderr)
                return 1
        if not has_said and is_listening(LOOPBACK, board_port):
            print(f"board     http://{LOOPBACK}:{board_port}   (Ctrl-C ends everything)", flush=True)
            has_said = True
        if not has_said and time.monotonic() > limit_s:
            print("the board does not answer; see parts.log", file=sys.stderr)
            return 1


def _end(part: Part) -> None:
    """Let go of the tether: the part is asked to end, and made to if it does not."""
    if part.process.stdin is not None:
        part.process.stdin.close()
    part.process.wait(STOP_LIMIT_S)


def _run_sensors(folder: Path, anchor_us: int) -> int:
    logs.set_up()
    stop = threading.Event()
    for number in (signal.SIGINT, signal.SIGTERM):
        signal.signal(number, lambda *_: stop.set())
    site = load(folder / "site.yaml")
    run_live(
        site,
        site.broker.host,
        site.broker.port,
        clock=SystemClock(),
        seed=SEED,
        stop=stop,
        scenario=scenarios.load(folder / "scenario.yaml"),
        anchor_us=anchor_us,
        since_us=anchor_us,
    )
    return 0
