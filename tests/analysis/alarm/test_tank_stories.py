"""Whole stories of one tank with the first settings: from readings to the alarm that people hear."""

from __future__ import annotations

import numpy as np
import pytest

from analysis.alarm.bank import AlarmBank, Outcome, alarm_bank, observe
from analysis.alarm.conditions import LimitCondition, dry_limit, limit_block, truth_block, wet_quality
from analysis.alarm.kinds import ConditionKind as Kind
from analysis.alarm.nearest import judged_rows, no_readings_yet, sensor_places
from analysis.alarm.rationale import first_rules
from analysis.alarm.set_point import salinity_band
from analysis.alarm.timing import judged_times, no_times_yet, stale_after_s
from tests.analysis.alarm.stories import MINUTE, SECOND

INTERVAL_S = 10
START = 10**15


class Tank:
    """A tank kept at 32, watched by one or two sensors, with the first settings of its alarms."""

    def __init__(self, sensor_count: int = 1) -> None:
        self.places = sensor_places(np.zeros(sensor_count, dtype=np.int64), tank_count=1)
        self.stale_us = np.full(sensor_count, round(stale_after_s(INTERVAL_S) * SECOND))
        self.interval_us = np.full(sensor_count, INTERVAL_S * SECOND)
        band = salinity_band([32.0], is_larva=False)
        self.dry_below = dry_limit([32.0])
        self.conditions = (
            LimitCondition(Kind.SALINITY_LOW, band.low, band.deadband, is_high=False),
            LimitCondition(Kind.SALINITY_HIGH, band.high, band.deadband, is_high=True),
            LimitCondition(Kind.PROBE_DRY_OR_TANK_EMPTY, self.dry_below, np.array([0.2]), is_high=False),
        )
        kinds = [condition.kind for condition in self.conditions]
        self.bank: AlarmBank = alarm_bank({kind: [first_rules(kind, interval_s=INTERVAL_S)] for kind in kinds})
        self.times = no_times_yet(sensor_count)
        self.wet = self.raw = no_readings_yet(self.places)
        self.told: list[tuple[str, float]] = []

    def reads(self, value: float, at_s: float, *, sensor: int = 0, clock_error_s: float = 0.0) -> None:
        """Take one reading through timing, choice of sensor, limits and alarms."""
        received = np.array([START + round(at_s * SECOND)])
        index, values, quality = np.array([sensor]), np.array([value]), np.array([1], dtype=np.uint8)
        self.times, judged = judged_times(
            self.times,
            sensor=index,
            measured_at_us=received + round(clock_error_s * SECOND),
            received_at_us=received,
            interval_us=self.interval_us,
            stale_after_us=self.stale_us,
        )
        if not judged.is_judged[0]:
            return
        common = {
            "sensor": index,
            "value": values,
            "judged_at_us": judged.judged_at_us,
            "stale_after_us": self.stale_us,
        }
        wet = wet_quality(values, quality=quality, tank=np.array([0]), dry_below=self.dry_below)
        self.wet, wet_rows = judged_rows(self.wet, self.places, quality=wet, **common)
        self.raw, raw_rows = judged_rows(self.raw, self.places, quality=quality, **common)
        block = limit_block(self.conditions, [wet_rows, wet_rows, raw_rows], now_us=received)
        self.bank, outcomes = observe(self.bank, block)
        self.told.extend(self._spoken(outcomes, at_s))

    @staticmethod
    def _spoken(outcomes: tuple[Outcome, ...], at_s: float) -> list[tuple[str, float]]:
        return [(item.kind.value, at_s) for item in outcomes if item.transition.is_announced]


def test_stuck_inflow_is_warned_of_within_five_minutes() -> None:
    """1 m3 at 32 with 20 L/min of fresh water: the well-mixed tank falls by exp(-0.02 t/min)."""
    tank = Tank()
    for at_s in range(-300, 601, INTERVAL_S):
        tank.reads(32.0 * np.exp(-0.02 * max(at_s, 0) / 60), at_s)
    ((kind, at_s),) = tank.told
    assert kind == "salinity_low"
    assert at_s <= 300


def test_probe_pulled_out_is_called_by_its_name_within_two_minutes_and_nothing_else_is_said() -> None:
    tank = Tank()
    for at_s in range(-60, 181, INTERVAL_S):
        tank.reads(32.0 if at_s < 0 else 0.01, at_s)
    ((kind, at_s),) = tank.told
    assert kind == "probe_dry_or_tank_empty"
    assert at_s <= 120


@pytest.mark.parametrize("clock_error_s", [-3600.0, 3600.0])
def test_probe_whose_clock_is_wrong_by_an_hour_still_alarms(clock_error_s: float) -> None:
    tank = Tank()
    for at_s in range(-60, 181, INTERVAL_S):
        tank.reads(32.0 if at_s < 0 else 25.0, at_s, clock_error_s=clock_error_s)
    ((kind, at_s),) = tank.told
    assert kind == "salinity_low"
    assert at_s <= 80
    assert tank.times.is_clock_doubted[0]


def test_clock_that_goes_wrong_and_is_set_right_silences_nothing() -> None:
    tank = Tank()
    for at_s in range(-300, 181, INTERVAL_S):
        tank.reads(32.0 if at_s < 0 else 25.0, at_s, clock_error_s=3600.0 if at_s < -100 else 0.0)
    assert tank.told[0][1] <= 80


def test_a_fresh_top_and_a_salt_bottom_are_both_heard() -> None:
    tank = Tank(2)
    for at_s in range(0, 121, INTERVAL_S):
        tank.reads(28.0, at_s, sensor=0)
        tank.reads(36.0, at_s + 1, sensor=1)
    assert {kind for kind, _ in tank.told} == {"salinity_low", "salinity_high"}


def test_a_dry_probe_does_not_hide_what_the_other_says() -> None:
    tank = Tank(2)
    for at_s in range(0, 121, INTERVAL_S):
        tank.reads(0.01, at_s, sensor=0)
        tank.reads(28.0, at_s + 1, sensor=1)
    assert {kind for kind, _ in tank.told} == {"salinity_low", "probe_dry_or_tank_empty"}


def test_late_data_of_a_past_excursion_are_not_annunciated() -> None:
    tank = Tank()
    tank.reads(32.0, 0)
    for late_s in range(600, 300, -INTERVAL_S):
        tank.reads(25.0, 1000, clock_error_s=-float(late_s))
    tank.reads(32.0, 1010)
    assert tank.told == []


def test_an_unwatched_tank_speaks_at_once_and_again_until_somebody_sees_to_it() -> None:
    bank = alarm_bank({Kind.UNWATCHED: [first_rules(Kind.UNWATCHED, interval_s=INTERVAL_S)]})
    bank, (outcome,) = observe(bank, truth_block(Kind.UNWATCHED, [True], at_us=MINUTE, now_us=MINUTE))
    assert outcome.transition.is_announced
    bank, (outcome,) = observe(bank, truth_block(Kind.UNWATCHED, [False], at_us=2 * MINUTE, now_us=2 * MINUTE))
    assert outcome.transition.happening.value == "returned"
