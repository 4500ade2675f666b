"""Make a small filled store of the present schema: run once, when a schema is released, never again for that number.

``python -P -m tests.ingest.store.schemas.make`` writes ``schemaN.db`` beside this file: two tanks, one of which fell
below its limit and was answered for; a day of readings; an unreadable payload; a command and its outcome.
"""

from __future__ import annotations

import shutil
import sqlite3
import tempfile
from contextlib import closing
from pathlib import Path

from ingest.store.migrations import STORE
from tests.harness.hatchery import START_US, Bench, site_text

DAY_US = 86_400_000_000
QUARTER_US = 900_000_000
STEP_US = 600_000_000
ROUNDS = 144
READINGS = 2 * ROUNDS
COMMAND_ID = "7d0ad1f6-5c39-4a8e-9a55-0d4e3a1f2b11"
LOW_ROUNDS = range(60, 80)


def fill(folder: Path) -> Path:
    """Fill a store and return the path of its file."""
    with Bench(folder, site_text(port=1, sensors=2, interval_s=600.0), now_us=START_US) as bench:
        for index in range(ROUNDS):
            at_us = START_US + index * STEP_US
            bench.clock.advance(STEP_US / 1e6)
            bench.read("s0", at_us, 27.0 if index in LOW_ROUNDS else 31.0)
            bench.read("s1", at_us, 31.0)
            bench.tick()
            if index == LOW_ROUNDS.stop - 5:
                bench.act("alarm.acknowledge", "t0", "salinity_low", command_id=COMMAND_ID)
        bench.send("quay/s0", b"{not a payload")
        bench.roll_up()
    return bench.store / "store.db"


def main() -> None:
    """Write the file of the present schema, unless it is there."""
    target = Path(__file__).parent / f"schema{STORE[-1].number}.db"
    if target.exists():
        raise SystemExit(f"{target.name} is there: the store of a released schema is never made anew")
    with tempfile.TemporaryDirectory() as folder:
        path = fill(Path(folder))
        with closing(sqlite3.connect(path)) as connection:
            connection.execute("PRAGMA wal_checkpoint(TRUNCATE)")
            connection.execute("PRAGMA journal_mode=DELETE")
            connection.execute("VACUUM")
        shutil.copy(path, target)


if __name__ == "__main__":
    main()
