"""The planner against the exhaustive optimum on small grids of litres and clock times.

The exhaustive search shares nothing with the planner but the task: it mixes with gsw alone, keeps every sequence
of litres on the grid that keeps the limits as they are published, and stops at the first clock time at which any of
them has arrived.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import product

import gsw
import numpy as np
import pytest
from numpy.typing import NDArray

from analysis.acclimation.limits import Limits
from analysis.acclimation.source import SourceWater
from analysis.acclimation.task import AcclimationTask, Grid, Method, Vessel
from tests.analysis.acclimation.tasks import SEA, TAP, limits, override, plan, say, task

Array = NDArray[np.float64]
STEP_MIN = 5.0


@dataclass
class Live:
    """Every sequence that is still possible: water by scenario, and the salinity and temperature it had at each slot."""

    mass: Array
    salt: Array
    heat: Array
    volume: Array
    salinity: Array
    warmth: Array


def hours_needed(rows: tuple[tuple[float, str, float], ...], salinity: Array) -> Array:
    """Return the hours that a rate needs from 0 to a salinity, by its definition; rows: above, kind, allowed."""
    total = np.zeros(salinity.shape)
    edges = [row[0] for row in rows[1:]] + [np.inf]
    for (above, kind, allowed), top in zip(rows, edges, strict=True):
        level = np.clip(salinity, above, top)
        if kind == "fraction":
            total += np.log(level / above) / np.log(1.0 / (1.0 - allowed))
        else:
            total += (level - above) / allowed
    return total


def exhaustive_hours(
    of: AcclimationTask,
    *,
    rate: tuple[tuple[float, str, float], ...],
    step: float,
    litres: float,
    clock_min: float,
    slots: int,
    degrees: tuple[float, float] = (np.inf, np.inf),
    most_live: int = 1_000_000,
) -> float:
    """Return the hours of the best schedule on the grid; infinite where none arrives within *slots* clock times."""
    factors, offsets = _scenarios(of)
    salinity0, warmth0 = of.start.salinity, of.start.temperature_degC
    absolute = gsw.SR_from_SP(salinity0)
    volume = of.vessel.volume_L * factors
    mass = volume * gsw.rho_t_exact(absolute, warmth0, 0.0) / 1000.0
    heat = mass * gsw.CT_from_t(absolute, warmth0, 0.0)
    shape = (1, factors.size)
    live = Live(
        mass.reshape(shape), (mass * absolute / 1000.0).reshape(shape), heat.reshape(shape), volume.reshape(shape),
        np.full((1, 0, factors.size), 0.0), np.full((1, 0, factors.size), 0.0),
    )  # fmt: skip
    choices = _choices(of, litres)
    for slot in range(slots):
        live = _extended(of, live, choices, offsets, rate=rate, step=step, clock_min=clock_min, degrees=degrees)
        assert live.mass.shape[0] <= most_live, f"{live.mass.shape[0]} sequences after {slot + 1} clock times"
        now = gsw.SP_from_SR(1000.0 * live.salt[:, 0] / live.mass[:, 0])
        arrived = np.abs(now - of.target.salinity) <= of.tolerance_salinity
        if np.isfinite(of.target.temperature_degC):
            warm = gsw.t_from_CT(1000.0 * live.salt[:, 0] / live.mass[:, 0], live.heat[:, 0] / live.mass[:, 0], 0.0)
            arrived &= np.abs(warm - of.target.temperature_degC) <= of.tolerance_K
        if arrived.any():
            return (slot * clock_min + STEP_MIN) / 60.0
    return np.inf


def _scenarios(of: AcclimationTask) -> tuple[Array, Array]:
    share, off = of.allowances.volume_share, of.allowances.source_salinity
    corners = [(1.0, (0.0,) * len(of.sources))]
    corners += list(product((1.0 - share, 1.0 + share), product((-off, off), repeat=len(of.sources))))
    return np.array([c[0] for c in corners]), np.array([c[1] for c in corners])


def _choices(of: AcclimationTask, litres: float) -> Array:
    most = int(0.5 * of.vessel.volume_L * (1.0 - of.allowances.volume_share) / litres + 1e-9)
    if of.method is Method.ADD:
        most = round((of.vessel.max_volume_L - of.vessel.volume_L) / litres)
    rows = [row for row in product(range(most + 1), repeat=len(of.sources)) if sum(row) <= most]
    return litres * np.array(rows, dtype=np.float64)


def _extended(
    of: AcclimationTask,
    live: Live,
    choices: Array,
    offsets: Array,
    *,
    rate: tuple[tuple[float, str, float], ...],
    step: float,
    clock_min: float,
    degrees: tuple[float, float],
) -> Live:
    absolute = 1000.0 * live.salt / live.mass
    before = gsw.SP_from_SR(absolute)
    warm = gsw.t_from_CT(absolute, live.heat / live.mass, 0.0)
    salinity = np.concatenate([live.salinity, before[:, None, :]], axis=1)
    warmth = np.concatenate([live.warmth, warm[:, None, :]], axis=1)
    slots = salinity.shape[1]
    kept: list[Live] = []
    for choice in choices:
        drained = 0.0 if of.method is Method.ADD else choice.sum()
        share = 1.0 - drained / live.volume
        mass, salt, heat, volume = live.mass * share, live.salt * share, live.heat * share, live.volume * share
        for n, source in enumerate(of.sources):
            source_absolute = gsw.SR_from_SP(np.maximum(0.0, source.salinity + offsets[:, n]))
            added = choice[n] / 1000.0 * gsw.rho_t_exact(source_absolute, source.temperature_degC, 0.0)
            mass, salt = mass + added, salt + added * source_absolute / 1000.0
            heat = heat + added * gsw.CT_from_t(source_absolute, source.temperature_degC, 0.0)
        after_absolute = 1000.0 * salt / mass
        after, after_warm = gsw.SP_from_SR(after_absolute), gsw.t_from_CT(after_absolute, heat / mass, 0.0)
        volume = 1000.0 * mass / gsw.rho_t_exact(after_absolute, after_warm, 0.0)
        good = np.ones(mass.shape[0], dtype=bool)
        if choice.sum() > 0.0:
            for past in range(slots):
                gap = (slots - 1 - past) * clock_min - STEP_MIN - of.allowances.late_min
                if gap < 60.0 or past == slots - 1:
                    used = np.abs(hours_needed(rate, salinity[:, past]) - hours_needed(rate, after))
                    good &= (used <= 1.0 + 1e-9).all(axis=1)
                    good &= (np.abs(warmth[:, past] - after_warm) <= degrees[0] * (1 + 1e-9)).all(axis=1)
                if gap < 10.0 or past == slots - 1:
                    good &= (np.abs(salinity[:, past] - after) <= step * (1.0 + 1e-9)).all(axis=1)
                    good &= (np.abs(warmth[:, past] - after_warm) <= degrees[1] * (1 + 1e-9)).all(axis=1)
        kept.append(Live(mass[good], salt[good], heat[good], volume[good], salinity[good], warmth[good]))
    return Live(*(np.concatenate([getattr(part, name) for part in kept]) for name in Live.__annotations__))


POSTLARVAE = ((0.0, "absolute", 0.25), (2.0, "fraction", 0.25))
ONE_AN_HOUR = ((0.0, "absolute", 1.0),)


def step_of(found: Limits) -> float:
    """Return the step that the limits allow, unrounded."""
    (rolling,) = [rolling for rolling in found.rolling if rolling.limit.name == "salinity per step"]
    return rolling.down.bands[0].allowed


CASES = {
    "postlarvae 23 to 12, 45 min, 50 L": (task("penaeus-vannamei/pl10", 23.0, 12.0), POSTLARVAE, 50.0, 45.0, 9),
    "postlarvae 23 to 9, 90 min, 50 L": (task("penaeus-vannamei/pl10", 23.0, 9.0), POSTLARVAE, 50.0, 90.0, 7),
    "postlarvae 6 to 2.5, 45 min, 50 L": (task("penaeus-vannamei/pl15-pl20", 6.0, 2.5), POSTLARVAE, 50.0, 45.0, 10),
    "postlarvae 3 to 1.5, 90 min, 50 L": (
        task("penaeus-vannamei/pl15-pl20", 3.0, 1.5, tolerance_salinity=0.1), POSTLARVAE, 50.0, 90.0, 8,
    ),
    "prawns 12 to 8, 45 min, 25 L": (task("macrobrachium-rosenbergii/postlarva", 12.0, 8.0), ONE_AN_HOUR, 25.0, 45.0, 12),
    "prawns 6 to 2, 90 min, 50 L": (task("macrobrachium-rosenbergii/postlarva", 6.0, 2.0), ONE_AN_HOUR, 50.0, 90.0, 7),
    "up 10 to 14, 45 min, 10 L": (task("penaeus-vannamei/pl10", 10.0, 14.0, (SEA,)), ONE_AN_HOUR, 10.0, 45.0, 12),
    "from a pond at 4, 23 to 12, 45 min, 50 L": (
        task("penaeus-vannamei/pl10", 23.0, 12.0, (SourceWater("pond", 4.0, 28.0),)), POSTLARVAE, 50.0, 45.0, 9,
    ),
    "adding to a bag, 30 to 18, 45 min, 1 L": (
        task("penaeus-vannamei/pl10", 30.0, 18.0, (TAP,), vessel=Vessel(10.0, 40.0, "bag"), method=Method.ADD),
        POSTLARVAE, 1.0, 45.0, 7,
    ),
}  # fmt: skip


@pytest.mark.parametrize("name", CASES)
def test_within_two_percent_of_the_exhaustive_optimum(name: str) -> None:
    of, rate, litres, clock, slots = CASES[name]
    of = _on_grid(of, litres, clock)
    found = plan(of)
    best = exhaustive_hours(of, rate=rate, step=step_of(limits(of)), litres=litres, clock_min=clock, slots=slots)
    say(f"{name}: planned {found.total_hours:.3f} h, exhaustive {best:.3f} h")
    assert np.isfinite(best)
    assert found.is_feasible
    assert found.total_hours <= 1.02 * best
    assert found.total_hours >= best - 1e-9  # or the exhaustive search is not exhaustive


def _on_grid(of: AcclimationTask, litres: float, clock: float) -> AcclimationTask:
    from dataclasses import replace

    return replace(of, grid=Grid(litres=litres, clock_min=clock))


WARMING = {
    "one warm and one cold well, 45 min, 50 L": (
        task("penaeus-vannamei/pl10", 24.0, 18.0, (SourceWater("cold well", 0.0, 24.0), SourceWater("warm well", 0.0, 34.0)),
             degC=26.0, target_degC=27.0, tolerance_salinity=0.5),
        50.0, 45.0, 6,
    ),
    "a warm sea and a cold well, 45 min, 50 L": (
        task("penaeus-vannamei/pl10", 26.0, 20.0, (SourceWater("well", 0.0, 25.0), SourceWater("warm sea", 34.0, 31.0)),
             degC=26.0, target_degC=27.0),
        50.0, 45.0, 6,
    ),
}  # fmt: skip


@pytest.mark.slow
@pytest.mark.parametrize("name", WARMING)
def test_blends_for_salinity_and_temperature_within_two_percent(name: str) -> None:
    of, litres, clock, slots = WARMING[name]
    of = _on_grid(of, litres, clock)
    found = plan(of, overrides=[override("stress of the journey", None)])
    best = exhaustive_hours(
        of, rate=POSTLARVAE, step=step_of(limits(of)), litres=litres, clock_min=clock, slots=slots, degrees=(3.0, 1.0)
    )
    say(f"{name}: planned {found.total_hours:.3f} h, exhaustive {best:.3f} h")
    assert np.isfinite(best)
    assert best - 1e-9 <= found.total_hours <= 1.02 * best
