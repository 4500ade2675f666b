"""However a stream of readings is cut into blocks, flags, amendments and state are the same."""

from __future__ import annotations

import json
from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from analysis.errors import InvalidInputError
from analysis.sensor.quality import evaluation
from analysis.sensor.quality.evaluation import evaluate
from analysis.sensor.quality.limits import Surroundings, default_limits
from analysis.sensor.quality.result import Amendments, joined
from analysis.sensor.quality.state import RECENT, RING, QualityState
from analysis.sensor.quality.thresholds import Thresholds
from analysis.sensor.quality.words import QualityTest
from tests.analysis.sensor.quality.streams import eventful

SENSORS = 3


def thresholds() -> Thresholds:
    open_tank = default_limits(Surroundings.OPEN_TANK, interval_s=600.0, expected_salinity=20.0)
    still = default_limits(Surroundings.THERMOSTATED_TANK, interval_s=600.0, flat_suspect_h=(2.0, 2.0, 2.0))
    seasons = tuple(((20.0, 40.0), (15.0, 25.0), (15.0, 25.0)) for _ in range(12))
    pond = default_limits(Surroundings.POND, interval_s=600.0, climatology=seasons)
    return Thresholds.from_limits([open_tank, still, pond], neighbour=[1, 0, -1])


def run(stream, cuts):
    state, results = QualityState.fresh(SENSORS), []
    edges = [0, *sorted(cuts), len(stream)]
    for start, stop in pairwise(edges):
        state, result = evaluate(state, thresholds(), **stream.part(start, stop))
        results.append(result)
    return state, joined(results)


def as_sorted_lines(amendments: Amendments) -> list[tuple[int, ...]]:
    columns = (getattr(amendments, name) for name in ("sensor", "variable", "test", "from_us", "to_us", "quality"))
    return sorted(tuple(int(x) for x in line) for line in zip(*columns, strict=True))


def assert_same(first, second) -> None:
    state_a, a = first
    state_b, b = second
    for name in ("by_test", "by_variable", "quality", "flags"):
        np.testing.assert_array_equal(getattr(a, name), getattr(b, name), err_msg=name)
    assert as_sorted_lines(a.amendments) == as_sorted_lines(b.amendments)
    for name in (*RECENT, *RING):
        np.testing.assert_array_equal(getattr(state_a, name), getattr(state_b, name), err_msg=name)


@settings(max_examples=10, deadline=None, derandomize=True)
@given(seed=st.integers(0, 40), cuts=st.lists(st.integers(0, 450), max_size=30))
def test_cutting_a_stream_changes_nothing(seed, cuts):
    stream = eventful(seed)
    cuts = [min(cut, len(stream)) for cut in cuts]
    assert_same(run(stream, []), run(stream, cuts))


@pytest.mark.parametrize("seed", range(2))
def test_row_by_row_equals_at_once(seed):
    stream = eventful(seed)
    assert_same(run(stream, []), run(stream, range(len(stream))))


def test_the_streams_exercise_every_test():
    """The property above would be empty if the streams never made a test speak."""
    spoken = set()
    amended = set()
    for seed in range(12):
        _, result = run(eventful(seed), [])
        spoken |= {test for test in QualityTest if ((result.test(test) == 3) | (result.test(test) == 4)).any()}
        amended |= set(result.amendments.test.tolist())
    assert spoken == set(QualityTest) - {QualityTest.SPIKE}  # a spike is never given at arrival
    assert amended == {QualityTest.SPIKE, QualityTest.NOISE}


def test_large_blocks_are_cut_inside_without_a_trace(monkeypatch):
    stream = eventful(5)
    whole = run(stream, [])
    monkeypatch.setattr(evaluation, "BLOCK_ROWS", 37)
    assert_same(whole, run(stream, []))


@pytest.mark.parametrize("seed", range(3))
def test_a_stored_state_goes_on_as_if_nothing_had_happened(seed):
    stream = eventful(seed)
    half = len(stream) // 2
    state, _ = evaluate(QualityState.fresh(SENSORS), thresholds(), **stream.part(0, half))
    by_json = QualityState.from_jsonable(json.loads(json.dumps(state.to_jsonable())))
    by_bytes = QualityState.fresh(SENSORS)
    for sensor in range(SENSORS):
        by_bytes.restore(sensor, recent=state.recent_bytes(sensor), ring=state.ring_bytes(sensor))
    rest = stream.part(half, len(stream))
    expected = evaluate(state, thresholds(), **rest)
    assert_same(expected, evaluate(by_json, thresholds(), **rest))
    assert_same(expected, evaluate(by_bytes, thresholds(), **rest))


def test_a_changed_list_of_sensors_keeps_what_is_known_of_each():
    stream = eventful(4)
    state, _ = evaluate(QualityState.fresh(SENSORS), thresholds(), **stream.part(0, 300))
    turned = state.rearranged([2, -1, 0])
    for new, old in ((0, 2), (2, 0)):
        assert turned.recent_bytes(new) == state.recent_bytes(old)
        assert turned.ring_bytes(new) == state.ring_bytes(old)
    assert turned.recent_bytes(1) == QualityState.fresh(1).recent_bytes(0)
    assert state.rearranged([]).sensors == 0
    with pytest.raises(InvalidInputError, match="former index"):
        state.rearranged([3])


def test_the_state_handed_in_stays_as_it_was():
    stream = eventful(1)
    state, _ = evaluate(QualityState.fresh(SENSORS), thresholds(), **stream.part(0, 200))
    before = json.dumps(state.to_jsonable())
    evaluate(state, thresholds(), **stream.part(200, 450))
    assert json.dumps(state.to_jsonable()) == before


def test_ring_changes_are_announced():
    stream = eventful(2)
    state = QualityState.fresh(SENSORS)
    for row in range(len(stream)):
        before = [state.ring_bytes(sensor) for sensor in range(SENSORS)]
        state, result = evaluate(state, thresholds(), **stream.part(row, row + 1))
        changed = {sensor for sensor in range(SENSORS) if state.ring_bytes(sensor) != before[sensor]}
        assert changed <= set(result.ring_changed.tolist())


def test_memory_is_bounded_so_the_state_can_be_rebuilt_from_the_last_day():
    """A day and an hour of stored readings give the state's tallies back."""
    stream = eventful(3, sensors=1, rounds=600)
    limits = Thresholds.from_limits([default_limits(Surroundings.OPEN_TANK, interval_s=600.0)])
    whole, _ = evaluate(QualityState.fresh(1), limits, **stream.all())
    first_bucket = int(whole.bucket[0]) - 26
    start = int(np.searchsorted(stream.measured_at_us, first_bucket * int(limits.bucket_us[0])))
    rebuilt, _ = evaluate(QualityState.fresh(1), limits, **stream.part(start, len(stream)))
    np.testing.assert_array_equal(rebuilt.tally[0], whole.tally[0])
    np.testing.assert_array_equal(rebuilt.last_value, whole.last_value)
    within = whole.ring_bucket[0] >= int(whole.bucket[0]) - 25
    held = rebuilt.ring_bucket[0] >= int(whole.bucket[0]) - 25
    np.testing.assert_array_equal(rebuilt.ring[0][held], whole.ring[0][within])


def test_stored_state_of_another_version_is_refused():
    state = QualityState.fresh(1)
    with pytest.raises(InvalidInputError, match="stored quality state"):
        state.restore(0, recent=b"short", ring=state.ring_bytes(0))
    plain = state.to_jsonable()
    del plain["ring"]
    with pytest.raises(InvalidInputError, match="no ring"):
        QualityState.from_jsonable(plain)
    plain = state.to_jsonable()
    plain["tally"] = [[1, 2], [3, 4]]
    with pytest.raises(InvalidInputError, match="tally"):
        QualityState.from_jsonable(plain)


def test_an_empty_block_changes_nothing():
    state = QualityState.fresh(SENSORS)
    after, result = evaluate(
        state, thresholds(), sensor=[], measured_at_us=[], conductivity=[], temperature=[], salinity=[]
    )
    assert after is state
    assert result.quality.shape == (0,)
    assert result.by_test.shape == (11, 3, 0)


def test_bad_input_is_named():
    state, limits = QualityState.fresh(SENSORS), thresholds()
    row = {"conductivity": [1.0], "temperature": [1.0], "salinity": [1.0]}
    with pytest.raises(InvalidInputError, match="sensor: found"):
        evaluate(state, limits, sensor=[3], measured_at_us=[1], **row)
    with pytest.raises(InvalidInputError, match="state: found '2 sensors'"):
        evaluate(QualityState.fresh(2), limits, sensor=[0], measured_at_us=[1], **row)
    with pytest.raises(InvalidInputError, match="measured_at_us, flags"):
        evaluate(state, limits, sensor=[0], measured_at_us=[1, 2], **row)
    two = {name: [20.0, 20.0] for name in row}
    with pytest.raises(InvalidInputError, match="in order of measured time"):
        evaluate(state, limits, sensor=[0, 0], measured_at_us=[2, 1], **two)
