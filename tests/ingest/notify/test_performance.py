"""How well the alarms worked, asked of a store in which something happened."""

from __future__ import annotations

from zoneinfo import ZoneInfo

from ingest.notify.performance import site_performance
from tests.ingest.notify.scene import CallBench
from tests.ingest.notify.test_restarts import Hands


def test_a_night_with_one_fall_is_counted_per_person(tmp_path):
    hands = Hands()
    with CallBench(tmp_path, post=hands) as bench:
        begin_us = bench.clock.now_us()
        bench.fall("s0")
        bench.step()
        bench.step(301)
        bench.act("alarm.acknowledge", "t0", "salinity_low")
        bench.step()
        report = site_performance(
            bench.store, from_us=begin_us, until_us=bench.clock.now_us() + 1, zone=ZoneInfo("Europe/Lisbon")
        )
    assert report.count == 1
    assert report.acknowledged_count == 1
    assert report.median_acknowledgement_s >= 300
    assert {who: list(nights.values()) for who, nights in report.calls_per_night.items()} == {"ana": [1], "rui": [1]}
    assert report.chattering == ()
    assert report.stale == ()
