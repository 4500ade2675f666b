"""How soon a limit speaks when noisy water creeps over it: on-delay and two readings. Regression, not a reference."""

from __future__ import annotations

import numpy as np
import pytest

from analysis.alarm.kinds import ConditionKind
from analysis.alarm.rationale import first_rules
from analysis.alarm.what_if import ProposedLimit, replayed
from tests.analysis.alarm.stories import SECOND

INTERVAL_S = 10
FALLING = ProposedLimit(29.0, 0.42, is_high=False, rules=first_rules(ConditionKind.SALINITY_LOW, interval_s=INTERVAL_S))
SEEDS = range(60)


def seconds_to_alarm(rate_per_h: float, noise: float, seed: int) -> float:
    """Return how long after the true water left the band the alarm was raised. [s]"""
    generator = np.random.default_rng(seed)
    time_s = (np.arange(-120, 120) + generator.uniform()) * INTERVAL_S
    value = 29.0 - rate_per_h / 3600 * time_s + generator.normal(0, noise, time_s.size)
    found = replayed(
        value,
        measured_at_us=np.round((time_s + 10_000) * SECOND).astype(np.int64),
        quality=np.ones(time_s.size, dtype=np.uint8),
        proposed=FALLING,
        reference_limit=29.0,
    )
    return found.alarms[0].raised_at_us / SECOND - 10_000


@pytest.mark.parametrize("rate_per_h", [4.5, 10, 30, 300])
def test_leaving_the_band_is_told_within_the_on_delay_and_two_readings(rate_per_h: float) -> None:
    latest = FALLING.rules.on_delay_s + 2 * INTERVAL_S
    assert max(seconds_to_alarm(rate_per_h, 0.02, seed) for seed in SEEDS) <= latest


def test_a_day_two_standard_deviations_inside_the_band_is_quiet() -> None:
    for seed in range(4):
        value = 29.0 + 0.1 + np.random.default_rng(seed).normal(0, 0.05, 8640)
        found = replayed(
            value,
            measured_at_us=np.arange(1, value.size + 1) * INTERVAL_S * SECOND,
            quality=np.ones(value.size, dtype=np.uint8),
            proposed=FALLING,
            reference_limit=29.0,
        )
        assert found.count == 0
