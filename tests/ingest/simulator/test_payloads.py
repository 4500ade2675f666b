from __future__ import annotations

import json

import cbor2
import numpy as np
import pytest

from analysis.errors import InvalidInputError
from ingest.simulator.payloads import Readings, encoder_for
from tests.ingest.simulator.examples import one_tank

ROW = Readings(np.array([1_796_000_000_123_456]), np.array([48.12345]), np.array([25.678]), np.array([1.98765]))


def encoded(lines: str, row: Readings = ROW):
    (messages,) = encoder_for(one_tank(lines).sensors[0])(row)
    return messages


def test_flat_json():
    ((topic, payload),) = encoded("fields: {conductivity: cond, temperature: temp, time: t}")
    assert topic == "sandbank/t1"
    assert payload == b'{"cond":48.123,"temp":25.68,"t":"2026-11-30T00:53:20.123Z"}'


def test_nested_json_in_other_units_and_with_strange_names():
    lines = """fields: {conductivity: "ec%.value", temperature: "ec%.{t}", pressure: 'p"q', time: z}
    time_format: unix_us
    conductivity_unit: uS/cm"""
    ((_, payload),) = encoded(lines)
    assert json.loads(payload) == {
        "ec%": {"value": 48, "{t}": 25.68},
        'p"q': 1.988,
        "z": 1_796_000_000_123_456,
    }


@pytest.mark.parametrize(
    ("time_format", "text"),
    [("unix_s", b"1796000000.123"), ("unix_ms", b"1796000000123"), ("unix_us", b"1796000000123456")],
)
def test_times_in_numbers(time_format, text):
    ((_, payload),) = encoded(f"fields: {{conductivity: c, time: t}}\n    time_format: {time_format}")
    assert payload == b'{"c":48.123,"t":' + text + b"}"


def test_without_a_time_of_its_own():
    assert encoded("fields: {conductivity: c}") == [("sandbank/t1", b'{"c":48.123}')]


def test_a_missing_value_is_null_in_json():
    row = Readings(ROW.time_us, np.array([np.nan]), ROW.temperature, ROW.pressure)
    ((_, payload),) = encoded("fields: {conductivity: c, temperature: t}", row)
    assert payload == b'{"c":null,"t":25.68}'


def test_senml_json_after_rfc_8428():
    lines = "payload: senml-json\n    fields: {conductivity: cond, temperature: temp}\n    conductivity_unit: S/m"
    ((_, payload),) = encoded(lines)
    assert json.loads(payload) == [
        {"bt": 1_796_000_000.123, "n": "cond", "u": "S/m", "v": 48.1234},
        {"n": "temp", "u": "Cel", "v": 25.68},
    ]


def test_senml_cbor_after_rfc_8428():
    lines = "payload: senml-cbor\n    fields: {conductivity: cond, temperature: temp}"
    ((_, payload),) = encoded(lines)
    assert cbor2.loads(payload) == [{-3: 1_796_000_000.123, 0: "cond", 2: 48.123}, {0: "temp", 1: "Cel", 2: 25.68}]


def test_plain_numbers_have_topics_of_their_own_and_no_message_where_there_is_no_value():
    lines = "payload: number\n    fields: {conductivity: cond, temperature: temp}"
    assert encoded(lines) == [("sandbank/t1/cond", b"48.123"), ("sandbank/t1/temp", b"25.68")]
    row = Readings(ROW.time_us, np.array([np.nan]), ROW.temperature, ROW.pressure)
    assert encoded(lines, row) == [("sandbank/t1/temp", b"25.68")]


CHANNELS = "\n    channels: {oxygen: {field: water.do, unit: mg/L}}"


@pytest.mark.parametrize(
    ("lines", "messages"),
    [
        (
            "fields: {conductivity: water.c}",
            [("sandbank/t1", b'{"water":{"c":48.123,"do":7.12}}')],
        ),
        (
            "payload: number\n    fields: {conductivity: c}",
            [("sandbank/t1/c", b"48.123"), ("sandbank/t1/water.do", b"7.12")],
        ),
        (
            "payload: senml-json\n    fields: {conductivity: c}",
            [("sandbank/t1", b'[{"bt":1796000000.123,"n":"c","v":48.123},{"n":"water.do","v":7.12}]')],
        ),
    ],
)
def test_further_channels_are_written_where_the_readings_hold_them(lines, messages):
    sensor = one_tank(lines + CHANNELS).sensors[0]
    row = Readings(ROW.time_us, ROW.conductivity, ROW.temperature, ROW.pressure, {"channel/oxygen": np.array([7.1234])})
    assert encoder_for(sensor, has_channels=True)(row) == [messages]
    assert b"do" not in encoder_for(sensor)(ROW)[0][0][1]


def test_a_sensor_of_nothing_is_refused():
    site = one_tank("fields: {conductivity: c}")
    channel_only = site.sensors[0].model_copy(
        update={"fields": site.sensors[0].fields.model_copy(update={"conductivity": None})}
    )
    with pytest.raises(InvalidInputError, match="t1-ct"):
        encoder_for(channel_only)
