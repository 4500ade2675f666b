"""Brokers for tests: each on a free port of loopback, with a folder of its own, ended with the test."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest

from ingest.broker import Broker, has_embedded, has_mosquitto

NEEDS_MOSQUITTO = pytest.mark.skipif(
    not has_mosquitto(), reason="mosquitto is not on the path; get it with: apt-get install mosquitto"
)
NEEDS_EMBEDDED = pytest.mark.skipif(
    not has_embedded(),
    reason="the package iotcore is not installed; get it with: pip install 'euryhale[demo]'",
)


@pytest.fixture
def mosquitto(tmp_path: Path) -> Iterator[Broker]:
    """A mosquitto that may be killed and restarted; its queues are kept. Mark the test with `mosquitto`."""
    if not has_mosquitto():
        pytest.skip("mosquitto is not on the path; get it with: apt-get install mosquitto")
    with Broker("mosquitto", folder=tmp_path / "broker") as broker:
        yield broker


@pytest.fixture
def embedded_broker(tmp_path: Path) -> Iterator[Broker]:
    """The embedded broker, speaking MQTT 3.1.1."""
    if not has_embedded():
        pytest.skip("the package iotcore is not installed; get it with: pip install 'euryhale[demo]'")
    with Broker("embedded", folder=tmp_path / "broker") as broker:
        yield broker
