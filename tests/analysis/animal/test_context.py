"""What stands beside the stress figure."""

from __future__ import annotations

import math

import numpy as np
import pytest

from analysis.animal import context, postlarvae
from analysis.animal.explanation import one_sentence
from analysis.animal.foresight import DeathCount, foresight
from analysis.animal.stress import Band, Driver
from analysis.errors import InvalidInputError

HOUR_US = 3_600_000_000


def test_only_sea_water_needs_no_proof():
    assert not context.osmotic_part_only("seawater")
    assert context.osmotic_part_only("sodium-chloride")
    assert not context.osmotic_part_only("borehole", is_seawater_like=True)


def test_oxygen_as_share_of_saturation():
    # 8.11 mg/L fills fresh water at 25 degC only to 98 %: solubility 8.26 mg/L (Benson and Krause, from memory)
    assert float(
        context.oxygen_saturation_percent(8.26, practical_salinity=0.0, temperature_degC=25.0)
    ) == pytest.approx(100.0, abs=0.3)
    salty = context.oxygen_saturation_percent(6.0, practical_salinity=35.0, temperature_degC=25.0)
    assert salty > context.oxygen_saturation_percent(6.0, practical_salinity=0.0, temperature_degC=25.0)
    assert np.isnan(context.oxygen_saturation_percent(-1.0, practical_salinity=35.0, temperature_degC=25.0))


def test_unionised_ammonia_at_the_published_point():
    # Bower and Bidwell 1978, table for 32-40 ppt: 2.98 % at 20 degC and pH 8.0, 2.07 % at 15 degC; S 34 taken
    for temperature, percent in ((20.0, 2.98), (15.0, 2.07)):
        found = context.unionised_ammonia_mg_L(1.0, ph=8.0, practical_salinity=34.0, temperature_degC=temperature)
        assert float(found) == pytest.approx(percent / 100.0, rel=0.02)


def test_chloride_of_sea_water():
    # 19,000 mg/L in ordinary sea water of 34.56 g/L (BOYD_BALANCE)
    assert float(context.chloride_mg_L(34.3, temperature_degC=20.0)) == pytest.approx(19_400, rel=0.02)


def test_chloride_against_nitrite():
    safe = context.nitrite_verdict(1.0, chloride_mg_L=150.0)
    assert safe.is_protected
    assert safe.ratio == pytest.approx(45.7, abs=0.1)
    short = context.nitrite_verdict(5.0, chloride_mg_L=50.0)
    assert not short.is_protected
    assert short.chloride_short_mg_L == pytest.approx(114.2, abs=0.1)
    assert context.nitrite_verdict(0.0, chloride_mg_L=120.0).ratio == math.inf
    with pytest.raises(InvalidInputError, match="chloride"):
        context.nitrite_verdict(1.0, chloride_mg_L=math.nan)


def test_eggs_float_where_the_water_is_as_dense():
    # Atlantic halibut 34.2-34.5, eastern Baltic cod 14.5 (Sundby and Kristiansen 2015): densities at 5 degC from TEOS-10
    assert context.neutral_buoyancy_salinity(1027.1, temperature_degC=5.0) == pytest.approx(34.3, abs=0.4)
    assert context.neutral_buoyancy_salinity(1011.5, temperature_degC=5.0) == pytest.approx(14.5, abs=0.4)
    assert math.isnan(context.neutral_buoyancy_salinity(1090.0, temperature_degC=5.0))
    with pytest.raises(InvalidInputError, match="density"):
        context.neutral_buoyancy_salinity(1.027, temperature_degC=5.0)


def test_rotifers_stop_after_a_fall_and_hardly_after_a_rise():
    # OIE1993: 20 to 15 ppt leaves 50 % mobile, 20 to 5 leaves 5 %, 20 to 30 only a slight loss
    assert context.feed_transfer_warning("rotifer", from_ppt=20, to_ppt=15).mobile == pytest.approx(0.5)
    assert context.feed_transfer_warning("rotifer", from_ppt=20, to_ppt=5).mobile == pytest.approx(0.05)
    assert context.feed_transfer_warning("rotifer", from_ppt=20, to_ppt=30) is None
    assert context.feed_transfer_warning("rotifer", from_ppt=20, to_ppt=19.5) is None


def test_a_feed_without_a_figure():
    unknown = context.feed_transfer_warning("copepod", from_ppt=30, to_ppt=20)
    assert math.isnan(unknown.mobile)
    assert unknown.sentence.startswith("No figure")
    assert context.feed_transfer_warning("copepod", from_ppt=30, to_ppt=28) is None


def a_test(alive, counted=100, mark=0.75):
    return postlarvae.PostlarvaeTest(0, 10, 30, 15, 30, 30, counted, alive, mark)


def test_the_stress_test_of_postlarvae():
    good, poor, near = (postlarvae.verdict(a_test(alive)) for alive in (92, 50, 77))
    assert (good.has_passed, good.is_clear) == (True, True)
    assert (poor.has_passed, poor.is_clear) == (False, True)
    assert (near.has_passed, near.is_clear) == (True, False)
    # Clopper and Pearson 1934, two-sided 90 %: 0 of 10 alive gives 0 to 0.2589
    none = postlarvae.verdict(a_test(0, 10))
    assert (none.low, none.high) == (0.0, pytest.approx(0.2589, abs=1e-4))
    assert postlarvae.animals_needed(0.75) == 51


@pytest.mark.parametrize(
    ("alive", "counted", "mark"), [(5, 0, 0.7), (5, 4, 0.7), (-1, 4, 0.7), (1, 4, 0.0), (1, 4, 1.5)]
)
def test_an_impossible_count_is_refused(alive, counted, mark):
    with pytest.raises(InvalidInputError):
        a_test(alive, counted, mark)


def test_did_the_score_foresee_the_losses():
    times = np.arange(0, 20 * 24) * HOUR_US
    stress = np.where((times > 100 * HOUR_US) & (times < 110 * HOUR_US), 80.0, 5.0)
    day = 24 * HOUR_US
    counts = [DeathCount(index * day, (index + 1) * day, 200 if index in (5, 15) else 2, 1000) for index in range(20)]
    found = foresight(counts, times_us=times, stress=stress)
    assert (found.foreseen, found.missed) == (1, 1)
    assert found.unfounded == 2  # the score still stands within three days of two quiet counts
    assert found.foreseen + found.missed + found.unfounded + found.quiet == 20
    assert foresight([], times_us=times, stress=stress).rows == ()
    assert foresight(counts[:2], times_us=times, stress=np.full(times.size, np.nan)).rows == ()


def test_the_sentence_says_why_and_which_way_water_moves():
    words = one_sentence(
        band=Band.STRAINED,
        driver=Driver.CHANGE,
        water_mOsm_kg=200.0,
        acclimated_mOsm_kg=800.0,
        optimal_low_mOsm_kg=580.0,
        gap_mOsm_kg=300.0,
    )
    assert words == (
        "Strained: the water is much fresher than what they are used to, "
        "and their bodies take up water (body 300 mOsm/kg above the water)."
    )
    assert one_sentence(band=Band.SETTLED, driver=Driver.NONE, water_mOsm_kg=700.0) == "Settled: the water suits them."
    assert one_sentence(band=Band.UNKNOWN, driver=Driver.UNKNOWN, water_mOsm_kg=700.0).startswith("Not known")
    assert "lose water" in one_sentence(
        band=Band.STRAINED, driver=Driver.RANGE, water_mOsm_kg=1200.0, gap_mOsm_kg=-300.0
    )
