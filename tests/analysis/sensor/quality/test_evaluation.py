"""What each quality test says, reading by reading, in the situations of a hatchery."""

from __future__ import annotations

import numpy as np
import pytest

from analysis.flags import Flag
from analysis.sensor.quality.evaluation import evaluate
from analysis.sensor.quality.limits import OFF, SensorLimits, Surroundings, default_limits
from analysis.sensor.quality.state import QualityState
from analysis.sensor.quality.thresholds import Thresholds
from analysis.sensor.quality.words import QualityTest, Variable
from tests.analysis.sensor.quality.streams import SECOND_US, START_US, Stream

C, T, S = Variable
DAY_ROWS = 1440  # one a minute


def tank(hours: float = 30.0, *, interval_s: float = 60.0, seed: int = 0, sensor: int = 0) -> Stream:
    """A quiet tank at salinity 20 with the noise of an honest sensor."""
    rng = np.random.default_rng(seed)
    count = round(hours * 3600 / interval_s)
    return Stream(
        sensor=np.full(count, sensor, dtype=np.int64),
        measured_at_us=START_US + np.rint(np.arange(count) * interval_s * SECOND_US).astype(np.int64),
        conductivity=32.0 + rng.normal(0, 0.02, count),
        temperature=25.0 + 0.5 * np.sin(np.arange(count) * interval_s / 13751.0) + rng.normal(0, 0.01, count),
        salinity=20.0 + rng.normal(0, 0.015, count),
    )


def limits(surroundings: Surroundings = Surroundings.OPEN_TANK, **replaced) -> SensorLimits:
    return default_limits(surroundings, interval_s=60.0, expected_salinity=20.0, **replaced)


def run(stream: Stream, *, state: QualityState | None = None, flags=None, **replaced):
    thresholds = Thresholds.from_limits([limits(**replaced)])
    return evaluate(state or QualityState.fresh(1), thresholds, **stream.all(), flags=flags)


def shift(stream: Stream, start: int, size: float, stop: int | None = None) -> Stream:
    """Change the water's salinity from one row on, conductivity with it."""
    stream.salinity[start:stop] += size
    stream.conductivity[start:stop] += 1.6 * size
    return stream


def test_a_quiet_tank_passes_everything():
    _, result = run(tank())
    assert set(result.quality) == {1}
    assert not result.flags.any()
    assert not len(result.amendments)


@pytest.mark.parametrize("size", [-9.0, -2.0, 2.0, 9.0])
def test_a_step_of_the_water_is_never_failed_and_never_a_spike(size):
    stream = shift(tank(), 1700, size)
    _, live = run(stream)
    amended = live.amended()
    assert 4 not in amended.quality
    assert set(amended.test(QualityTest.SPIKE)[:, 1:].ravel()) == {1}
    # of high interest at its first reading, believed from the second on
    assert live.test(QualityTest.RATE_OF_CHANGE)[S, 1700] == 3
    assert set(live.quality[1701:]) == {1}


def test_a_steep_slope_of_the_water_passes():
    stream = tank()
    ramp = np.clip((np.arange(len(stream)) - 1700) / 40.0, 0.0, 1.0)
    stream.salinity -= 8.0 * ramp
    stream.conductivity -= 12.0 * ramp
    _, live = run(stream)
    assert set(live.quality) == {1}
    assert set(live.amended().quality) == {1}


def test_a_spike_is_open_at_its_arrival_and_settled_by_the_next_reading():
    stream = shift(tank(), 1700, 7.0, 1701)
    state, first = run(Stream(**stream.part(0, 1701)))
    assert first.test(QualityTest.SPIKE)[S, 1700] == 2
    assert not len(first.amendments)
    _, second = run(Stream(**stream.part(1701, 1702)), state=state)
    lines = second.amendments
    assert set(lines.test.tolist()) == {QualityTest.SPIKE}
    assert sorted(lines.variable.tolist()) == [C, S]
    assert set(lines.from_us.tolist()) == set(lines.to_us.tolist()) == {int(stream.measured_at_us[1700])}
    assert set(lines.quality.tolist()) == {4}


def test_a_reading_near_the_one_before_passes_the_spike_test_for_good():
    stream = shift(tank(), 1700, 7.0, 1701)
    _, live = run(stream)
    passed_live = live.test(QualityTest.SPIKE)[S] == 1
    settled = live.amended().test(QualityTest.SPIKE)[S]
    assert set(settled[passed_live]) == {1}


def test_an_amendment_reaches_the_rolled_up_flag_and_the_words():
    stream = shift(tank(), 1700, 7.0, 1701)
    _, live = run(stream)
    amended = live.amended()
    assert live.quality[1700] == 3  # the rate test saw it come
    assert amended.quality[1700] == 4
    assert amended.by_variable[:, 1700].tolist() == [4, 1, 4]
    assert amended.flags[1700] & Flag.SPIKE
    assert not amended.flags[1699] & Flag.SPIKE
    assert live.amended(amended.amendments).quality.tolist() == amended.quality.tolist()


def test_a_jump_across_a_missing_value_is_judged():
    stream = shift(tank(), 1701, 7.0, 1702)
    stream.conductivity[1700] = stream.salinity[1700] = np.nan
    _, live = run(stream)
    assert live.quality[1700] == 9
    assert live.by_variable[:, 1700].tolist() == [9, 1, 9]
    assert live.test(QualityTest.RATE_OF_CHANGE)[S, 1701] == 3
    assert live.amended().test(QualityTest.SPIKE)[S, 1701] == 4


def test_after_a_gap_nothing_is_compared():
    stream = shift(tank(), 1700, 7.0)
    stream.measured_at_us[1700:] += 3 * 3600 * SECOND_US
    _, live = run(stream)
    assert live.test(QualityTest.GAP)[C, 1700] == 4
    assert live.flags[1700] & Flag.GAP
    assert live.test(QualityTest.RATE_OF_CHANGE)[S, 1700] == 2
    assert live.test(QualityTest.SPIKE)[S, 1700] == 2
    assert live.quality[1700] == 1  # a gap is no fault of the reading that ends it


def test_missing_and_unphysical_values_are_told_apart():
    stream = tank(1.0)
    stream.salinity[10:13] = np.nan
    stream.conductivity[10] = np.nan
    stream.temperature[20] = np.nan
    flags = np.zeros(len(stream), dtype=np.uint32)
    flags[11] = Flag.NEGATIVE
    _, live = run(stream, flags=flags)
    assert live.quality[10:13].tolist() == [9, 4, 9]
    assert live.quality[20] == 9
    assert live.by_variable[:, 20].tolist() == [1, 9, 1]
    assert live.flags[11] & Flag.NEGATIVE
    assert set(live.by_test[:, T, 20]) == {9}


@pytest.mark.parametrize("flag", [Flag.EXTRAPOLATED, Flag.WATER_KIND_DOUBTED])
def test_salinity_beyond_what_is_published_is_at_least_suspect(flag):
    stream = tank(1.0)
    flags = np.zeros(len(stream), dtype=np.uint32)
    flags[10:13] = flag
    stream.temperature[11] = 99.0
    stream.conductivity[12] = np.nan
    _, live = run(stream, flags=flags)
    assert live.quality[9:14].tolist() == [1, 3, 4, 9, 1]
    assert live.by_variable[:, 10].tolist() == [1, 1, 3]
    assert live.flags[10] == flag


def test_missing_is_never_hidden_by_an_amendment():
    stream = tank(40.0, seed=2)
    rng = np.random.default_rng(1)
    stream.temperature[1900:] += rng.normal(0, 3.0, len(stream) - 1900)
    stream.temperature[1890] = np.nan
    _, live = run(stream)
    amended = live.amended()
    assert set(live.amendments.test.tolist()) >= {QualityTest.NOISE}
    assert amended.quality[1890] == 9
    assert set(amended.by_test[:, T, 1890]) == {9}


def test_gross_range_and_the_history_after_it():
    stream = tank()
    stream.temperature[1700] = 60.0
    _, live = run(stream)
    assert live.by_test[QualityTest.GROSS_RANGE, T, 1700] == 4
    assert live.quality[1700] == 4
    assert live.flags[1700] & Flag.GROSS_RANGE
    # what cannot be leaves no trace: the next reading is compared with the one before it
    assert live.quality[1701] == 1
    assert live.amended().quality[1701] == 1


def test_climatology_is_suspect_only():
    span = ((0.0, 100.0), (24.0, 25.0), (0.0, 60.0))
    _, live = run(tank(), climatology=(span,) * 12)
    outside = live.test(QualityTest.CLIMATOLOGY)[T] == 3
    assert 0.2 < outside.mean() < 0.8
    assert set(live.test(QualityTest.CLIMATOLOGY)[T]) == {1, 3}
    assert (live.flags[outside] & Flag.CLIMATOLOGY).all()


def test_rate_of_change_needs_a_history():
    stream = shift(tank(1.5), 5, 9.0)
    _, live = run(stream)
    assert set(live.test(QualityTest.RATE_OF_CHANGE)[S, :60]) == {2}
    assert set(live.test(QualityTest.RATE_OF_CHANGE)[S, 60:]) == {1}


def test_rate_of_change_adapts_to_restless_water():
    """N_DEV times the SD of a tide and a day: what is fast in a tank is usual at an intake."""
    stream = tank(60.0)
    tide = 6.0 * np.sin(2 * np.pi * np.arange(len(stream)) / 745.0)
    stream.salinity += tide
    stream.conductivity += 1.6 * tide
    _, live = run(shift(stream, 3000, 5.0), **{"rate_floor": (0.1, 0.1, 0.1)})
    assert live.test(QualityTest.RATE_OF_CHANGE)[S, 3000] == 1
    _, quiet = run(shift(tank(60.0), 3000, 5.0), **{"rate_floor": (0.1, 0.1, 0.1)})
    assert quiet.test(QualityTest.RATE_OF_CHANGE)[S, 3000] == 3


class TestFlatLine:
    def test_a_stuck_cell_is_suspect_then_failed(self):
        stream = tank()
        stream.conductivity[600:] = stream.conductivity[600]
        _, live = run(stream)
        flat = live.test(QualityTest.FLAT_LINE)[C]
        first_suspect, first_fail = (int(np.argmax(flat == flag)) for flag in (3, 4))
        assert 3.0 <= (first_suspect - 600) / 60 <= 4.1
        assert 6.0 <= (first_fail - 600) / 60 <= 7.1
        assert set(flat[first_fail:]) == {4}
        assert live.quality[-1] == 4
        assert live.flags[-1] & Flag.FLAT_LINE

    def test_it_ends_with_the_first_change(self):
        stream = tank()
        stream.conductivity[600:1500] = 32.0
        stream.conductivity[1500] = 32.1
        _, live = run(stream)
        assert live.test(QualityTest.FLAT_LINE)[C, 1499] == 4
        assert live.test(QualityTest.FLAT_LINE)[C, 1500] == 1

    def still(self, stream: Stream, *, changed_at: int | None = None):
        state = QualityState.fresh(1)
        if changed_at is not None:
            state.note_water_change(0, at_us=int(stream.measured_at_us[changed_at]))
        return run(stream, state=state, surroundings=Surroundings.THERMOSTATED_TANK)[1]

    def constant(self) -> Stream:
        stream = tank()
        stream.conductivity[:], stream.temperature[:], stream.salinity[:] = 32.0, 25.0, 20.0
        return stream

    def test_in_a_thermostated_tank_a_constant_value_is_what_everybody_wants(self):
        live = self.still(self.constant())
        assert set(live.test(QualityTest.FLAT_LINE).ravel()) == {2}
        assert set(live.test(QualityTest.ATTENUATED_SIGNAL).ravel()) == {2}
        assert set(live.quality) == {1}

    def test_but_not_when_the_temperature_moved(self):
        stream = self.constant()
        stream.temperature = 25.0 + 0.8 * np.sin(np.arange(len(stream)) / 200.0)
        live = self.still(stream)
        assert 4 in live.test(QualityTest.FLAT_LINE)[C]

    def test_nor_when_the_water_was_changed(self):
        live = self.still(self.constant(), changed_at=900)
        flat = live.test(QualityTest.FLAT_LINE)[C]
        hours = np.arange(len(flat)) / 60
        assert set(flat[(hours >= 16) & (hours < 19)]) == {4}
        assert set(flat[hours < 15]) == {2}

    def test_a_water_change_noted_within_an_hour_counts_from_the_next_reading(self):
        stream = self.constant()
        thresholds = Thresholds.from_limits([limits(Surroundings.THERMOSTATED_TANK)])
        state, _ = evaluate(QualityState.fresh(1), thresholds, **stream.part(0, 910))
        state.note_water_change(0, at_us=int(stream.measured_at_us[850]))
        _, live = evaluate(state, thresholds, **stream.part(910, 911))
        assert live.test(QualityTest.FLAT_LINE)[C, 0] >= 3

    def test_nor_when_the_neighbour_moved(self):
        stuck, other = self.constant(), shift(tank(sensor=1), 600, 2.0)
        other.temperature[:] = 25.0
        both = merged(stuck, other)
        thresholds = Thresholds.from_limits([limits(Surroundings.THERMOSTATED_TANK)] * 2, neighbour=[1, 0])
        _, live = evaluate(QualityState.fresh(2), thresholds, **both.all())
        flat = live.test(QualityTest.FLAT_LINE)[C, both.sensor == 0]
        assert set(flat[:660]) == {2}
        assert set(flat[660:]) == {4}  # and it stays failed while the line lies flat


def merged(first: Stream, second: Stream) -> Stream:
    columns = {name: np.concatenate((getattr(first, name), getattr(second, name))) for name in vars(first)}
    order = np.lexsort((columns["sensor"], columns["measured_at_us"]))
    return Stream(**{name: column[order] for name, column in columns.items()})


def test_an_attenuated_signal():
    """A clogged cell: the value still moves, but far less than this water does."""
    stream = tank(30.0)
    stream.conductivity[600:] = 32.0 + np.random.default_rng(0).normal(0, 0.0025, len(stream) - 600)
    _, live = run(stream)
    attenuated = live.test(QualityTest.ATTENUATED_SIGNAL)[C]
    assert set(attenuated[600 + 13 * 60 :]) == {3}
    assert set(attenuated[9 * 60 : 600]) == {1}
    assert live.flags[-1] & Flag.ATTENUATED


def test_a_thermometer_that_steps_without_the_conductivity_is_suspect():
    stream = tank()
    stream.temperature[1700:] += 2.0
    _, lone = run(stream)
    assert lone.test(QualityTest.MULTI_VARIATE)[T, 1700] == 3
    assert lone.flags[1700] & Flag.MULTI_VARIATE
    stream.conductivity[1700:] *= 1.04  # warmer water of the same salinity conducts 2 %/K more
    _, together = run(stream)
    assert together.test(QualityTest.MULTI_VARIATE)[T, 1700] == 1


def test_two_sensors_in_a_tank_that_do_not_agree_are_both_suspect():
    both = merged(tank(), shift(tank(seed=1, sensor=1), 900, 1.5))
    thresholds = Thresholds.from_limits([limits()] * 2, neighbour=[1, 0])
    _, live = evaluate(QualityState.fresh(2), thresholds, **both.all())
    for sensor in (0, 1):
        flags = live.test(QualityTest.NEIGHBOUR)[:, both.sensor == sensor]
        assert set(flags[S, 60:900]) == {1}
        assert set(flags[S, 960:]) == {3}
        assert set(flags[C]) == {2}  # raw conductivities of two places are not compared
        assert set(flags[T, 60:]) == {1}
    assert 4 not in live.quality


def test_a_noisy_thermometer_is_found_and_its_first_hours_are_amended():
    stream = tank(46.0)
    rng = np.random.default_rng(5)
    stream.temperature[1500:2100] += rng.normal(0, 2.0, 600)
    _, live = run(stream)
    noisy = live.test(QualityTest.NOISE)[T]
    first = int(np.argmax(noisy == 3))
    assert 1500 < first < 1500 + 180
    assert set(noisy[first:2100]) == {3}
    assert set(live.amended().test(QualityTest.NOISE)[T, 1500:2100]) == {3}
    assert live.flags[first] & Flag.NOISE
    assert set(live.test(QualityTest.NOISE)[T, 2500:]) == {1}
    assert 4 not in live.test(QualityTest.NOISE)


def test_a_dry_probe_is_failed_and_does_not_disturb_what_follows():
    stream = tank()
    stream.conductivity[1700:1720] = 0.4
    stream.salinity[1700:1720] = 0.2
    _, live = run(stream)
    assert set(live.test(QualityTest.IN_AIR)[C, 1700:1720]) == {4}
    assert set(live.quality[1700:1720]) == {4}
    assert (live.flags[1700:1720] & Flag.IN_AIR).all()
    assert set(live.amended().quality[1720:]) == {1}


def test_fresh_water_is_not_air():
    stream = tank()
    stream.conductivity, stream.salinity = stream.conductivity / 100, stream.salinity / 100
    thresholds = Thresholds.from_limits([default_limits(Surroundings.OPEN_TANK, interval_s=60.0)])
    _, live = evaluate(QualityState.fresh(1), thresholds, **stream.all())
    assert 4 not in live.quality


class TestLate:
    def test_a_late_reading_is_judged_by_itself_only(self):
        stream = tank()
        state, _ = run(stream)
        late = Stream(**stream.part(800, 801))
        late.conductivity = late.conductivity + 20.0
        late.temperature = np.array([99.0])
        after, result = run(late, state=state)
        assert result.flags[0] & Flag.LATE
        assert result.quality[0] == 4
        history = [test for test in QualityTest if QualityTest.SPIKE <= test <= QualityTest.NOISE]
        assert set(result.by_test[history].ravel()) == {2}
        assert result.by_test[QualityTest.GAP, C, 0] == 2
        assert after.to_jsonable() == state.to_jsonable()

    def test_late_rows_among_others(self):
        stream = tank()
        state, _ = run(Stream(**stream.part(0, 1700)))
        mixed = merged(Stream(**stream.part(1600, 1601)), Stream(**stream.part(1700, 1800)))
        _, result = run(mixed, state=state)
        assert (result.flags & Flag.LATE).astype(bool).tolist() == [True] + [False] * 100
        _, expected = run(Stream(**stream.part(1700, 1800)), state=state)
        np.testing.assert_array_equal(result.by_test[:, :, 1:], expected.by_test)

    def test_the_same_time_twice_is_late(self):
        stream = tank(2.0)
        stream.measured_at_us[50] = stream.measured_at_us[49]
        _, result = run(stream)
        assert np.flatnonzero(result.flags & Flag.LATE).tolist() == [50]


def test_a_test_without_threshold_says_not_evaluated():
    off = (OFF, OFF, OFF)
    stream = shift(tank(), 1700, 9.0, 1701)
    _, live = run(
        stream,
        spike_suspect=off,
        spike_fail=off,
        flat_tolerance=off,
        attenuated_suspect=off,
        attenuated_fail=off,
        rate_floor=off,
        noise_limit=off,
    )
    for test in (QualityTest.SPIKE, QualityTest.FLAT_LINE, QualityTest.ATTENUATED_SIGNAL, QualityTest.RATE_OF_CHANGE):
        assert set(live.amended().test(test).ravel()) == {2}, test
    assert set(live.quality) == {1}
