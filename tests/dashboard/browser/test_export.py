"""The readings behind a chart, as a table."""

from __future__ import annotations

import csv
import io

import pytest

from dashboard.browser.access import Access
from dashboard.browser.routes.export import HEAD, tank_table
from tests.dashboard.browser.conftest import NOW_US


def table(access: Access, **query: str) -> list[dict[str, str]]:
    tank = access.snapshot().tank("l4")
    return list(csv.DictReader(io.StringIO(tank_table(access, tank, query))))


def test_the_table_holds_the_readings_of_the_stretch(access: Access):
    end = NOW_US // 10**6
    rows = table(access, **{"from": str(end - 3600), "to": str(end)})
    assert 58 <= len(rows) <= 60
    assert tuple(rows[0]) == HEAD
    assert all(row["time_utc"].endswith("Z") and row["sensor"] == "l4-ct" for row in rows)
    assert float(rows[-1]["salinity"]) == pytest.approx(31.0, abs=0.3)
    assert [row["time_utc"] for row in rows] == sorted(row["time_utc"] for row in rows)


def test_a_long_stretch_comes_with_its_extremes(access: Access):
    rows = table(access, span="week")
    assert any(row["salinity_min"] != row["salinity_max"] for row in rows)
