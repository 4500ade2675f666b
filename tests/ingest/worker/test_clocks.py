"""Clocks of probes that are wrong, and what a worker that starts again makes of them."""

from __future__ import annotations

from analysis.flags import Flag
from tests.harness.hatchery import START_US, Bench, payload, site_text

MINUTE_US = 60_000_000
HOUR_US = 60 * MINUTE_US


def test_a_probe_clock_that_steps_back_neither_hides_its_readings_nor_stops_the_worker(tmp_path):
    with Bench(tmp_path, site_text(port=1), now_us=START_US) as bench:
        sent = []
        for _ in range(10):
            bench.clock.advance(60)
            sent.append(payload(bench.clock.now_us(), 31.0))
            assert bench.send("quay/s0", sent[-1])
        for minute in range(10):
            bench.clock.advance(60)
            assert bench.send("quay/s0", payload(bench.clock.now_us() - HOUR_US, 30.0 + minute / 10))
        shown = bench.queries.latest()["s0"]
        assert shown.practical_salinity is not None
        assert abs(shown.practical_salinity - 30.9) < 1e-6
        assert shown.flags & Flag.CLOCK_DOUBTED
        bench.restart()
        # The broker delivers again what it holds unacknowledged: all of it is known, though it is newer than what is shown.
        assert bench.send("quay/s0", *sent)
        assert bench.queries.reading_count() == 20
        assert bench.queries.counters()["duplicates"] == 10
