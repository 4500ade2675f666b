"""One measured year of a tidal creek through a real broker and the real worker.

Data: U.S. National Estuarine Research Reserve System-wide Monitoring Program (NOAA), station in a tidal creek of
Florida, 2004, every 30 minutes; specific conductance at 25 degC compensated by 1.91 %/K, salinity reported to 0.1.
"""

from __future__ import annotations

import csv
import subprocess
import sys
from datetime import datetime
from pathlib import Path

import numpy as np
import pytest

from ingest.broker import Broker
from ingest.clock import to_microseconds
from ingest.store.queries import Queries
from tests.harness.hatchery import running_worker
from tests.harness.process import wait_until

DAY_US = 86_400_000_000
SITE = """\
site: {{id: creek, name: Creek House, time_zone: America/New_York, horizon: {{past_h: 1000000, future_min: 10}}}}
store: {{path: store}}
broker: {{host: 127.0.0.1, port: {port}}}
tanks:
  - {{id: creek, name: Creek, volume_L: 1000, water: seawater}}
sensors:
  - id: creek-ct
    tank: creek
    topic: creek/ct
    fields: {{conductivity: sc, temperature: temp, time: t}}
    reports: compensated
    compensation: {{method: linear, coefficient_percent_per_K: 1.91, reference_temperature_degC: 25}}
    interval_s: 1800
"""


class Year:
    """The record as it lies in the file; NaN where it is blank."""

    def __init__(self, file: Path) -> None:
        with file.open(encoding="utf-8", newline="") as lines:
            rows = list(csv.DictReader(lines))
        self.file = file
        self.time_us = np.array([to_microseconds(datetime.fromisoformat(row["time_utc"])) for row in rows])
        self.temperature, self.conductance, self.salinity = (
            np.array([float(row[name]) if row[name] else np.nan for row in rows])
            for name in ("temp_C", "spcond_mS_cm", "sal_psu")
        )

    @property
    def has_values(self) -> np.ndarray:
        return ~np.isnan(self.temperature) | ~np.isnan(self.conductance)

    def blank_stretches(self, least_us: int) -> list[tuple[int, int]]:
        """Return (last row with values, next row with values) of every stretch without any that is so long."""
        times = self.time_us[self.has_values]
        long = np.flatnonzero(np.diff(times) >= least_us)
        return [(int(times[index]), int(times[index + 1])) for index in long]


@pytest.mark.slow
@pytest.mark.mosquitto
@pytest.mark.shared_data
def test_a_measured_year_is_stored_once_agrees_and_keeps_its_gaps(mosquitto: Broker, shared_data: Path, tmp_path: Path):
    file = shared_data / "estuary_creek_2004.csv"
    if not file.exists():
        pytest.skip("estuary_creek_2004.csv is not beside the project; get it with: a copy of shared/data beside it")
    year = Year(file)
    site_file = tmp_path / "site.yaml"
    site_file.write_text(SITE.format(port=mosquitto.port))
    with running_worker(site_file, "--clock", "replay") as worker:
        queries = Queries(worker.store)
        wait_until(lambda: queries.meta().get("broker_connected") == 1, what="the worker to reach the broker")
        replay = [
            sys.executable,
            "-P",
            "-m",
            "dashboard.terminal.command",
            "replay",
            str(file),
            "--site",
            str(site_file),
        ]
        subprocess.run([*replay, "--sensor", "creek-ct", "--keep-times"], check=True, capture_output=True, timeout=600)
        expected = int(year.has_values.sum())
        wait_until(lambda: queries.counters().get("messages", 0) >= expected, what="every row", limit_s=300)
        wait_until(
            lambda: int(queries.meta().get("rolled_until", 0)) > year.time_us[-1] - DAY_US // 24,
            what="the rollups",
            limit_s=300,
        )
        assert worker.stop() == 0
    assert queries.reading_count() == expected
    assert queries.counters().get("duplicates", 0) == 0

    stored = [queries.history("creek-ct", from_us=day, to_us=day + DAY_US) for day in _days(year)]
    time_us = np.concatenate([part.time_us for part in stored])
    assert np.array_equal(time_us, year.time_us[year.has_values])
    computed, reported = np.concatenate([part.salinity for part in stored]), year.salinity[year.has_values]
    both = ~np.isnan(computed) & ~np.isnan(reported)
    assert both.sum() > 15_000
    difference = np.abs(computed - reported)[both]
    median, nearly_all = np.median(difference), np.percentile(difference, 95)
    assert median <= 0.03
    assert nearly_all <= 0.06
    measured = ~np.isnan(year.temperature) & ~np.isnan(year.conductance)
    assert np.array_equal(np.isnan(computed), ~measured[year.has_values]), "a value there is, and none where none was"

    whole = queries.history("creek-ct", from_us=int(year.time_us[0]), to_us=int(year.time_us[-1]) + 1)
    assert whole.resolution_us > 0
    weeks = year.blank_stretches(DAY_US)
    assert len(weeks) >= 3
    for last, following in weeks:
        inside = (whole.time_us > last) & (whole.time_us + whole.resolution_us <= following)
        assert not inside.any(), "nothing was measured there, so nothing is drawn there"
    known = ~np.isnan(whole.salinity)
    assert np.nanmin(whole.salinity_min[known]) == pytest.approx(np.nanmin(computed), abs=1e-9)


def _days(year: Year) -> range:
    return range(int(year.time_us[0]), int(year.time_us[-1]) + 1, DAY_US)
