"""Salt, water and heat balance of a body of water: blend, replace, add, flow through, evaporate, dissolve.

What is conserved is mass: of salt (mass fraction times mass), of water, and heat (Conservative Temperature
times mass). Litres and practical salinity are not: the shortcut "litres times ppt" is 1.5 % short in a
replacement from 35 to 20 and 2 % short in a flow-through.

Heat content of waters other than sea water is taken as that of sea water with the same mass fraction of salt
(within 0.5 % of the heat capacity up to 40 g/kg; the temperature of a blend then errs by less than 0.05 K for
waters 10 K apart). The heat of dissolving salt and the heat lost by evaporation are left out: in a hatchery
the room or the heater decides the temperature.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING

import gsw
import numpy as np

from analysis.errors import InvalidInputError
from analysis.water.properties import Seawater, WaterKind

if TYPE_CHECKING:
    from numpy.typing import ArrayLike

    from analysis.arrays import FloatArray

_ITERATIONS = 25  # of a contraction by a factor below 0.1: rounding is reached after a dozen


@dataclass(frozen=True, slots=True)
class WaterBody:
    """Some well-mixed water: a tank, or what comes out of a pipe.

    Parameters
    ----------
    volume_L : float
        [L]
    salinity : float
        Practical salinity in sea water, g/kg in other kinds of water.
    temperature_degC : float
        [degC]
    kind : WaterKind
        Sea water if not said otherwise.

    Raises
    ------
    InvalidInputError
        If volume or salinity is negative or not finite, or the temperature outside -2 to 45 degC.
    """

    volume_L: float
    salinity: float
    temperature_degC: float
    kind: WaterKind = field(default_factory=Seawater)

    def __post_init__(self) -> None:
        _require("volume", self.volume_L, low=0.0, unit="L")
        _require("salinity", self.salinity, low=0.0, unit=self.kind.salinity_unit)
        _require("temperature", self.temperature_degC, low=-2.0, high=45.0, unit="degC")
        if not math.isfinite(self.density_kg_m3):
            raise InvalidInputError(
                "salinity", found=self.salinity, allowed=f"within the range of the water model {self.kind.name}"
            )

    @property
    def absolute_salinity_g_kg(self) -> float:
        """Mass fraction of salt. [g/kg solution]"""
        return float(self.kind.absolute_salinity_from_salinity(self.salinity))

    @property
    def density_kg_m3(self) -> float:
        """Density at the surface. [kg/m3]"""
        return float(self.kind.density_kg_m3(salinity=self.salinity, temperature_degC=self.temperature_degC))

    @property
    def mass_kg(self) -> float:
        """Mass of salt and water together. [kg]"""
        return self.volume_L * self.density_kg_m3 / 1000.0

    @property
    def salt_kg(self) -> float:
        """Mass of the salt alone. [kg]"""
        return self.mass_kg * self.absolute_salinity_g_kg / 1000.0

    @property
    def osmolality_mOsm_kg(self) -> float:
        """Osmolality on the freezing-point basis. [mOsm/kg water]"""
        return float(self.kind.osmolality_from_salinity(self.salinity))

    @property
    def conservative_temperature_degC(self) -> float:
        """Heat content per mass, as a temperature (TEOS-10). [degC]"""
        return float(gsw.CT_from_t(self.absolute_salinity_g_kg, self.temperature_degC, 0.0))


@dataclass(frozen=True, slots=True)
class Exchange:
    """Water taken out and put in, and what the body is then.

    Parameters
    ----------
    drain_L : float
        Litres of the body's own water to take out first; a little below 0 where cooling makes room. [L]
    add_L : float
        Litres of the source water to put in, at its own temperature. [L]
    after : WaterBody
        The body afterwards, well mixed.
    """

    drain_L: float
    add_L: float
    after: WaterBody


@dataclass(frozen=True, slots=True)
class Dissolution:
    """Salt to weigh out, and what the body is then.

    Parameters
    ----------
    product_kg : float
        Kilograms of the product as weighed, with the water it holds. [kg]
    after : WaterBody
        The body once everything has dissolved.
    """

    product_kg: float
    after: WaterBody


def blend(*bodies: WaterBody) -> WaterBody:
    """Return all *bodies* poured together.

    Raises
    ------
    InvalidInputError
        If there is no water, or the bodies are of different kinds: two kinds of salt have no common salinity.
    """
    kind = _common_kind(*bodies)
    mass = sum(body.mass_kg for body in bodies)
    _require("total volume", mass, low=np.nextafter(0.0, 1.0), unit="L")
    absolute = 1000.0 * sum(body.salt_kg for body in bodies) / mass
    heat = sum(body.mass_kg * body.conservative_temperature_degC for body in bodies) / mass
    return _body_of_mass(mass, absolute_salinity_g_kg=absolute, conservative_temperature_degC=heat, kind=kind)


def replacement(
    body: WaterBody, *, source: WaterBody, target_salinity: float, held_temperature_degC: float | None = None
) -> Exchange:
    """Return how much to drain and then fill so that the body has the target salinity at its old volume.

    Parameters
    ----------
    body : WaterBody
        The tank as it is.
    source : WaterBody
        The water to fill with; its volume does not matter.
    target_salinity : float
        Between the salinity of the body and that of the source.
    held_temperature_degC : float, optional
        Temperature to which a heater or the room brings the tank; without it the heat balance decides. [degC]

    Returns
    -------
    Exchange
        `after` has the volume of *body*.

    Raises
    ------
    InvalidInputError
        If the target cannot be reached with this source.
    """
    ratio = _added_mass_per_kept_mass(body, source=source, target_salinity=target_salinity)
    heat = (body.conservative_temperature_degC + ratio * source.conservative_temperature_degC) / (1.0 + ratio)
    after = _body_of_volume(body.volume_L, salinity=target_salinity, conservative_temperature_degC=heat, kind=body.kind)
    after = _held(after, held_temperature_degC)
    kept_kg = after.mass_kg / (1.0 + ratio)
    drained_kg = body.mass_kg - kept_kg
    added_kg = after.mass_kg - kept_kg
    return Exchange(
        drain_L=1000.0 * drained_kg / body.density_kg_m3, add_L=1000.0 * added_kg / source.density_kg_m3, after=after
    )


def addition(
    body: WaterBody, *, source: WaterBody, target_salinity: float, held_temperature_degC: float | None = None
) -> Exchange:
    """Return how much of the source water to add, draining nothing; arguments as `replacement`."""
    ratio = _added_mass_per_kept_mass(body, source=source, target_salinity=target_salinity)
    added_kg = body.mass_kg * ratio
    add_L = 1000.0 * added_kg / source.density_kg_m3
    mixed = blend(body, replace(source, volume_L=add_L))
    held = _held(mixed, held_temperature_degC)
    return Exchange(
        drain_L=0.0,
        add_L=add_L,
        after=replace(held, salinity=target_salinity, volume_L=1000.0 * mixed.mass_kg / held.density_kg_m3),
    )


def after_exchange(body: WaterBody, *, source: WaterBody, drain_L: float, add_L: float) -> WaterBody:
    """Return the body after *drain_L* has been taken out and *add_L* of the source put in.

    Raises
    ------
    InvalidInputError
        If more is drained than there is.
    """
    _require("volume to drain", drain_L, low=0.0, high=body.volume_L, unit="L")
    return blend(replace(body, volume_L=body.volume_L - drain_L), replace(source, volume_L=add_L))


def flow_through_time_min(
    body: WaterBody,
    *,
    source: WaterBody,
    target_salinity: float,
    flow_L_min: float,
    held_temperature_degC: float | None = None,
) -> float:
    """Return how long a constant flow through a full, well-mixed tank takes to reach the target.

    The mass of salt per litre, c, follows dc/dt = (Q / V) (c_in - c).

    Parameters
    ----------
    body, source : WaterBody
        The tank, and the water that flows in.
    target_salinity : float
        Between the two, and not that of the source (which is never quite reached).
    flow_L_min : float
        [L/min]
    held_temperature_degC : float, optional
        Temperature at which a heater or the room holds the tank; without it the heat balance decides. [degC]

    Returns
    -------
    float
        [min]

    Raises
    ------
    InvalidInputError
        If the target cannot be reached with this source, or the flow is not positive.
    """
    _require("flow", flow_L_min, low=np.nextafter(0.0, 1.0), unit="L/min")
    _added_mass_per_kept_mass(body, source=source, target_salinity=target_salinity)
    inflow, start = _salt_g_L(source), _salt_g_L(body)
    wanted = _held(replace(body, salinity=target_salinity), held_temperature_degC)
    turnovers = 0.0
    for _ in range(_ITERATIONS):  # the tank's temperature on arrival decides its density there
        remaining = (_salt_g_L(wanted) - inflow) / (start - inflow)
        before, turnovers = turnovers, -math.log(min(1.0, max(remaining, np.finfo(float).tiny)))
        if abs(turnovers - before) <= 1e-14 * turnovers:
            break
        heat = _relaxed(_heat_L(body), towards=_heat_L(source), turnovers=np.asarray(turnovers))
        wanted = _held(_body_with_heat_L(wanted, heat_L=float(heat)), held_temperature_degC)
    return turnovers * body.volume_L / flow_L_min


def flow_through(
    body: WaterBody, *, source: WaterBody, flow_L_min: float, minutes: ArrayLike
) -> tuple[FloatArray, FloatArray]:
    """Return salinity and temperature of a full, well-mixed tank through which source water flows.

    Parameters
    ----------
    body, source : WaterBody
        The tank at the start, and the water that flows in.
    flow_L_min : float
        [L/min]
    minutes : array_like
        Times since the start. [min]

    Returns
    -------
    tuple of ndarray
        Salinity (of the tank's kind of water) and temperature [degC] at those times.

    Raises
    ------
    InvalidInputError
        If the kinds of water differ or the flow is negative.
    """
    _require("flow", flow_L_min, low=0.0, unit="L/min")
    kind = _common_kind(body, source)
    _require("volume", body.volume_L, low=np.nextafter(0.0, 1.0), unit="L")
    turnovers = np.asarray(minutes, dtype=np.float64) * (flow_L_min / body.volume_L)
    salt = _relaxed(_salt_g_L(body), towards=_salt_g_L(source), turnovers=turnovers)
    heat = _relaxed(_heat_L(body), towards=_heat_L(source), turnovers=turnovers)
    density = np.full(turnovers.shape, body.density_kg_m3)
    absolute = temperature = density
    for _ in range(_ITERATIONS):
        absolute = 1000.0 * salt / density
        temperature = np.asarray(gsw.t_from_CT(absolute, 1000.0 * heat / density, 0.0))
        salinity = kind.salinity_from_absolute_salinity(absolute)
        before, density = density, kind.density_kg_m3(salinity=salinity, temperature_degC=temperature)
        if np.allclose(before, density, rtol=1e-14, atol=0.0, equal_nan=True):
            break
    return np.asarray(kind.salinity_from_absolute_salinity(absolute)), temperature


def evaporation(body: WaterBody, *, water_L: float) -> WaterBody:
    """Return the body after *water_L* litres of pure water have left it; its temperature is kept.

    Raises
    ------
    InvalidInputError
        If more water leaves than there is, or the rest is saltier than the water model knows.
    """
    fresh = replace(body, salinity=0.0)
    _require("evaporated water", water_L, low=0.0, high=body.volume_L, unit="L")
    mass = body.mass_kg - water_L * fresh.density_kg_m3 / 1000.0
    _require("water left", mass - body.salt_kg, low=np.nextafter(0.0, 1.0), unit="kg")
    salinity = float(body.kind.salinity_from_absolute_salinity(1000.0 * body.salt_kg / mass))
    rest = replace(body, salinity=salinity)
    return replace(rest, volume_L=1000.0 * mass / rest.density_kg_m3)


def salt_addition(body: WaterBody, *, target_salinity: float, dry_fraction: float = 1.0) -> Dissolution:
    """Return how much salt to dissolve for a target salinity.

    Parameters
    ----------
    body : WaterBody
        The water as it is.
    target_salinity : float
        Above the salinity of the body.
    dry_fraction : float
        Mass of salt in a kilogram of the product; commercial salt mixes hold water (common practice: 0.8 to
        0.95; weigh, dissolve a known amount, measure). [kg/kg]

    Returns
    -------
    Dissolution

    Raises
    ------
    InvalidInputError
        If the target is below the body's salinity, or saltier than the product.
    """
    _require("dry fraction", dry_fraction, low=np.nextafter(0.0, 1.0), high=1.0, unit="kg/kg")
    _require("target salinity", target_salinity, low=body.salinity, unit=body.kind.salinity_unit)
    wanted = replace(body, salinity=target_salinity)
    per_kg = 1000.0 * dry_fraction - wanted.absolute_salinity_g_kg
    if per_kg <= 0.0:
        raise InvalidInputError("target salinity", found=target_salinity, allowed="below that of the product")
    product = body.mass_kg * (wanted.absolute_salinity_g_kg - body.absolute_salinity_g_kg) / per_kg
    return Dissolution(
        product_kg=product, after=replace(wanted, volume_L=1000.0 * (body.mass_kg + product) / wanted.density_kg_m3)
    )


def dissolve(body: WaterBody, *, product_kg: float, dry_fraction: float = 1.0) -> WaterBody:
    """Return the body after *product_kg* of a salt of its own kind has dissolved; its temperature is kept."""
    _require("salt", product_kg, low=0.0, unit="kg")
    _require("dry fraction", dry_fraction, low=np.nextafter(0.0, 1.0), high=1.0, unit="kg/kg")
    mass = body.mass_kg + product_kg
    absolute = 1000.0 * (body.salt_kg + product_kg * dry_fraction) / mass
    salty = replace(body, salinity=float(body.kind.salinity_from_absolute_salinity(absolute)))
    return replace(salty, volume_L=1000.0 * mass / salty.density_kg_m3)


def _require(what: str, found: float, *, low: float, unit: str, high: float = math.inf) -> None:
    if not (math.isfinite(found) and low <= found <= high):
        bounds = f"from {low:g}" if math.isinf(high) else f"{low:g} to {high:g}"
        raise InvalidInputError(what, found=found, allowed=f"{bounds} {'' if unit == '1' else unit}".rstrip())


def _common_kind(*bodies: WaterBody) -> WaterKind:
    names = sorted({body.kind.name for body in bodies})
    if len(names) != 1:
        raise InvalidInputError("kinds of water", found=names, allowed="exactly one kind in one balance")
    return bodies[0].kind


def _added_mass_per_kept_mass(body: WaterBody, *, source: WaterBody, target_salinity: float) -> float:
    _common_kind(body, source)
    low, high = sorted((body.salinity, source.salinity))
    is_inside = low <= target_salinity <= high and target_salinity != source.salinity
    if not is_inside and target_salinity != body.salinity:
        raise InvalidInputError(
            "target salinity",
            found=target_salinity,
            allowed=f"between the body's {body.salinity:g} and the source's {source.salinity:g}, not the source's",
        )
    wanted = replace(body, salinity=target_salinity).absolute_salinity_g_kg
    short_of = body.absolute_salinity_g_kg - wanted
    return 0.0 if short_of == 0.0 else short_of / (wanted - source.absolute_salinity_g_kg)


def _held(body: WaterBody, temperature_degC: float | None) -> WaterBody:
    return body if temperature_degC is None else replace(body, temperature_degC=temperature_degC)


def _salt_g_L(body: WaterBody) -> float:
    return body.density_kg_m3 * body.absolute_salinity_g_kg / 1000.0


def _heat_L(body: WaterBody) -> float:
    return body.density_kg_m3 * body.conservative_temperature_degC / 1000.0


def _relaxed(start: float, *, towards: float, turnovers: FloatArray) -> FloatArray:
    return np.asarray(towards + (start - towards) * np.exp(-turnovers))


def _body_with_heat_L(body: WaterBody, *, heat_L: float) -> WaterBody:
    heat = 1000.0 * heat_L / body.density_kg_m3
    return replace(body, temperature_degC=float(gsw.t_from_CT(body.absolute_salinity_g_kg, heat, 0.0)))


def _body_of_volume(
    volume_L: float, *, salinity: float, conservative_temperature_degC: float, kind: WaterKind
) -> WaterBody:
    absolute = float(kind.absolute_salinity_from_salinity(salinity))
    temperature = float(gsw.t_from_CT(absolute, conservative_temperature_degC, 0.0))
    return WaterBody(volume_L=volume_L, salinity=salinity, temperature_degC=temperature, kind=kind)


def _body_of_mass(
    mass_kg: float, *, absolute_salinity_g_kg: float, conservative_temperature_degC: float, kind: WaterKind
) -> WaterBody:
    salinity = float(kind.salinity_from_absolute_salinity(absolute_salinity_g_kg))
    one_litre = _body_of_volume(
        1.0, salinity=salinity, conservative_temperature_degC=conservative_temperature_degC, kind=kind
    )
    return replace(one_litre, volume_L=mass_kg / one_litre.mass_kg)
