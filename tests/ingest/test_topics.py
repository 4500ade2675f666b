"""What may be a sensor's topic."""

from __future__ import annotations

from pathlib import Path
from typing import get_args

import pytest

import ingest
from ingest.payloads import Reason
from ingest.site.sensors import Payload, TimeFormat
from ingest.topics import fault_of_topic, own_topic, worker_status_topic


@pytest.mark.parametrize("topic", ["a", "larkfen/larval/l3/ct", "Larkfen 2/höhe", "a/$b"])
def test_good_topics(topic: str) -> None:
    assert fault_of_topic(topic) is None


@pytest.mark.parametrize(
    ("topic", "word"),
    [
        ("a/+/b", "wildcard"),
        ("a/#", "wildcard"),
        ("$share/g/a", "broker"),
        (worker_status_topic("larkfen"), "the tool itself"),
        ("/a", "slashes"),
        ("a//b", "slashes"),
        ("a/", "slashes"),
        ("a\0b", "65535 bytes"),
        (" a", "no blank"),
        ("ä" * 32_768, "65535 bytes"),
    ],
)
def test_a_fault_says_what_would_be_right(topic: str, word: str) -> None:
    assert word in (fault_of_topic(topic) or "")


def test_the_tools_own_topics_lie_below_the_site() -> None:
    assert own_topic("larkfen", "a", "b") == "euryhale/larkfen/a/b"
    assert worker_status_topic("larkfen") == "euryhale/larkfen/worker/status"


def test_the_document_names_every_reason_and_every_kind_of_payload() -> None:
    text = (Path(ingest.__file__).parent / "TOPICS.md").read_text(encoding="utf-8")
    words = [*Reason, *get_args(Payload), *get_args(TimeFormat)]
    assert [word for word in words if f"`{word}`" not in text and f"**{word}**" not in text] == []
    assert worker_status_topic("SITE") in text
