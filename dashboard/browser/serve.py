"""Start the board: python -P -m dashboard.browser.serve --site FILE."""

from __future__ import annotations

import argparse
import sys
import threading
from pathlib import Path
from typing import Any

import streamlit as st
from starlette.middleware import Middleware
from starlette.middleware.trustedhost import TrustedHostMiddleware

from analysis.errors import EuryhaleError
from dashboard.browser import house
from dashboard.browser.routes import export, health, ways
from dashboard.browser.theme import streamlit_config
from ingest.clock import SystemClock

SCRIPT = Path(__file__).with_name("app.py")


def options(*, host: str, port: int) -> dict[str, Any]:
    """Return Streamlit's options: our theme; nothing sent home, nothing watched, no programs let in by the agent interface."""
    return {
        **streamlit_config(),
        "server.address": host,
        "server.port": port,
        "server.headless": True,
        "server.fileWatcherType": "none",
        "server.runOnSave": False,
        "server.enableAgentApi": False,
        "server.enableXsrfProtection": True,
        "browser.gatherUsageStats": False,
        "browser.serverAddress": host,
        "client.showErrorDetails": "none",
        "runner.fastReruns": True,
        "logger.level": "warning",
    }


def board(allowed_hosts: tuple[str, ...]) -> st.App:
    """Return the board as an ASGI application; a request under a host name that is not allowed is refused before anything else."""
    guard = Middleware(TrustedHostMiddleware, allowed_hosts=list(allowed_hosts), www_redirect=False)
    return st.App(SCRIPT, routes=[*health.ROUTES, *ways.ROUTES, *export.ROUTES], middleware=[guard])


def main(arguments: list[str] | None = None) -> int:
    """Serve until stopped."""
    parser = argparse.ArgumentParser(prog="euryhale board", description="The board in a browser.")
    parser.add_argument("--site", required=True, type=Path, help="the site file")
    parser.add_argument("--host", help="address to listen on (default: the site file's, else 127.0.0.1)")
    parser.add_argument("--port", type=int, help="port (default: the site file's, else 8501)")
    given = parser.parse_args(arguments)
    try:
        access = house.open_site(given.site, clock=SystemClock())
    except (EuryhaleError, OSError) as error:
        print(error, file=sys.stderr)  # noqa: T201 - this is what the terminal shows
        return 1
    section = access.site.board
    host, port = given.host or section.host, given.port if given.port is not None else section.port
    print(f"The board: http://{host}:{port}", flush=True)  # noqa: T201
    # The first look reads the species tables and takes seconds; it is over before the first visitor has come.
    threading.Thread(target=access.snapshot, name="first look", daemon=True).start()
    sys.argv = [str(SCRIPT)]
    board(section.allowed_hosts).run(config=options(host=host, port=port))
    return 0


if __name__ == "__main__":
    sys.exit(main())
