"""Conversion, uncertainty and all quality tests cost less than eight times the bare library calls."""

from __future__ import annotations

import numpy as np
import pytest

from analysis.water.properties import Seawater
from tests.analysis.sensor.quality.speed import PARTS, bare_calls, measure, timed_parts

ALLOWED = 8.0
SLACK = 1.5


def test_the_bare_calls_are_an_honest_measure():
    """They give what the project gives: density and osmolality at the water's own temperature."""
    conductivity, temperature = np.array([3.0, 30.0, 55.0]), np.array([5.0, 18.0, 27.0])
    density, osmolality = bare_calls(conductivity, temperature)
    found = Seawater().properties(conductivity, temperature_degC=temperature)
    np.testing.assert_allclose(density, found.density_kg_m3, rtol=1e-12)
    np.testing.assert_allclose(osmolality, found.osmolality_in_situ_mOsm_kg, rtol=1e-6)


def test_every_part_is_timed_and_put_back():
    before = [getattr(module, name) for functions in PARTS.values() for module, name in functions]
    with timed_parts():
        pass
    assert [getattr(module, name) for functions in PARTS.values() for module, name in functions] == before


@pytest.mark.slow
def test_a_million_readings():
    speed = measure()
    for line in speed.lines():
        print(line)  # noqa: T201
    assert all(seconds > 0 for seconds in speed.parts.values())
    assert speed.ratio < ALLOWED * SLACK
