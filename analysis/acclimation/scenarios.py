"""The tank as it is meant to be, and as it may be: one state for every combination of allowed errors.

The first scenario is the plan itself. The others are the corners of what `Allowances` admits: the volume too
small or too large, each source saltier or fresher than said. A limit that holds in all corners holds between
them, because the change that a step makes is monotone in each error.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from itertools import product
from typing import TYPE_CHECKING, Final

import numpy as np

from analysis.acclimation.source import SEAWATER
from analysis.tank import Exchange, Inflow, TankWater, step, tank_water
from analysis.water.seawater import REFERENCE_SALINITY_PER_SP, density_from_absolute_salinity

if TYPE_CHECKING:
    from collections.abc import Sequence

    from analysis.acclimation.source import SourceWater
    from analysis.acclimation.task import AcclimationTask
    from analysis.arrays import FloatArray

MOST_SOURCES_APART: Final = 3
"""With more sources than this their errors are taken to have one sign, else the corners grow out of hand."""
NOMINAL: Final = 0
ONE_HOUR_S: Final = 3600.0


@dataclass(frozen=True, slots=True)
class Scenarios:
    """Errors by scenario.

    Parameters
    ----------
    volume_factor : ndarray, shape (scenarios,)
        True volume over the volume that is written down. [1]
    source_offset : ndarray, shape (scenarios, sources)
        True salinity of a source less the one that is written down.
    """

    volume_factor: FloatArray
    source_offset: FloatArray

    @property
    def count(self) -> int:
        """Number of scenarios."""
        return int(self.volume_factor.size)


def scenarios_of(task: AcclimationTask) -> Scenarios:
    """Return the plan itself and the corners of its allowances."""
    share, offset, sources = task.allowances.volume_share, task.allowances.source_salinity, len(task.sources)
    volumes = (1.0 - share, 1.0 + share) if share > 0.0 else (1.0,)
    signs: list[tuple[float, ...]] = [(0.0,) * sources]
    if offset > 0.0 and sources > MOST_SOURCES_APART:
        signs = [(sign,) * sources for sign in (-1.0, 1.0)]
    elif offset > 0.0 and sources > 0:
        signs = list(product((-1.0, 1.0), repeat=sources))
    corners = [(1.0, (0.0,) * sources), *product(volumes, signs)]
    factors = np.array([factor for factor, _ in corners])
    offsets = np.array([corner for _, corner in corners], dtype=np.float64).reshape(len(corners), sources)
    return Scenarios(factors, offset * offsets)


@dataclass(frozen=True, slots=True)
class ScenarioTank:
    """The tank in every scenario.

    Parameters
    ----------
    water : TankWater
        Arrays whose last axis is the scenario.
    ph : ndarray
        A mass-weighted mean, which real water only roughly follows: a measured pH decides. NaN where unknown.
    is_seawater : bool
        True where `salinity` is practical salinity, else it is g/kg.
    """

    water: TankWater
    ph: FloatArray
    is_seawater: bool

    @property
    def salinity(self) -> FloatArray:
        """Practical salinity in sea water, g/kg in other kinds."""
        per_unit = REFERENCE_SALINITY_PER_SP if self.is_seawater else 1.0
        return np.asarray(self.water.absolute_salinity_g_kg / per_unit)

    @property
    def temperature_degC(self) -> FloatArray:
        """Temperature. [degC]"""
        return self.water.temperature_degC

    @property
    def volume_L(self) -> FloatArray:
        """Volume. [L]"""
        return self.water.volume_L

    def level(self, quantity: str) -> FloatArray:
        """Return ``salinity``, ``temperature_degC`` or ``ph``."""
        if quantity == "salinity":
            return self.salinity
        return self.temperature_degC if quantity == "temperature_degC" else self.ph

    def at(self, candidate: int) -> ScenarioTank:
        """Return the tank of one candidate (first axis)."""
        water = self.water
        picked = TankWater(
            water.mass_kg[candidate],
            water.salt_kg[candidate],
            water.temperature_degC[candidate],
            water.volume_L[candidate],
        )
        return replace(self, water=picked, ph=self.ph[candidate])


@dataclass(frozen=True, slots=True)
class Sources:
    """The sources in every scenario, ready for the balance.

    Parameters
    ----------
    waters : tuple of SourceWater
        As written down.
    absolute_salinity_g_kg : ndarray, shape (sources, scenarios)
        With each scenario's error; never below 0. [g/kg]
    """

    waters: tuple[SourceWater, ...]
    absolute_salinity_g_kg: FloatArray

    def nominal_only(self) -> Sources:
        """Return the sources as written down."""
        return replace(self, absolute_salinity_g_kg=self.absolute_salinity_g_kg[:, :1])


def per_unit(task: AcclimationTask) -> float:
    """Return g/kg for one unit of the task's salinity."""
    return REFERENCE_SALINITY_PER_SP if task.water_kind == SEAWATER else 1.0


def sources_of(task: AcclimationTask, scenarios: Scenarios) -> Sources:
    """Return the task's sources in every scenario."""
    written = np.array([source.salinity for source in task.sources], dtype=np.float64).reshape(-1, 1)
    salinity = np.clip(written + scenarios.source_offset.T, 0.0, 119.0)
    return Sources(task.sources, salinity * per_unit(task))


def tank_of(task: AcclimationTask, scenarios: Scenarios) -> ScenarioTank:
    """Return the tank at the start in every scenario."""
    water = tank_water(
        task.vessel.volume_L * scenarios.volume_factor,
        absolute_salinity_g_kg=task.start.salinity * per_unit(task),
        temperature_degC=task.start.temperature_degC,
    )
    ph = np.full(scenarios.count, task.start.ph)
    return ScenarioTank(water, ph, task.water_kind == SEAWATER)


@dataclass(frozen=True, slots=True)
class Amounts:
    """What one step moves, for every candidate.

    Parameters
    ----------
    drain_L : ndarray, shape (candidates,)
        Of the tank's own water. [L]
    add_L : ndarray, shape (candidates, sources)
        Of each source. [L]
    salt_kg : ndarray, shape (candidates,)
        Of the product as weighed, dissolved beforehand in water drawn from the tank and poured back. [kg]
    dry_fraction : float
        Salt in a kilogram of the product; the rest is water. [kg/kg]
    """

    drain_L: FloatArray
    add_L: FloatArray
    salt_kg: FloatArray
    dry_fraction: float = 1.0


def exchanged(tank: ScenarioTank, sources: Sources, amounts: Amounts) -> ScenarioTank:
    """Return the tank after draining and then adding, for every candidate and scenario.

    Parameters
    ----------
    tank : ScenarioTank
        Arrays of shape (scenarios,).
    sources : Sources
        What can be added.
    amounts : Amounts
        Of each candidate.

    Returns
    -------
    ScenarioTank
        Arrays of shape (candidates, scenarios). A candidate that drains more than nine tenths of a scenario's
        water is NaN there.
    """
    add_L = amounts.add_L
    drained = amounts.drain_L[:, np.newaxis]
    share_kept = 1.0 - drained / tank.volume_L
    share_kept = np.where(share_kept > 0.1, share_kept, np.nan)
    water = tank.water
    kept = TankWater(
        water.mass_kg * share_kept,
        water.salt_kg * share_kept,
        np.broadcast_to(water.temperature_degC, share_kept.shape),
        water.volume_L * share_kept,
    )
    inflows = [
        Inflow(add_L[:, n, np.newaxis], sources.absolute_salinity_g_kg[n], source.temperature_degC)
        for n, source in enumerate(sources.waters)
    ]
    salt: FloatArray | float = 0.0
    if amounts.salt_kg.any():
        salt = amounts.salt_kg[:, np.newaxis] * amounts.dry_fraction
        crystal_water_kg = amounts.salt_kg[:, np.newaxis] * (1.0 - amounts.dry_fraction)
        per_L = density_from_absolute_salinity(0.0, temperature_degC=water.temperature_degC) / 1000.0
        inflows.append(Inflow(crystal_water_kg / per_L, 0.0, water.temperature_degC))
    after = step(kept, Exchange(inflows=tuple(inflows), dry_salt_kg_h=salt), duration_s=ONE_HOUR_S)
    added = np.broadcast_to(add_L[:, :, np.newaxis], (*add_L.shape, kept.volume_L.shape[-1]))
    return replace(tank, water=after, ph=mixed_ph(tank, kept.volume_L, sources.waters, added))


def mixed_ph(tank: ScenarioTank, kept: FloatArray, waters: Sequence[SourceWater], added: FloatArray) -> FloatArray:
    """Return the mean of pH by volume; NaN where the pH of any of the waters is not known.

    Parameters
    ----------
    tank : ScenarioTank
        Before.
    kept : ndarray, shape (candidates, scenarios)
        Volume of the tank's own water.
    waters : sequence of SourceWater
        What was added.
    added : ndarray, shape (candidates, sources, scenarios)
        Volume of each.
    """
    if np.isnan(tank.ph).all() or any(np.isnan(source.ph) for source in waters):
        return np.full(kept.shape, np.nan)
    weighted = kept * tank.ph + sum(added[:, n] * source.ph for n, source in enumerate(waters))
    return np.asarray(weighted / (kept + added.sum(axis=1)))
