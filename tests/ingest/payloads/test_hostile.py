"""Whatever comes over the wire, decoding gives readings or its own error, and nothing else."""

from __future__ import annotations

import json
from typing import Any

import cbor2
from hypothesis import given, settings
from hypothesis import strategies as st

from ingest.payloads import Decoded, Decoder, PayloadError
from ingest.site import load_text
from tests.ingest.site.examples import FULL

NOW_US = 1_767_268_800_000_000
DECODERS = (
    Decoder(load_text(FULL)),
    Decoder(load_text(FULL.replace("senml-cbor", "senml-json").replace("time_format: iso", "time_format: unix_ms"))),
)
TOPICS = DECODERS[0].topics

scalars = (
    st.none()
    | st.booleans()
    | st.integers(-(10**20), 10**20)
    | st.floats()
    | st.text(max_size=6)
    | st.sampled_from([-99, "NaN", 1e308, NOW_US / 1e6, NOW_US // 1000, "2026-01-01T12:00:00Z", "p1-ec", "S/m"])
)
names = st.sampled_from(
    [
        "ec",
        "value",
        "temp",
        "t",
        "do",
        "mg",
        "n",
        "bn",
        "bt",
        "bv",
        "bs",
        "v",
        "vs",
        "vb",
        "vd",
        "s",
        "u",
        "bu",
        "ut",
        "bver",
    ]
)
contents = st.recursive(
    scalars,
    lambda inner: st.lists(inner, max_size=4) | st.dictionaries(names | st.text(max_size=3), inner, max_size=6),
    max_leaves=15,
)
packs = st.lists(st.dictionaries(names, scalars, max_size=6), max_size=4)


def is_answered(payload: bytes) -> bool:
    """Send *payload* everywhere; any exception but the declared one fails the test."""
    for decoder in DECODERS:
        for topic in TOPICS:
            try:
                decoded = decoder.decode(topic, payload, received_at_us=NOW_US)
            except PayloadError as error:
                if not (error.code and error.where and error.found and error.allowed):
                    return False
            else:
                if not isinstance(decoded, Decoded):
                    return False
    return True


@settings(max_examples=150, deadline=None, derandomize=True)
@given(payload=st.binary(max_size=120))
def test_any_bytes(payload: bytes) -> None:
    assert is_answered(payload)


@settings(max_examples=200, deadline=None, derandomize=True)
@given(content=contents | packs)
def test_any_json(content: Any) -> None:
    assert is_answered(json.dumps(content).encode("utf-8", "surrogatepass"))


@settings(max_examples=200, deadline=None, derandomize=True)
@given(
    content=contents
    | packs
    | st.lists(st.dictionaries(st.integers(-6, 9), scalars | st.binary(max_size=4)), max_size=4)
)
def test_any_cbor(content: Any) -> None:
    assert is_answered(cbor2.dumps(content))


@settings(max_examples=150, deadline=None, derandomize=True)
@given(place=st.integers(0, 200), new=st.integers(0, 255), cut=st.integers(0, 200))
def test_a_good_pack_with_one_byte_changed_or_cut(place: int, new: int, cut: int) -> None:
    good = bytearray(cbor2.dumps([{-2: "p1-", -3: NOW_US / 1e6, 0: "ec", 1: "S/m", 2: 4.8}, {0: "t", 1: "Cel", 2: 25}]))
    good[place % len(good)] = new
    assert is_answered(bytes(good))
    assert is_answered(bytes(good[: cut % len(good)]))
