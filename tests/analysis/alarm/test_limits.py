"""What one value says about a limit, and which band a tank alarms on."""

from __future__ import annotations

import csv
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from analysis.alarm.events import Verdict
from analysis.alarm.limits import SALINITY_SPAN, deadband_of_band, high_verdict, is_usable, low_verdict
from analysis.alarm.set_point import salinity_band, temperature_band
from analysis.errors import InvalidInputError

FIGURES = Path(__file__).parents[2] / "reference" / "alarm_figures.csv"


def published(row_id: str) -> dict[str, str]:
    with FIGURES.open(encoding="utf-8") as file:
        table = csv.DictReader(line for line in file if not line.startswith("#"))
        return next(row for row in table if row["id"] == row_id)


def test_published_clear_point() -> None:
    """ALM01: HIGH limit 35.0, span 0-42, deadband 1 %: EEMUA 191 as restated publicly."""
    clear = float(published("ALM01")["expected"])
    deadband = float(deadband_of_band(100.0, span=SALINITY_SPAN))
    values = np.array([35.001, 35.0, clear + 1e-6, clear - 1e-6])
    verdicts = high_verdict(values, limit=35.0, deadband=deadband, usable=True)
    assert verdicts.tolist() == [Verdict.TRUE, Verdict.NEAR, Verdict.BETWEEN, Verdict.FALSE]


def test_low_limit_mirrors_the_high_one() -> None:
    verdicts = low_verdict([28.9, 29.0, 29.39, 29.5], limit=29.0, deadband=0.4, usable=True)
    assert verdicts.tolist() == [Verdict.TRUE, Verdict.NEAR, Verdict.BETWEEN, Verdict.FALSE]


def test_no_limit_is_never_exceeded_and_never_unknown() -> None:
    verdicts = high_verdict([50.0, np.nan], limit=np.nan, deadband=0.4, usable=[True, False])
    assert verdicts.tolist() == [Verdict.FALSE, Verdict.FALSE]


def test_unusable_is_unknown_and_never_normal() -> None:
    assert low_verdict(np.nan, limit=29.0, deadband=0.4, usable=False).tolist() == Verdict.UNKNOWN


def test_nothing_in_sight_is_a_number() -> None:
    assert low_verdict(np.inf, limit=30.0, deadband=5.0, usable=True).tolist() == Verdict.FALSE


def test_suspect_stays_in_the_alarm_path_fail_and_missing_do_not() -> None:
    usable = is_usable([1.0, 1, 1, 1, 1, np.nan], quality=[1, 2, 3, 4, 9, 1])
    assert usable.tolist() == [True, True, True, False, False, False]


@given(st.floats(0, 50), st.floats(0, 50), st.floats(0, 2))
def test_array_equals_its_elements_and_only_one_side_can_be_true(value: float, limit: float, deadband: float) -> None:
    high = high_verdict(value, limit=limit, deadband=deadband, usable=True)
    low = low_verdict(value, limit=limit, deadband=deadband, usable=True)
    assert high_verdict([value, value], limit=limit, deadband=deadband, usable=True).tolist() == [high, high]
    assert not (high == Verdict.TRUE and low == Verdict.TRUE)
    assert (high == Verdict.TRUE) == (value > limit)


@pytest.mark.parametrize(
    ("point", "is_larva", "half_width"),
    [
        (31.0, True, 1.0),
        (31.0, False, 1.55),
        (45.0, False, 2.0),
        (10.0, True, 0.5),
        (3.0, True, 0.25),
        (0.0, False, 0.25),
    ],
)
def test_larvae_1_others_2_or_5_percent_whichever_is_tighter(point, is_larva, half_width) -> None:
    """Within 5 % or 2 of the set point: husbandry guidance; +-1 for larvae and the floor: common practice."""
    band = salinity_band(point, is_larva=is_larva)
    assert float(band.low) == pytest.approx(point - half_width)
    assert float(band.high) == pytest.approx(point + half_width)
    assert band.deadband <= half_width / 4


def test_the_site_may_set_its_own_band_and_a_tidal_band_replaces_the_set_point() -> None:
    band = salinity_band(
        [31.0, np.nan],
        is_larva=True,
        site_half_width=[3.0, np.nan],
        tidal_low=[np.nan, 8],
        tidal_high=[np.nan, 28],
    )
    assert band.low.tolist() == [28.0, 8.0]
    assert band.high.tolist() == [34.0, 28.0]


@given(
    st.floats(0, 42),
    st.floats(0, 42) | st.just(np.nan),
    st.floats(0, 42) | st.just(np.nan),
    st.booleans(),
)
def test_the_animals_limits_only_tighten(point: float, low: float, high: float, is_larva: bool) -> None:
    plain = salinity_band(point, is_larva=is_larva)
    band = salinity_band(point, is_larva=is_larva, tolerable_low=low, tolerable_high=high)
    assert band.low >= plain.low
    assert band.high <= plain.high
    assert band.low <= point <= band.high
    is_outside = low > point or high < point
    assert bool(band.is_set_point_outside) == is_outside
    if not is_outside:
        assert not band.low < low
        assert not band.high > high


def test_no_set_point_means_no_limits() -> None:
    band = salinity_band(np.nan, is_larva=False)
    assert np.isnan([band.low, band.high]).all()
    band = temperature_band([28.5, np.nan], half_width_K=2.0, tolerable_high_degC=30.0)
    assert band.high[0] == 30.0
    assert band.is_high_backstop[0]
    assert np.isnan(band.low[1])


@pytest.mark.parametrize(
    "bad",
    [
        {"set_point": -1.0},
        {"set_point": 31.0, "site_half_width": 0.0},
        {"set_point": 31.0, "tidal_low": 9.0, "tidal_high": 8.0},
    ],
)
def test_impossible_bands_are_refused(bad: dict[str, float]) -> None:
    with pytest.raises(InvalidInputError):
        salinity_band(is_larva=False, **bad)
