"""Plans on the tanks of a small invented hatchery: made for its first tank, carried out by way of the inbox."""

from __future__ import annotations

from collections.abc import Sequence
from datetime import timedelta
from typing import Any
from zoneinfo import ZoneInfo

from analysis.acclimation.plan import Plan
from analysis.acclimation.record import to_record
from analysis.acclimation.source import Release, SourceWater
from ingest.clock import to_datetime
from ingest.store.plans import TankPlan
from ingest.store.queries import Outcome
from tests.analysis.acclimation import tasks
from tests.harness.hatchery import START_US, Bench, site_text
from tests.ingest.sensor_work import ask, wait_until_time

SHRIMP = "penaeus-vannamei/pl10"
BEGIN = to_datetime(START_US).astimezone(ZoneInfo("Europe/Lisbon"))
RELEASE = Release("Duty", BEGIN + timedelta(days=3), chlorine_mg_L=0.0)
TAP = SourceWater("tap", 0.0, 28.0, release=RELEASE)
PEOPLE = "people:\n" + "".join(
    f"  - {{id: {name.lower()}, name: {name}, role: {role}, channels: [{{kind: push, url_secret: {name.lower()}-push}}]}}\n"
    for name, role in (("Olga", "operator"), ("Bea", "biologist"))
)
READING_S = 60.0


def text(**more: Any) -> str:
    """Return the site file: tank t0 at 20, with postlarvae of shrimp."""
    return site_text(port=1, set_point=more.pop("set_point", 20.0), extra=PEOPLE, **more)


def plan(start: float = 20.0, target: float = 8.0, sources: Sequence[SourceWater] = (TAP,), **more: Any) -> Plan:
    """Return a plan that begins when the test does."""
    return tasks.plan(tasks.task(SHRIMP, start, target, sources, begins_at=more.pop("begins_at", BEGIN), **more))


def as_asked(of: Plan, *, by: str = "Bea") -> dict[str, Any]:
    """Return what a command says of a plan, with every yes."""
    return {"plan": to_record(of), "agreed": dict.fromkeys(of.needs_yes, by)}


def start(bench: Bench, of: Plan, *, actor: str = "Bea", role: str = "biologist", **more: Any) -> Outcome:
    """Let a biologist start a plan on t0."""
    return do(bench, "plan.start", actor=actor, role=role, **(as_asked(of) | more))


def do(bench: Bench, kind: str, *, actor: str = "Olga", role: str = "operator", **body: Any) -> Outcome:
    """Let a person do something about the plan of t0."""
    return ask(bench, kind, "tank/t0", actor=actor, role=role, **body)


def the_plan(bench: Bench) -> TankPlan:
    """Return the newest plan as screens see it."""
    return bench.queries.plans()[-1]


def record_of(bench: Bench) -> list[tuple[str, str]]:
    """Return what was done and by whom."""
    return [(done.what, done.by) for done in the_plan(bench).state.record]


def water_until(bench: Bench, minute: float, salinity: float, *, sensors: Sequence[str] = ("s0",)) -> None:
    """Let the probes of t0 read *salinity* every minute until *minute* after the start, the plan being looked at each time."""
    until_us = START_US + round(minute * 60e6)
    while bench.clock.now_us() < until_us:
        wait_until_time(bench, min(until_us, bench.clock.now_us() + round(READING_S * 1e6)))
        for sensor in sensors:
            bench.read(sensor, bench.clock.now_us(), salinity)
        bench.tick()


def follow_down(bench: Bench, of: Plan, *, steps: int, offset: float = 0.0) -> None:
    """Do the first *steps* steps on time, the water following as the plan expects it but for *offset*."""
    water = of.task.start.salinity
    for step in of.steps[:steps]:
        water_until(bench, step.minute + step.duration_min, water + offset)
        assert do(bench, "plan.step_done", step=step.number).outcome == "applied"
        water = step.salinity
        water_until(bench, step.minute + step.duration_min + 2, water + offset)
