from __future__ import annotations

import numpy as np
import pytest

from ingest.simulator.scenario import Rain
from ingest.simulator.weather import CONSTITUENTS, Weather, smooth_noise
from tests.ingest.simulator.conftest import ANCHOR_US

HOURS = np.arange(0.0, 24 * 60, 0.1)


def test_the_tide_has_two_high_waters_in_a_lunar_day():
    """A lunar day is 24 h 50 min (common knowledge of the trade): 58 of them in 60 days, two high waters each."""
    tide = Weather(1, ANCHOR_US).tide_m(HOURS)
    turns = np.sum((tide[1:-1] > tide[:-2]) & (tide[1:-1] >= tide[2:]) & (tide[1:-1] > 0.0))
    assert turns == pytest.approx(2 * 60 * 24 / 24.84, abs=2)


def test_spring_and_neap_follow_each_other_in_a_fortnight():
    """M2 and S2 are in step every 14.77 days (360 degrees over the difference of their speeds, Schureman 1940)."""
    difference = CONSTITUENTS["S2"][0] - CONSTITUENTS["M2"][0]
    assert 360.0 / difference / 24.0 == pytest.approx(14.7653, abs=1e-3)
    tide = Weather(1, ANCHOR_US).tide_m(HOURS)
    highest = tide[: 240 * 60].reshape(60, 240).max(axis=1)
    assert highest.max() - highest.min() > 0.5


def test_rain_freshens_the_intake_for_a_day_and_more():
    dry = Weather(1, ANCHOR_US)
    wet = Weather(1, ANCHOR_US, rains=(Rain(start_h=0.0, lasts_h=5.0, depth_mm=40.0),))
    hours = np.arange(-24.0, 120.0, 0.25)
    fresher = dry.intake_salinity(hours) - wet.intake_salinity(hours)
    assert np.all(fresher[hours < 0.0] == 0.0)
    assert fresher[(hours > 4.0) & (hours < 28.0)].max() > 5.0
    assert np.all(fresher >= -1e-9)
    assert fresher[-1] < 0.5
    assert wet.rain_mm_h(hours).sum() * 0.25 == pytest.approx(40.0, rel=0.06)


def test_the_intake_is_saltier_at_high_water():
    weather = Weather(1, ANCHOR_US, rains=(Rain(start_h=-10.0, lasts_h=5.0, depth_mm=30.0),))
    hours = np.arange(-5.0, 7.5, 0.1)  # one tide at the height of the flood
    assert np.corrcoef(weather.tide_m(hours), weather.intake_salinity(hours))[0, 1] > 0.7


def test_days_are_warmer_than_nights_and_july_than_january():
    weather = Weather(1, 0)
    year = np.arange(0.0, 8766.0, 1.0)
    air = weather.air_degC(year)
    assert air[year % 24 == 15].mean() > air[year % 24 == 4].mean() + 4.0
    assert air[(year > 181 * 24) & (year < 212 * 24)].mean() > air[year < 31 * 24].mean() + 8.0


def test_slow_noise_has_unit_spread_and_can_be_asked_anywhere():
    hours = np.arange(0.0, 5000.0, 0.5)
    noise = smooth_noise(hours, seed=(1, 2), shortest_h=5.0, longest_h=60.0)
    assert noise.std() == pytest.approx(1.0, abs=0.1)
    assert smooth_noise(1234.5, seed=(1, 2), shortest_h=5.0, longest_h=60.0) == pytest.approx(noise[2469])
