"""At least 300 seeded faults of six kinds: how many are found, by kind; and what happens to good readings meanwhile.

The faults come from `faulty_sensors`, which shares no code with the tests, the checks or the health summary.
"""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass

import numpy as np
import pytest

from analysis.sensor.compensation_check import CompensationEvidence, check_compensation
from analysis.sensor.health import Belief, Finding, Health, Period, assess
from analysis.sensor.quality.evaluation import evaluate
from analysis.sensor.quality.limits import Surroundings, default_limits
from analysis.sensor.quality.result import QualityResult
from analysis.sensor.quality.state import QualityState
from analysis.sensor.quality.thresholds import Thresholds
from analysis.sensor.quality.words import QualityTest
from analysis.water.properties import Seawater
from tests.analysis.sensor.faulty_sensors import KINDS, Case, make

SEEDS = range(9000, 9060)
"""Never looked at while thresholds and checks were made: those used seeds 0 to 59 and 5000 to 5059."""
TO_FIND = 0.95
GOOD_FAILED_AT_MOST = 0.02

NAMED_BY_TEST = {
    "spike": {QualityTest.SPIKE},
    "stuck": {QualityTest.FLAT_LINE, QualityTest.ATTENUATED_SIGNAL},
    "noise": {QualityTest.NOISE},
    "in air": {QualityTest.IN_AIR},
    "drift": {QualityTest.NEIGHBOUR},
    "wrong compensation": {QualityTest.NEIGHBOUR},
}
NAMED_BY_HEALTH = {
    "spike": set(),
    "stuck": {Finding.STUCK, Finding.ATTENUATED},
    "noise": {Finding.NOISY},
    "in air": {Finding.IN_AIR},
    "drift": {Finding.FOULING, Finding.SLOW_FALL, Finding.NEIGHBOUR_DISAGREES},
    "wrong compensation": {Finding.COMPENSATION_DOUBTED, Finding.NEIGHBOUR_DISAGREES},
}


@dataclass
class Seen:
    result: QualityResult
    is_own: np.ndarray
    health: Health
    compensation: CompensationEvidence

    @property
    def own_quality(self) -> np.ndarray:
        return self.result.quality[self.is_own]


def look_at(case: Case) -> Seen:
    """Run a case through the quality tests, the compensation check and the health summary."""
    sensors, times = (2 if case.has_neighbour else 1), len(case.time_us)
    limits = default_limits(
        Surroundings(case.place), interval_s=case.interval_s, expected_salinity=case.expected_salinity
    )
    thresholds = Thresholds.from_limits([limits] * sensors, neighbour=[1, 0] if sensors == 2 else None)
    conductivity = case.conductivity[:sensors].T.ravel()
    temperature = case.temperature[:sensors].T.ravel()
    water = Seawater().properties(conductivity, temperature_degC=temperature)
    sensor = np.tile(np.arange(sensors), times)
    _, live = evaluate(
        QualityState.fresh(sensors),
        thresholds,
        sensor=sensor,
        measured_at_us=np.repeat(case.time_us, sensors),
        conductivity=conductivity,
        temperature=temperature,
        salinity=water.practical_salinity,
        flags=water.flags,
    )
    result, own = live.amended(), sensor == 0
    stop = int(np.flatnonzero(case.faulty)[-1]) + 1 if case.faulty.any() else times
    compensation = check_compensation(
        case.reported[0, :stop],
        temperature_degC=case.temperature[0, :stop],
        measured_at_us=case.time_us[:stop],
        is_declared_compensated=case.is_declared_compensated,
        neighbour_mS_cm=case.conductivity[1, :stop] if sensors == 2 else None,
    )
    period = Period(
        measured_at_us=case.time_us[:stop],
        temperature_degC=case.temperature[0, :stop],
        salinity=water.practical_salinity[own][:stop],
        by_test=result.by_test[:, :, own][:, :, :stop],
        neighbour_salinity=water.practical_salinity[~own][:stop] if sensors == 2 else None,
    )
    health = assess(period, now_us=int(case.time_us[stop - 1]), interval_s=case.interval_s, compensation=compensation)
    return Seen(result, own, health, compensation)


def is_bad(flags: np.ndarray) -> np.ndarray:
    return (flags == 3) | (flags == 4)


@pytest.fixture(scope="module", params=KINDS)
def seen(request) -> tuple[str, list[tuple[Case, Seen]]]:
    cases = [make(seed, request.param) for seed in SEEDS]
    return request.param, [(case, look_at(case)) for case in cases]


pytestmark = pytest.mark.slow


def test_faults_are_found_and_named(seen):
    kind, cases = seen
    found = named = 0
    for case, saw in cases:
        own = saw.result.by_test[:, :, saw.is_own]
        by_test = any(is_bad(own[test][:, case.faulty]).any() for test in NAMED_BY_TEST[kind])
        by_health = bool(set(saw.health.findings) & NAMED_BY_HEALTH[kind])
        named += by_test or by_health
        found += by_test or is_bad(saw.own_quality[case.faulty]).any() or saw.health.belief > Belief.BELIEVE
    print(f"{kind}: {found} of {len(cases)} found, {named} named")  # noqa: T201
    assert len(cases) * len(KINDS) >= 300
    assert found / len(cases) >= TO_FIND
    assert named / len(cases) >= TO_FIND


def test_good_readings_are_hardly_ever_failed(seen):
    """Also within fast events of the water itself: steps, gushes, steep slopes."""
    kind, cases = seen
    good, eventful = [], []
    for case, saw in cases:
        good.append(saw.own_quality[~case.faulty])
        eventful.append(saw.own_quality[~case.faulty & case.eventful])
        if case.has_neighbour:
            beside = saw.result.quality[~saw.is_own]
            good.append(beside)
            eventful.append(beside[case.eventful])
    good, eventful = np.concatenate(good), np.concatenate(eventful)
    failed, within = (good == 4).mean(), (eventful == 4).mean()
    print(f"{kind}: {failed:.4f} of {len(good)} good rows failed, {within:.4f} of {len(eventful)} in events")  # noqa: T201
    assert (good == 4).mean() <= GOOD_FAILED_AT_MOST
    assert (eventful == 4).mean() <= GOOD_FAILED_AT_MOST


def test_nearly_every_reading_in_air_is_failed():
    """Other faults need time to show; this one does not."""
    pairs = [(case, look_at(case)) for case in (make(seed, "in air") for seed in range(20))]
    assert np.mean([(saw.own_quality[case.faulty] == 4).mean() for case, saw in pairs]) >= 0.99


def healthy(seed: int) -> Case:
    """A case whose fault is one reading of an honest spike kind, taken back."""
    case = make(seed, "spike")
    at = int(np.flatnonzero(case.faulty)[0])
    for column in (case.conductivity, case.reported, case.temperature):
        column[0, at] = column[0, at - 1]
    case.faulty[:] = False
    return case


def test_healthy_sensors_are_believed_through_fast_events():
    """Steps, gushes and slopes of the water, without any fault."""
    beliefs, suspect, failed, rows = Counter(), 0, 0, 0
    for seed in range(1000, 1080):
        case = healthy(seed)
        saw = look_at(case)
        beliefs[saw.health.belief] += 1
        quality = saw.own_quality[case.eventful]
        suspect, failed, rows = suspect + (quality == 3).sum(), failed + (quality == 4).sum(), rows + len(quality)
        assert not saw.compensation.contradicts_declaration
    print(f"healthy: {dict(beliefs)}, in events {suspect / rows:.4f} suspect, {failed / rows:.4f} failed")  # noqa: T201
    assert beliefs[Belief.BELIEVE] >= 0.98 * beliefs.total()
    assert failed == 0
    assert suspect / rows <= 0.02
