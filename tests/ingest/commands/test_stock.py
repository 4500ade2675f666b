from __future__ import annotations

import sqlite3
from collections.abc import Iterator
from pathlib import Path

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from analysis.animal.osmoregulation import CohortState, StageArrays
from analysis.animal.stress import advance_series
from analysis.animal.tables import load
from ingest.store import cohorts, samples
from ingest.water_kinds import kinds_of
from tests.harness.hatchery import START_US, Bench, site_text
from tests.ingest.stock_work import HOUR_US, MINUTE_US, book, do, live, memory, read_for, table

PL10 = "penaeus-vannamei/pl10"
DAY_US = 24 * HOUR_US
NEWCOMERS = {"tank": "t0", "animal": PL10, "number": 1000, "used_to_salinity": 15.0}


@pytest.fixture
def bench(tmp_path: Path) -> Iterator[Bench]:
    """Two tanks with 80,000 postlarvae each, used to 31."""
    with Bench(tmp_path, site_text(port=1, sensors=2), now_us=START_US) as bench:
        yield bench


def osmolality(bench: Bench, salinity: float) -> float:
    return float(kinds_of(bench.worker.plant.site, tables=bench.store)["seawater"].osmolality_from_salinity(salinity))


def test_animals_that_come_into_saltier_water_feel_it_at_once_and_settle(bench):
    read_for(bench, 2, salinity={"s0": 31.0})
    assert do(bench, "stock.receive", "n1", **NEWCOMERS, used_for_h=100.0).outcome == "applied"
    first = bench.queries.latest_stress_of_cohorts(since_us=0)
    assert first["n1"].stress > 20.0
    assert first["n1"].driver == "change"
    assert first["n1"].acclimated_mOsm_kg == pytest.approx(osmolality(bench, 15.0))
    assert first["b0"].stress < 1.0, "those that were there before feel nothing"
    assert bench.queries.latest_stress(since_us=0)["t0"].cohort == "n1", "the worst stands for the tank"
    read_for(bench, 60 * 24 * 4, salinity={"s0": 31.0}, step_s=1800.0)
    later = bench.queries.latest_stress_of_cohorts(since_us=0)
    assert later["n1"].stress < 0.5 * first["n1"].stress
    assert later["b0"].stress < 1.0


def test_each_cohort_of_a_tank_has_its_own_record(bench):
    do(bench, "stock.receive", "n1", **NEWCOMERS)
    read_for(bench, 5, salinity={"s0": 31.0})
    rows = table(bench, "SELECT measured_at, cohort FROM stress ORDER BY 1, 2")
    assert len(rows) == 10
    assert {row["cohort"] for row in rows} == {"b0", "n1"}
    span = {"from_us": START_US, "to_us": START_US + HOUR_US}
    worst, old, new = (bench.queries.stress_history("t0", cohort=one, **span) for one in (None, "b0", "n1"))
    assert worst.stress.tolist() == new.stress.tolist()
    assert (old.stress < 1.0).all()


def test_what_animals_are_used_to_goes_with_them(bench):
    read_for(bench, 30, salinity={"s0": 31.0, "s1": 20.0})
    before, there = live(bench, "b0"), live(bench, "b1")
    assert do(bench, "stock.move", to_tank="t1").outcome == "applied"
    after = live(bench, "b0")
    assert after["tank"] == "t1"
    for name in ("acclimated", "internal", "exposure", "acclimated_degC", "uncertainty"):
        assert after[name] == before[name], name
    assert after["osmolality"] == there["osmolality"], "they are in the water of the tank to which they came"
    assert bench.queries.latest_stress_of_cohorts(since_us=0)["b0"].stress > 5.0
    read_for(bench, 60, salinity={"s0": 31.0, "s1": 20.0})
    assert live(bench, "b0")["acclimated"] < before["acclimated"]
    by_tank = table(
        bench, "SELECT DISTINCT slug FROM stress JOIN tank ON tank.id = tank WHERE cohort = 'b0' ORDER BY measured_at"
    )
    assert [row["slug"] for row in by_tank] == ["t0", "t1"]


def test_a_move_entered_hours_later_is_as_if_entered_at_once(tmp_path):
    """The chain is taken back to the moment of the move and through all that was measured in the other tank since."""
    states = []
    for name, is_late in (("at once", False), ("late", True)):
        (tmp_path / name).mkdir()
        with Bench(tmp_path / name, site_text(port=1, sensors=2), now_us=START_US) as bench:
            read_for(bench, 30, salinity={"s0": 31.0, "s1": 20.0})
            moved_at = bench.clock.now_us()
            if not is_late:
                do(bench, "stock.move", to_tank="t1")
            read_for(bench, 120, salinity={"s0": 31.0, "s1": 20.0}, step_s=120.0)
            if is_late:
                assert live(bench, "b0")["acclimated"] == pytest.approx(osmolality(bench, 31.0))
                assert do(bench, "stock.move", to_tank="t1", at_us=moved_at).outcome == "applied"
            states.append(live(bench, "b0"))
    for name in ("acclimated", "internal", "exposure", "osmolality", "updated_at_us"):
        assert states[1][name] == pytest.approx(states[0][name], rel=1e-6), name


def test_animals_entered_a_day_after_they_came_have_lived_through_that_day(bench):
    came_at = bench.clock.now_us()
    read_for(bench, 60 * 24, salinity={"s0": 31.0}, step_s=600.0)
    do(bench, "stock.receive", "n1", **NEWCOMERS, temperature_degC=28.0, at_us=came_at)
    found = live(bench, "n1")
    times = came_at + 600_000_000 * np.arange(1, 145)
    start = CohortState.used_to(np.array([osmolality(bench, 15.0)]), temperature_degC=np.array([28.0]))
    expected, _ = advance_series(
        StageArrays.from_stages([load()[PL10]]),
        CohortState(**{name: getattr(start, name) for name in start.__slots__ if name != "updated_at_us"} | {
            "updated_at_us": np.array([came_at]), "osmolality": np.array([np.nan])}),
        times_us=times,
        osmolality_mOsm_kg=np.full(144, osmolality(bench, 31.0)),
        temperature_degC=np.full(144, 28.0),
    )  # fmt: skip
    assert found["acclimated"] == pytest.approx(float(expected.acclimated[0]), rel=1e-6)
    assert found["acclimated"] > osmolality(bench, 20.0)


def test_animals_of_which_nobody_knows_the_water_say_not_known(bench):
    do(bench, "stock.receive", "n1", tank="t0", animal=PL10, number=50)
    read_for(bench, 3, salinity={"s0": 31.0})
    felt = bench.queries.latest_stress_of_cohorts(since_us=0)["n1"]
    assert felt.change_strain is None
    assert felt.exposure_strain is None
    assert felt.range_strain is not None, "of the water itself something can be said"
    assert "used_to_salinity" not in book(bench)["n1"].body


def test_a_split_and_a_join_balance_and_mix(bench):
    read_for(bench, 10, salinity={"s0": 31.0, "s1": 20.0})
    assert do(bench, "stock.split", new_id="b2", to_tank="t1", number=20_000, name="second half").outcome == "applied"
    rows = book(bench)
    assert (rows["b0"].number, rows["b0"].tank) == (60_000, "t0")
    assert (rows["b2"].number, rows["b2"].tank, rows["b2"].body["split_from"]) == (20_000, "t1", "b0")
    assert live(bench, "b2")["acclimated"] == live(bench, "b0")["acclimated"]
    do(bench, "stock.receive", "n1", **NEWCOMERS | {"tank": "t1", "number": 20_000})
    mean = (live(bench, "b2")["acclimated"] + live(bench, "n1")["acclimated"]) / 2
    assert do(bench, "stock.join", "b2", other="n1").outcome == "applied"
    assert live(bench, "b2")["acclimated"] == pytest.approx(mean)
    rows = book(bench)
    assert rows["b2"].number == 40_000
    assert (rows["n1"].number, rows["n1"].body["joined_to"]) == (0, "b2")
    assert rows["n1"].ended_at is not None
    assert "n1" not in bench.worker.plant.animals.row_of
    assert not table(bench, "SELECT * FROM animal_state WHERE cohort = 'n1'")


def test_animals_parted_in_their_own_tank_stay_the_same(bench):
    read_for(bench, 10, salinity={"s0": 29.0})
    bench.clock.advance(45.0)
    assert do(bench, "stock.split", new_id="b2", to_tank="t0", number=500).outcome == "applied"
    assert live(bench, "b2") == live(bench, "b0")
    read_for(bench, 10, salinity={"s0": 24.0})
    assert live(bench, "b2") == live(bench, "b0")


def test_an_emptied_tank_feels_nothing_and_its_limits_are_those_of_the_water_alone(bench):
    read_for(bench, 2, salinity={"s0": 31.0, "s1": 31.0})
    assert do(bench, "stock.harvest", number=79_990).outcome == "applied"
    assert do(bench, "stock.remove_dead", number=10).outcome == "applied"
    assert book(bench)["b0"].ended_at == bench.clock.now_us()
    read_for(bench, 2, salinity={"s0": 10.0, "s1": 31.0})
    assert set(bench.queries.latest_stress(since_us=0)) == {"t1"}
    assert bench.worker.plant.animals.stages[0] is None


def test_the_ledger_alone_tells_the_cohorts_again(bench):
    read_for(bench, 3, salinity={"s0": 31.0, "s1": 20.0})
    do(bench, "stock.receive", "n1", **NEWCOMERS, hours_packed=9.0, density_per_L=800.0, ph=7.4, from_water="dock")
    do(bench, "stock.split", new_id="b2", to_tank="t1", number=500)
    do(bench, "stock.join", "b1", other="b2")
    do(bench, "stock.count", "b1", number=79_000)
    do(bench, "stock.remove_dead", "n1", number=3)
    do(bench, "stock.confirm_stage", "n1", animal="penaeus-vannamei/pl15-pl20", metamorphosed_at=START_US - 20 * DAY_US)
    do(
        bench,
        "sample.postlarvae",
        "n1",
        from_salinity=30,
        to_salinity=15,
        minutes=30,
        recovery_minutes=30,
        counted=100,
        alive=88,
    )
    told = {name: table(bench, f"SELECT * FROM {name}") for name in ("cohort", "animal_sample")}
    with bench.worker.store.transaction() as connection:
        assert cohorts.rebuild(connection) == 8
        assert samples.rebuild(connection) == 1
    assert {name: table(bench, f"SELECT * FROM {name}") for name in told} == told
    [(_, received)] = [
        (i, e) for i, e in bench.queries.events(kind_prefix="stock.received") if e.body["cohort"] == "n1"
    ]
    assert (received.body["hours_packed"], received.body["ph"], received.subject) == (9.0, 7.4, "cohort/n1")
    assert received.body["states"]["n1"]["acclimated"] == pytest.approx(osmolality(bench, 15.0))


def test_a_restart_in_the_middle_changes_nothing(tmp_path):
    found = []
    for name in ("through", "restarted"):
        (tmp_path / name).mkdir()
        with Bench(tmp_path / name, site_text(port=1, sensors=2), now_us=START_US) as bench:
            for step in (
                lambda b=bench: do(b, "stock.receive", "n1", **NEWCOMERS),
                lambda b=bench: do(b, "stock.move", to_tank="t1"),
                lambda b=bench: do(b, "stock.split", "b1", new_id="b2", to_tank="t0", number=7),
                lambda b=bench: do(b, "stock.join", "b0", other="b1"),
                lambda b=bench: do(b, "stock.confirm_stage", "n1", animal="penaeus-vannamei/pl15-pl20"),
            ):
                read_for(bench, 7, salinity={"s0": 31.0, "s1": 20.0})
                assert step().outcome == "applied"
                if name == "restarted":
                    bench.restart()
            read_for(bench, 7, salinity={"s0": 31.0, "s1": 20.0})
            found.append((memory(bench), table(bench, "SELECT * FROM stress"), table(bench, "SELECT * FROM cohort")))
            before = memory(bench)
            bench.restart()
            assert memory(bench) == before
    assert found[0] == found[1]


def test_a_stage_that_age_proposes_makes_limits_stricter_until_a_person_confirms_one(bench):
    """PL1 to PL7 moves the lethal limit from 16.8 to 3.0 within a week (SAMOCHA1998): older animals stand more, not less."""
    do(
        bench,
        "stock.receive",
        "n1",
        **NEWCOMERS | {"animal": "penaeus-vannamei/pl1-pl2"},
        metamorphosed_at=START_US - 2 * DAY_US,
    )
    lethal = lambda: float(bench.worker.plant.animals.figures.level_low[bench.worker.plant.animals.row_of["n1"]])  # noqa: E731
    young = lethal()
    bench.clock.advance(8 * 86_400.0)
    bench.worker.age_animals(bench.stop)
    [(_, event)] = bench.queries.events(kind_prefix="stock.stage_proposed")
    proposed = event.body["proposed"]["stage"]
    assert proposed == book(bench)["n1"].body["proposed"]["stage"] != "penaeus-vannamei/pl1-pl2"
    assert event.body["proposed"]["age_d"] == pytest.approx(10.0)
    assert lethal() == young, "the younger stage is the stricter on the fresh side"
    bench.worker.age_animals(bench.stop)
    assert len(bench.queries.events(kind_prefix="stock.stage_proposed")) == 1, "proposed once"
    bench.restart()
    assert lethal() == young
    assert do(bench, "stock.confirm_stage", "n1", role="operator", animal=proposed).reason == "role_too_weak"
    assert do(bench, "stock.confirm_stage", "n1", animal=proposed).outcome == "applied"
    assert lethal() < young
    assert book(bench)["n1"].body["proposed"] is None
    bench.worker.age_animals(bench.stop)
    assert len(bench.queries.events(kind_prefix="stock.stage_proposed")) == 1


@pytest.mark.parametrize(("temperature", "stages"), [(28.0, 1), (18.0, 0)])
def test_in_the_cold_animals_age_more_slowly(tmp_path, temperature, stages):
    """Development halves with ten kelvin (assumed in the animals' room): five days at 18 are not those of postlarvae 3 to 4."""
    pl1 = "penaeus-vannamei/pl1-pl2"
    with Bench(tmp_path, site_text(port=1, sensors=1, interval_s=3600.0), now_us=START_US) as bench:
        do(bench, "stock.receive", "n1", **NEWCOMERS | {"animal": pl1}, metamorphosed_at=START_US)
        read_for(bench, 60 * 24 * 5, salinity={"s0": 15.0}, step_s=3600.0, temperature=temperature)
        bench.roll_up()
        bench.worker.age_animals(bench.stop)
        found = [event.body["proposed"] for _, event in bench.queries.events(kind_prefix="stock.stage_proposed")]
        assert len(found) == stages
        if found:
            assert found[0]["age_d"] == pytest.approx(5.0)


def test_a_declined_proposal_is_not_made_again(bench):
    pl1 = "penaeus-vannamei/pl1-pl2"
    do(bench, "stock.receive", "n1", **NEWCOMERS | {"animal": pl1}, metamorphosed_at=START_US - 10 * DAY_US)
    bench.worker.age_animals(bench.stop)
    proposed = book(bench)["n1"].body["proposed"]["stage"]
    assert do(bench, "stock.confirm_stage", "n1", animal=pl1).outcome == "applied"
    bench.worker.age_animals(bench.stop)
    row = book(bench)["n1"]
    assert (row.animal, row.body["proposed"], row.body["declined"]) == (pl1, None, proposed)


@pytest.mark.parametrize(
    ("reason", "kind", "cohort", "body"),
    [
        ("id_is_taken", "stock.receive", "b0", NEWCOMERS),
        ("unusable_id", "stock.receive", "No Slug", NEWCOMERS),
        ("no_such_tank", "stock.receive", "n1", NEWCOMERS | {"tank": "t9"}),
        ("no_such_animal", "stock.receive", "n1", NEWCOMERS | {"animal": "penaeus-vannamei/adult-in-space"}),
        ("unusable_number", "stock.receive", "n1", NEWCOMERS | {"number": 0}),
        ("unusable_details", "stock.receive", "n1", NEWCOMERS | {"number": 1.5}),
        ("unusable_details", "stock.receive", "n1", NEWCOMERS | {"used_to_salinity": -1.0}),
        ("unusable_details", "stock.receive", "n1", NEWCOMERS | {"ph": 15.0}),
        ("unusable_details", "stock.receive", "n1", NEWCOMERS | {"colour": "grey"}),
        ("dates_out_of_order", "stock.receive", "n1", NEWCOMERS | {"hatched_at": START_US + 1}),
        ("in_the_future", "stock.receive", "n1", NEWCOMERS | {"at_us": START_US + MINUTE_US}),
        ("no_such_cohort", "stock.move", "b9", {"to_tank": "t1"}),
        ("already_there", "stock.move", "b0", {"to_tank": "t0"}),
        ("no_such_tank", "stock.move", "b0", {"to_tank": "t9"}),
        ("before_the_last_entry", "stock.move", "b0", {"to_tank": "t1", "at_us": START_US - 400 * DAY_US}),
        ("not_so_many", "stock.split", "b0", {"new_id": "b2", "to_tank": "t1", "number": 80_000}),
        ("id_is_taken", "stock.split", "b0", {"new_id": "b1", "to_tank": "t1", "number": 1}),
        ("no_such_cohort", "stock.join", "b0", {"other": "b0"}),
        ("not_so_many", "stock.remove_dead", "b0", {"number": 80_001}),
        ("not_so_many", "stock.remove_dead", "b0", {"number": 0}),
        ("not_so_many", "stock.harvest", "b0", {"number": 80_001}),
        ("unusable_number", "stock.count", "b0", {"number": -1}),
        ("no_such_animal", "stock.confirm_stage", "b0", {"animal": "lates-calcarifer/juvenile"}),
    ],
)
def test_what_cannot_be_is_refused_and_leaves_nothing(bench, reason, kind, cohort, body):
    before = table(bench, "SELECT * FROM cohort"), memory(bench), bench.worker.plant
    answer = do(bench, kind, cohort, **body)
    assert (answer.outcome, answer.reason) == ("refused", reason)
    assert (table(bench, "SELECT * FROM cohort"), memory(bench), bench.worker.plant) == before
    assert len(bench.queries.events(kind_prefix="stock.")) == 2


def test_the_dead_are_those_since_the_count_before_whatever_else_happened(bench):
    counted_at = bench.clock.now_us()
    do(bench, "stock.count", number=79_990)
    bench.clock.advance(86_400.0)
    do(bench, "stock.move", to_tank="t1")
    bench.clock.advance(60.0)
    do(bench, "stock.remove_dead", number=80)
    do(bench, "stock.remove_dead", number=8, from_us=bench.clock.now_us() - 5 * MINUTE_US)
    first, second = (event.body for _, event in bench.queries.events(kind_prefix="stock.died"))
    assert (first["from_us"], first["number_before"], first["number"]) == (counted_at, 79_990, 79_910)
    assert second["from_us"] == bench.clock.now_us() - 5 * MINUTE_US


def test_two_stages_are_never_joined(bench):
    do(bench, "stock.receive", "n1", **NEWCOMERS | {"animal": "penaeus-vannamei/pl1-pl2"})
    assert do(bench, "stock.join", "b0", other="n1").reason == "another_stage"


def test_a_cohort_that_has_ended_is_left_alone(bench):
    do(bench, "stock.harvest")
    assert do(bench, "stock.count", number=5).reason == "cohort_has_ended"
    assert do(bench, "stock.receive", "b0", **NEWCOMERS).reason == "id_is_taken", "an id is never used again"


def test_who_acts_on_an_old_sight_is_told_so(bench):
    seen = str(book(bench)["b0"].event_id)
    do(bench, "stock.count", number=79_000)
    answer = do(bench, "stock.remove_dead", number=10, expected=seen)
    assert answer.reason == "changed_meanwhile"
    assert do(bench, "stock.remove_dead", number=10, expected=str(book(bench)["b0"].event_id)).outcome == "applied"


def test_the_narrowest_published_limit_of_all_in_a_tank_holds(tmp_path):
    """Two stages whose published tolerable limits differ, by the site's own figures: 6 to 40 and 8 to 38."""
    own = "".join(
        f"  - {{animal: penaeus-vannamei/{stage}, figures: {{tolerable_low_ppt: {low}, tolerable_high_ppt: {high}}},"
        " author: Ines Prado, reason: trial of spring}\n"
        for stage, low, high in (("pl10", 6.0, 40.0), ("pl12", 8.0, 38.0))
    )
    with Bench(tmp_path, site_text(port=1, sensors=1, extra=f"species:\n{own}"), now_us=START_US) as bench:
        limits = lambda: bench.worker.plant.animals.tolerable_salinity[0].tolist()  # noqa: E731
        assert limits() == pytest.approx([6.0, 40.0], abs=0.05)
        do(bench, "stock.receive", "n1", **NEWCOMERS | {"animal": "penaeus-vannamei/pl12"})
        assert limits() == pytest.approx([8.0, 38.0], abs=0.05)
        do(bench, "stock.harvest", "n1")
        assert limits() == pytest.approx([6.0, 40.0], abs=0.05)


def test_in_a_tank_that_nobody_watches_doubt_grows(tmp_path):
    """Two tanks with a sensor each; the second loses its sensor, as in a site that has only one."""
    text = site_text(port=1, sensors=2)
    text = text[: text.index("  - id: s1\n")]
    with Bench(tmp_path, text, now_us=START_US) as bench:
        read_for(bench, 5, salinity={"s0": 31.0})
        do(bench, "stock.move", to_tank="t1")
        assert live(bench, "b0")["osmolality"] is None
        assert bench.queries.latest_stress_of_cohorts(since_us=0)["b0"].stress is None
        bench.clock.advance(6 * 3600.0)
        do(bench, "stock.move", to_tank="t0")
        assert 20.0 < live(bench, "b0")["uncertainty"] < 300.0
        do(bench, "stock.move", to_tank="t1")
        bench.clock.advance(30 * 3600.0)
        do(bench, "stock.move", to_tank="t0")
        assert live(bench, "b0")["acclimated"] is None, "after a day nobody can say"


def test_a_store_that_refuses_leaves_everything_as_it_was(bench):
    """All or nothing: the ledger, the cohorts, the chain's animals and the limits of the tanks."""
    read_for(bench, 3, salinity={"s0": 31.0, "s1": 20.0})
    before = memory(bench), table(bench, "SELECT * FROM cohort"), bench.worker.plant
    connection = bench.worker.store.connection
    connection.execute("CREATE TRIGGER full BEFORE INSERT ON animal_state BEGIN SELECT RAISE(ABORT, 'no room'); END")
    with pytest.raises(sqlite3.IntegrityError, match="no room"):
        do(bench, "stock.move", to_tank="t1")
    assert (memory(bench), table(bench, "SELECT * FROM cohort"), bench.worker.plant) == before
    assert bench.queries.events(kind_prefix="stock.moved") == []
    connection.execute("DROP TRIGGER full")
    bench.worker.take_commands(bench.stop)
    assert book(bench)["b0"].tank == live(bench, "b0")["tank"] == "t1"


def test_a_reload_keeps_the_animals_and_takes_up_the_sites_own_figures(bench):
    read_for(bench, 5, salinity={"s0": 20.0, "s1": 31.0})
    do(bench, "stock.receive", "n1", **NEWCOMERS)
    before = memory(bench)
    own = (
        "{animal: penaeus-vannamei/pl10, figures: {tolerable_low_ppt: 18.0}, author: Ines Prado, reason: two lots lost}"
    )
    bench.site_file.write_text(f"{bench.site_file.read_text()}species:\n  - {own}\n")
    assert bench.worker.reload()
    assert memory(bench) == before
    assert bench.worker.plant.animals.tolerable_salinity[0, 0] == pytest.approx(18.0, abs=0.05)


def test_animals_of_a_tank_that_is_gone_can_be_moved_to_one_that_is_there(bench):
    read_for(bench, 30, salinity={"s0": 31.0, "s1": 20.0})
    before = live(bench, "b1")
    text = bench.site_file.read_text()
    start, end = text.index("  - id: t1\n"), text.index("sensors:\n")
    bench.site_file.write_text((text[:start] + text[end:])[: text.index("  - id: s1\n") - (end - start)])
    assert bench.worker.reload()
    assert "b1" not in bench.worker.plant.animals.row_of
    assert do(bench, "stock.move", "b1", to_tank="t0").outcome == "applied"
    after = live(bench, "b1")
    assert (after["tank"], after["acclimated"]) == ("t0", before["acclimated"])


ACTS = st.one_of(
    st.tuples(st.just("receive"), st.integers(1, 500), st.integers(0, 1)),
    st.tuples(st.just("move"), st.integers(0, 9), st.integers(0, 1)),
    st.tuples(st.just("split"), st.integers(0, 9), st.integers(1, 300)),
    st.tuples(st.just("join"), st.integers(0, 9), st.integers(0, 9)),
    st.tuples(st.just("count"), st.integers(0, 9), st.integers(0, 400)),
    st.tuples(st.just("remove_dead"), st.integers(0, 9), st.integers(1, 300)),
    st.tuples(st.just("harvest"), st.integers(0, 9), st.integers(1, 300)),
    st.tuples(st.just("restart"), st.just(0), st.just(0)),
)


def enact(bench: Bench, act: tuple[str, int, int], index: int) -> None:
    kind, one, other = act
    if kind == "restart":
        bench.restart()
        return
    known = sorted(book(bench))
    if kind == "receive":
        do(bench, "stock.receive", f"c{index}", **NEWCOMERS | {"number": one, "tank": f"t{other}"})
        return
    body = {
        "move": {"to_tank": f"t{other % 2}"},
        "split": {"new_id": f"c{index}", "to_tank": f"t{other % 2}", "number": other},
        "join": {"other": known[other % len(known)]},
    }.get(kind, {"number": other})
    do(bench, f"stock.{kind}", known[one % len(known)], **body)


@settings(max_examples=12, deadline=None, derandomize=True, suppress_health_check=[HealthCheck.too_slow])
@given(st.lists(ACTS, max_size=14))
def test_no_sequence_of_events_loses_an_animal(tmp_path_factory, acts):
    """Received = alive + died + harvested - what counts found more: of the ledger, and of the store's own rows."""
    text = site_text(port=1, sensors=2).replace("number: 80000", "number: 600")
    with Bench(tmp_path_factory.mktemp("balance"), text, now_us=START_US) as bench:
        for index, act in enumerate(acts):
            enact(bench, act, index)
        total = {"stock.received": 0, "stock.died": 0, "stock.harvested": 0, "stock.counted": 0}
        for _, event in bench.queries.events(kind_prefix="stock."):
            before = event.body.get("number_before", 0)
            if event.kind in total:
                total[event.kind] += event.body["number"] - before
        alive = sum(row.number for row in book(bench).values())
        assert alive == sum(total.values())
        assert all((row.number == 0) == (row.ended_at is not None) for row in book(bench).values())
        present = {row.id: row.tank for row in book(bench).values() if row.ended_at is None}
        animals = bench.worker.plant.animals
        assert {
            cohort: bench.worker.plant.tanks.tanks[animals.tanks[row]] for cohort, row in animals.row_of.items()
        } == present
        before_restart = memory(bench)
        bench.restart()
        assert memory(bench) == before_restart
