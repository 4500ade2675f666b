"""Thresholds: defaults by surroundings, what a site may replace, and what is refused."""

from __future__ import annotations

import math

import numpy as np
import pytest

from analysis.errors import InvalidInputError
from analysis.sensor.quality.limits import OFF, Surroundings, default_limits
from analysis.sensor.quality.thresholds import SUSPECT_HIGH, SUSPECT_LOW, Thresholds


@pytest.mark.parametrize("surroundings", Surroundings)
@pytest.mark.parametrize("interval_s", [1.0, 10.0, 900.0, 3600.0])
def test_every_surroundings_has_defaults_for_every_pace(surroundings, interval_s):
    limits = default_limits(surroundings, interval_s=interval_s, expected_salinity=30.0)
    assert limits.gap_s >= 3 * interval_s
    assert limits.bucket_s >= 4 * interval_s
    assert limits.is_still == (surroundings is Surroundings.THERMOSTATED_TANK)
    assert Thresholds.from_limits([limits]).sensors == 1


def test_only_a_tank_known_to_be_salt_takes_a_low_reading_for_air():
    salt = default_limits(Surroundings.OPEN_TANK, interval_s=10.0, expected_salinity=30.0)
    unknown = default_limits(Surroundings.TIDAL_INTAKE, interval_s=10.0)
    assert salt.in_air_mS_cm == pytest.approx(1.8)
    assert unknown.in_air_mS_cm == pytest.approx(0.02)


def test_a_site_replaces_what_it_likes():
    limits = default_limits(Surroundings.POND, interval_s=60.0, suspect_span=((0.0, 50.0), (5.0, 35.0), (1.0, 36.0)))
    row = Thresholds.from_limits([limits, limits]).row
    assert row[SUSPECT_LOW, :, 1].tolist() == [0.0, 5.0, 1.0]
    assert row[SUSPECT_HIGH, :, 0].tolist() == [50.0, 35.0, 36.0]


def test_windows_become_whole_buckets_within_the_memory():
    limits = default_limits(
        Surroundings.OPEN_TANK, interval_s=60.0, flat_suspect_h=(2.5, OFF, 90.0), flat_fail_h=(3.0, OFF, 90.0)
    )
    thresholds = Thresholds.from_limits([limits])
    assert thresholds.flat_suspect_buckets[:, 0].tolist() == [3, 25, 25]
    assert thresholds.rate_buckets.tolist() == [25]
    assert thresholds.bucket_us.tolist() == [3_600_000_000]


@pytest.mark.parametrize(
    ("replaced", "words"),
    [
        ({"colour": 1}, "threshold: found 'colour'"),
        ({"interval_s": 0.0}, "interval_s"),
        ({"bucket_s": 5.0}, "bucket_s"),
        ({"gap_s": -1.0}, "gap_s"),
        ({"suspect_span": ((0.0, 500.0), (0.0, 40.0), (0.0, 60.0))}, r"suspect_span\[0\]"),
        ({"suspect_span": ((5.0, 1.0), (0.0, 40.0), (0.0, 60.0))}, r"suspect_span\[0\]"),
        ({"climatology": ()}, "climatology: found 0"),
        ({"spike_fail": (0.1, 0.1, 0.1)}, "spike_fail"),
        ({"flat_fail_h": (1.0, 1.0, 1.0)}, "flat_fail_h"),
        ({"noise_share": 0.0}, "noise_share"),
        ({"noise_share": math.nan}, "noise_share"),
    ],
)
def test_numbers_that_contradict_one_another_are_refused(replaced, words):
    keywords = {"interval_s": 60.0, **replaced}
    with pytest.raises(InvalidInputError, match=words):
        default_limits(Surroundings.OPEN_TANK, **keywords)


def test_neighbours_are_checked():
    two = [default_limits(Surroundings.OPEN_TANK, interval_s=60.0)] * 2
    assert Thresholds.from_limits(two).neighbour.tolist() == [-1, -1]
    with pytest.raises(InvalidInputError, match="one index for each of 2"):
        Thresholds.from_limits(two, neighbour=[1])
    for wrong in ([0, -1], [2, -1], [-2, -1]):
        with pytest.raises(InvalidInputError, match="sensor 0: neighbour"):
            Thresholds.from_limits(two, neighbour=wrong)


def test_neighbours_keep_their_history_in_step():
    """A slow and a fast logger in one tank: their hours are compared by number, so they must be the same hours."""
    fast = default_limits(Surroundings.OPEN_TANK, interval_s=10.0)
    slow = default_limits(Surroundings.OPEN_TANK, interval_s=1800.0)
    thresholds = Thresholds.from_limits([fast, slow, fast, fast], neighbour=[1, 2, 0, -1])
    assert (thresholds.bucket_us // 3_600_000_000).tolist() == [2, 2, 2, 1]
    assert thresholds.flat_suspect_buckets[0].tolist() == [2, 2, 2, 3]


def test_climatology_of_some_sensors_only():
    seasons = (((0.0, 1.0), (2.0, 3.0), (4.0, 5.0)),) * 12
    first = default_limits(Surroundings.POND, interval_s=60.0, climatology=seasons)
    second = default_limits(Surroundings.POND, interval_s=60.0)
    table = Thresholds.from_limits([first, second]).climatology
    assert table is not None
    assert table[6, :, :, 0].tolist() == [[0.0, 2.0, 4.0], [1.0, 3.0, 5.0]]
    assert np.isnan(table[:, :, :, 1]).all()
