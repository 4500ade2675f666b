"""SenML packs: records to readings, in the declared units."""

from __future__ import annotations

import json
import math
from typing import Any

import cbor2
import pytest

from analysis.flags import Flag
from ingest.payloads import Decoded, Decoder, PayloadError, Promise, Reason
from ingest.payloads.senml import CBOR_LABELS, records_from_json, resolved
from ingest.payloads.senml_units import PRIMARY_UNITS, SECONDARY_UNITS, scale_to_declared
from ingest.site import load_text

NOW_US = 1_767_268_800_000_000
NOW_S = NOW_US / 1e6
SITE = """\
site: {id: larkfen, name: Larkfen, time_zone: Europe/Lisbon}
tanks:
  - {id: t1, name: Tank 1, volume_L: 800}
sensors:
  - id: a
    tank: t1
    topic: gw
    payload: senml-json
    fields: {conductivity: a-ec, temperature: a-t}
    channels: {oxygen: {field: a-do, unit: mg/L}}
  - {id: b, tank: t1, topic: gw, payload: senml-json, temperature_unit: degF, conductivity_unit: uS/cm,
     fields: {conductivity: b-ec, temperature: b-t, pressure: b-p}}
"""


def decoded(pack: list[dict[str, Any]], site: str = SITE, *, is_retained: bool = False) -> Decoded:
    payload = json.dumps(pack).encode()
    return Decoder(load_text(site)).decode("gw", payload, received_at_us=NOW_US, is_retained=is_retained)


def refusal(pack: object, site: str = SITE, *, is_retained: bool = False) -> PayloadError:
    payload = pack if isinstance(pack, bytes) else json.dumps(pack).encode()
    with pytest.raises(PayloadError) as caught:
        Decoder(load_text(site)).decode("gw", payload, received_at_us=NOW_US, is_retained=is_retained)
    return caught.value


def test_records_of_one_moment_are_one_reading_in_the_declared_units() -> None:
    found = decoded(
        [
            {"bt": NOW_S - 60, "n": "a-ec", "u": "S/m", "v": 4.82},
            {"n": "a-t", "u": "Cel", "v": 25.1},
            {"n": "b-ec", "u": "S/m", "v": 0.5},
            {"n": "b-t", "u": "K", "v": 298.15},
            {"n": "b-p", "u": "hPa", "v": 1013.25},
            {"n": "a-do", "u": "kg/m3", "v": 0.0071},
            {"n": "battery", "u": "V", "v": 3.7},
        ]
    )
    first, second = found.readings
    at_us = NOW_US - 60_000_000
    assert first[:3] == (0, at_us, NOW_US)
    assert first[3:5] == pytest.approx((48.2, 25.1))
    assert math.isnan(first.pressure)
    assert first.flags == 0
    assert second[3:6] == pytest.approx((5000, 77, 10.1325))
    assert found.channels[0][:3] == (0, "oxygen", at_us)
    assert found.channels[0].value == pytest.approx(7.1)


def test_cbor_gives_what_json_gives() -> None:
    pack: list[dict[str, Any]] = [
        {"bn": "a-", "bt": NOW_S, "n": "ec", "u": "S/m", "v": 4.82},
        {"n": "t", "u": "Cel", "v": 25},
        {"n": "t", "t": 1, "u": "Cel", "v": 25.5, "ut": 30},
    ]
    labels = {name: label for label, name in CBOR_LABELS.items()}
    payload = cbor2.dumps([{labels[name]: value for name, value in record.items()} for record in pack])
    by_cbor = Decoder(load_text(SITE.replace("senml-json", "senml-cbor"))).decode("gw", payload, received_at_us=NOW_US)
    assert repr(by_cbor) == repr(decoded(pack))
    assert [reading.flags for reading in by_cbor.readings] == [0, Flag.MISSING]


def test_a_backlog_in_one_pack_comes_in_the_order_of_time() -> None:
    pack = [
        {"bt": NOW_S, "bn": "a-", "n": "ec", "v": 3.0},
        {"n": "ec", "t": -20, "v": 1.0},
        {"n": "ec", "t": -10, "v": 2},
    ]
    readings = decoded(pack).readings
    assert [reading.conductivity for reading in readings] == [1, 2, 3]
    assert [reading.measured_at_us - NOW_US for reading in readings] == [-20_000_000, -10_000_000, 0]
    assert {reading.flags for reading in readings} == {int(Flag.MISSING)}


def test_records_join_within_the_declared_window_only() -> None:
    pack = [{"bt": NOW_S, "n": "a-t", "t": -0.4, "v": 25.0}, {"n": "a-ec", "v": 48.2}]
    assert len(decoded(pack).readings) == 2
    joined = decoded(pack, SITE.replace("topic: gw\n", "topic: gw\n    pair_within_s: 1\n")).readings
    assert [(reading.measured_at_us - NOW_US, reading.flags) for reading in joined] == [(-400_000, 0)]


def test_a_relative_time_hangs_on_the_time_received_and_is_marked() -> None:
    reading = decoded([{"n": "a-ec", "v": 48.2, "t": -5}, {"n": "a-t", "v": 25.0, "t": -5}]).readings[0]
    assert (reading.measured_at_us, reading.flags) == (NOW_US - 5_000_000, Flag.TIME_RECEIVED)
    assert refusal([{"n": "a-ec", "v": 1, "t": -5}], is_retained=True).code is Reason.RETAINED_WITHOUT_TIME
    assert decoded([{"n": "a-ec", "v": 1, "t": NOW_S}], is_retained=True).readings


def test_the_update_time_is_passed_on() -> None:
    found = decoded([{"n": "a-ec", "v": 48.2, "ut": 30}])
    assert found.promises == [Promise(0, 30)]


@pytest.mark.parametrize("unit", ["uS/cm", "mS/cm", "Cel", "degC", "", "PSU"])
def test_a_unit_that_is_not_registered_or_of_another_quantity_gives_no_value(unit: str) -> None:
    found = decoded([{"n": "a-ec", "u": unit, "v": 48.2}, {"n": "a-t", "u": "Cel", "v": 25}])
    if not unit:
        assert found.readings[0].conductivity == 48.2, "no unit: the declared one, by agreement"
        return
    assert math.isnan(found.readings[0].conductivity)
    assert found.remarks[0].code is Reason.WRONG_UNIT
    assert found.remarks[0].allowed.startswith("S/m, or no unit")


@pytest.mark.parametrize(
    ("record", "code", "flag"),
    [
        ({"v": -99}, Reason.FILLER, Flag.FILLER),
        ({"vs": "48.2"}, Reason.WRONG_TYPE, Flag.MISSING),
        ({"vb": True}, Reason.WRONG_TYPE, Flag.MISSING),
        ({"vd": "aGkgCg"}, Reason.WRONG_TYPE, Flag.MISSING),
        ({"v": 1e308, "u": "S/m"}, Reason.NOT_FINITE, Flag.NOT_FINITE),
    ],
)
def test_one_unusable_record_leaves_the_others(record: dict[str, Any], code: Reason, flag: Flag) -> None:
    found = decoded([{"n": "a-ec", **record}, {"n": "a-t", "u": "Cel", "v": 25}])
    if code is Reason.NOT_FINITE:
        found = decoded([{"n": "b-ec", **record}, {"n": "b-t", "u": "Cel", "v": 25}, {"n": "b-p", "v": 1}])
    assert [remark.code for remark in found.remarks] == [code]
    assert found.readings[0].flags & ~Flag.TIME_RECEIVED == flag


def test_a_record_beyond_the_horizon_is_remarked_and_the_others_stay() -> None:
    found = decoded([{"n": "a-ec", "v": 48.2, "t": NOW_S}, {"n": "a-t", "v": 25, "t": 2**28}])
    assert [remark.code for remark in found.remarks] == [Reason.TIME_BEYOND_HORIZON]
    assert found.readings[0].conductivity == 48.2
    assert refusal([{"n": "a-t", "v": 25, "t": 2**28}]).code is Reason.TIME_BEYOND_HORIZON
    for far_s in (1e300, 1.7e308, -1e300, -1.7e308):
        assert refusal([{"n": "a-t", "v": 25, "t": far_s}]).code is Reason.TIME_BEYOND_HORIZON


@pytest.mark.parametrize(
    ("pack", "code"),
    [
        (b"", Reason.UNREADABLE),
        (b"[" * 60_000, Reason.UNREADABLE),
        ({"n": "a-ec", "v": 1}, Reason.WRONG_SHAPE),
        ([1], Reason.WRONG_SHAPE),
        ([{"n": "a-ec", "v": "1"}], Reason.WRONG_TYPE),
        ([{"n": 5, "v": 1}], Reason.WRONG_TYPE),
        ([{"n": "a-ec", "v": True}], Reason.WRONG_TYPE),
        ([{"n": "a-ec", "v": 1, "vs": "x"}], Reason.WRONG_SHAPE),
        ([{"n": "a-ec"}], Reason.WRONG_SHAPE),
        ([{"v": 1}], Reason.WRONG_SHAPE),
        ([{"n": "a ec", "v": 1}], Reason.WRONG_SHAPE),
        ([{"n": "a-ec", "vd": "a b"}], Reason.WRONG_TYPE),
        ([{"n": "a-ec", "v": 1, "must_": 0}], Reason.MUST_UNDERSTAND),
        (b'[{"n": "a-ec", "v": 1, "must\\u005f": 0}]', Reason.MUST_UNDERSTAND),
        ([{"bver": 10, "n": "a-ec", "v": 1}, {"bver": 26, "n": "a-t", "v": 1}], Reason.VERSION_UNKNOWN),
        ([{"bver": 11, "n": "a-ec", "v": 1}], Reason.VERSION_UNKNOWN),
        ([{"n": "other", "v": 1}], Reason.NO_KNOWN_NAME),
        ([], Reason.NO_KNOWN_NAME),
        ([{"n": "a-ec", "v": -99}], Reason.FILLER),
    ],
)
def test_packs_that_break_the_rules_are_refused(pack: object, code: Reason) -> None:
    assert refusal(pack).code is code


@pytest.mark.parametrize(
    "payload",
    [
        b"",
        b"\x9b\x7f\xff\xff\xff\xff\xff\xff\xff",
        b"\x81" * 60_000,
        b"\x81\xa2\x00\x64a-ec\x02\xfb\x7f\xf8\x00\x00\x00\x00\x00\x00",  # NaN
        b"\x81\xa2\x00\x64a-ec\x02\xc4\x82\x1a\x3b\x9a\xca\x00\x01",  # 10**1000000000
        b"\x81\xa3\x00\x64a-ec\x02\x01\x06\xf9\x7e\x00",  # time NaN
        b"\xd8\x1c\x81\xd8\x1d\x00",  # a list that holds itself
        b"\x81\xa2\x00\x64a-ec\x02\xd8\x1c\x81\xd8\x1d\x00",
        b"\xc2\x5a\x00\x00\x10\x00",
        b"\x81\xa1\xf5\x01",
    ],
)
def test_hostile_cbor_is_refused_with_a_reason(payload: bytes) -> None:
    decoder = Decoder(load_text(SITE.replace("senml-json", "senml-cbor")))
    with pytest.raises(PayloadError):
        decoder.decode("gw", payload, received_at_us=NOW_US)


def test_base_fields_hold_until_they_are_replaced() -> None:
    pack = b"""[{"bn": "x", "bt": 300000000, "bu": "Cel", "bv": 20}, {"n": "1", "v": 1}, {"n": "2"},
        {"bn": "y", "bv": 0, "n": "3", "u": "V", "v": 2}, {"n": "4", "vs": "on"}, {"n": "5", "s": 7}]"""
    found = [(r.name, r.unit, r.value, r.sum) for r in resolved(records_from_json(pack), now_s=NOW_S)]
    assert found == [
        ("x", "Cel", 20, None),
        ("x1", "Cel", 21, None),
        ("x2", "Cel", 20, None),
        ("y3", "V", 2, None),
        ("y4", "Cel", "on", None),
        ("y5", "Cel", None, 7),
    ]


def test_a_record_that_only_sets_base_fields_gives_nothing() -> None:
    pack = b'[{"bver": 10, "bv": 20}, {"bn": "x"}, {"bv": 0}, {"n": "1", "v": 1}]'
    found = [(record.name, record.value) for record in resolved(records_from_json(pack), now_s=NOW_S)]
    assert found == [("x", 20), ("x", 0), ("x1", 1)]


@pytest.mark.parametrize("unit", sorted(PRIMARY_UNITS | set(SECONDARY_UNITS)))
def test_a_unit_leads_to_itself_or_to_nothing_wrong(unit: str) -> None:
    # "%" is the ratio 0 to 1 in SenML and percent in a site file.
    assert scale_to_declared(unit, unit) == ((100, 0) if unit == "%" else (1, 0))
