"""A year of another estuary, which nothing was tuned on: how often honest readings are called bad.

Record: estuary_creek_2004.csv, U.S. National Estuarine Research Reserve System-wide Monitoring Program (NOAA), a
tidal creek in Florida, every 30 minutes, salinity 0.1 to 33, weeks of fresh flood. Its rows without complaint are
flagged <4> (historical).
"""

from __future__ import annotations

import csv

import numpy as np
import pytest

from analysis.sensor.quality.evaluation import evaluate
from analysis.sensor.quality.limits import Surroundings, default_limits
from analysis.sensor.quality.state import QualityState
from analysis.sensor.quality.thresholds import Thresholds
from analysis.water.compensation import Compensation, conductivity_from_specific_conductance
from analysis.water.properties import Seawater


@pytest.mark.shared_data
def test_a_year_of_tides_and_floods(shared_data):
    with (shared_data / "estuary_creek_2004.csv").open(newline="", encoding="utf-8") as lines:
        rows = list(csv.DictReader(lines))
    temperature = np.array([float(row["temp_C"] or "nan") for row in rows])
    conductivity = conductivity_from_specific_conductance(
        np.array([float(row["spcond_mS_cm"] or "nan") for row in rows]),
        temperature_degC=temperature,
        compensation=Compensation(),
    )
    water = Seawater().properties(conductivity, temperature_degC=temperature)
    times = np.array([row["time_utc"].removesuffix("Z") for row in rows], dtype="datetime64[us]").astype(np.int64)
    _, live = evaluate(
        QualityState.fresh(1),
        Thresholds.from_limits([default_limits(Surroundings.TIDAL_INTAKE, interval_s=1800.0)]),
        sensor=np.zeros(len(rows), dtype=np.int64),
        measured_at_us=times,
        conductivity=conductivity,
        temperature=temperature,
        salinity=water.practical_salinity,
        flags=water.flags,
    )
    quality = live.amended().quality
    honest = np.array([row["flag_sal"].startswith("<4>") and row["flag_temp"].startswith("<4>") for row in rows])
    blank = np.isnan(temperature)
    print(f"suspect {(quality[honest] == 3).mean():.4f}, failed {(quality[honest] == 4).mean():.4f}")  # noqa: T201
    assert honest.sum() == 16243
    assert (quality[honest] == 3).mean() <= 0.02
    assert (quality[honest] == 4).mean() <= 0.001
    assert set(quality[blank]) == {9}
