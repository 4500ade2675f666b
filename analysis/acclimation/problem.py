"""A task made ready for the search: limits, scenarios, sources, the blends worth trying, and a count of the work."""

from __future__ import annotations

from dataclasses import dataclass, field
from itertools import product
from typing import TYPE_CHECKING, Final

import numpy as np
from scipy.optimize import nnls

from analysis.acclimation.scenarios import NOMINAL, Scenarios, ScenarioTank, Sources, scenarios_of, sources_of, tank_of
from analysis.acclimation.task import Method
from analysis.acclimation.windows import Mark, Windows

if TYPE_CHECKING:
    from analysis.acclimation.limits import Limits, RollingLimit
    from analysis.acclimation.task import AcclimationTask, Water
    from analysis.arrays import BoolArray, FloatArray

FINE_PARTS: Final = 5
"""Two sources for salinity and temperature together are tried in fifths, and in the blend that leads straight there."""
COARSE_PARTS: Final = 2
SUM_WEIGHT: Final = 1e3


@dataclass(slots=True)
class Work:
    """How often the water of a candidate step was computed (candidates times scenarios)."""

    evaluations: int = 0


@dataclass(frozen=True, slots=True)
class Problem:
    """What a search works on; made by `problem_of`."""

    task: AcclimationTask
    limits: Limits
    rolling: tuple[RollingLimit, ...]
    scenarios: Scenarios
    sources: Sources
    tank: ScenarioTank
    windows: Windows
    blends: FloatArray
    has_target_temperature: bool
    ways: tuple[tuple[RollingLimit, float, float, float], ...]
    """Of each limit that measures the way: itself, the target's level, and its efforts down and up."""
    work: Work = field(default_factory=Work)

    @property
    def target(self) -> Water:
        """The water to arrive at."""
        return self.task.target

    @property
    def is_fall(self) -> bool:
        """True where salinity is to fall."""
        return self.task.target.salinity < self.task.start.salinity

    @property
    def doses_salt(self) -> bool:
        """True where weighed salt, dissolved, is what goes in."""
        return self.task.method is Method.DOSE and self.task.salt is not None

    @property
    def drains(self) -> bool:
        """True where as much is drained as is added."""
        return self.task.method in {Method.STEPS, Method.FLOW}

    @property
    def window_h(self) -> float:
        """The longest window of a salinity limit, which is the time that a full share of it lasts. [h]"""
        return max((limit.window_min for limit in self.rolling if limit.quantity == "salinity"), default=60.0) / 60.0

    def remaining_h(self, tank: ScenarioTank) -> FloatArray:
        """Return the hours that the limits themselves still need from the nominal water to the target.

        Parameters
        ----------
        tank : ScenarioTank
            Any shape whose last axis is the scenario.
        """
        total = np.zeros(tank.water.mass_kg.shape[:-1])
        known: dict[str, FloatArray] = {}
        for limit, target, down, up in self.ways:
            if limit.quantity not in known:
                known[limit.quantity] = tank.level(limit.quantity)[..., NOMINAL]
            level = known[limit.quantity]
            effort = np.where(level > target, limit.down.effort(level) - down, up - limit.up.effort(level))
            total = np.maximum(total, effort * (limit.window_min / 60.0 / limit.cap))
        if "salinity" not in known:  # no rate: any measure of distance will do
            total = np.maximum(total, np.abs(tank.salinity[..., NOMINAL] - self.target.salinity))
        return total

    def is_there(self, tank: ScenarioTank) -> BoolArray:
        """Return True where the nominal water is the target within the tolerances; shape without the scenarios."""
        there = np.abs(tank.salinity[..., NOMINAL] - self.target.salinity) <= self.task.tolerance_salinity
        if self.has_target_temperature:
            off_K = np.abs(tank.temperature_degC[..., NOMINAL] - self.target.temperature_degC)
            there = there & (off_K <= self.task.tolerance_K)
        return np.asarray(there)

    def has_arrived(self, tank: ScenarioTank) -> bool:
        """Return True where the nominal water of one tank is the target within the tolerances."""
        return bool(self.is_there(tank))


def problem_of(task: AcclimationTask, limits: Limits, *, slowness: float = 1.0, work: Work | None = None) -> Problem:
    """Return the problem of a task; *slowness* below 1 keeps every limit with that share of its cap."""
    scenarios = scenarios_of(task)
    tank = tank_of(task, scenarios)
    rolling = tuple(limit for limit in limits.rolling if _can_matter(limit, task, slowness))
    windows = Windows(rolling, task.allowances.late_min, slowness=slowness)
    windows = _with_past(windows, task, scenarios.count)
    wants_temperature = bool(np.isfinite(task.target.temperature_degC))
    return Problem(
        task=task,
        limits=limits,
        rolling=rolling,
        scenarios=scenarios,
        sources=sources_of(task, scenarios),
        tank=tank,
        windows=windows,
        blends=_blends(task, fine=wants_temperature),
        has_target_temperature=wants_temperature,
        ways=_ways(task, rolling, wants_temperature=wants_temperature),
        work=work or Work(),
    )


def _ways(
    task: AcclimationTask, rolling: tuple[RollingLimit, ...], *, wants_temperature: bool
) -> tuple[tuple[RollingLimit, float, float, float], ...]:
    targets = {"salinity": task.target.salinity}
    if wants_temperature:
        targets["temperature_degC"] = task.target.temperature_degC
    ways = []
    for limit in rolling:
        if limit.quantity in targets:
            target = targets[limit.quantity]
            ways.append((limit, target, float(limit.down.effort(target)), float(limit.up.effort(target))))
    return tuple(ways)


def _can_matter(limit: RollingLimit, task: AcclimationTask, slowness: float) -> bool:
    """Return False for a limit that is lifted, on something unknown, or wider than all there is to change."""
    if not np.isfinite(limit.cap):
        return False
    if limit.quantity == "salinity":
        return True
    waters = [task.start, *(past.water for past in task.past), *task.sources]
    levels = [getattr(water, limit.quantity) for water in waters]
    if limit.quantity == "ph" and not np.isfinite(levels).all():
        return False
    span = float(np.nanmax(levels) - np.nanmin(levels))
    return span > limit.down.allowed_at(float(np.nanmin(levels))) * limit.cap * slowness


def _with_past(windows: Windows, task: AcclimationTask, count: int) -> Windows:
    marks = []
    for past in sorted(task.past, key=lambda past: -past.minutes_before):
        levels = np.array([[getattr(past.water, limit.quantity)] * count for limit in windows.limits]).reshape(
            -1, count
        )
        pairs = list(zip(windows.limits, levels, strict=True))
        down = np.array([limit.down.effort(level) for limit, level in pairs]).reshape(levels.shape)
        up = np.array([limit.up.effort(level) for limit, level in pairs]).reshape(levels.shape)
        marks.append(Mark(-past.minutes_before, 0.0, levels, down, up))
    return Windows(windows.limits, windows.late_min, tuple(marks), windows.slowness)


def _blends(task: AcclimationTask, *, fine: bool) -> FloatArray:
    count = len(task.sources)
    if count == 0:
        return np.zeros((1, 0))
    parts = FINE_PARTS if fine and count <= 2 else COARSE_PARTS
    rows = [row for row in product(range(parts + 1), repeat=count) if sum(row) == parts]
    blends = [np.array(row) / parts for row in rows]
    flows = np.array([source.max_L_per_h for source in task.sources])
    if count > 1 and np.isfinite(flows).all():
        blends.append(flows / flows.sum())
    return np.array(blends)


def direct_blend(problem: Problem, tank: ScenarioTank) -> FloatArray | None:
    """Return the blend of sources that leads from the nominal water straight to the target; None if there is none.

    Non-negative least squares (`scipy.optimize.nnls`) on the balances of salt and heat, each in units of its
    tolerance.
    """
    shares, residual = _shares_to_target(problem, tank)
    added = shares[1:]
    if residual > 1.0 or added.sum() <= 0.0:
        return None
    return np.asarray(added / added.sum())


def is_reachable(problem: Problem, tank: ScenarioTank) -> bool:
    """Return True where some mixture of the nominal water and the sources is the target, within the tolerances."""
    return _shares_to_target(problem, tank)[1] <= 1.0


def _shares_to_target(problem: Problem, tank: ScenarioTank) -> tuple[FloatArray, float]:
    task = problem.task
    salinity = [float(tank.salinity[NOMINAL]), *(source.salinity for source in task.sources)]
    rows = [np.array(salinity) / task.tolerance_salinity]
    wanted = [task.target.salinity / task.tolerance_salinity]
    if problem.has_target_temperature:
        heat = [float(tank.temperature_degC[NOMINAL]), *(source.temperature_degC for source in task.sources)]
        rows.append(np.array(heat) / task.tolerance_K)
        wanted.append(task.target.temperature_degC / task.tolerance_K)
    rows.append(np.full(len(salinity), SUM_WEIGHT))
    wanted.append(SUM_WEIGHT)
    matrix, right = np.array(rows), np.array(wanted)
    shares, _ = nnls(matrix, right)
    off = np.abs(matrix[:-1] @ shares - right[:-1])
    return np.asarray(shares), float(off.max())


def highest_litres(problem: Problem, tank: ScenarioTank, used_L: FloatArray) -> FloatArray:
    """Return the most that one step may add of each source: what is left of it, and what flows in the time. [L]"""
    task = problem.task
    left = np.array([source.available_L for source in task.sources]) - used_L
    flow = np.array([source.max_L_per_h for source in task.sources]) * task.grid.longest_step_min / 60.0
    most = np.maximum(np.minimum(left, flow), 0.0)
    if problem.drains:
        return most
    return np.minimum(most, max(task.vessel.max_volume_L - float(tank.volume_L[NOMINAL]), 0.0))
