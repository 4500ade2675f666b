"""A plan done for real in the simulated tank, second by second, with everything that may be wrong; and its limits judged
from the published words alone, without the planner's own arithmetic."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import gsw
import numpy as np
from numpy.typing import NDArray

from analysis.acclimation.plan import Plan
from analysis.acclimation.published import PublishedRate, rates
from analysis.acclimation.task import AcclimationTask, Method
from analysis.tank import Exchange, Inflow, TankWater, step, tank_water

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Wrong:
    """What is not as the plan takes it to be."""

    volume_factor: float = 1.0
    source_offset: Mapping[str, float] | None = None
    late_min: Mapping[int, float] | None = None
    """Step number to minutes; the next step is on time again, or begins when the late one is done."""


@dataclass(frozen=True)
class Track:
    """Salinity and temperature each second."""

    salinity: Array
    temperature_degC: Array
    end: TankWater


def replayed(plan: Plan, wrong: Wrong = Wrong(), *, hours_after: float = 1.5) -> Track:
    """Do *plan* in the simulated tank: drain in the first third of a step, fill in the rest; flow-through runs evenly."""
    task = plan.task
    water = tank_water(
        task.vessel.volume_L * wrong.volume_factor,
        absolute_salinity_g_kg=gsw.SR_from_SP(task.start.salinity),
        temperature_degC=task.start.temperature_degC,
    )
    second, salinity, temperature = 0, [float(water.practical_salinity)], [float(water.temperature_degC)]

    def run(exchange: Exchange, seconds: int) -> None:
        nonlocal water, second
        if seconds <= 0:
            return
        lasting = np.arange(1, seconds + 1, dtype=np.float64)
        path = step(water, exchange, duration_s=lasting)
        salinity.extend(path.practical_salinity.tolist())
        temperature.extend(path.temperature_degC.tolist())
        water = step(water, exchange, duration_s=float(seconds))
        second += seconds

    def wait(seconds: int) -> None:
        nonlocal second
        if seconds > 0:
            salinity.extend([salinity[-1]] * seconds)
            temperature.extend([temperature[-1]] * seconds)
            second += seconds

    for planned in plan.steps:
        late = (wrong.late_min or {}).get(planned.number, 0.0)
        wait(round(60 * (planned.minute + late)) - second)
        lasting = round(60 * planned.duration_min)
        if task.method is Method.FLOW:
            run(_filling(task, planned.add, wrong, lasting, outflow=planned.drain_L), lasting)
            continue
        draining = lasting // 3 if planned.drain_L else 0
        if draining:
            run(Exchange(outflow_L_h=planned.drain_L * 3600.0 / draining), draining)
        filling = lasting - draining
        salt = sum(planned.salt.values())
        dry = 1.0 if task.salt is None else task.salt.dry_fraction
        run(_filling(task, planned.add, wrong, filling, salt_kg=salt, dry=dry, temperature=temperature[-1]), filling)
    wait(round(3600 * hours_after))
    return Track(np.array(salinity), np.array(temperature), water)


def _filling(
    task: AcclimationTask,
    add: Mapping[str, float],
    wrong: Wrong,
    seconds: int,
    *,
    outflow: float = 0.0,
    salt_kg: float = 0.0,
    dry: float = 1.0,
    temperature: float = 20.0,
) -> Exchange:
    by_name = {source.name: source for source in task.sources}
    per_h = 3600.0 / seconds
    inflows = [
        Inflow(
            litres * per_h,
            float(gsw.SR_from_SP(max(0.0, by_name[name].salinity + (wrong.source_offset or {}).get(name, 0.0)))),
            by_name[name].temperature_degC,
        )
        for name, litres in add.items()
    ]
    if salt_kg:
        inflows.append(Inflow(salt_kg * (1.0 - dry) * per_h, 0.0, temperature))
    return Exchange(tuple(inflows), outflow_L_h=outflow * per_h, dry_salt_kg_h=salt_kg * dry * per_h)


def worst_share(plan: Plan, track: Track, *, direction: str, governs: str = "hour") -> dict[str, float]:
    """Return, for each limit, the largest change over any of its windows as a share of what it allows."""
    animal, home = plan.task.animal, plan.task.home_salinity
    shares = {"hour": _rate_share(track.salinity, rates(animal, direction=direction, per="h"), 3600)}
    if governs == "day":
        shares["day"] = _rate_share(track.salinity, rates(animal, direction=direction, per="d"), 86_400)
    named = {limit.name: limit for limit in plan.limits}
    allowed_step = float(named["salinity per step"].value.split()[0])
    shares["step"] = _largest_change(track.salinity, 600) / (allowed_step * 1.05)  # printed with two digits
    shares["temperature per hour"] = _largest_change(track.temperature_degC, 3600) / _printed(
        named, "temperature per hour"
    )
    shares["temperature per step"] = _largest_change(track.temperature_degC, 600) / _printed(
        named, "temperature per step"
    )
    assert home >= 0.0
    return shares


def _printed(named: Mapping[str, object], name: str) -> float:
    return float(named[name].value.split()[0])  # type: ignore[attr-defined]


def _largest_change(level: Array, window_s: int) -> float:
    """Return the largest difference between any two seconds up to a window apart."""
    length = min(window_s, level.size - 1)
    sections = np.lib.stride_tricks.sliding_window_view(level, length + 1)[:: max(1, length // 60)]
    return float((sections.max(axis=1) - sections.min(axis=1)).max())


def _rate_share(salinity: Array, published: tuple[PublishedRate, ...], window_s: int) -> float:
    """Return the largest change over a window, in windows of the published rate, by integrating it numerically."""
    grid = np.linspace(0.0, max(120.0, salinity.max()), 400_001)
    rate = np.full(grid.shape, np.nan)
    for row in sorted(published, key=lambda row: row.above):
        inside = grid >= row.above
        # "25 % of the present salinity an hour" leaves 75 % after an hour: the rate is -ln(0.75) of it.
        rate[inside] = -np.log1p(-row.allowed) * grid[inside] if row.kind == "fraction" else row.allowed
    rate = np.maximum(rate, 1e-9)
    needed = np.concatenate([[0.0], np.cumsum(np.diff(grid) * 0.5 * (1.0 / rate[1:] + 1.0 / rate[:-1]))])
    effort = np.interp(salinity, grid, needed)
    reach = min(window_s, effort.size - 1)
    return float(np.abs(effort[reach:] - effort[: effort.size - reach]).max())
