"""Believe, doubt, or do not use: what each kind of evidence does to a sensor's standing."""

from __future__ import annotations

import numpy as np
import pytest

from analysis.errors import InvalidInputError
from analysis.sensor.compensation_check import CompensationEvidence, CompensationVerdict
from analysis.sensor.health import Belief, BenchSample, Finding, Period, SampleKind, aligned, assess
from analysis.sensor.quality.words import TESTS, QualityTest, Variable
from analysis.sensor.trend import block_medians, steps_of_the_water, trend, without_changes

HOUR_US = 3_600_000_000
DAY_US = 24 * HOUR_US
INTERVAL_S = 600.0
C, T, S = Variable


def days(count: float, seed: int = 0) -> dict:
    """A healthy sensor in a tank with a day wave."""
    rng = np.random.default_rng(seed)
    rows = round(count * 86_400 / INTERVAL_S)
    return {
        "measured_at_us": np.arange(rows) * round(INTERVAL_S * 1e6),
        "temperature_degC": 25.0 + np.sin(np.arange(rows) * 2 * np.pi / 144) + rng.normal(0, 0.02, rows),
        "salinity": 30.0 + rng.normal(0, 0.03, rows),
        "by_test": np.ones((TESTS, 3, rows), dtype=np.uint8),
    }


def judged(columns: dict, **more):
    now_us = more.pop("now_us") if "now_us" in more else int(columns["measured_at_us"][-1])
    period_keys = {"neighbour_salinity", "cleaned_at_us", "level_m"}
    period = Period(**columns, **{key: more.pop(key) for key in period_keys & more.keys()})
    return assess(period, now_us=now_us, interval_s=INTERVAL_S, **more)


def test_a_healthy_sensor_is_believed():
    health = judged(days(5))
    assert health.belief is Belief.BELIEVE
    assert health.reasons == ()


def test_silence_is_not_health():
    columns = days(2)
    health = judged(columns, now_us=int(columns["measured_at_us"][-1]) + 3 * HOUR_US)
    assert health.belief is Belief.DO_NOT_USE
    assert health.findings == (Finding.SILENT,)
    assert health.reasons[0].figures["silent_h"] == pytest.approx(3.0)
    never = judged({name: column[..., :0] for name, column in columns.items()}, now_us=0)
    assert never.findings == (Finding.SILENT,)
    assert never.reasons[0].figures == {}


def test_missing_values():
    columns = days(2)
    columns["salinity"][-5:] = np.nan
    health = judged(columns)
    assert health.findings == (Finding.VALUES_MISSING,)
    assert health.belief is Belief.DO_NOT_USE


@pytest.mark.parametrize(
    ("test", "variable", "flag", "finding", "belief"),
    [
        (QualityTest.IN_AIR, C, 4, Finding.IN_AIR, Belief.DO_NOT_USE),
        (QualityTest.GROSS_RANGE, T, 4, Finding.OUT_OF_RANGE, Belief.DO_NOT_USE),
        (QualityTest.FLAT_LINE, C, 4, Finding.STUCK, Belief.DO_NOT_USE),
        (QualityTest.FLAT_LINE, T, 3, Finding.STUCK, Belief.DOUBT),
        (QualityTest.ATTENUATED_SIGNAL, C, 3, Finding.ATTENUATED, Belief.DOUBT),
    ],
)
def test_flags_of_the_last_hour(test, variable, flag, finding, belief):
    columns = days(2)
    columns["by_test"][test, variable, -6:] = flag
    health = judged(columns)
    assert health.findings == (finding,)
    assert health.belief is belief
    columns["by_test"][test, variable, -6:] = 1
    columns["by_test"][test, variable, -30:-10] = flag
    assert judged(columns).belief is Belief.BELIEVE  # it is over


@pytest.mark.parametrize(("rows", "belief"), [(5, Belief.BELIEVE), (20, Belief.DOUBT), (36, Belief.DO_NOT_USE)])
def test_noise(rows, belief):
    columns = days(2)
    columns["by_test"][QualityTest.NOISE, T, -rows:] = 3
    assert judged(columns).belief is belief


def test_suspect_rates_of_change_are_no_finding():
    """Fast water is not a sick sensor."""
    columns = days(2)
    columns["by_test"][QualityTest.RATE_OF_CHANGE, :, -6:] = 3
    columns["by_test"][QualityTest.SPIKE, :, -6:] = 3
    assert judged(columns).belief is Belief.BELIEVE


class TestFouling:
    def test_a_slow_fall_against_the_neighbour_is_fouling(self):
        columns, other = days(8), days(8, seed=1)["salinity"]
        columns["salinity"] = columns["salinity"] * np.linspace(1.0, 0.96, len(other))
        health = judged(columns, neighbour_salinity=other)
        assert health.belief is Belief.DOUBT
        assert set(health.findings) == {Finding.FOULING, Finding.NEIGHBOUR_DISAGREES}
        fouling = next(reason for reason in health.reasons if reason.finding is Finding.FOULING)
        assert fouling.figures["change_percent"] == pytest.approx(-4.0, abs=0.4)
        assert fouling.figures["change_percent_per_day"] == pytest.approx(-0.5, abs=0.05)

    def test_a_large_one_is_not_to_be_used(self):
        columns, other = days(8), days(8, seed=1)["salinity"]
        columns["salinity"] = columns["salinity"] * np.linspace(1.0, 0.85, len(other))
        assert judged(columns, neighbour_salinity=other).belief is Belief.DO_NOT_USE

    def test_when_both_fall_it_is_the_water(self):
        columns, other = days(8), days(8, seed=1)["salinity"]
        fall = np.linspace(1.0, 0.9, len(other))
        columns["salinity"] = columns["salinity"] * fall
        assert judged(columns, neighbour_salinity=other * fall).belief is Belief.BELIEVE

    def test_when_the_neighbour_falls_this_one_is_believed(self):
        columns, other = days(8), days(8, seed=1)["salinity"]
        health = judged(columns, neighbour_salinity=other * np.linspace(1.0, 0.98, len(other)))
        assert health.findings == (Finding.NEIGHBOUR_FALLS,)
        assert health.belief is Belief.BELIEVE

    def test_alone_a_slow_fall_is_a_doubt(self):
        columns = days(8)
        columns["salinity"] = columns["salinity"] * np.linspace(1.0, 0.95, len(columns["salinity"]))
        health = judged(columns)
        assert health.findings == (Finding.SLOW_FALL,)
        assert health.belief is Belief.DOUBT

    def test_a_slow_rise_alone_is_evaporation(self):
        columns = days(8)
        columns["salinity"] = columns["salinity"] * np.linspace(1.0, 1.05, len(columns["salinity"]))
        assert judged(columns).belief is Belief.BELIEVE

    def test_cleaning_starts_the_trend_anew(self):
        columns = days(8)
        rows = len(columns["salinity"])
        columns["salinity"][: rows // 2] *= np.linspace(1.0, 0.95, rows // 2)
        assert judged(columns, cleaned_at_us=int(columns["measured_at_us"][rows // 2])).belief is Belief.BELIEVE

    @pytest.mark.parametrize("size", [-6.0, -2.0])
    def test_water_changes_are_no_fouling(self, size):
        columns = days(8)
        rows = len(columns["salinity"])
        for at in (rows // 4, rows // 2):
            columns["salinity"][at:] += size / 2
        assert judged(columns).belief is Belief.BELIEVE

    def test_what_goes_with_temperature_is_no_fouling(self):
        """A cooling week and a slightly wrong coefficient: salinity follows temperature, hour by hour."""
        columns = days(8)
        rows = len(columns["salinity"])
        columns["temperature_degC"] = columns["temperature_degC"] - np.linspace(0.0, 3.0, rows)
        columns["salinity"] = columns["salinity"] * (1 + 0.008 * (columns["temperature_degC"] - 25.0))
        assert judged(columns).belief is Belief.BELIEVE

    def test_what_goes_with_the_water_level_is_no_fouling(self):
        """From spring to neap the tide brings less sea water."""
        columns = days(8)
        hours = columns["measured_at_us"] / HOUR_US
        level = 1.0 + (1.0 - hours / 240) * np.sin(2 * np.pi * hours / 12.42) - hours / 400
        columns["salinity"] = columns["salinity"] * (1 + 0.1 * (level - 1.0))
        assert judged(columns, level_m=level).belief is Belief.BELIEVE

    def test_fouling_under_a_tide_is_still_found(self):
        columns = days(8)
        hours = columns["measured_at_us"] / HOUR_US
        level = 1.0 + np.sin(2 * np.pi * hours / 12.42)
        fouled = np.linspace(1.0, 0.93, len(hours))
        columns["salinity"] = columns["salinity"] * (1 + 0.05 * (level - 1.0)) * fouled
        assert judged(columns, level_m=level).findings == (Finding.SLOW_FALL,)

    def test_a_short_record_has_no_trend(self):
        columns = days(0.5)
        columns["salinity"] = columns["salinity"] * np.linspace(1.0, 0.95, len(columns["salinity"]))
        assert judged(columns).belief is Belief.BELIEVE


class TestComparisons:
    def test_a_neighbour_that_disagrees(self):
        columns, other = days(2), days(2, seed=1)["salinity"] + 1.5
        health = judged(columns, neighbour_salinity=other)
        assert health.findings == (Finding.NEIGHBOUR_DISAGREES,)
        assert health.reasons[0].figures["difference"] == pytest.approx(-1.5, abs=0.1)

    def test_a_bench_sample_decides_between_two_sensors(self):
        columns, other = days(2), days(2, seed=1)["salinity"] + 1.5
        at = int(columns["measured_at_us"][-10])
        sample = BenchSample(at, 30.1, SampleKind.SECOND_METER)
        right = judged(columns, neighbour_salinity=other, samples=[sample])
        assert right.belief is Belief.BELIEVE
        assert set(right.findings) == {Finding.NEIGHBOUR_DISAGREES, Finding.SAMPLE_AGREES}
        wrong = judged(columns, neighbour_salinity=other, samples=[BenchSample(at, 31.5, SampleKind.SECOND_METER)])
        assert wrong.belief is Belief.DO_NOT_USE
        assert Finding.SAMPLE_DISAGREES in wrong.findings

    @pytest.mark.parametrize(
        ("salinity", "kind", "belief"),
        [
            (31.5, SampleKind.REFRACTOMETER, Belief.BELIEVE),
            (32.5, SampleKind.REFRACTOMETER, Belief.DOUBT),
            (35.0, SampleKind.REFRACTOMETER, Belief.DO_NOT_USE),
            (31.5, SampleKind.OSMOMETER, Belief.DO_NOT_USE),
            (31.2, SampleKind.HYDROMETER, Belief.BELIEVE),
        ],
    )
    def test_a_sample_counts_by_its_uncertainty(self, salinity, kind, belief):
        columns = days(2)
        sample = BenchSample(int(columns["measured_at_us"][-10]), salinity, kind)
        assert judged(columns, samples=[sample]).belief is belief

    def test_the_newest_usable_sample_counts(self):
        columns = days(2)
        times = columns["measured_at_us"]
        samples = [
            BenchSample(int(times[-100]), 35.0, SampleKind.OSMOMETER),
            BenchSample(int(times[-10]), 30.0, SampleKind.OSMOMETER, uncertainty=0.1),
            BenchSample(int(times[-1]) + DAY_US, 35.0, SampleKind.OSMOMETER),  # not yet
            BenchSample(int(times[-1]) - 8 * DAY_US, 35.0, SampleKind.OSMOMETER),  # too long ago
        ]
        assert judged(columns, samples=samples).findings == (Finding.SAMPLE_AGREES,)
        columns["salinity"][-20:-1] = np.nan
        assert Finding.SAMPLE_DISAGREES in judged(columns, samples=samples).findings
        assert judged(columns, samples=[]).findings == (Finding.VALUES_MISSING,)

    def test_neighbour_values_are_brought_to_the_same_times(self):
        found = aligned(
            np.array([1.0, 2.0, 3.0]),
            measured_at_us=np.array([10, 20, 30]),
            to_us=np.array([5, 10, 19, 25, 60]),
            within_us=9,
        )
        np.testing.assert_array_equal(found, [np.nan, 1.0, 1.0, 2.0, np.nan])
        assert np.isnan(aligned(np.zeros(0), measured_at_us=np.zeros(0), to_us=np.array([1]), within_us=1)).all()


def test_a_wrong_compensation_is_not_to_be_used():
    evidence = CompensationEvidence(CompensationVerdict.LOOKS_RAW, 1.0, 0.9, 1.1, 0.0, 100, 2.0, 72.0)
    health = judged(days(2), compensation=evidence)
    assert health.belief is Belief.DO_NOT_USE
    assert health.findings == (Finding.COMPENSATION_DOUBTED,)
    fine = CompensationEvidence(CompensationVerdict.CONSISTENT, 0.0, -0.1, 0.1, 0.0, 100, 2.0, 72.0)
    assert judged(days(2), compensation=fine).belief is Belief.BELIEVE


def test_an_overdue_calibration_is_a_task_not_a_doubt():
    columns = days(2)
    health = judged(columns, calibration_due_us=int(columns["measured_at_us"][-1]) - 3 * DAY_US)
    assert health.belief is Belief.BELIEVE
    assert health.findings == (Finding.CALIBRATION_OVERDUE,)
    assert health.reasons[0].figures["overdue_days"] == pytest.approx(3.0)


def test_the_weightiest_reason_comes_first():
    columns = days(2)
    columns["by_test"][QualityTest.NOISE, T, -20:] = 3
    columns["by_test"][QualityTest.IN_AIR, C, -6:] = 4
    assert judged(columns).findings == (Finding.IN_AIR, Finding.NOISY)


def test_lengths_must_agree():
    columns = days(2)
    with pytest.raises(InvalidInputError, match="lengths of a sensor's period"):
        Period(**{**columns, "salinity": columns["salinity"][:-1]})
    with pytest.raises(InvalidInputError, match="lengths of a sensor's period"):
        Period(**columns, neighbour_salinity=columns["salinity"][:-1])


class TestTrend:
    def test_slope_and_bounds(self):
        times = np.arange(2000) * 600_000_000
        rng = np.random.default_rng(0)
        values = 30.0 * np.exp(-0.01 * times / DAY_US) * (1 + rng.normal(0, 0.002, 2000))
        found = trend(values, time_us=times)
        assert found is not None
        assert found.percent_per_day == pytest.approx(-1.0, abs=0.02)
        assert found.low_percent_per_day <= found.percent_per_day <= found.high_percent_per_day < 0
        assert found.steadiness == pytest.approx(1.0)

    def test_steps_are_taken_out(self):
        level = np.concatenate((np.zeros(20), np.ones(20))) + np.tile([0.0, 0.001], 20)
        steps = steps_of_the_water(level, least_step=0.01)
        assert np.flatnonzero(steps).tolist() == [19]
        assert np.ptp(without_changes(level, steps)) < 0.003

    def test_medians_of_blocks(self):
        times = np.array([0, 10, 20, 130, 140, 900]) * 60_000_000
        values = np.array([3.0, 1.0, 2.0, 5.0, np.nan, 7.0])
        medians, day = block_medians(values, time_us=times, block_us=HOUR_US)
        assert medians.tolist() == [2.0, 5.0, 7.0]
        np.testing.assert_allclose(day * 24, [0.5, 2.5, 15.5])
        even, _ = block_medians(np.array([4.0, 1.0]), time_us=times[:2], block_us=HOUR_US)
        assert even.tolist() == [2.5]

    def test_nothing_in_nothing_out(self):
        empty = np.zeros(0)
        assert trend(empty, time_us=np.zeros(0, dtype=np.int64)) is None
        assert steps_of_the_water(empty, least_step=0.1).shape == (0,)
        assert without_changes(empty, np.zeros(0, dtype=bool)).shape == (0,)
        assert trend(np.full(500, np.nan), time_us=np.arange(500) * 600_000_000) is None
