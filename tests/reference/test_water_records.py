"""Measured records: the salinity that the instruments reported, against this project. The data stay where they are."""

from __future__ import annotations

import csv
from collections import defaultdict
from pathlib import Path

import numpy as np
import pytest

from analysis.water.compensation import Compensation, conductivity_from_specific_conductance
from analysis.water.properties import Seawater
from analysis.water.units import T90_FROM_T68

pytestmark = pytest.mark.shared_data
Columns = dict[str, np.ndarray]


def column_values(path: Path, names: tuple[str, ...]) -> Columns:
    found: dict[str, list[float]] = defaultdict(list)
    texts: dict[str, list[str]] = defaultdict(list)
    with path.open(encoding="utf-8", newline="") as source:
        for row in csv.DictReader(source):
            for name in names:
                found[name].append(float(row[name]) if row[name].strip() else np.nan)
            for name in ("cast", "temp_scale"):
                texts[name].append(row.get(name, ""))
    return {
        **{name: np.array(values) for name, values in found.items()},
        **{name: np.array(v) for name, v in texts.items()},
    }


@pytest.fixture(scope="module")
def casts(shared_data: Path) -> Columns:
    return column_values(shared_data / "ctd_casts.csv", ("pressure_dbar", "temp_C", "cond_mS_cm", "sal_psu"))


def test_ship_casts_to_a_ten_thousandth(casts: Columns) -> None:
    """The two casts that print four decimals of salinity: every row in water agrees to 0.0001."""
    temperature = np.where(casts["temp_scale"] == "ITS-90", casts["temp_C"], casts["temp_C"] * T90_FROM_T68)
    found = Seawater().properties(
        casts["cond_mS_cm"], temperature_degC=temperature, pressure_dbar=casts["pressure_dbar"]
    )
    difference = np.abs(found.practical_salinity - casts["sal_psu"])
    exact = np.char.startswith(casts["cast"].astype(str), "dPIRX") & np.isfinite(difference)
    assert exact.sum() > 500
    assert np.max(difference[exact]) <= 1e-4


@pytest.mark.parametrize(
    ("cast", "furthest"),
    [("Hotin", 2e-4), ("SK287_CTD05", 1e-4), ("dPIRX003", 1e-4), ("dPIRX010", 1e-4), ("sta0860", 1e-4)],
)
def test_every_cast_in_water_agrees(casts: Columns, cast: str, furthest: float) -> None:
    """The sixth cast holds saturated conductivities and no row to compare."""
    temperature = np.where(casts["temp_scale"] == "ITS-90", casts["temp_C"], casts["temp_C"] * T90_FROM_T68)
    found = Seawater().properties(
        casts["cond_mS_cm"], temperature_degC=temperature, pressure_dbar=casts["pressure_dbar"]
    )
    rows = (casts["cast"] == cast) & (casts["sal_psu"] > 2.0) & (casts["pressure_dbar"] > 1.0)
    difference = np.abs(found.practical_salinity[rows] - casts["sal_psu"][rows])
    assert np.isfinite(difference).sum() >= 9
    assert np.nanmedian(difference) <= 5e-5
    assert np.nanmax(difference) <= furthest


def test_the_casts_begin_in_air_and_say_so(casts: Columns) -> None:
    negative = casts["cond_mS_cm"] < 0.0
    assert negative.any()
    found = Seawater().properties(
        casts["cond_mS_cm"], temperature_degC=casts["temp_C"], pressure_dbar=casts["pressure_dbar"]
    )
    assert np.isnan(found.practical_salinity[negative]).all()


def test_a_year_in_a_tidal_creek(shared_data: Path) -> None:
    """Linear compensation 1.91 %/K to 25 degC undone, then PSS-78: the 0.1 rounding of the reported value remains."""
    year = column_values(shared_data / "estuary_creek_2004.csv", ("temp_C", "spcond_mS_cm", "sal_psu"))
    conductivity = conductivity_from_specific_conductance(
        year["spcond_mS_cm"], temperature_degC=year["temp_C"], compensation=Compensation()
    )
    found = Seawater().properties(conductivity, temperature_degC=year["temp_C"]).practical_salinity
    has_values = np.isfinite(year["spcond_mS_cm"]) & np.isfinite(year["temp_C"]) & np.isfinite(year["sal_psu"])
    difference = np.abs(found - year["sal_psu"])[has_values & np.isfinite(found)]
    assert difference.size > 15_000
    assert np.median(difference) <= 0.03
    assert np.percentile(difference, 95) <= 0.06
    blank = ~(np.isfinite(year["spcond_mS_cm"]) & np.isfinite(year["temp_C"]))
    assert blank.any()
    assert np.isnan(found[blank]).all()
