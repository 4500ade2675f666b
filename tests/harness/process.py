"""Watching processes and waiting for conditions, with a generous limit and never a fixed sleep as proof."""

from __future__ import annotations

import os
import time
from collections.abc import Callable
from pathlib import Path


def is_gone(pid: int) -> bool:
    """Return True when the process ended; a zombie that nobody has reaped counts as gone."""
    stat = Path(f"/proc/{pid}/stat")
    if Path("/proc/self/stat").exists():
        try:
            return stat.read_text().rpartition(")")[2].split()[0] in "ZX"
        except (FileNotFoundError, ProcessLookupError):
            return True
    try:
        os.kill(pid, 0)
    except ProcessLookupError:
        return True
    return False


def wait_until(condition: Callable[[], bool], *, what: str, limit_s: float = 60.0) -> None:
    """Return as soon as *condition* holds; fail with *what* was waited for after *limit_s*."""
    limit = time.monotonic() + limit_s
    while not condition():
        assert time.monotonic() < limit, f"waited {limit_s} s for {what}"
        time.sleep(0.01)
