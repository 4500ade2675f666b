"""A spike is known for one only when the next reading is in: the record then says so, and what was seen stays as it was."""

from __future__ import annotations

import threading
from pathlib import Path

import numpy as np

from analysis.flags import Quality
from ingest.clock import SystemClock
from ingest.mqtt import Received
from ingest.store.queries import Queries
from ingest.worker.worker import Worker
from tests.harness.hatchery import payload, site_text


def test_spike_is_amended_in_the_best_set_and_left_alone_in_the_seen_one(tmp_path: Path) -> None:
    site_file = tmp_path / "site.yaml"
    site_file.write_text(site_text(port=1, interval_s=10.0))
    worker = Worker(site_file, clock=SystemClock())
    stop = threading.Event()
    start_us = SystemClock().now_us() - 600_000_000
    salinities = [31.0, 31.01, 30.99, 38.0, 31.0, 31.01]
    times = [start_us + 10_000_000 * step for step in range(len(salinities))]
    for at_us, salinity in zip(times, salinities, strict=True):
        assert worker.process([Received("quay/s0", payload(at_us, salinity), at_us, False, 0, 0)], stop)
    queries = Queries(worker.store.folder)
    seen = queries.history("s0", from_us=times[0], to_us=times[-1] + 1, set="seen")
    best = queries.history("s0", from_us=times[0], to_us=times[-1] + 1)
    worker.close()
    assert seen.quality[3] in (Quality.PASS, Quality.NOT_EVALUATED, Quality.SUSPECT)
    assert best.quality[3] == Quality.FAIL
    others = np.delete(best.quality, 3)
    assert (others != Quality.FAIL).all()
    np.testing.assert_array_equal(best.salinity, seen.salinity)
