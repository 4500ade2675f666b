"""Continuous flow-through: which flow from when to when, changed by a person on the hour.

A flow is chosen so that it could go on for the whole window of every limit without breaking it. The flow of a
section is constant, the tank follows the exponential law in salt mass (`analysis.tank`), and a section that is
stopped or changed up to the allowed lateness too late still keeps every limit.
"""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING, Final

import numpy as np

from analysis.acclimation.problem import direct_blend, is_reachable
from analysis.acclimation.scenarios import NOMINAL, ScenarioTank, mixed_ph
from analysis.acclimation.stepping import Move, Place, Schedule, next_working_minute, rounded_litres
from analysis.acclimation.task import nice_step
from analysis.tank import Exchange, Inflow, step

if TYPE_CHECKING:
    from analysis.acclimation.problem import Problem
    from analysis.acclimation.windows import Windows
    from analysis.arrays import BoolArray, FloatArray, IntArray

SECTION_MIN: Final = 60.0
"""A person changes the flow at most this often where the hour governs. [min]"""
DAY_SECTION_MIN: Final = 360.0
SAMPLE_MIN: Final = 10.0
PROBES: Final = 48
HIGHEST_TURNOVER_PER_H: Final = 1.0
HORIZON_MIN: Final = 60.0 * 24.0 * 90.0
MOST_SECTIONS: Final = 400


def flowed(
    tank: ScenarioTank, problem: Problem, *, flow_L_min: FloatArray, minutes: FloatArray, count: bool = True
) -> ScenarioTank:
    """Return the tank after a constant flow through it, as much running over as runs in.

    Parameters
    ----------
    tank : ScenarioTank
        Arrays of shape (scenarios,).
    problem : Problem
        Whose sources flow.
    flow_L_min : ndarray, shape (candidates, sources)
        [L/min]
    minutes : ndarray, shape (candidates,)
        How long. [min]
    count : bool
        False for a look that is no work of the search.

    Returns
    -------
    ScenarioTank
        Arrays of shape (candidates, scenarios).
    """
    if count:
        problem.work.evaluations += int(minutes.size) * problem.scenarios.count
    salinity = problem.sources.absolute_salinity_g_kg
    inflows = tuple(
        Inflow(60.0 * flow_L_min[:, n, np.newaxis], salinity[n], source.temperature_degC)
        for n, source in enumerate(problem.task.sources)
    )
    total = 60.0 * flow_L_min.sum(axis=1)[:, np.newaxis]
    water = step(tank.water, Exchange(inflows=inflows, outflow_L_h=total), duration_s=60.0 * minutes[:, np.newaxis])
    turnovers = (flow_L_min.sum(axis=1) * minutes)[:, np.newaxis] / tank.volume_L
    renewed = -np.expm1(-turnovers)
    share = flow_L_min / np.maximum(flow_L_min.sum(axis=1, keepdims=True), 1e-12)
    ph = mixed_ph(tank, 1.0 - renewed, problem.task.sources, share[:, :, np.newaxis] * renewed[:, np.newaxis, :])
    return replace(tank, water=water, ph=ph)


def flowing(problem: Problem) -> Schedule:
    """Return sections of constant flow that lead to the target as fast as a lasting flow may."""
    place = Place(problem.tank, problem.windows, np.zeros(len(problem.task.sources)))
    moves: list[Move] = []
    minute = next_working_minute(problem, 0.0)
    while not problem.has_arrived(place.tank):
        if not minute <= HORIZON_MIN or len(moves) >= MOST_SECTIONS:
            return Schedule(tuple(moves), has_arrived=False, obstacle=f"it takes more than {HORIZON_MIN / 1440:g} days")
        move = _best_section(problem, place, minute=minute)
        if move is None:
            return Schedule(tuple(moves), has_arrived=False, obstacle=_obstacle(problem, place))
        place = _through(problem, place, move)
        moves.append(move)
        minute = next_working_minute(problem, minute + move.duration_min)
    return Schedule(merged(moves), has_arrived=True)


def merged(moves: list[Move]) -> tuple[Move, ...]:
    """Return *moves* with neighbours of the same flow made one."""
    kept: list[Move] = []
    for move in moves:
        before = kept[-1] if kept else None
        if before is not None and _has_same_flow(before, move):
            kept[-1] = Move(
                before.minute,
                before.duration_min + move.duration_min,
                before.drain_L + move.drain_L,
                tuple(first + second for first, second in zip(before.add_L, move.add_L, strict=True)),
                0.0,
                move.after,
            )
        else:
            kept.append(move)
    return tuple(kept)


def _has_same_flow(first: Move, second: Move) -> bool:
    if abs(first.minute + first.duration_min - second.minute) > 1e-6:
        return False
    flows = [np.array(move.add_L) / move.duration_min for move in (first, second)]
    return bool(np.allclose(flows[0], flows[1], rtol=1e-9, atol=1e-12))


def flow_unit_L_min(problem: Problem) -> float:
    """Return the rounding of a flow: a ten-thousandth of the volume a minute, finer where the day governs."""
    return nice_step(problem.task.vessel.volume_L / (1e4 if problem.limits.governs == "hour" else 1e5))


def _section_min(problem: Problem) -> float:
    return SECTION_MIN if problem.limits.governs == "hour" else DAY_SECTION_MIN


def _best_section(problem: Problem, place: Place, *, minute: float) -> Move | None:
    unit = flow_unit_L_min(problem)
    length = _section_min(problem)
    blends = problem.blends
    straight = direct_blend(problem, place.tank) if len(problem.task.sources) > 1 else None
    if straight is not None:
        blends = np.vstack([blends, straight])
    most = _most_units(problem, place, blends, unit=unit, length=length)
    units = _most_allowed(problem, place, blends, most, minute=minute, unit=unit, length=length)
    flows = rounded_litres(blends, units, unit)
    lengths = _landing_minutes(problem, place, flows, length=length)
    after = flowed(place.tank, problem, flow_L_min=flows, minutes=lengths)
    before = float(problem.remaining_h(place.tank))
    score = problem.remaining_h(after) - before
    score = np.where((units > 0) & (lengths > 0.0), score / np.maximum(lengths, 1.0), np.inf)
    for number in np.argsort(score, kind="stable"):
        if not score[number] < 0.0:
            return None
        candidate = after.at(int(number))
        if len(problem.task.sources) > 1 and not is_reachable(problem, candidate):
            continue
        litres = flows[number] * lengths[number]
        return Move(
            minute, float(lengths[number]), float(litres.sum()), tuple(float(v) for v in litres), 0.0, candidate
        )
    return None


def _most_units(problem: Problem, place: Place, blends: FloatArray, *, unit: float, length: float) -> IntArray:
    task = problem.task
    flow = np.array([source.max_L_per_h / 60.0 for source in task.sources])
    left = (np.array([source.available_L for source in task.sources]) - place.used_L) / length
    most = np.maximum(np.minimum(flow, left), 0.0)
    with np.errstate(divide="ignore", invalid="ignore"):
        by_source = np.where(blends > 0.0, (most + 1e-9) / blends, np.inf).min(axis=1)
    by_source = np.minimum(by_source, HIGHEST_TURNOVER_PER_H * task.vessel.volume_L / 60.0)
    return np.asarray(np.floor(by_source / unit + 1e-9).astype(np.int64))


def _most_allowed(
    problem: Problem,
    place: Place,
    blends: FloatArray,
    most: IntArray,
    *,
    minute: float,
    unit: float,
    length: float,
) -> IntArray:
    low, high = np.zeros_like(most), most + 1
    marked = place.windows.marked(place.tank, minute=minute, duration_min=0.0)
    count = max(4, PROBES // len(blends))
    while (high - low > 1).any():
        probes = low[:, np.newaxis] + ((high - low)[:, np.newaxis] * np.arange(1, count + 1)) // (count + 1)
        probes = np.clip(probes, np.minimum(low + 1, high - 1)[:, np.newaxis], (high - 1)[:, np.newaxis])
        flows = rounded_litres(np.repeat(blends, count, axis=0), probes.ravel(), unit)
        good = _lasts(problem, place, flows) & _keeps(problem, place, marked, flows, minute=minute, length=length)
        kept = np.logical_and.accumulate(good.reshape(probes.shape) | (probes <= low[:, np.newaxis]), axis=1)
        low = np.where(kept.any(axis=1), np.where(kept, probes, low[:, np.newaxis]).max(axis=1), low)
        high = np.where((~kept).any(axis=1), np.where(~kept, probes, high[:, np.newaxis]).min(axis=1), high)
        high = np.maximum(high, low + 1)
    return low


def _lasts(problem: Problem, place: Place, flows: FloatArray) -> BoolArray:
    """Return True for flows that could go on for the whole window of every limit (and the lateness)."""
    good = np.ones(len(flows), dtype=np.bool_)
    for limit in problem.rolling:
        reach = limit.window_min + problem.task.allowances.late_min
        alone = replace(place.windows, limits=(limit,), marks=()).marked(place.tank, minute=0.0, duration_min=0.0)
        after = flowed(place.tank, problem, flow_L_min=flows, minutes=np.full(len(flows), reach))
        good &= alone.allows(after, minute=0.0)
    return good


def _keeps(
    problem: Problem, place: Place, marked: Windows, flows: FloatArray, *, minute: float, length: float
) -> BoolArray:
    """Return True for flows that keep every limit against what went before, all through the section."""
    good = np.ones(len(flows), dtype=np.bool_)
    if len(marked.marks) < 2:
        return good
    for passed in np.linspace(SAMPLE_MIN, length, 4):
        after = flowed(place.tank, problem, flow_L_min=flows, minutes=np.full(len(flows), passed))
        good &= marked.allows(after, minute=minute + float(passed))
    return good


def _landing_minutes(problem: Problem, place: Place, flows: FloatArray, *, length: float) -> FloatArray:
    """Return how long each flow may run within the section before the nominal water passes the target."""
    target = problem.target
    low, high = np.zeros(len(flows)), np.full(len(flows), length)
    sign = -1.0 if float(place.tank.salinity[NOMINAL]) > target.salinity else 1.0

    def is_past(minutes: FloatArray) -> BoolArray:
        after = flowed(place.tank, problem, flow_L_min=flows, minutes=minutes, count=False)
        past = sign * (after.salinity[:, NOMINAL] - target.salinity) > 0.0
        if problem.has_target_temperature:
            warm = float(place.tank.temperature_degC[NOMINAL])
            sign_K = -1.0 if warm > target.temperature_degC else 1.0
            off_K = sign_K * (after.temperature_degC[:, NOMINAL] - target.temperature_degC)
            past |= off_K > problem.task.tolerance_K
        return np.asarray(past)

    if not is_past(high).any():
        return high
    whole = is_past(high)
    for _ in range(12):
        middle = 0.5 * (low + high)
        past = is_past(middle)
        low, high = np.where(past, low, middle), np.where(past, middle, high)
    return np.where(whole, np.maximum(np.ceil(low), 1.0), length)


def _through(problem: Problem, place: Place, move: Move) -> Place:
    """Return the place after a section, with marks along it."""
    windows = place.windows.marked(place.tank, minute=move.minute, duration_min=0.0)
    flow = np.array([move.add_L]) / move.duration_min
    samples = np.arange(SAMPLE_MIN, move.duration_min, SAMPLE_MIN if move.duration_min <= SECTION_MIN else SECTION_MIN)
    for passed in samples:
        along = flowed(place.tank, problem, flow_L_min=flow, minutes=np.array([passed]), count=False).at(0)
        windows = windows.marked(along, minute=move.minute + float(passed), duration_min=0.0)
    return Place(move.after, windows, place.used_L + np.array(move.add_L))


def _obstacle(problem: Problem, place: Place) -> str:
    unit = flow_unit_L_min(problem)
    flows = rounded_litres(problem.blends, np.ones(len(problem.blends), dtype=np.int64), unit)
    for limit in problem.rolling:
        reach = limit.window_min + problem.task.allowances.late_min
        alone = replace(place.windows, limits=(limit,), marks=()).marked(place.tank, minute=0.0, duration_min=0.0)
        after = flowed(place.tank, problem, flow_L_min=flows, minutes=np.full(len(flows), reach))
        if not alone.allows(after, minute=0.0).any():
            words = f"{limit.limit.name} ({limit.limit.value}; {limit.limit.source})"
            return f"even a flow of {unit:g} L/min breaks the limit {words}"
    return "no flow of these sources brings the water nearer to the target"
