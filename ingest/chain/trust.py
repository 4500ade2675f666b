"""How far each reading can be believed: the quality tests, with thresholds by where a sensor hangs."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np

from analysis import flags as flag_room
from analysis.flags import Flag, Quality
from analysis.sensor.quality.evaluation import evaluate
from analysis.sensor.quality.limits import SensorLimits, Surroundings, default_limits
from analysis.sensor.quality.result import joined
from analysis.sensor.quality.thresholds import Thresholds
from analysis.sensor.quality.words import TESTS, QualityTest, rolled_up
from ingest.chain.roster import NO_TANK

if TYPE_CHECKING:
    from analysis.arrays import IntArray, QualityArray
    from analysis.sensor.quality.result import QualityResult
    from analysis.sensor.quality.state import QualityState
    from ingest.chain.block import RawBlock
    from ingest.chain.roster import Roster
    from ingest.chain.water import Water
    from ingest.site.models import Site
    from ingest.site.sensors import Sensor
    from ingest.site.tanks import Tank

BITS_A_TEST = 4
"""A QARTOD flag (1 to 9) takes four bits of the packed word, in the order of `QualityTest`."""


def thresholds(site: Site, roster: Roster) -> Thresholds:
    """Return the thresholds of the site's sensors, each by its surroundings."""
    limits = [_limits(site, sensor) for sensor in site.sensors]
    return Thresholds.from_limits(limits, neighbour=_neighbours(roster.tank))


def judged(
    limits: Thresholds, state: QualityState, block: RawBlock, water: Water
) -> tuple[QualityState, QualityResult]:
    """Run the quality tests on a block in the order of arrival; late readings come after all others, being older."""
    late = (block.flags & np.uint32(Flag.LATE)) != 0
    if not late.any():
        return _evaluated(limits, state, block, water, slice(None))
    behind = np.flatnonzero(late)
    order = np.concatenate([np.flatnonzero(~late), behind[np.argsort(block.measured_at_us[behind], kind="stable")]])
    count = len(block) - behind.size
    state, on_time = _evaluated(limits, state, block, water, order[:count])
    state, others = _evaluated(limits, state, block, water, order[count:])
    return state, _in_order(joined([on_time, others]), np.argsort(order))


def _evaluated(
    limits: Thresholds, state: QualityState, block: RawBlock, water: Water, rows: slice | IntArray
) -> tuple[QualityState, QualityResult]:
    return evaluate(
        state,
        limits,
        sensor=block.sensor[rows],
        measured_at_us=block.measured_at_us[rows],
        conductivity=water.conductivity_mS_cm[rows],
        temperature=water.temperature_degC[rows],
        salinity=water.salinity[rows],
        flags=water.flags[rows],
    )


def _in_order(result: QualityResult, order: IntArray) -> QualityResult:
    return replace(
        result,
        sensor=result.sensor[order],
        measured_at_us=result.measured_at_us[order],
        by_test=result.by_test[:, :, order],
        by_variable=result.by_variable[:, order],
        quality=result.quality[order],
        flags=result.flags[order],
    )


def packed(result: QualityResult) -> IntArray:
    """Return the flags of all tests of each reading as one integer, rolled up over the variables."""
    levels = rolled_up(np.moveaxis(result.by_test, 1, 0)).astype(np.int64)
    shifts = BITS_A_TEST * np.arange(TESTS, dtype=np.int64)
    return np.asarray((levels << shifts[:, None]).sum(axis=0), dtype=np.int64)


def unpacked(tests: int) -> dict[str, int]:
    """Return the QARTOD flag of each test by its name, from a packed word; tests that were not evaluated are left out."""
    found = {test.name.lower(): tests >> (BITS_A_TEST * test) & 0xF for test in QualityTest}
    return {name: flag for name, flag in found.items() if flag not in (0, Quality.NOT_EVALUATED)}


def quality_for_alarms(water: Water, result: QualityResult) -> QualityArray:
    """Return the quality with which readings go the way of the alarms.

    Only what fails on physical grounds is kept from it: no value, an unphysical one, or one that the sensor cannot measure.
    A value that is merely odd (a spike, a flat line) may be the accident that somebody has to be told of.
    """
    quality = flag_room.rolled_up(water.flags)
    beyond_sensor = (result.by_test[QualityTest.GROSS_RANGE] == Quality.FAIL).any(axis=0)
    quality[beyond_sensor & (quality != Quality.MISSING)] = Quality.FAIL
    return quality


def _limits(site: Site, sensor: Sensor) -> SensorLimits:
    tank = None if sensor.tank is None else site.tank(sensor.tank)
    surroundings = _surroundings(tank) if sensor.surroundings is None else Surroundings(sensor.surroundings)
    limits = default_limits(
        surroundings,
        interval_s=sensor.interval_s,
        expected_salinity=np.nan if tank is None else _expected_salinity(tank),
    )
    spans = list(limits.fail_span)
    if sensor.span.conductivity_mS_cm is not None:
        spans[0] = sensor.span.conductivity_mS_cm
    if sensor.span.temperature_degC is not None:
        spans[1] = sensor.span.temperature_degC
    if tuple(spans) == limits.fail_span:
        return limits
    inner = [
        (max(low, fail[0]), min(high, fail[1])) for (low, high), fail in zip(limits.suspect_span, spans, strict=True)
    ]
    return default_limits(
        surroundings,
        interval_s=sensor.interval_s,
        expected_salinity=np.nan if tank is None else _expected_salinity(tank),
        fail_span=tuple(spans),
        suspect_span=tuple(inner),
    )


def _surroundings(tank: Tank | None) -> Surroundings:
    """Return where a sensor hangs if the site file does not say: by what its tank's water should do."""
    if tank is None or tank.set_point is None or tank.set_point.tidal_band is not None:
        return Surroundings.TIDAL_INTAKE
    if tank.set_point.temperature_degC is not None:
        return Surroundings.THERMOSTATED_TANK
    return Surroundings.OPEN_TANK


def _expected_salinity(tank: Tank) -> float:
    if tank.set_point is None:
        return np.nan
    if tank.set_point.salinity is not None:
        return tank.set_point.salinity
    return np.nan if tank.set_point.tidal_band is None else tank.set_point.tidal_band[0]


def _neighbours(tank: IntArray) -> list[int]:
    """Return for each sensor the next one in the same tank, or -1."""
    found = []
    for index, place in enumerate(tank.tolist()):
        others = [other for other in np.flatnonzero(tank == place).tolist() if other != index]
        after = [other for other in others if other > index]
        found.append(-1 if place == NO_TANK or not others else (after or others)[0])
    return found
