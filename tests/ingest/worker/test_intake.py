"""What a worker makes of messages, good and bad: readings, refusals, duplicates, contradictions."""

from __future__ import annotations

import json
import math

import pytest

from analysis.flags import Flag, words
from tests.harness.hatchery import START_US, Bench, conductivity, payload, site_text

MINUTE_US = 60_000_000
NOW_US = START_US + 60 * MINUTE_US


@pytest.fixture
def bench(tmp_path):
    with Bench(tmp_path, site_text(port=1, sensors=2), now_us=NOW_US) as bench:
        yield bench


def body(at_us=NOW_US, **changes):
    values = {"c": conductivity(31.0), "t": 28.0, "at": at_us}
    return json.dumps({**values, **changes}).encode()


def stored(bench, sensor="s0"):
    return bench.queries.history(sensor, from_us=START_US, to_us=NOW_US + MINUTE_US)


def test_a_reading_becomes_water(bench):
    assert bench.send("quay/s0", payload(NOW_US, 31.0, 28.0))
    latest = bench.queries.latest()["s0"]
    assert (latest.measured_at, latest.received_at) == (NOW_US, NOW_US)
    assert latest.practical_salinity == pytest.approx(31.0, abs=1e-9)
    assert latest.temperature_degC == 28.0
    assert latest.conductivity_mS_cm == pytest.approx(conductivity(31.0))
    # TEOS-10 ratio of Reference Salinity to practical salinity: 35.16504 / 35 (Millero and others 2008).
    assert latest.absolute_salinity_g_kg == pytest.approx(31.0 * 35.16504 / 35, rel=1e-3)
    assert latest.flags == 0


@pytest.mark.parametrize(
    ("payload_bytes", "code"),
    [
        (b"", "unreadable"),
        (b"\x00\xff\xfe", "unreadable"),
        (b"{", "unreadable"),
        (b"[1, 2]", "wrong_shape"),
        (b"31.0", "wrong_shape"),
        (b'{"c": NaN, "t": NaN, "at": %d}' % NOW_US, "not_finite"),
        (b'{"c": 1e999, "t": -1e999, "at": %d}' % NOW_US, "not_finite"),
        (b'{"c": -999, "t": -99.9, "at": %d}' % NOW_US, "filler"),
        (b'{"c": "\\ud800", "t": "\\ud800", "at": %d}' % NOW_US, "wrong_type"),
        (b'{"c": 50, "t": 28}', "time_missing"),
        (b'{"c": 50, "t": 28, "at": "\\ud800"}', "time_unreadable"),
        (b'{"c": 50, "t": 28, "at": %d}' % (NOW_US + 11 * MINUTE_US), "time_beyond_horizon"),
        (b'{"c": 50, "t": 28, "at": %d}' % (NOW_US - 37 * 10**14), "time_beyond_horizon"),
        (b"[" * 60_000, "unreadable"),
        (b"x" * 1_000_000, "too_large"),
    ],
)
def test_what_cannot_be_read_is_kept_with_its_reason_and_stops_nothing(bench, payload_bytes, code):
    good = bench.received("quay/s1", payload(NOW_US, 31.0))
    assert bench.process([bench.received("quay/s0", payload_bytes), good])
    (kept,) = bench.queries.refused()
    assert (kept.code, kept.topic, kept.received_at, kept.is_partly_kept) == (code, "quay/s0", NOW_US, False)
    assert kept.payload == payload_bytes[:4096]
    assert kept.found
    assert kept.allowed
    counters = bench.queries.counters()
    assert (counters["refused"], counters[f"refused.{code}"], counters["messages"]) == (1, 1, 2)
    assert set(bench.queries.latest()) == {"s1"}


@pytest.mark.parametrize(
    ("changes", "flag", "code"),
    [
        ({"c": -999}, Flag.FILLER, "filler"),
        ({"c": math.nan}, Flag.NOT_FINITE, "not_finite"),
        ({"c": None}, Flag.MISSING, "missing"),
        ({"c": "fifty"}, Flag.MISSING, "wrong_type"),
        ({"t": -99.9}, Flag.FILLER, "filler"),
    ],
)
def test_one_unusable_value_is_null_with_its_flag_and_the_bytes_are_kept(bench, changes, flag, code):
    assert bench.send("quay/s0", body(**changes))
    latest = bench.queries.latest()["s0"]
    assert latest.flags & flag, words(latest.flags)
    assert latest.practical_salinity is None
    assert (latest.temperature_degC is None) is ("t" in changes)
    assert latest.quality == 9
    (kept,) = bench.queries.refused()
    assert (kept.code, kept.is_partly_kept) == (code, True)
    assert bench.queries.counters()["remarks"] == 1


def test_a_topic_that_nobody_declared_is_kept_aside(bench):
    assert bench.send("quay/s99", payload(NOW_US, 31.0))
    assert [item.code for item in bench.queries.refused()] == ["unknown_topic"]


def test_a_decoder_that_fails_as_it_should_not_takes_nothing_down(bench, monkeypatch):
    decoder = type(bench.worker.plant.decoder)
    right = decoder.decode

    def fails(self, topic, *rest, **options):
        if topic == "quay/s0":
            raise ZeroDivisionError("a defect")
        return right(self, topic, *rest, **options)

    monkeypatch.setattr(decoder, "decode", fails)
    messages = [bench.received(f"quay/{sensor}", payload(NOW_US, 31.0)) for sensor in ("s0", "s1")]
    assert bench.process(messages)
    assert [item.code for item in bench.queries.refused()] == ["internal"]
    assert set(bench.queries.latest()) == {"s1"}


def test_the_same_reading_again_is_counted_and_stored_once(bench):
    bench.send("quay/s0", body(), body())
    bench.send("quay/s0", body())
    bench.restart()
    bench.send("quay/s0", body())
    assert bench.queries.reading_count() == 1
    counters = bench.queries.counters()
    assert (counters["readings"], counters["duplicates"], counters.get("conflicts", 0)) == (1, 3, 0)


@pytest.mark.parametrize("has_restart", [False, True])
def test_another_reading_of_the_same_moment_is_kept_aside_and_the_first_stays(bench, has_restart):
    bench.send("quay/s0", body())
    if has_restart:
        bench.restart()
    bench.send("quay/s0", body(t=27.0))
    assert bench.queries.counters()["conflicts"] == 1
    assert stored(bench).temperature_degC.tolist() == [28.0]
    row = bench.worker.store.connection.execute("SELECT temperature, reason FROM conflict").fetchone()
    assert row["temperature"] == 27.0
    assert row["reason"]


def test_an_older_reading_that_comes_late_is_stored_and_is_not_the_latest(bench):
    bench.send("quay/s0", body(NOW_US))
    bench.send("quay/s0", body(NOW_US - 30 * MINUTE_US, t=20.0))
    assert stored(bench).temperature_degC.tolist() == [20.0, 28.0]
    assert bench.queries.latest()["s0"].temperature_degC == 28.0
    flags = [row[0] for row in bench.worker.store.connection.execute("SELECT flags FROM reading ORDER BY measured_at")]
    assert flags[0] & Flag.LATE
    assert not flags[1] & Flag.LATE


def test_a_backlog_in_order_is_not_late(bench):
    bench.send("quay/s0", *(body(START_US + minute * MINUTE_US) for minute in range(60)))
    flags = [row[0] for row in bench.worker.store.connection.execute("SELECT flags FROM reading")]
    assert len(flags) == 60
    assert not any(flag & Flag.LATE for flag in flags)


def test_an_empty_block_is_no_trouble(bench):
    assert bench.process([])
    assert bench.queries.reading_count() == 0


def timeless(text: str) -> str:
    return text.replace(", time: at", "")


def test_without_a_time_of_its_own_it_is_measured_when_it_is_received(tmp_path):
    with Bench(tmp_path, timeless(site_text(port=1)), now_us=NOW_US) as bench:
        bench.send("quay/s0", b'{"c": 50, "t": 28}')
        latest = bench.queries.latest()["s0"]
        assert latest.measured_at == NOW_US
        assert latest.flags & Flag.TIME_RECEIVED


def test_a_retained_message_without_a_time_is_never_a_reading(tmp_path):
    with Bench(tmp_path, timeless(site_text(port=1)), now_us=NOW_US) as bench:
        bench.send("quay/s0", b'{"c": 50, "t": 28}', is_retained=True)
        assert bench.queries.reading_count() == 0
        assert [item.code for item in bench.queries.refused()] == ["retained_without_time"]


def test_a_retained_message_that_says_its_time_is_a_reading(bench):
    bench.send("quay/s0", body(), is_retained=True)
    assert bench.queries.reading_count() == 1
