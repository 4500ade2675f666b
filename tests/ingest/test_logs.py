from __future__ import annotations

import json
import subprocess
import sys
from datetime import datetime

PROGRAM = """
import logging, structlog
from ingest import logs
logs.set_up({options})
log = structlog.get_logger("room")
log.debug("hidden")
log.info("said", topic="quay/s0", text="line one\\nline two – ±", number=1.5)
try:
    1 / 0
except ZeroDivisionError:
    log.exception("went wrong", attempt=2)
"""


def said(options: str = "") -> tuple[str, list[dict[str, object]]]:
    done = subprocess.run(
        [sys.executable, "-P", "-c", PROGRAM.format(options=options)], capture_output=True, text=True, check=True
    )
    return done.stdout, [json.loads(line) for line in done.stderr.splitlines()]


def test_every_line_is_one_json_object_on_standard_error():
    out, lines = said()
    assert out == ""
    said_line, wrong = lines
    assert said_line["event"] == "said"
    assert said_line["level"] == "info"
    assert said_line["text"] == "line one\nline two – ±"
    assert said_line["number"] == 1.5
    assert datetime.fromisoformat(str(said_line["timestamp"])).utcoffset().total_seconds() == 0
    assert wrong["level"] == "error"
    assert "ZeroDivisionError: division by zero" in str(wrong["exception"])


def test_what_is_below_the_level_is_not_said():
    _, lines = said("level=logging.WARNING")
    assert [line["event"] for line in lines] == ["went wrong"]
