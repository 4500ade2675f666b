"""How near the worker comes to a client that only acknowledges: a ratio within one run, with 1.5 times slack for a shared machine."""

from __future__ import annotations

from pathlib import Path

import pytest

from tests.bench.road import road

ASKED = 0.5
SLACK = 1.5


@pytest.mark.slow
@pytest.mark.mosquitto
def test_the_whole_worker_reaches_half_of_a_bare_loop(mosquitto: object, tmp_path: Path) -> None:
    found = road(tmp_path, readings=20_000, sensors=100)
    assert found.ratio >= ASKED / SLACK, found
