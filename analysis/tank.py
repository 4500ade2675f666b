"""The well-mixed tank: what goes in, what goes out, and what the water is afterwards.

Plan, follow and simulator share it. Three things are conserved: mass, salt and heat. Salinity, litres and
degrees are not; they follow from the three. Heat is counted as potential enthalpy at the surface, which TEOS-10
makes exact: mass times Conservative Temperature times a constant. Each works on a number or on an array of tanks.

Between two moments all flows are constant, so the law has a closed solution and a step may be as long as the
flows stay as they are: an hour at once gives what 3,600 seconds one by one give. What is not in the closed
solution is the contraction of mixing (0.02 % of the volume at most), which moves the level from step to step.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Final, Protocol, TypeAlias

import gsw
import numpy as np

from analysis.errors import InvalidInputError

if TYPE_CHECKING:
    from numpy.typing import ArrayLike

    from analysis.arrays import FloatArray

ENTHALPY_PER_CT_J_KG_K: Final = 3991.86795711963
"""Potential enthalpy over Conservative Temperature (IOC, SCOR and IAPSO 2010, eq. 3.3.3)."""
SECONDS_PER_HOUR: Final = 3600.0
JOULES_PER_KWH: Final = 3.6e6
LITRES_PER_M3: Final = 1000.0
LEAST_PART_LEFT: Final = 1e-3
"""A step may not leave less of the water than this part: below it nobody would call the tank stirred."""


class Solution(Protocol):
    """Density and heat of one kind of water, from its mass fraction of salt and its temperature."""

    def density_kg_m3(self, absolute_salinity_g_kg: ArrayLike, *, temperature_degC: ArrayLike) -> FloatArray:
        """Return density at the surface. [kg/m3]"""
        ...

    def enthalpy_J_kg(self, absolute_salinity_g_kg: ArrayLike, *, temperature_degC: ArrayLike) -> FloatArray:
        """Return specific enthalpy at the surface, on any fixed zero. [J/kg]"""
        ...

    def temperature_degC(self, absolute_salinity_g_kg: ArrayLike, *, enthalpy_J_kg: ArrayLike) -> FloatArray:
        """Return the temperature of water with this enthalpy. [degC]"""
        ...


class SeaSalt:
    """Seawater, its dilutions and concentrates, by TEOS-10 at the surface.

    For a solution of sodium chloride of the same mass fraction the density is 0.15 % too high at 35 g/kg and
    the heat capacity within 0.5 % (handbook values, from memory): a `Solution` of its own does better.

    References
    ----------
    IOC, SCOR and IAPSO, The international thermodynamic equation of seawater, 2010, sections 2.8 and 3.3.
    """

    def density_kg_m3(self, absolute_salinity_g_kg: ArrayLike, *, temperature_degC: ArrayLike) -> FloatArray:
        """Return density at the surface. [kg/m3]"""
        return np.asarray(gsw.rho_t_exact(absolute_salinity_g_kg, temperature_degC, 0.0))

    def enthalpy_J_kg(self, absolute_salinity_g_kg: ArrayLike, *, temperature_degC: ArrayLike) -> FloatArray:
        """Return potential enthalpy at the surface. [J/kg]"""
        return np.asarray(ENTHALPY_PER_CT_J_KG_K * gsw.CT_from_t(absolute_salinity_g_kg, temperature_degC, 0.0))

    def temperature_degC(self, absolute_salinity_g_kg: ArrayLike, *, enthalpy_J_kg: ArrayLike) -> FloatArray:
        """Return the temperature of water with this potential enthalpy. [degC]"""
        conservative = np.asarray(enthalpy_J_kg) / ENTHALPY_PER_CT_J_KG_K
        return np.asarray(gsw.t_from_CT(absolute_salinity_g_kg, conservative, 0.0))


SEA_SALT: Final = SeaSalt()


@dataclass(frozen=True, slots=True)
class TankWater:
    """The water in a tank, or in each of an array of tanks. Made by `tank_water`; `step` gives the next one.

    Parameters
    ----------
    mass_kg, salt_kg : ndarray
        Mass of the solution, and of the salt in it. [kg]
    temperature_degC : ndarray
        [degC]
    volume_L : ndarray
        [L]
    """

    mass_kg: FloatArray
    salt_kg: FloatArray
    temperature_degC: FloatArray
    volume_L: FloatArray

    @property
    def absolute_salinity_g_kg(self) -> FloatArray:
        """Return the mass fraction of salt. [g/kg]"""
        return np.asarray(1000.0 * self.salt_kg / self.mass_kg)

    @property
    def practical_salinity(self) -> FloatArray:
        """Return practical salinity, for water with the salts of the sea."""
        return np.asarray(gsw.SP_from_SR(self.absolute_salinity_g_kg))

    @property
    def density_kg_m3(self) -> FloatArray:
        """Return mass over volume. [kg/m3]"""
        return np.asarray(LITRES_PER_M3 * self.mass_kg / self.volume_L)


@dataclass(frozen=True, slots=True)
class Inflow:
    """Water that runs in at a constant rate: from a source water, a brine pump, rain, the tank before.

    Parameters
    ----------
    flow_L_h : array_like
        Volume as it comes, at its own salinity and temperature. [L/h]
    absolute_salinity_g_kg : array_like
        [g/kg]
    temperature_degC : array_like
        [degC]
    """

    flow_L_h: ArrayLike
    absolute_salinity_g_kg: ArrayLike
    temperature_degC: ArrayLike


@dataclass(frozen=True, slots=True)
class Exchange:
    """Everything that passes the walls of a tank during a step, all at constant rates.

    Parameters
    ----------
    inflows : tuple of Inflow
        Rain is an inflow without salt.
    outflow_L_h : array_like
        Drained or pumped out, beside what runs over the rim. [L/h]
    evaporation_L_h : array_like
        Litres of fresh water; takes its latent heat along. [L/h]
    dry_salt_kg_h : array_like
        Salt without water, dissolved as it is given, at the temperature of the tank; its heat of solution is
        left out. [kg/h]
    heating_kW : array_like
        Heater, lamp, pump; negative for a chiller. [kW]
    heat_exchange_kW_K : array_like
        Through walls and surface, per kelvin of difference from the surroundings. [kW/K]
    surroundings_degC : array_like
        Temperature that the tank would come to by itself. [degC]
    """

    inflows: tuple[Inflow, ...] = ()
    outflow_L_h: ArrayLike = 0.0
    evaporation_L_h: ArrayLike = 0.0
    dry_salt_kg_h: ArrayLike = 0.0
    heating_kW: ArrayLike = 0.0
    heat_exchange_kW_K: ArrayLike = 0.0
    surroundings_degC: ArrayLike = 20.0


def tank_water(
    volume_L: ArrayLike,
    *,
    absolute_salinity_g_kg: ArrayLike,
    temperature_degC: ArrayLike,
    solution: Solution = SEA_SALT,
) -> TankWater:
    """Return the water of a tank that holds *volume_L* of one salinity and temperature.

    Raises
    ------
    InvalidInputError
        A volume that is not above 0, or a salinity outside 0 to 1000 g/kg.
    """
    volume, salinity, temperature = np.broadcast_arrays(
        np.asarray(volume_L, dtype=np.float64),
        np.asarray(absolute_salinity_g_kg, dtype=np.float64),
        np.asarray(temperature_degC, dtype=np.float64),
    )
    if np.any(volume <= 0.0):
        raise InvalidInputError("volume_L", found=float(volume.min()), allowed="above 0 L")
    if np.any((salinity < 0.0) | (salinity >= 1000.0)):
        raise InvalidInputError("absolute_salinity_g_kg", found=salinity.tolist(), allowed="0 to below 1000 g/kg")
    mass = solution.density_kg_m3(salinity, temperature_degC=temperature) * volume / LITRES_PER_M3
    return TankWater(mass, mass * salinity / 1000.0, temperature.copy(), volume.copy())


def step(
    water: TankWater,
    exchange: Exchange,
    *,
    duration_s: ArrayLike,
    capacity_L: ArrayLike = np.inf,
    solution: Solution = SEA_SALT,
) -> TankWater:
    r"""Return the water after *duration_s* of constant *exchange*, stirred all the time.

    With volume :math:`V(t) = V_0 + at` and constant gains :math:`F`, each of mass, salt and heat obeys
    :math:`dX/dt = F - Q_{out} X/V`, whose solution in :math:`c = X/V` is
    :math:`c = c_0 e^{-b\tau} + F\tau\,\phi(-b\tau)` with :math:`b = Q_{out} + a`,
    :math:`\tau = \ln(V/V_0)/a` and :math:`\phi(x) = (e^x - 1)/x`. At constant volume that is the
    exponential law of flow-through in salt mass.

    Parameters
    ----------
    water : TankWater
        At the beginning.
    exchange : Exchange
        Broadcast with the tanks.
    duration_s : array_like
        0 or more. [s]
    capacity_L : array_like
        Volume at the rim or standpipe; what would rise above it runs over, stirred. [L]
    solution : Solution
        Density and heat of this kind of water.

    Returns
    -------
    TankWater
        At the end. NaN where an input is NaN.

    Raises
    ------
    InvalidInputError
        A negative duration or flow, or a tank that would run empty in this step.
    """
    _check(exchange, duration_s)
    duration_h = np.asarray(duration_s, dtype=np.float64) / SECONDS_PER_HOUR
    gains = _gains(water, exchange, solution=solution)
    capacity = np.maximum(np.asarray(capacity_L, dtype=np.float64), 0.0)
    net = gains.volume_L_h - np.asarray(exchange.outflow_L_h)
    rising = net > 0.0
    until_full = np.where(rising, np.maximum(capacity - water.volume_L, 0.0) / np.where(rising, net, 1.0), np.inf)
    filling_h = np.minimum(duration_h, until_full)
    held = _Held(water.mass_kg, water.salt_kg, gains.heat_J, water.volume_L)
    held = _advanced(held, gains, outflow_L_h=exchange.outflow_L_h, hours=filling_h)
    if np.any(filling_h < duration_h):
        spilling = np.where(rising, gains.volume_L_h, exchange.outflow_L_h)
        held = _advanced(held, gains, outflow_L_h=spilling, hours=duration_h - filling_h)
    return _settled(held, capacity_L=capacity, solution=solution)


@dataclass(frozen=True, slots=True)
class _Gains:
    """What a step adds per hour, and the heat at its beginning."""

    volume_L_h: FloatArray
    mass_kg_h: FloatArray
    salt_kg_h: FloatArray
    heat_J_h: FloatArray
    heat_loss_L_h: FloatArray
    """Loss to the surroundings, as the outflow that would take the same share of heat along."""
    heat_J: FloatArray


@dataclass(frozen=True, slots=True)
class _Held:
    """What the tank holds: the conserved quantities, and the volume that they are spread over."""

    mass_kg: FloatArray
    salt_kg: FloatArray
    heat_J: FloatArray
    volume_L: FloatArray


def _check(exchange: Exchange, duration_s: ArrayLike) -> None:
    named = [
        ("duration_s", duration_s),
        ("outflow_L_h", exchange.outflow_L_h),
        ("evaporation_L_h", exchange.evaporation_L_h),
        ("dry_salt_kg_h", exchange.dry_salt_kg_h),
        ("heat_exchange_kW_K", exchange.heat_exchange_kW_K),
        *((f"inflows[{number}].flow_L_h", inflow.flow_L_h) for number, inflow in enumerate(exchange.inflows)),
    ]
    for name, value in named:
        lowest = value if isinstance(value, float) else np.min(np.asarray(value), initial=0.0)
        if lowest < 0.0:
            raise InvalidInputError(name, found=float(lowest), allowed="0 or more")


def _gains(water: TankWater, exchange: Exchange, *, solution: Solution) -> _Gains:
    salinity, temperature = water.absolute_salinity_g_kg, water.temperature_degC
    enthalpy = solution.enthalpy_J_kg(salinity, temperature_degC=temperature)
    parts = [_inflow_part(inflow, solution=solution) for inflow in exchange.inflows]
    if np.any(exchange.evaporation_L_h):
        parts.append(_evaporation_part(water, exchange, solution=solution))
    if np.any(exchange.dry_salt_kg_h):
        parts.append(_dry_salt_part(water, exchange, enthalpy_J_kg=enthalpy, solution=solution))
    none = np.zeros_like(water.mass_kg)
    volume, mass, salt, heat = (sum((part[n] for part in parts), start=none) for n in range(4))
    heat = heat + np.asarray(exchange.heating_kW) * JOULES_PER_KWH
    loss = none
    if np.any(exchange.heat_exchange_kW_K):
        heat_capacity = solution.enthalpy_J_kg(salinity, temperature_degC=temperature + 1.0) - enthalpy
        still = solution.enthalpy_J_kg(salinity, temperature_degC=exchange.surroundings_degC)
        loss_kg_h = np.asarray(exchange.heat_exchange_kW_K) * JOULES_PER_KWH / heat_capacity
        heat = heat + loss_kg_h * still
        loss = loss_kg_h * water.volume_L / water.mass_kg
    return _Gains(volume, mass, salt, heat, loss, enthalpy * water.mass_kg)


_Part: TypeAlias = "tuple[FloatArray, FloatArray, FloatArray, FloatArray]"
"""Volume [L/h], mass [kg/h], salt [kg/h] and heat [J/h] of one thing that goes in."""


def _inflow_part(inflow: Inflow, *, solution: Solution) -> _Part:
    salinity, temperature = inflow.absolute_salinity_g_kg, inflow.temperature_degC
    flow_L_h = np.asarray(inflow.flow_L_h, dtype=np.float64)
    mass = flow_L_h * solution.density_kg_m3(salinity, temperature_degC=temperature) / LITRES_PER_M3
    heat = mass * solution.enthalpy_J_kg(salinity, temperature_degC=temperature)
    return flow_L_h, mass, mass * np.asarray(salinity) / 1000.0, heat


def _evaporation_part(water: TankWater, exchange: Exchange, *, solution: Solution) -> _Part:
    temperature = water.temperature_degC
    flow_L_h = -np.asarray(exchange.evaporation_L_h, dtype=np.float64)
    mass = flow_L_h * solution.density_kg_m3(0.0, temperature_degC=temperature) / LITRES_PER_M3
    liquid = solution.enthalpy_J_kg(0.0, temperature_degC=temperature)
    latent = gsw.latentheat_evap_t(water.absolute_salinity_g_kg, temperature)
    return flow_L_h, mass, np.zeros_like(mass), mass * (liquid + latent)


def _dry_salt_part(water: TankWater, exchange: Exchange, *, enthalpy_J_kg: FloatArray, solution: Solution) -> _Part:
    salinity = water.absolute_salinity_g_kg
    mass = np.asarray(exchange.dry_salt_kg_h, dtype=np.float64)
    slope = solution.enthalpy_J_kg(salinity + 1.0, temperature_degC=water.temperature_degC) - enthalpy_J_kg
    return np.zeros_like(mass), mass, mass, mass * (enthalpy_J_kg + (1000.0 - salinity) * slope)


def _advanced(held: _Held, gains: _Gains, *, outflow_L_h: ArrayLike, hours: FloatArray) -> _Held:
    outflow = np.asarray(outflow_L_h, dtype=np.float64)
    growth = gains.volume_L_h - outflow
    volume = held.volume_L + growth * hours
    if np.any(volume <= LEAST_PART_LEFT * held.volume_L):
        raise InvalidInputError(
            "outflow_L_h",
            found=outflow.tolist(),
            allowed=f"flows and a duration that leave water in the tank, which holds {held.volume_L.tolist()} L",
        )
    tau = hours / held.volume_L * _log1p_over(growth * hours / held.volume_L)
    rate = outflow + growth
    kept, gained = _decay(rate * tau, tau=tau, start_L=held.volume_L, end_L=volume)
    has_loss = bool(np.any(gains.heat_loss_L_h))
    heat_kept, heat_gained = (
        _decay((rate + gains.heat_loss_L_h) * tau, tau=tau, start_L=held.volume_L, end_L=volume)
        if has_loss
        else (kept, gained)
    )
    return _Held(
        mass_kg=held.mass_kg * kept + gains.mass_kg_h * gained,
        salt_kg=held.salt_kg * kept + gains.salt_kg_h * gained,
        heat_J=held.heat_J * heat_kept + gains.heat_J_h * heat_gained,
        volume_L=np.asarray(volume),
    )


def _decay(
    turnovers: FloatArray, *, tau: FloatArray, start_L: FloatArray, end_L: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Return what becomes of one unit held at the start, and of one unit an hour gained on the way."""
    lost = np.expm1(-turnovers)
    gained = np.divide(-lost, turnovers, out=np.ones_like(lost), where=turnovers != 0.0)
    return np.asarray(end_L / start_L * (1.0 + lost)), np.asarray(end_L * tau * gained)


def _settled(held: _Held, *, capacity_L: FloatArray, solution: Solution) -> TankWater:
    salinity = 1000.0 * held.salt_kg / held.mass_kg
    temperature = solution.temperature_degC(salinity, enthalpy_J_kg=held.heat_J / held.mass_kg)
    volume = LITRES_PER_M3 * held.mass_kg / solution.density_kg_m3(salinity, temperature_degC=temperature)
    # What has expanded above the rim runs over.
    part_kept = np.minimum(1.0, capacity_L / volume)
    return TankWater(
        mass_kg=np.asarray(held.mass_kg * part_kept),
        salt_kg=np.asarray(held.salt_kg * part_kept),
        temperature_degC=np.asarray(temperature),
        volume_L=np.asarray(volume * part_kept),
    )


def _log1p_over(x: FloatArray) -> FloatArray:
    """Return ln(1 + x) / x, and 1 at 0."""
    return np.asarray(np.divide(np.log1p(x), x, out=np.ones_like(x), where=x != 0.0))
