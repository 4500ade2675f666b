"""What happens to cohorts, and the stage that their age points to."""

from __future__ import annotations

import math

import numpy as np
import pytest

from analysis.animal import tables
from analysis.animal.ageing import governing_stage, pace, proposed_stage
from analysis.animal.cohort import Cohort, Counted, Died, Harvested, Joined, Moved, Received, Split, after, received
from analysis.animal.fallbacks import resolved
from analysis.animal.osmoregulation import SPREAD_MOSM_KG, CohortState
from analysis.errors import InvalidInputError

STAGES = tables.load()
PL10 = STAGES["penaeus-vannamei/pl10"]
DAY_US = 86_400_000_000


def came(number=80_000, used_to=900.0, hours=math.inf, cohort_id="l3-a"):
    return received(
        Received(
            0,
            cohort_id,
            "l3",
            PL10.id,
            number,
            used_to,
            hours,
            temperature_degC=28.0,
            hours_packed=6,
            density_per_L=500,
            ph=7.9,
        ),
        PL10,
    )


def test_animals_long_in_their_water_come_known():
    cohort = came()
    assert cohort.state.acclimated[0] == 900.0
    assert cohort.state.uncertainty[0] == 0.0
    assert cohort.state.acclimated_degC[0] == 28.0


def test_the_shorter_they_had_the_less_sure():
    doubts = [came(hours=hours).state.uncertainty[0] for hours in (0.0, 12.0, 48.0, math.inf)]
    assert doubts == sorted(doubts, reverse=True)
    assert doubts[0] == SPREAD_MOSM_KG
    assert came(used_to=math.nan).state.uncertainty[0] == SPREAD_MOSM_KG


def test_the_state_goes_with_the_animals():
    cohort = came()
    (moved,) = after(cohort, Moved(1, "n1"))
    assert (moved.tank, moved.state) == ("n1", cohort.state)
    rest, part = after(moved, Split(2, "l3-b", "n2", 30_000))
    assert (rest.number, part.number, part.tank, part.id) == (50_000, 30_000, "n2", "l3-b")
    assert part.state is cohort.state


def test_two_cohorts_put_together():
    ours, theirs = came(60_000, 900.0), came(20_000, 700.0, cohort_id="l4-a")
    joined, ended = after(ours, Joined(3, theirs))
    assert joined.number == 80_000
    assert joined.state.acclimated[0] == pytest.approx(850.0)
    assert joined.state.uncertainty[0] == pytest.approx(math.sqrt(0.25 * 0.75) * 200.0)
    assert (ended.number, ended.tank) == (0, "")


def test_joining_two_stages_is_refused():
    other = Cohort("x", "l3", "penaeus-vannamei/pl7", 10, CohortState.unknown(1))
    with pytest.raises(InvalidInputError, match="animal"):
        after(came(), Joined(1, other))


def test_numbers():
    cohort = came(1000)
    assert after(cohort, Died(1, 100))[0].number == 900
    assert after(cohort, Counted(1, 950))[0].number == 950
    assert after(cohort, Counted(1, 0))[0].number == 0
    assert after(cohort, Harvested(1))[0].tank == ""
    assert after(cohort, Harvested(1, 400))[0].number == 600


@pytest.mark.parametrize(
    "event", [Died(1, 1001), Died(1, 0), Harvested(1, 1001), Split(1, "b", "n", 1000), Counted(1, -1)]
)
def test_more_than_there_are_is_refused(event):
    with pytest.raises(InvalidInputError, match="number"):
        after(came(1000), event)


def test_age_proposes_the_next_stage():
    current = STAGES["penaeus-vannamei/pl1-pl2"]
    found = proposed_stage(current, STAGES, now_us=5 * DAY_US, metamorphosed_at_us=0)
    assert (found.stage, found.age_d) == ("penaeus-vannamei/pl5", 5.0)
    assert proposed_stage(current, STAGES, now_us=7 * DAY_US, metamorphosed_at_us=0).stage == "penaeus-vannamei/pl7"
    assert proposed_stage(current, STAGES, now_us=5 * DAY_US) is None
    assert proposed_stage(current, STAGES, now_us=5 * DAY_US, hatched_at_us=0) is None


def test_cold_slows_the_age():
    current = STAGES["penaeus-vannamei/pl1-pl2"]
    assert pace(current, 19.5) == pytest.approx(0.5)
    cold = proposed_stage(current, STAGES, now_us=10 * DAY_US, metamorphosed_at_us=0, mean_temperature_degC=19.5)
    assert cold.stage == "penaeus-vannamei/pl5"
    assert pace(current, math.nan) == 1.0


def test_until_confirmed_the_stricter_stage_governs():
    young, old = STAGES["penaeus-vannamei/pl5"], STAGES["penaeus-vannamei/pl7"]
    for confirmed, proposed in ((young, old), (old, young)):
        governed = governing_stage(confirmed, proposed)
        assert governed.id == confirmed.id
        limit = resolved(governed).value("tolerable_low")
        assert limit == max(resolved(young).value("tolerable_low"), resolved(old).value("tolerable_low"))
    assert governing_stage(young, young) is young


def test_the_stricter_side_is_chosen_side_by_side():
    fry, larva = STAGES["rachycentron-canadum/larva-3-dph"], STAGES["rachycentron-canadum/larva-7-9-dph"]
    governed = resolved(governing_stage(fry, larva))
    for key in ("tolerable_low", "tolerable_high"):
        choose = max if key.endswith("low") else min
        assert governed.value(key) == choose(resolved(fry).value(key), resolved(larva).value(key))
    assert np.isfinite(governed.value("tolerable_high"))
