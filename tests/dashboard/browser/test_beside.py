"""What stands beside the stress: oxygen against saturation, un-ionised ammonia, nitrite, missing ions, and the osmotic part only."""

from __future__ import annotations

import math

import gsw
import pytest

from analysis.water.oxygen import oxygen_solubility_mg_L
from dashboard.browser.beside import beside
from dashboard.browser.sights import SensorSight, ShortOf
from ingest.store.queries import LatestChannel


def sensor(salinity: float = 31.0, temperature_degC: float = 28.0) -> SensorSight:
    return SensorSight(
        id="s", name="s", tank="t", source_water=None, interval_s=10, stale_after_s=60,
        salinity=salinity, temperature_degC=temperature_degC, quality=1,
    )  # fmt: skip


def test_oxygen_is_held_against_what_this_water_can_hold() -> None:
    found = beside(sensor(), water="seawater", units={"oxygen": "mg/L"}, channels={"oxygen": LatestChannel(1, 5.0)})
    # Garcia and Gordon 1992 by the reference library: umol/kg, moist air; 31.998 g/mol (IUPAC).
    solubility = (
        gsw.O2sol_SP_pt(31.0, 28.0)
        * 31.998e-6
        * gsw.rho(gsw.SR_from_SP(31.0), gsw.CT_from_t(gsw.SR_from_SP(31.0), 28.0, 0), 0)
    )
    assert found.oxygen_saturation_percent == pytest.approx(100 * 5.0 / solubility, rel=2e-3)
    assert float(oxygen_solubility_mg_L(31.0, temperature_degC=28.0)) == pytest.approx(solubility, rel=2e-3)


def test_a_channel_in_another_unit_or_without_a_value_says_nothing() -> None:
    channels = {"oxygen": LatestChannel(1, 95.0), "ph": LatestChannel(1, None), "ammonia": LatestChannel(1, 1.0)}
    found = beside(sensor(), water="seawater", units={"oxygen": "%", "ph": "", "ammonia": "mg/L"}, channels=channels)
    assert math.isnan(found.oxygen_saturation_percent)
    assert math.isnan(found.unionised_ammonia_mg_L)


def test_ammonia_rises_with_ph() -> None:
    units = {"ph": "", "ammonia": "mg/L"}
    low, high = (
        beside(
            sensor(),
            water="seawater",
            units=units,
            channels={"ph": LatestChannel(1, ph), "ammonia": LatestChannel(1, 1.0)},
        )
        for ph in (6.8, 8.1)
    )
    # Raising pH from 6.8 to 8.1 at 28 degC multiplies the un-ionised part about eighteen-fold (Bell and others 2008).
    assert high.unionised_ammonia_mg_L / low.unionised_ammonia_mg_L == pytest.approx(18, rel=0.08)


def test_in_other_waters_the_stress_is_said_to_be_the_osmotic_part_only() -> None:
    short = (ShortOf("K", 8.0, 40.0, is_upper=False, source="a source"),)
    assert not beside(sensor(), water="seawater", units={}, channels={}).is_osmotic_part_only
    found = beside(None, water="bore", units={}, channels={}, short_of=short)
    assert found.is_osmotic_part_only
    assert found.short_of == short
