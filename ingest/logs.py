"""Structured logs: one JSON object a line for machines, plain lines on a terminal."""

from __future__ import annotations

import logging
import sys
from typing import Any

import structlog


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
        logger_factory=structlog.PrintLoggerFactory(sys.stderr),
        cache_logger_on_first_use=True,
    )
