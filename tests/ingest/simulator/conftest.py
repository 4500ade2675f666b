from __future__ import annotations

from pathlib import Path

import pytest

from ingest.simulator import scenario
from ingest.simulator.scenario import Scenario
from ingest.site.loading import load
from ingest.site.models import Site

DEMO = Path(__file__).parents[3] / "demo_data"
HOUR_US = 3_600_000_000
ANCHOR_US = 1_796_000_000_000_000


@pytest.fixture(scope="session")
def demo_site() -> Site:
    return load(DEMO / "site.yaml")


@pytest.fixture(scope="session")
def demo_scenario() -> Scenario:
    return scenario.load(DEMO / "scenario.yaml")
