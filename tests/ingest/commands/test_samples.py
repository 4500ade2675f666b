from __future__ import annotations

import math
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from analysis.animal.osmoregulation import StageArrays
from analysis.animal.stage import Certainty
from analysis.animal.strains import exposure_strain
from analysis.animal.stress import Band, Driver
from analysis.animal.survival import survival_of_schedule
from analysis.animal.tables import load
from ingest.chain.animal_roster import known_stages, own_figures
from ingest.chain.moving import exposure_from_strain
from ingest.site.loading import load_text
from tests.harness.hatchery import START_US, Bench, site_text
from tests.ingest.stock_work import HOUR_US, MINUTE_US, do, live, memory, read_for

PL10 = "penaeus-vannamei/pl10"


@pytest.fixture
def bench(tmp_path: Path) -> Iterator[Bench]:
    with Bench(tmp_path, site_text(port=1, sensors=2), now_us=START_US) as bench:
        yield bench


def blood(value: float, *, miss: float = 0.0, **more: Any) -> dict[str, Any]:
    """Return a value between two standards, the lower of which was read wrong by a share."""
    standards = [
        {"nominal_mOsm_kg": 290.0, "read_mOsm_kg": 290.0 * (1.0 + miss)},
        {"nominal_mOsm_kg": 1000.0, "read_mOsm_kg": 1000.0},
    ]
    return {
        "replicates_mOsm_kg": [value - 2.0, value + 2.0],
        "method": "freezing point",
        "standards": standards,
        "moult_stage": "C",
        **more,
    }


def test_a_fresh_value_resets_the_modelled_body_fluid(bench):
    read_for(bench, 5, salinity={"s0": 31.0})
    before = live(bench, "b0")
    assert do(bench, "sample.blood", **blood(720.0)).outcome == "applied"
    after = live(bench, "b0")
    assert after["internal"] == pytest.approx(720.0, abs=0.5)
    assert after["acclimated"] == before["acclimated"], "blood of a regulator does not tell what it is used to"
    felt = bench.queries.latest_stress(since_us=0)["t0"]
    assert felt.internal_mOsm_kg == pytest.approx(720.0, abs=0.5)
    [sample] = bench.queries.animal_samples("b0")
    assert sample.body["has_reset"]
    assert sample.body["capacity_mOsm_kg"] == pytest.approx(720.0 - before["osmolality"], abs=0.5)
    kept = memory(bench)
    bench.restart()
    assert memory(bench) == kept
    read_for(bench, 60 * 24 * 3, salinity={"s0": 31.0}, step_s=1800.0)
    assert live(bench, "b0")["internal"] == pytest.approx(before["internal"], abs=5.0), "it settles again"


def test_a_value_that_comes_late_counts_for_as_much_as_is_left_of_it(bench):
    """The model was wrong by so much at the draw; that has died away since with the settling time of body fluid."""
    read_for(bench, 30, salinity={"s0": 31.0})
    drawn_at, modelled = bench.clock.now_us(), live(bench, "b0")["internal"]
    read_for(bench, 120, salinity={"s0": 31.0}, step_s=120.0)
    assert do(bench, "sample.blood", **blood(modelled - 80.0, at_us=drawn_at)).outcome == "applied"
    settling_h = float(StageArrays.from_stages([load()[PL10]]).tau_internal[0])
    assert live(bench, "b0")["internal"] == pytest.approx(modelled - 80.0 * math.exp(-2.0 / settling_h), abs=0.5)


def test_failed_standards_block_the_value_and_it_is_kept(bench):
    read_for(bench, 5, salinity={"s0": 31.0})
    before = memory(bench)
    assert do(bench, "sample.blood", **blood(720.0, miss=0.05)).outcome == "applied"
    assert do(bench, "sample.blood", **blood(720.0) | {"standards": []}).outcome == "applied"
    assert memory(bench) == before
    first, second = bench.queries.animal_samples("b0")
    assert not first.body["is_usable"]
    assert "more than 2% off" in first.body["remarks"][0]
    assert second.body["remarks"][0] == "fewer than two standards"
    assert first.body["capacity_share"] is None


def test_a_value_of_long_ago_without_a_record_resets_nothing(bench):
    bench.clock.advance(7200.0)
    do(bench, "sample.blood", **blood(720.0, at_us=bench.clock.now_us() - 2 * HOUR_US))
    [sample] = bench.queries.animal_samples("b0")
    assert sample.body["is_usable"]
    assert not sample.body["has_reset"]


@pytest.mark.parametrize(
    ("reason", "kind", "body"),
    [
        ("unusable_details", "sample.blood", blood(720.0) | {"replicates_mOsm_kg": []}),
        ("unusable_details", "sample.blood", blood(720.0) | {"replicates_mOsm_kg": [-5.0]}),
        ("unusable_details", "sample.blood", blood(720.0) | {"method": "taste"}),
        ("unusable_details", "sample.blood", blood(720.0, miss=-1.0)),
        ("in_the_future", "sample.blood", blood(720.0, at_us=START_US + MINUTE_US)),
        ("role_too_weak", "sample.blood", blood(720.0) | {"role": "operator"}),
        ("unusable_details", "sample.postlarvae", {"counted": 100, "alive": 101}),
        ("unusable_details", "sample.postlarvae", {"counted": 0, "alive": 0}),
        ("role_too_weak", "sample.postlarvae", {"counted": 100, "alive": 80, "role": "viewer"}),
    ],
)
def test_what_cannot_be_is_refused(bench, reason, kind, body):
    if kind == "sample.postlarvae":
        body = {"from_salinity": 30.0, "to_salinity": 15.0, "minutes": 30.0, "recovery_minutes": 30.0, **body}
    answer = do(bench, kind, **body)
    assert (answer.outcome, answer.reason) == ("refused", reason)
    assert bench.queries.animal_samples() == []


def test_a_stress_test_of_postlarvae_is_a_record_and_moves_nothing(bench):
    do(bench, "stock.confirm_stage", animal=PL10, metamorphosed_at=START_US - 12 * 24 * HOUR_US)
    before = memory(bench)
    entry = {
        "from_salinity": 30.0,
        "to_salinity": 15.0,
        "minutes": 30.0,
        "recovery_minutes": 30.0,
        "counted": 100,
        "alive": 88,
    }
    assert do(bench, "sample.postlarvae", role="operator", **entry).outcome == "applied"
    assert memory(bench) == before
    [sample] = bench.queries.animal_samples("b0")
    assert sample.body["age_d"] == pytest.approx(12.0)
    assert sample.body["verdict"]["has_passed"]
    # Clopper and Pearson 1934, 90 %, 88 of 100: 0.813 to 0.929 (scipy.stats.binomtest gives the same).
    assert (sample.body["verdict"]["low"], sample.body["verdict"]["high"]) == pytest.approx((0.813, 0.929), abs=1e-3)
    assert sample.body["by"] == "Duty"


def test_what_the_board_sees_of_each_cohort(bench):
    read_for(bench, 5, salinity={"s0": 31.0, "s1": 31.0})
    do(bench, "stock.receive", "n1", tank="t1", animal=PL10, number=500, used_to_salinity=10.0, used_for_h=200.0)
    do(bench, "sample.blood", **blood(760.0))
    read_for(bench, 2, salinity={"s0": 31.0, "s1": 31.0})
    sights = {one.cohort.id: one for one in bench.queries.animals(bench.worker.plant.stages)}
    assert list(sights) == ["b0", "b1", "n1"]
    new, old = sights["n1"], sights["b0"]
    assert (new.cohort.tank, new.driver) == ("t1", Driver.CHANGE)
    assert new.band in (Band.ADJUSTING, Band.STRAINED, Band.IN_DANGER)
    assert "much saltier than what they are used to" in new.sentence
    assert new.gap == pytest.approx(new.internal - new.water)
    assert old.band is Band.SETTLED
    assert old.sentence.startswith("Settled: the water suits them")
    assert old.blood is not None
    assert new.blood is None
    assert old.postlarvae_test is None
    for one in sights.values():
        for estimate in (one.survival, one.survival_ahead):
            assert estimate is None or 0.0 <= estimate.low <= estimate.alive <= estimate.high <= 1.0
    assert old.survival is not None
    assert old.survival.alive == pytest.approx(1.0, abs=0.01)
    do(bench, "stock.harvest", "n1")
    assert len(bench.queries.animals(bench.worker.plant.stages)) == 2


def test_survival_ahead_is_that_of_a_day_in_this_water_for_each_cohort_by_itself(bench):
    """All cohorts are worked out at once; each must be as if alone (a check of our own, not of the science)."""
    read_for(bench, 2, salinity={"s0": 3.0, "s1": 31.0})
    do(bench, "stock.receive", "n1", tank="t0", animal="penaeus-vannamei/pl1-pl2", number=500, used_to_salinity=28.0)
    do(bench, "stock.receive", "n2", tank="t0", animal=PL10, number=500)
    read_for(bench, 1, salinity={"s0": 3.0, "s1": 31.0})
    known = 0
    for sight in bench.queries.animals(bench.worker.plant.stages):
        state = live(bench, sight.cohort.id)
        alone = survival_of_schedule(
            load()[sight.cohort.animal],
            acclimated_mOsm_kg=state["acclimated"],
            hours=np.array([24.0]),
            osmolality_mOsm_kg=np.array([state["osmolality"]]),
            temperature_degC=np.array([state["temperature"]]),
        )
        assert (alone is None) == (sight.survival_ahead is None)
        if alone is not None:
            known += 1
            assert sight.survival_ahead.exposure == pytest.approx(alone.exposure + state["exposure"], rel=1e-9)
            assert sight.survival_ahead.sources == alone.sources
            assert sight.survival_ahead.alive <= sight.survival.alive
    assert known >= 2


def test_losses_are_held_against_the_stress_before_them(bench):
    """Two quiet days with the usual losses, then fresh water and many dead: the score saw it coming."""
    for _ in range(2):
        read_for(bench, 60 * 24, salinity={"s0": 31.0}, step_s=1800.0)
        do(bench, "stock.remove_dead", number=80)
    read_for(bench, 60 * 24, salinity={"s0": 4.0}, step_s=1800.0)
    do(bench, "stock.remove_dead", number=8000)
    found = bench.queries.foresight("b0")
    assert [row.is_raised for row in found.rows] == [False, False, True]
    assert (found.foreseen, found.missed, found.unfounded, found.quiet) == (1, 0, 0, 2)
    assert found.rows[2].count.before == 80_000 - 160
    assert bench.queries.foresight("b1").rows == ()


OWN = (
    "species:\n  - {animal: penaeus-vannamei/pl10, figures: {tolerable_low_ppt: 18.0},"
    " author: Ines Prado, reason: two lots lost in spring}\n"
)


def test_figures_of_the_site_reach_the_chain_and_say_whose_they_are(tmp_path):
    scores = []
    for name, extra in (("packaged", ""), ("own", OWN)):
        (tmp_path / name).mkdir()
        with Bench(tmp_path / name, site_text(port=1, extra=extra), now_us=START_US) as bench:
            read_for(bench, 5, salinity={"s0": 14.0})
            scores.append(bench.queries.latest_stress(since_us=0)["t0"].range_strain)
            [sight] = bench.queries.animals(known_stages(bench.worker.plant.site))
            assert sight.has_own_figures is bool(extra)
    assert scores[1] > scores[0] + 0.2
    assert sight.stage is not None
    figure = sight.stage.figures["tolerable_low_ppt"]
    assert (figure.certainty, figure.sources, figure.note) == (
        Certainty.SITE,
        ("Ines Prado",),
        "two lots lost in spring",
    )


def test_own_figures_are_listed_with_what_they_replace():
    site = load_text(site_text(port=1, extra=OWN))
    [own] = own_figures(site)
    assert (own.animal, own.figure, own.value, own.author) == (PL10, "tolerable_low_ppt", 18.0, "Ines Prado")
    packaged = load()[PL10].figures.get("tolerable_low_ppt")
    assert own.before == ("" if packaged is None else f"{packaged.value:g} ppt ({packaged.mark})")


@pytest.mark.parametrize("strain", [0.0, 0.1, 0.699, 0.7, 0.71, 0.999])
def test_a_recorded_strain_gives_its_exposure_back(strain):
    figures = StageArrays.from_stages([load()[PL10]])
    exposure = exposure_from_strain(strain, steepness=figures.steepness)
    assert float(exposure_strain(figures, exposure)[0]) == pytest.approx(strain, abs=1e-9)


def test_a_full_strain_says_no_more_how_far():
    assert math.isnan(exposure_from_strain(1.0, steepness=3.0))
