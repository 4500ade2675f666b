"""`euryhale watch`: the worker. It listens, judges, stores and alarms until it is told to stop."""

from __future__ import annotations

import gc
import signal
import threading
from pathlib import Path
from typing import TYPE_CHECKING, Any

import structlog

from ingest import logs
from ingest.clock import ReplayClock, SystemClock
from ingest.worker import health
from ingest.worker.worker import Worker

if TYPE_CHECKING:
    import argparse

log = structlog.get_logger(__name__)

HELP = "run the worker: take readings in, judge, store and alarm"


def add_parser(subparsers: Any) -> None:
    """Add this command to the parser."""
    parser = subparsers.add_parser("watch", help=HELP, description=HELP)
    parser.add_argument("--site", type=Path, default=Path("site.yaml"), help="the site file (default: site.yaml)")
    parser.add_argument(
        "--clock",
        choices=("system", "replay"),
        default="system",
        help="replay: the time is that of the newest reading, for records replayed with --keep-times",
    )
    parser.add_argument(
        "--health-port", type=int, default=8502, help="port on this machine for /health and /metrics; 0: none"
    )


def run(args: argparse.Namespace) -> int:
    """Work until told to stop."""
    logs.set_up()
    stop = threading.Event()
    # Before the worker takes its store: whoever asks it to stop while it starts is heard too.
    for number in (signal.SIGINT, signal.SIGTERM):
        signal.signal(number, lambda *_: stop.set())
    clock = ReplayClock() if args.clock == "replay" else SystemClock()
    worker = Worker(args.site, clock=clock)
    signal.signal(signal.SIGHUP, lambda *_: worker.reload_soon())
    # What is loaded now stays for years: the collector need not look at it again at every block.
    gc.collect()
    gc.freeze()
    server = health.serve(worker, port=args.health_port) if args.health_port else None
    try:
        worker.run(stop)
    finally:
        if server is not None:
            server.shutdown()
    log.info("stopped; whatever was not yet stored waits at the broker")
    return 0
