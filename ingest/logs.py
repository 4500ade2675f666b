"""Structured logs: one JSON object a line for machines, plain lines on a terminal."""

from __future__ import annotations

import logging
import sys
from typing import Any, TextIO, cast

import structlog


class _StandardError:
    """Standard error as it is at the moment of writing: a logger lives longer than a redirection of it."""

    def write(self, text: str) -> int:
        return sys.stderr.write(text)

    def flush(self) -> None:
        sys.stderr.flush()


def set_up(*, level: int = logging.INFO) -> None:
    """Send all logs to standard error."""
    renderer: Any = structlog.processors.JSONRenderer()
    if sys.stderr.isatty():
        renderer = structlog.dev.ConsoleRenderer(colors=False)
    structlog.configure(
        processors=[
            structlog.processors.add_log_level,
            structlog.processors.TimeStamper(fmt="iso", utc=True),
            structlog.processors.format_exc_info,
            renderer,
        ],
        wrapper_class=structlog.make_filtering_bound_logger(level),
        logger_factory=structlog.PrintLoggerFactory(cast("TextIO", _StandardError())),
        cache_logger_on_first_use=True,
    )
