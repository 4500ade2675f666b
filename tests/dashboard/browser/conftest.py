"""A filled store, an empty one, and a look at them."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest

from dashboard.browser.access import Access
from ingest.clock import FakeClock
from tests.dashboard.browser.scene import Scene, make_scene, site_text

NOW_US = 1_796_115_600_000_000 + 12_345_678
"""1 December 2026, about nine in the morning."""


@pytest.fixture(scope="module")
def scene(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Scene]:
    scene = make_scene(tmp_path_factory.mktemp("scene"), now_us=NOW_US)
    yield scene
    scene.stop_worker()


@pytest.fixture
def clock() -> FakeClock:
    return FakeClock(NOW_US)


@pytest.fixture
def access(scene: Scene, clock: FakeClock) -> Access:
    return Access(scene.site_file, clock=clock)


@pytest.fixture
def bare_access(tmp_path: Path, clock: FakeClock) -> Access:
    """A site whose worker has never run."""
    site_file = tmp_path / "site.yaml"
    site_file.write_text(site_text(), encoding="utf-8")
    return Access(site_file, clock=clock)
