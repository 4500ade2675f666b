"""Commands on plans: who may, what is refused and why, what the ledger and the record keep."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path

import pytest

from analysis.acclimation.follow import Progress
from analysis.acclimation.plan import Plan
from analysis.acclimation.record import to_record
from analysis.acclimation.source import SourceWater
from ingest.store import plans
from ingest.words import en
from tests.harness.hatchery import START_US, Bench
from tests.ingest.plan_work import as_asked, do, plan, record_of, start, text, the_plan, water_until

DOWN = plan()


@pytest.fixture
def bench(tmp_path: Path) -> Iterator[Bench]:
    with Bench(tmp_path, text(), now_us=START_US) as bench:
        yield bench


def refused(outcome: object) -> str:
    """Return why a command was refused; the screen has words for it."""
    assert outcome.outcome == "refused"  # type: ignore[attr-defined]
    reason: str = outcome.reason  # type: ignore[attr-defined]
    assert reason in en.COMMAND_REASONS
    return reason


def test_a_biologist_starts_a_plan_and_the_ledger_tells_who_agreed_to_what(bench: Bench) -> None:
    assert DOWN.needs_yes
    assert start(bench, DOWN).outcome == "applied"
    [(_, event)] = bench.queries.events(kind_prefix="plan.")
    assert (event.kind, event.subject, event.actor) == ("plan.started", "tank/t0", "Bea")
    assert event.body["agreed"] == dict.fromkeys(DOWN.needs_yes, "Bea")
    assert len(event.body["plan"]["steps"]) == len(DOWN.steps)
    found = the_plan(bench)
    assert (found.tank, found.started_at, found.ended_at) == ("t0", START_US, None)
    assert found.state.progress is Progress.ON_PLAN
    assert found.state.record[0].words == "; ".join(f"Bea agreed: {need}" for need in DOWN.needs_yes)


def test_one_plan_a_tank(bench: Bench) -> None:
    start(bench, DOWN)
    assert refused(start(bench, DOWN)) == "another_plan_runs"
    assert do(bench, "plan.end", actor="Bea", role="biologist", reason="sold").outcome == "applied"
    bench.clock.advance(1)
    assert start(bench, DOWN).outcome == "applied"
    assert [one.is_running for one in bench.queries.plans()] == [False, True]


def test_a_plan_without_every_yes_is_refused(bench: Bench) -> None:
    assert refused(start(bench, DOWN, agreed={})) == "yes_missing"
    assert refused(start(bench, DOWN, agreed=dict.fromkeys(DOWN.needs_yes, "Nobody"))) == "unknown_person"
    assert bench.queries.plans() == []


def test_water_that_is_not_released_is_refused(bench: Bench) -> None:
    assert refused(start(bench, plan(sources=(SourceWater("tap", 0.0, 28.0),)))) == "source_not_released"
    bench.clock.advance(4 * 24 * 3600)
    assert refused(start(bench, DOWN)) == "source_not_released", "the release has ended since the plan was made"


def _with_step(of: Plan, **change: object) -> Plan:
    return replace(of, steps=(replace(of.steps[0], **change), *of.steps[1:]))  # type: ignore[arg-type]


@pytest.mark.parametrize(
    ("wrong", "reason"),
    [
        (replace(DOWN, is_feasible=False, reason="too fast"), "plan_not_feasible"),
        (replace(DOWN, task=replace(DOWN.task, animal="salmo-salar/smolt")), "plan_for_other_animals"),
        (replace(DOWN, task=replace(DOWN.task, water_kind="sodium-chloride")), "plan_for_other_water"),
        (replace(DOWN, steps=()), "unusable_details"),
        (replace(DOWN, steps=DOWN.steps[1:]), "unusable_details"),
        (_with_step(DOWN, salinity_low=math.nan), "unusable_details"),
        (_with_step(DOWN, salinity_high=math.inf), "unusable_details"),
        (_with_step(DOWN, duration_min=math.inf), "unusable_details"),
        (_with_step(DOWN, duration_min=math.nan), "unusable_details"),
    ],
)
def test_a_plan_that_is_none_or_is_not_for_this_tank_is_refused(bench: Bench, wrong: Plan, reason: str) -> None:
    assert refused(start(bench, wrong)) == reason


def test_what_is_no_plan_at_all_is_refused(bench: Bench) -> None:
    record = to_record(DOWN)
    del record["task"]["vessel"]
    for body in ({}, {"plan": record}, {"plan": {"steps": 7}}, {"plan": to_record(DOWN), "agreed": ["yes"]}):
        assert refused(do(bench, "plan.start", actor="Bea", role="biologist", **body)) == "unusable_details"
    outcome = do(bench, "plan.step_done", step=1)
    assert refused(outcome) == "no_plan_runs"


def test_each_role_does_its_own(bench: Bench) -> None:
    assert refused(start(bench, DOWN, actor="Olga", role="operator")) == "role_too_weak"
    start(bench, DOWN)
    assert do(bench, "plan.pause", reason="feeding").outcome == "applied"
    assert refused(do(bench, "plan.resume", **as_asked(DOWN))) == "role_too_weak"
    assert do(bench, "plan.resume").outcome == "applied"
    assert refused(do(bench, "plan.end", reason="enough")) == "role_too_weak"
    assert refused(do(bench, "plan.end", actor="Bea", role="biologist", reason=" ")) == "without_reason"


def test_a_step_is_recorded_with_the_water_really_moved(bench: Bench) -> None:
    start(bench, DOWN)
    first = DOWN.steps[0]
    assert refused(do(bench, "plan.step_done", step=2)) == "not_this_step"
    assert refused(do(bench, "plan.step_done", step=1, added_L={"sea": 3.0})) == "unusable_details"
    assert refused(do(bench, "plan.step_done", step=1, drained_L=-1.0)) == "unusable_details"
    water_until(bench, first.duration_min, 20.0)
    added_L = {"tap": first.add["tap"] - 10.0}
    assert do(bench, "plan.step_done", step=1, added_L=added_L, note="pump slow").outcome == "applied"
    (_, event) = bench.queries.events(kind_prefix="plan.step_done")[0]
    assert event.actor == "Olga"
    assert event.body["planned"]["add_L"] == first.add
    assert (event.body["drained_L"], event.body["added_L"]) == (first.drain_L, added_L)
    state = the_plan(bench).state
    assert state.next_step == 2
    assert f"really added {added_L['tap']:g} L tap; pump slow" in state.record[-1].words


def test_a_paused_plan_takes_no_step_until_it_goes_on(bench: Bench) -> None:
    start(bench, DOWN)
    assert refused(do(bench, "plan.resume")) == "plan_not_paused"
    do(bench, "plan.pause", reason="animals gasp")
    assert the_plan(bench).state.progress is Progress.PAUSED
    assert refused(do(bench, "plan.pause", reason="again")) == "plan_is_paused"
    assert refused(do(bench, "plan.step_done", step=1)) == "plan_is_paused"
    do(bench, "plan.resume")
    assert do(bench, "plan.step_done", step=1).outcome == "applied"
    assert record_of(bench) == [("started", "Bea"), ("paused", "Olga"), ("resumed", "Olga"), ("step", "Olga")]


def test_a_plan_goes_on_with_another_plan(bench: Bench) -> None:
    start(bench, DOWN)
    do(bench, "plan.pause", reason="tap water is short")
    slower = plan(20.0, 12.0)
    missing = do(bench, "plan.resume", actor="Bea", role="biologist", plan=to_record(slower))
    assert refused(missing) == "yes_missing"
    assert do(bench, "plan.resume", actor="Bea", role="biologist", **as_asked(slower)).outcome == "applied"
    state = the_plan(bench).state
    assert state.task.target.salinity == 12.0
    assert len(state.steps) == len(slower.steps)
    assert record_of(bench)[-1] == ("planned anew", "Bea")


def test_the_end_keeps_the_whole_record(bench: Bench) -> None:
    start(bench, DOWN)
    do(bench, "plan.step_done", step=1)
    do(bench, "plan.end", actor="Bea", role="biologist", reason="sold as they are")
    (_, event) = bench.queries.events(kind_prefix="plan.ended")[0]
    assert [one["what"] for one in event.body["record"]] == ["started", "step"]
    assert event.body["has_arrived"] is False
    assert record_of(bench)[-1] == ("ended", "Bea")


def test_the_table_is_told_anew_from_the_ledger(bench: Bench) -> None:
    start(bench, DOWN)
    do(bench, "plan.step_done", step=1)
    do(bench, "plan.pause", reason="feeding")
    do(bench, "plan.resume")
    before = the_plan(bench)
    store = bench.worker.store
    with store.transaction() as connection:
        assert plans.rebuild(connection) == 1
    after = the_plan(bench)
    assert (after.tank, after.started_at, after.ended_at) == (before.tank, before.started_at, before.ended_at)
    assert to_record(after.state) == to_record(before.state)
