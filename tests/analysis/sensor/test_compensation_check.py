"""A wrong declaration of temperature compensation shows in the data."""

from __future__ import annotations

import csv

import gsw
import numpy as np
import pytest

from analysis.sensor.compensation_check import CompensationVerdict, check_compensation
from analysis.water.compensation import Compensation, CompensationMethod

V = CompensationVerdict
MINUTE_US = 60_000_000


def tank(days: float = 3.0, *, swing_K: float = 1.0, seed: int = 0, level: float = 22.0):
    """Times, temperature and raw conductivity (library gsw) of a tank with a day wave and wandering salinity."""
    rng = np.random.default_rng(seed)
    minutes = np.arange(round(days * 1440))
    temperature = level + swing_K * np.sin(minutes * 2 * np.pi / 1440) + rng.normal(0, 0.02, minutes.shape)
    salinity = 30.0 + 0.15 * np.cumsum(rng.normal(0, 1, minutes.shape)) / np.sqrt(1440)
    return minutes * MINUTE_US, temperature, gsw.C_from_SP(salinity, temperature, 0.0)


def compensated(conductivity, temperature, coefficient: float = 0.0191):
    return conductivity / (1 + coefficient * (temperature - 25.0))


@pytest.mark.parametrize("seed", range(4))
@pytest.mark.parametrize("level", [8.0, 22.0, 31.0])
@pytest.mark.parametrize(
    ("times", "is_declared", "verdict"),
    [
        (0, False, V.CONSISTENT),
        (0, True, V.LOOKS_RAW),
        (1, False, V.LOOKS_COMPENSATED),
        (1, True, V.CONSISTENT),
        (2, True, V.LOOKS_COMPENSATED_TWICE),
        (2, False, V.LOOKS_COMPENSATED_TWICE),
    ],
)
def test_a_declaration_is_held_against_the_data(seed, level, times, is_declared, verdict):
    measured_at_us, temperature, reported = tank(seed=seed, level=level)
    for _ in range(times):
        reported = compensated(reported, temperature)
    found = check_compensation(
        reported, temperature_degC=temperature, measured_at_us=measured_at_us, is_declared_compensated=is_declared
    )
    assert found.verdict is verdict
    assert found.contradicts_declaration is (verdict is not V.CONSISTENT)
    assert found.share_low <= found.share_followed <= found.share_high


@pytest.mark.parametrize("coefficient", [0.018, 0.0191, 0.0214])
def test_the_coefficient_hardly_matters(coefficient):
    measured_at_us, temperature, raw = tank()
    reported = compensated(raw, temperature, coefficient)
    for method in (
        Compensation(coefficient_percent_per_K=2.0),
        Compensation(method=CompensationMethod.NATURAL_WATER),
    ):
        found = check_compensation(
            reported,
            temperature_degC=temperature,
            measured_at_us=measured_at_us,
            is_declared_compensated=False,
            compensation=method,
        )
        assert found.verdict is V.LOOKS_COMPENSATED


def test_water_changes_do_not_deceive():
    measured_at_us, temperature, _ = tank()
    salinity = np.where(np.arange(len(temperature)) < 1500, 30.0, 24.0)
    raw = gsw.C_from_SP(salinity, temperature, 0.0)
    found = check_compensation(
        raw, temperature_degC=temperature, measured_at_us=measured_at_us, is_declared_compensated=False
    )
    assert found.verdict is V.CONSISTENT


@pytest.mark.parametrize("times", [0, 1, 2])
@pytest.mark.parametrize("is_declared", [True, False])
def test_under_a_tide_a_second_sensor_tells(times, is_declared):
    """Salinity swings with the tide and with temperature; at 25 degC a wrong declaration is hardly an error yet."""
    measured_at_us, temperature, _ = tank(level=25.0)
    tide = np.sin(2 * np.pi * measured_at_us / (12.42 * 60 * MINUTE_US))
    temperature = temperature - 0.5 * tide
    raw = gsw.C_from_SP(20.0 + 9.0 * tide, temperature, 0.0)
    rng = np.random.default_rng(2)
    reported, neighbour = raw * (1 + rng.normal(0, 0.001, raw.shape)), 1.02 * raw
    for _ in range(times):
        reported = compensated(reported, temperature)
    options = {
        "temperature_degC": temperature,
        "measured_at_us": measured_at_us,
        "is_declared_compensated": is_declared,
    }
    assert check_compensation(reported, **options).verdict is V.UNDECIDED
    found = check_compensation(reported, **options, neighbour_mS_cm=neighbour)
    assert found.share_followed == pytest.approx(1.0 - times, abs=0.15)
    assert found.contradicts_declaration is (times != (1 if is_declared else 0))


def test_a_steady_temperature_tells_nothing():
    measured_at_us, temperature, raw = tank(swing_K=0.05)
    found = check_compensation(
        raw, temperature_degC=temperature, measured_at_us=measured_at_us, is_declared_compensated=True
    )
    assert found.verdict is V.TOO_LITTLE_CHANGE
    assert not found.contradicts_declaration
    assert found.sentence.startswith("Cannot tell yet: the temperature moved 0.")


def test_one_event_is_no_evidence():
    measured_at_us, temperature, raw = tank(days=0.4, swing_K=3.0)
    found = check_compensation(
        raw, temperature_degC=temperature, measured_at_us=measured_at_us, is_declared_compensated=True
    )
    assert found.verdict is V.TOO_LITTLE_CHANGE


def test_nothing_at_all():
    found = check_compensation([], temperature_degC=[], measured_at_us=[], is_declared_compensated=True)
    assert found.verdict is V.TOO_LITTLE_CHANGE
    assert found.pairs == 0
    gone = check_compensation(
        [np.nan, 0.0], temperature_degC=[20.0, 21.0], measured_at_us=[0, 1], is_declared_compensated=True
    )
    assert gone.verdict is V.TOO_LITTLE_CHANGE


def test_the_evidence_in_words():
    measured_at_us, temperature, raw = tank()
    found = check_compensation(
        compensated(raw, temperature),
        temperature_degC=temperature,
        measured_at_us=measured_at_us,
        is_declared_compensated=False,
    )
    assert "declared raw (100 % expected) but behaves as if the sensor compensates already" in found.sentence
    assert f"In {found.pairs} pairs of readings over 72 h" in found.sentence


@pytest.mark.shared_data
def test_where_salinity_moves_with_temperature_it_does_not_pretend(shared_data):
    """A tidal creek, a year of field data: no verdict either way."""
    with (shared_data / "estuary_creek_2004.csv").open(newline="", encoding="utf-8") as lines:
        rows = list(csv.DictReader(lines))
    reported = np.array([float(row["spcond_mS_cm"] or "nan") for row in rows])
    temperature = np.array([float(row["temp_C"] or "nan") for row in rows])
    times = np.array([row["time_utc"].removesuffix("Z") for row in rows], dtype="datetime64[us]").astype(np.int64)
    for is_declared in (True, False):
        found = check_compensation(
            reported, temperature_degC=temperature, measured_at_us=times, is_declared_compensated=is_declared
        )
        assert found.verdict is V.UNDECIDED
