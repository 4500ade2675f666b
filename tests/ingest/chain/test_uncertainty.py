from __future__ import annotations

import math

import gsw
import pytest

from analysis.water.properties import Seawater
from ingest.chain.uncertainty import accuracy_of, latest_uncertainties
from ingest.site.loading import load_text
from ingest.store.queries import Latest
from tests.harness.hatchery import START_US, conductivity, site_text


def site(accuracy: str):
    text = site_text(port=1).replace("    interval_s: 60.0\n", f"    interval_s: 60.0\n{accuracy}")
    return load_text(text, "site.yaml")


def latest(salinity: float | None, temperature: float = 28.0) -> dict[str, Latest]:
    return {
        "s0": Latest(
            sensor="s0",
            measured_at=START_US,
            received_at=START_US,
            conductivity_mS_cm=None if salinity is None else conductivity(salinity, temperature),
            temperature_degC=temperature,
            practical_salinity=salinity,
            absolute_salinity_g_kg=None,
            density_kg_m3=None,
            osmolality_mOsm_kg=None,
            flags=0,
            quality=1,
        )
    }


def test_the_stated_accuracy_reaches_the_screen():
    own = site("    accuracy: {conductivity_percent: 1.0, temperature_K: 0.2}\n")
    found = latest_uncertainties(own, {"seawater": Seawater()}, latest(31.0))["s0"]
    # Straight from the reference library: what 1 % more and 0.2 K more make of salinity, added as independent.
    c = conductivity(31.0)
    by_conductivity = float(gsw.SP_from_C(1.01 * c, 28.0, 0.0)) - 31.0
    by_temperature = 31.0 - float(gsw.SP_from_C(c, 28.2, 0.0))
    assert found.salinity == pytest.approx(math.hypot(by_conductivity, by_temperature), rel=0.01)
    assert found.salinity_from_conductivity == pytest.approx(by_conductivity, rel=0.01)
    assert found.salinity_from_temperature == pytest.approx(by_temperature, rel=0.01)
    assert found.osmolality_mOsm_kg > 29.0 * found.salinity
    assert not found.is_assumed


@pytest.mark.parametrize(
    "stated", ["", "    accuracy: {conductivity_percent: 1.0}\n", "    accuracy: {temperature_K: 0.2}\n"]
)
def test_what_the_data_sheet_leaves_open_is_assumed_and_said_so(stated):
    accuracy, is_assumed = accuracy_of(site(stated).sensors[0])
    assert is_assumed
    assert accuracy.conductivity_percent > 0.0
    assert accuracy.temperature_K > 0.0


def test_no_value_has_no_uncertainty():
    found = latest_uncertainties(site(""), {"seawater": Seawater()}, latest(None))["s0"]
    assert found.salinity is None
    assert found.osmolality_mOsm_kg is None


def test_a_sensor_that_never_spoke_is_left_out():
    assert latest_uncertainties(site(""), {"seawater": Seawater()}, {}) == {}
