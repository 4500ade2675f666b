"""What is looked at before any search: released sources, plain salt, whether the target can be reached at all."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING, Final

import numpy as np

from analysis.acclimation.limits import SMOLT_TEMPERATURE_SHIFT_K
from analysis.acclimation.source import SEAWATER, SODIUM_CHLORIDE
from analysis.acclimation.task import Method

if TYPE_CHECKING:
    from analysis.acclimation.journey import Standing
    from analysis.acclimation.limits import Gate, Limits
    from analysis.acclimation.source import SourceWater
    from analysis.acclimation.task import AcclimationTask

FRESH: Final = 2.0
"""Salinity below which a source counts as the fresh water of an ion gate."""


def usable_sources(task: AcclimationTask, *, needs_release: bool) -> tuple[tuple[SourceWater, ...], tuple[str, ...]]:
    """Return the sources that may be used at the start of the task, and words on those left out."""
    kept, words = [], []
    for source in task.sources:
        obstacle = source.obstacle(task.begins_at)
        if source.release is None and not needs_release:
            obstacle = ""
        if obstacle:
            words.append(f"Left out: {source.name} ({obstacle}).")
        else:
            kept.append(source)
    return tuple(kept), tuple(words)


def first_obstacle(task: AcclimationTask) -> str:
    """Return what forbids the task whatever the schedule; empty where nothing does."""
    for check in (_plain_salt, _wrong_direction, _out_of_reach):
        words = check(task)
        if words:
            return words
    return ""


def _plain_salt(task: AcclimationTask) -> str:
    if task.plain_salt_reason:
        return ""
    if task.salt is not None and task.salt.is_sodium_chloride and task.water_kind == SEAWATER:
        return (
            f"{task.salt.name} is plain sodium chloride: refused for raising sea water, it lacks potassium, magnesium and "
            "calcium (SRAC2601; BOYD_ION); give a reason to override"
        )
    other = [source.name for source in task.sources if source.kind != task.water_kind]
    if other and task.water_kind == SEAWATER:
        return f"{', '.join(other)}: water of plain sodium chloride is refused for a tank of sea water; give a reason to override"
    if other and not all(source.salinity == 0.0 for source in task.sources if source.kind == SEAWATER):
        return f"{', '.join(other)}: sea water is refused for a tank of {SODIUM_CHLORIDE} water"
    return ""


def _wrong_direction(task: AcclimationTask) -> str:
    if task.method is not Method.DOSE:
        return ""
    if task.target.salinity < task.start.salinity - task.tolerance_salinity:
        return "dosing raises salinity; it cannot bring it down"
    if task.salt is None and not any(source.salinity > task.target.salinity for source in task.sources):
        return f"no brine is saltier than the target {task.target.salinity:g}, and no salt was given"
    return ""


def _out_of_reach(task: AcclimationTask) -> str:
    start, target, near = task.start.salinity, task.target.salinity, task.tolerance_salinity
    doses_salt = task.method is Method.DOSE and task.salt is not None
    levels = [source.salinity for source in task.sources]
    if abs(start - target) > near and not doses_salt:
        if target < start and min(levels) > target + near:
            return f"no source is fresh enough: {target:g} is asked, the freshest has {min(levels):g}"
        if target > start and max(levels) < target - near:
            return f"no source is salty enough: {target:g} is asked, the saltiest has {max(levels):g}"
    return _temperature_out_of_reach(task)


def _temperature_out_of_reach(task: AcclimationTask) -> str:
    wanted, near = task.target.temperature_degC, task.tolerance_K
    if np.isnan(wanted) or (abs(wanted - task.start.temperature_degC) <= near and not task.sources):
        return ""
    temperatures = [task.start.temperature_degC, *(source.temperature_degC for source in task.sources)]
    if not min(temperatures) - near <= wanted <= max(temperatures) + near:
        return (
            f"these waters cannot give {wanted:g} degC: they have {min(temperatures):g} to {max(temperatures):g} degC; warm or "
            "cool a source first"
        )
    return _both_out_of_reach(task)


def _both_out_of_reach(task: AcclimationTask) -> str:
    from analysis.acclimation.limits import Limit, Limits
    from analysis.acclimation.problem import is_reachable, problem_of

    nothing = Limits((), float("inf"), Limit("", "", "", ""), (), "hour")
    problem = problem_of(task, nothing)
    if task.salt is not None or is_reachable(problem, problem.tank):
        return ""
    return (
        f"no blend of these waters has salinity {task.target.salinity:g} and {task.target.temperature_degC:g} degC together; "
        "warm or cool a source, or leave the temperature free"
    )


def opened_gates(task: AcclimationTask, gates: tuple[Gate, ...]) -> tuple[Gate, ...]:
    """Return the gates, those on an ion opened by the release of a fresh source that holds enough of it."""
    return tuple(_opened(task, gate) for gate in gates)


def _opened(task: AcclimationTask, gate: Gate) -> Gate:
    if gate.is_open or np.isnan(gate.least_mg_L):
        return gate
    fresh = [source for source in task.sources if source.salinity < FRESH]
    releases = [source.release for source in fresh if source.release is not None]
    enough = [release for release in releases if release.ions_mg_L.get(gate.kind, 0.0) >= gate.least_mg_L]
    if fresh and len(enough) == len(fresh):
        return replace(gate, confirmed_by=enough[0].by)
    return gate


def needed_yes(task: AcclimationTask, limits: Limits, standing: Standing) -> tuple[str, ...]:
    """Return what a named person must agree to before the plan begins."""
    needed = [
        f"{gate.kind}: {gate.text} ({gate.source})" for gate in opened_gates(task, limits.gates) if not gate.is_open
    ]
    if standing.needs_yes:
        strain = (
            "not known"
            if np.isnan(standing.range_strain)
            else f"{standing.range_strain:.2f} (0.5 is the tolerable limit)"
        )
        needed.append(f"the destination's own strain is {strain}")
    warmer = [abs(source.temperature_degC - task.start.temperature_degC) for source in task.sources]
    if task.animal.startswith("salmo-salar/smolt") and max(warmer, default=0.0) > SMOLT_TEMPERATURE_SHIFT_K:
        needed.append("the temperature shifts by more than 4 K at sea entry (4 to 6 K advised; STAURNES2001)")
    return tuple(needed)
