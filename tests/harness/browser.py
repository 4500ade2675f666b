"""A real board and a real Chromium for the tests: each skips with a message that names what is missing."""

from __future__ import annotations

import shutil
import signal
import socket
import subprocess
import sys
import time
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from pathlib import Path
from typing import TYPE_CHECKING
from urllib.error import URLError
from urllib.request import urlopen

import pytest

if TYPE_CHECKING:
    from playwright.sync_api import Browser

ARTEFACTS = Path(__file__).resolve().parents[2] / "artefacts"
FLAGS = ["--no-sandbox", "--disable-gpu", "--disable-background-networking", "--disable-component-update"]
READY_WITHIN_S = 60.0


def free_port() -> int:
    """Return a port of loopback that nobody uses."""
    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        return int(probe.getsockname()[1])


@contextmanager
def chromium() -> Iterator[Browser]:
    """Yield a Chromium; skip where there is none."""
    sync_api = pytest.importorskip("playwright.sync_api", reason="needs the package playwright: pip install playwright")
    path = shutil.which("chromium")
    if path is None:
        pytest.skip("needs Chromium on the path: apt-get install chromium")
    with sync_api.sync_playwright() as playwright:
        browser = playwright.chromium.launch(executable_path=path, args=FLAGS)
        try:
            yield browser
        finally:
            browser.close()


@contextmanager
def running_board(site_file: Path, *, log: Path) -> Iterator[str]:
    """Start the board on a free port and yield its address."""
    port = free_port()
    line = [sys.executable, "-P", "-m", "dashboard.browser.serve", "--site", str(site_file), "--port", str(port)]
    with log.open("wb") as out:
        process = subprocess.Popen(line, stdout=out, stderr=subprocess.STDOUT)
        try:
            _wait_until_ready(process, f"http://127.0.0.1:{port}/health", log)
            yield f"http://127.0.0.1:{port}"
        finally:
            process.send_signal(signal.SIGTERM)
            try:
                process.wait(15)
            except subprocess.TimeoutExpired:
                process.kill()
                process.wait()


def _wait_until_ready(process: subprocess.Popen[bytes], address: str, log: Path) -> None:
    deadline = time.monotonic() + READY_WITHIN_S
    while time.monotonic() < deadline:
        if process.poll() is not None:
            break
        with suppress(URLError, ConnectionError, TimeoutError), urlopen(address, timeout=5) as answer:
            if answer.status == 200:
                return
        time.sleep(0.1)
    raise AssertionError(f"the board did not come up:\n{log.read_text(errors='replace')[-3000:]}")
