"""The measured records beside the project, read with one declaration each; their README says what they hold."""

from __future__ import annotations

import csv
import time
from pathlib import Path

import numpy as np
import pytest

from analysis.flags import Flag
from ingest.tables import Table, whole


@pytest.mark.shared_data
@pytest.mark.parametrize(("name", "rows"), [("estuary_creek_2004", 17_568), ("oyster_bar_2012", 17_452)])
def test_a_station_record(shared_data: Path, name: str, rows: int) -> None:
    table = Table(
        shared_data / f"{name}.csv",
        columns={"conductivity": "spcond_mS_cm", "temperature": "temp_C", "salinity": "sal_psu"},
        time="time_utc",
        texts={"flag": "flag_sal"},
        units={"conductivity": "mS/cm", "temperature": "degC"},
    )
    chunk = whole(table)
    assert chunk.remarks == []
    assert len(chunk) == rows
    assert chunk.time_us is not None
    assert (np.diff(chunk.time_us) > 0).all()
    with (shared_data / f"{name}.csv").open(newline="") as file:
        cells = [row["spcond_mS_cm"] for row in csv.DictReader(file)]
    is_blank = np.array([not cell for cell in cells])
    np.testing.assert_array_equal(chunk.flags["conductivity"] == Flag.MISSING, is_blank)
    assert is_blank.sum() > 1000
    values = [float(cell) for cell in cells if cell]
    kept = np.where(chunk.flags["conductivity"][~is_blank] == 0, values, np.nan)
    np.testing.assert_array_equal(chunk.values["conductivity"][~is_blank], kept)


@pytest.mark.shared_data
def test_the_casts(shared_data: Path) -> None:
    columns = {"conductivity": "cond_mS_cm", "temperature": "temp_C", "pressure": "pressure_dbar"}
    chunk = whole(Table(shared_data / "ctd_casts.csv", columns=columns, texts={"cast": "cast"}))
    assert (len(chunk), chunk.remarks, len(set(chunk.texts["cast"]))) == (3644, [], 6)


def test_reading_costs_a_small_multiple_of_splitting_the_lines(tmp_path: Path) -> None:
    path = tmp_path / "minutes.csv"
    moments = np.datetime64("2026-01-01T00:00:00") + np.arange(40_000).astype("timedelta64[m]")
    path.write_text(
        "time,temp,ec\n" + "".join(f"{moment}Z,25.{i % 9},48.{i % 7}\n" for i, moment in enumerate(moments))
    )
    table = Table(path, columns={"conductivity": "ec", "temperature": "temp"}, time="time")
    ratios = []
    for _ in range(5):
        start = time.process_time()
        with path.open(newline="") as file:
            assert sum(1 for _ in csv.reader(file)) == 40_001
        middle = time.process_time()
        assert len(whole(table)) == 40_000
        ratios.append((time.process_time() - middle) / (middle - start))
    # Measured: 3.5 to 5.
    assert min(ratios) < 9
