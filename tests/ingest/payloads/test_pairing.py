"""Plain numbers on topics of their own, joined by time."""

from __future__ import annotations

import json
import math

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from analysis.flags import Flag
from ingest.payloads import Decoder, Pairing, PayloadError, Reason
from ingest.reading import RawReading
from ingest.site import load_text

START_US = 1_767_268_800_000_000
SITE = """\
site: {id: larkfen, name: Larkfen, time_zone: Europe/Lisbon}
tanks:
  - {id: t1, name: Tank 1, volume_L: 800}
sensors:
  - id: a
    tank: t1
    topic: larkfen/t1
    payload: number
    fields: {conductivity: ec, temperature: temp}
    channels: {level: {field: level, unit: cm}}
    interval_s: 30
    pair_within_s: 5
"""
SITE_OBJECT = load_text(SITE)
RECEIVED = int(Flag.TIME_RECEIVED)


class Wire:
    """A decoder and a clock in seconds."""

    def __init__(self) -> None:
        self.decoder = Decoder(SITE_OBJECT)

    def send(self, topic: str, payload: str, at_s: float) -> list[RawReading]:
        at_us = START_US + round(at_s * 1e6)
        return list(self.decoder.decode(f"larkfen/t1/{topic}", payload.encode(), received_at_us=at_us).readings)

    def restart(self) -> None:
        state = json.loads(json.dumps(self.decoder.pairing.to_dict(), allow_nan=False))
        self.decoder = Decoder(SITE_OBJECT, pairing=Pairing.restored(SITE_OBJECT, state))


def rows(readings: list[RawReading]) -> list[tuple[float, float | None, float | None, int]]:
    """Return seconds, conductivity, temperature (None where absent) and flags beside "time received"."""
    return [
        (
            (reading.measured_at_us - START_US) / 1e6,
            None if math.isnan(reading.conductivity) else reading.conductivity,
            None if math.isnan(reading.temperature) else reading.temperature,
            reading.flags & ~RECEIVED,
        )
        for reading in readings
    ]


def test_two_halves_are_one_reading_at_the_time_of_the_second() -> None:
    wire = Wire()
    assert wire.send("ec", "48.2", 0) == []
    readings = wire.send("temp", " 25.1\n", 1)
    assert rows(readings) == [(1, 48.2, 25.1, 0)]
    assert readings[0].flags == RECEIVED
    assert wire.decoder.pairing.to_dict() == {}


def test_an_old_half_is_never_used_again() -> None:
    wire = Wire()
    wire.send("ec", "48.2", 0)
    assert rows(wire.send("temp", "25.1", 5.1)) == [(0, 48.2, None, Flag.MISSING)]
    assert rows(wire.send("ec", "48.3", 6)) == [(6, 48.3, 25.1, 0)]


def test_a_second_value_of_one_quantity_cuts_the_first_off() -> None:
    wire = Wire()
    wire.send("ec", "48.2", 0)
    assert rows(wire.send("ec", "48.3", 1)) == [(0, 48.2, None, Flag.MISSING)]
    assert rows(wire.send("temp", "25.1", 2)) == [(2, 48.3, 25.1, 0)]


def test_a_half_delivered_twice_counts_once() -> None:
    wire = Wire()
    wire.send("ec", "48.2", 0)
    assert wire.send("ec", "48.2", 1) == []
    assert rows(wire.send("temp", "25.1", 2)) == [(2, 48.2, 25.1, 0)]


def test_a_half_without_partner_comes_out_when_its_time_is_over() -> None:
    wire = Wire()
    wire.send("temp", "25.1", 0)
    pairing = wire.decoder.pairing
    assert pairing.expired(START_US + 5_000_000) == []
    assert rows(pairing.expired(START_US + 5_000_001)) == [(0, None, 25.1, Flag.MISSING)]
    assert pairing.expired(START_US + 99_000_000) == []


def test_the_waiting_half_survives_a_restart() -> None:
    wire = Wire()
    wire.send("ec", "48.2", 0)
    wire.restart()
    assert rows(wire.send("temp", "25.1", 2)) == [(2, 48.2, 25.1, 0)]


def test_an_unusable_half_waits_as_such_through_a_restart() -> None:
    wire = Wire()
    decoded = wire.decoder.decode("larkfen/t1/ec", b"-99", received_at_us=START_US)
    assert [remark.code for remark in decoded.remarks] == [Reason.FILLER]
    wire.restart()
    assert rows(wire.send("temp", "25.1", 2)) == [(2, None, 25.1, Flag.FILLER)]


def test_state_of_sensors_that_are_gone_is_dropped() -> None:
    wire = Wire()
    wire.send("ec", "48.2", 0)
    other = load_text(SITE.replace("id: a", "id: b"))
    assert Pairing.restored(other, wire.decoder.pairing.to_dict()).to_dict() == {}
    alone = load_text(SITE.replace("conductivity: ec, ", ""))
    assert Pairing.restored(alone, wire.decoder.pairing.to_dict()).to_dict() == {}


@pytest.mark.parametrize(
    ("payload", "code"),
    [("48,2", Reason.WRONG_TYPE), ("", Reason.MISSING), ("nan", Reason.NOT_FINITE), ("1_0", Reason.WRONG_TYPE),
     ("0x1f", Reason.WRONG_TYPE), ("1e999", Reason.NOT_FINITE), ("9" * 101, Reason.WRONG_TYPE), ("-100", Reason.FILLER)],
)  # fmt: skip
def test_what_is_no_number_is_remarked(payload: str, code: Reason) -> None:
    decoded = Wire().decoder.decode("larkfen/t1/temp", payload.encode(), received_at_us=START_US)
    assert [remark.code for remark in decoded.remarks] == [code]


def test_a_channel_does_not_wait() -> None:
    decoder = Wire().decoder
    decoded = decoder.decode("larkfen/t1/level", b"-100", received_at_us=START_US)
    assert decoded.channels[0] == (0, "level", START_US, START_US, -100, RECEIVED)
    with pytest.raises(PayloadError) as caught:
        decoder.decode("larkfen/t1/level", b"full", received_at_us=START_US)
    assert caught.value.code is Reason.WRONG_TYPE


def test_a_retained_number_is_never_a_reading() -> None:
    with pytest.raises(PayloadError) as caught:
        Wire().decoder.decode("larkfen/t1/ec", b"48.2", received_at_us=START_US, is_retained=True)
    assert caught.value.code is Reason.RETAINED_WITHOUT_TIME


EVENTS = st.lists(st.tuples(st.sampled_from(["ec", "temp", "tick", "restart"]), st.floats(0, 12)), max_size=25)


@settings(max_examples=150, deadline=None, derandomize=True)
@given(events=EVENTS)
def test_no_value_is_lost_or_used_twice_and_partners_are_never_far_apart(events: list[tuple[str, float]]) -> None:
    wire, at_s, sent, found = Wire(), 0.0, {}, []
    for number, (kind, wait_s) in enumerate(events):
        at_s += wait_s
        if kind == "restart":
            wire.restart()
        elif kind == "tick":
            found += wire.decoder.pairing.expired(START_US + round(at_s * 1e6))
        else:
            sent[float(number)] = at_s
            found += wire.send(kind, str(number), at_s)
    found += wire.decoder.pairing.expired(START_US + round((at_s + 100) * 1e6))
    values = [value for reading in found for value in reading[3:5] if not math.isnan(value)]
    assert sorted(values) == sorted(sent)
    for reading in found:
        if not math.isnan(reading.conductivity) and not math.isnan(reading.temperature):
            assert abs(sent[reading.conductivity] - sent[reading.temperature]) <= 5 + 2e-6
