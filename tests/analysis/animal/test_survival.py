"""Expected survival, and that the harmful is told from the harmless."""

from __future__ import annotations

import numpy as np
import pytest

from analysis.animal import tables
from analysis.animal.constants import constants
from analysis.animal.fallback_rules import osmolality_from_ppt
from analysis.animal.stage import Certainty
from analysis.animal.survival import EXPOSURE_FACTOR, alive_from_exposure, survival_of_schedule
from analysis.errors import InvalidInputError

STAGES = tables.load()


def told(animal, used_to, pieces, degC=None):
    hours, ppt = (np.array(column, dtype=float) for column in zip(*pieces, strict=True))
    water = np.array([osmolality_from_ppt(level) for level in ppt])
    warmth = None if degC is None else np.full(water.shape, float(degC))
    return survival_of_schedule(
        STAGES[animal],
        acclimated_mOsm_kg=osmolality_from_ppt(used_to),
        hours=hours,
        osmolality_mOsm_kg=water,
        temperature_degC=warmth,
    )


def test_half_live_at_exposure_1():
    steep = constants().steepness
    np.testing.assert_allclose(alive_from_exposure(np.array([0.0, 1.0]), steepness=steep), [1.0, 0.5])


def test_the_published_median_comes_back_with_its_source():
    # SAMOCHA1998: PL7, from 27.9 to 3.0 ppt, 2 h: half alive
    found = told("penaeus-vannamei/pl7", 27.9, [(2.0, 3.0)])
    assert found.alive == pytest.approx(0.5, abs=0.01)
    assert found.low < found.alive < found.high
    assert found.sources == ("SAMOCHA1998",)
    assert found.certainty is Certainty.LOOKED_UP


def test_its_range_is_that_of_an_exposure_known_within_a_factor():
    found = told("penaeus-vannamei/pl7", 27.9, [(2.0, 3.0)])
    steep = constants().steepness
    assert found.high == pytest.approx(1 / (1 + (found.exposure / EXPOSURE_FACTOR) ** steep))


def test_a_day_at_20_first_makes_30_harmless_to_mozambique_tilapia():
    # HWANG1989: straight to 30 most die; 24 h at 20 first: lived
    animal = "oreochromis-mossambicus/juvenile-adult"
    assert told(animal, 0.0, [(24.0, 30.0)]).alive < 0.5
    assert told(animal, 0.0, [(24.0, 20.0), (24.0, 30.0)]).alive > 0.9


def test_the_way_back_to_fresh_water_is_safe_for_mozambique_tilapia():
    # HAWAII_TILAPIA: fresh to salt kills, sea water to fresh water is safe
    found = told("oreochromis-mossambicus/juvenile-adult", 32.0, [(96.0, 0.0)])
    assert found.alive == 1.0
    assert found.sources == ("HAWAII_TILAPIA",)


def test_gradual_beats_abrupt_in_macrobrachium_and_tilapia():
    # KAU1988: 120 h, abrupt from fresh water LC50 28.18, gradual 31.6; LEMARIE2004 and ALAMOUDI1987 for tilapia
    abrupt = told("macrobrachium-rosenbergii/juvenile", 0.0, [(120.0, 31.6)])
    slow = told("macrobrachium-rosenbergii/juvenile", 31.6, [(120.0, 31.6)])
    assert slow.alive == pytest.approx(0.5, abs=0.02)
    assert abrupt.alive < 0.3
    assert told("oreochromis-niloticus/juvenile", 0.0, [(24.0, 36.0)]).alive < 0.3
    assert told("oreochromis-niloticus/juvenile", 36.0, [(24.0, 36.0)]).alive > 0.9


def test_sea_bass_live_at_9_and_die_below_4():
    # MARINO1994
    animal = "dicentrarchus-labrax/fry-juvenile"
    at_9 = told(animal, 37.0, [(48.0, 9.0)])
    assert at_9 is None or at_9.alive > 0.9
    straight = StageExposure(animal).peak(37.0, [(48.0, 3.0)])
    harmless = StageExposure(animal).peak(37.0, [(48.0, 9.0)])
    assert straight > 1.0
    assert harmless < 0.3


class StageExposure:
    """Exposure alone, where no time to death is printed and survival is therefore not told."""

    def __init__(self, animal):
        from analysis.animal.stage_arrays import StageArrays

        self.figures = StageArrays.from_stages([STAGES[animal]])

    def peak(self, used_to, pieces):
        from analysis.animal.survival import peak_exposure

        hours, ppt = (np.array(column, dtype=float)[:, None] for column in zip(*pieces, strict=True))
        water = np.vectorize(osmolality_from_ppt)(ppt)
        return float(
            peak_exposure(
                self.figures, acclimated_mOsm_kg=np.array([osmolality_from_ppt(used_to)]), hours=hours, osmolality_mOsm_kg=water,
                temperature_degC=np.full(water.shape, np.nan),
            )[0]
        )  # fmt: skip


@pytest.mark.parametrize(
    "animal", ["penaeus-vannamei/juvenile", "oncorhynchus-mykiss/50-g", "oreochromis-niloticus/juvenile"]
)
def test_cold_narrows_the_limits(animal):
    from analysis.animal.exposure import limits_at
    from analysis.animal.stage_arrays import StageArrays

    figures = StageArrays.from_stages([STAGES[animal]])
    cold, mild = (
        limits_at(figures, np.array([degC]), constants())
        for degC in (figures.optimal_low_degC[0] - 8.0, figures.optimal_low_degC[0])
    )
    finite = np.isfinite(mild.level_low)
    assert np.all(cold.level_low[finite] > mild.level_low[finite])
    assert np.all(cold.level_high < mild.level_high)
    assert np.all(~np.isfinite(mild.jump_high) | (cold.jump_high < mild.jump_high))


def test_catfish_settle_slower_in_the_cold():
    # CATFISH_PLASMA: 48 h at 27 degC, not settled after 13 d at 9 degC
    from analysis.animal.exposure import settling_factor
    from analysis.animal.stage_arrays import StageArrays

    figures = StageArrays.from_stages([STAGES["ictalurus-punctatus/fingerling-5-14-mo"]])
    settle_h = [
        float(3.0 * figures.tau_up[0] * settling_factor(figures, np.array([degC]), constants())[0])
        for degC in (27.0, 9.0)
    ]
    assert settle_h[0] == pytest.approx(48.0)
    assert settle_h[1] > 300.0


def test_nothing_is_told_where_no_time_to_death_is_published():
    assert told("lates-calcarifer/egg", 30.0, [(24.0, 10.0)]) is None
    assert told("hippoglossus-hippoglossus/larva", 20.0, [(24.0, 5.0)]) is None


def test_a_schedule_must_fit():
    water = np.array([500.0])
    with pytest.raises(InvalidInputError, match="hours"):
        survival_of_schedule(
            STAGES["perna-perna/adult"], acclimated_mOsm_kg=1000.0, hours=np.array([-1.0]), osmolality_mOsm_kg=water
        )
    with pytest.raises(InvalidInputError, match="schedule"):
        survival_of_schedule(
            STAGES["perna-perna/adult"], acclimated_mOsm_kg=1000.0, hours=np.array([1.0, 2.0]), osmolality_mOsm_kg=water
        )
