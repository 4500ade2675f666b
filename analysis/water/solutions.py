"""Solutions at the bench: physiological saline, sperm extenders, sampling and transport solutions.

Osmolality of given grams of several solutes, and the recipe for a wanted osmolality. Four words are kept
apart: molality (mol per kilogram of water), molarity (mol per litre of solution), osmolality (osmoles per kilogram
of water: what an osmometer reads and what cells feel) and osmolarity (osmoles per litre).

Salts follow Pitzer's equation, each at the ionic strength of the whole mixture (Young's rule); what does not
dissociate follows the osmotic virial equation with the mean of the two coefficients for unlike substances
(Elliott and others 2007, Cryobiology), the salts' share of it being in Pitzer's equation already. Estimated: have
a new extender measured before it touches eggs or milt.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from difflib import get_close_matches
from types import MappingProxyType
from typing import TYPE_CHECKING, Final

import gsw

from analysis.errors import InvalidInputError
from analysis.water.solutes import PRODUCTS, SOLUTES, WATER_MOLAR_MASS_G_MOL, Dissociation

if TYPE_CHECKING:
    from collections.abc import Mapping

_DEBYE_HUCKEL_AT_0_DEGC: Final = 0.3767
"""Pitzer, Peiper and Busey 1984, table A-1. [kg^0.5/mol^0.5]"""

_HIGHEST_OSMOLALITY_MOSM_KG: Final = 5000.0


@dataclass(frozen=True, slots=True)
class Solution:
    """Several solutes in water.

    Parameters
    ----------
    grams_per_kg_water : mapping of str to float
        For each key of `analysis.water.solutes.PRODUCTS` grams as weighed, into one kilogram of water. [g/kg water]

    Raises
    ------
    InvalidInputError
        If a product is not known, an amount is negative or not finite, or a solute is beyond the molality for
        which its coefficients hold.
    """

    grams_per_kg_water: Mapping[str, float]

    def __post_init__(self) -> None:
        object.__setattr__(self, "grams_per_kg_water", MappingProxyType(dict(self.grams_per_kg_water)))
        for key, grams in self.grams_per_kg_water.items():
            _check_amount(key, grams)
        for key, molality in self.molalities.items():
            highest = SOLUTES[key].highest_molality
            if molality > highest:
                raise InvalidInputError(
                    f"molality of {key}", found=round(molality, 4), allowed=f"up to {highest:g} mol/kg water"
                )

    @property
    def water_kg(self) -> float:
        """Water in all, with what crystallised in the products, for one kilogram poured. [kg]"""
        crystal_g = sum(
            grams / PRODUCTS[key].molar_mass_g_mol * PRODUCTS[key].waters * WATER_MOLAR_MASS_G_MOL
            for key, grams in self.grams_per_kg_water.items()
        )
        return 1.0 + crystal_g / 1000.0

    @property
    def molalities(self) -> dict[str, float]:
        """Moles of each solute per kilogram of water. [mol/kg water]"""
        found: dict[str, float] = {}
        for key, grams in self.grams_per_kg_water.items():
            product = PRODUCTS[key]
            moles = grams / product.molar_mass_g_mol
            found[product.solute] = found.get(product.solute, 0.0) + moles / self.water_kg
        return found

    @property
    def ionic_strength_mol_kg(self) -> float:
        """Half the sum of molality times charge squared over all ions. [mol/kg water]"""
        return sum(
            molality * _strength_per_mole(SOLUTES[key].dissociation) for key, molality in self.molalities.items()
        )

    @property
    def osmolality_mOsm_kg(self) -> float:
        """Osmolality on the freezing-point basis. [mOsm/kg water]"""
        strength = self.ionic_strength_mol_kg
        ions, whole = 0.0, {}
        for key, molality in self.molalities.items():
            dissociation = SOLUTES[key].dissociation
            if dissociation is None:
                whole[key] = molality
            else:
                particles = (dissociation.cations + dissociation.anions) * molality
                ions += particles * _osmotic_coefficient(dissociation, strength)
        alone = sum(whole.values())
        virials = sum(SOLUTES[key].virial * molality for key, molality in whole.items())
        # The mean of two coefficients over all pairs of wholes is their weighted mean times the square.
        return 1000.0 * (ions + alone + virials * (alone + ions))

    def density_kg_m3(self, *, temperature_degC: float = 20.0) -> float:
        """Return density, from the volumes of water and solutes (within 0.2 %). [kg/m3]"""
        mass_kg = 1.0 + sum(self.grams_per_kg_water.values()) / 1000.0
        return 1000.0 * mass_kg / self.volume_L(temperature_degC=temperature_degC)

    def volume_L(self, *, temperature_degC: float = 20.0) -> float:
        """Return the volume of the solution made with one kilogram of water. [L]"""
        solutes_L = sum(
            molality * self.water_kg * SOLUTES[key].volume_cm3_mol / 1000.0 for key, molality in self.molalities.items()
        )
        return self.water_kg * 1000.0 / _water_density(temperature_degC) + solutes_L

    def osmolarity_mOsm_L(self, *, temperature_degC: float = 20.0) -> float:
        """Return osmoles per litre of solution: what labels print, never what an osmometer reads. [mOsm/L]"""
        return self.osmolality_mOsm_kg * self.water_kg / self.volume_L(temperature_degC=temperature_degC)

    def molarities(self, *, temperature_degC: float = 20.0) -> dict[str, float]:
        """Return moles of each solute per litre of solution. [mol/L]"""
        water_kg_L = self.water_kg / self.volume_L(temperature_degC=temperature_degC)
        return {key: molality * water_kg_L for key, molality in self.molalities.items()}

    def grams_per_L(self, *, temperature_degC: float = 20.0) -> dict[str, float]:
        """Return grams of each product, as weighed, in a litre of solution. [g/L]"""
        volume = self.volume_L(temperature_degC=temperature_degC)
        return {key: grams / volume for key, grams in self.grams_per_kg_water.items()}

    @property
    def uncertainty_percent(self) -> float:
        """Of osmolality: 1 % for one solute, 2 % for a mixture, 5 % with a coefficient that is assumed. [%]"""
        if any(SOLUTES[key].is_assumed for key in self.molalities):
            return 5.0
        return 1.0 if len(self.molalities) <= 1 else 2.0

    def times(self, factor: float) -> Solution:
        """Return the solution with every amount multiplied, in the same water."""
        return Solution({key: factor * grams for key, grams in self.grams_per_kg_water.items()})

    def with_more(self, product: str, *, grams_per_kg_water: float) -> Solution:
        """Return the solution with more of one product."""
        amounts = dict(self.grams_per_kg_water)
        amounts[product] = amounts.get(product, 0.0) + grams_per_kg_water
        return Solution(amounts)


def solution_per_litre(grams_per_L: Mapping[str, float], *, temperature_degC: float = 20.0) -> Solution:
    """Return the solution that holds given grams in a litre, made up to the mark at a temperature.

    Parameters
    ----------
    grams_per_L : mapping of str to float
        For each product grams as weighed. [g/L]
    temperature_degC : float
        At which the flask is filled. [degC]

    Raises
    ------
    InvalidInputError
        As `Solution`, or if the solutes leave no room for water.
    """
    taken_L = 0.0
    for key, grams in grams_per_L.items():
        _check_amount(key, grams)
        product = PRODUCTS[key]
        moles = grams / product.molar_mass_g_mol
        crystal_L = product.waters * WATER_MOLAR_MASS_G_MOL / _water_density(temperature_degC)
        taken_L += moles * (SOLUTES[product.solute].volume_cm3_mol / 1000.0 + crystal_L)
    water_kg = (1.0 - taken_L) * _water_density(temperature_degC) / 1000.0
    if water_kg <= 0.2:
        raise InvalidInputError("grams in a litre", found=sum(grams_per_L.values()), allowed="room for 0.2 kg of water")
    return Solution({key: grams / water_kg for key, grams in grams_per_L.items()})


def scaled_to_osmolality(solution: Solution, *, osmolality_mOsm_kg: float) -> Solution:
    """Return the recipe with the same proportions and a wanted osmolality.

    Raises
    ------
    InvalidInputError
        If the osmolality is not within 0 to 5000 mOsm/kg, the recipe holds nothing, or it would be beyond the
        molality for which a coefficient holds.
    """
    _check_wanted(osmolality_mOsm_kg)
    if solution.osmolality_mOsm_kg <= 0.0:
        raise InvalidInputError("recipe", found="no solutes", allowed="at least one solute to scale")
    factor = 1.0
    for _ in range(60):  # nearly proportional: each step gains a digit or more
        factor *= osmolality_mOsm_kg / solution.times(factor).osmolality_mOsm_kg
    return solution.times(factor)


def topped_up_to_osmolality(solution: Solution, *, product: str, osmolality_mOsm_kg: float) -> Solution:
    """Return the solution with as much more of one product as makes a wanted osmolality.

    Raises
    ------
    InvalidInputError
        If the solution is above it already, or it cannot be reached with this product.
    """
    _check_wanted(osmolality_mOsm_kg)
    _check_amount(product, 0.0)
    missing = osmolality_mOsm_kg - solution.osmolality_mOsm_kg
    if missing < 0.0:
        raise InvalidInputError(
            "wanted osmolality", found=osmolality_mOsm_kg, allowed=f"from {solution.osmolality_mOsm_kg:.1f} mOsm/kg"
        )
    solute = SOLUTES[PRODUCTS[product].solute].dissociation
    particles = 1 if solute is None else solute.cations + solute.anions
    more = 0.0
    for _ in range(60):
        found = solution.with_more(product, grams_per_kg_water=more).osmolality_mOsm_kg
        more += (osmolality_mOsm_kg - found) / (1000.0 * particles) * PRODUCTS[product].molar_mass_g_mol
        more = max(more, 0.0)
    return solution.with_more(product, grams_per_kg_water=more)


def _osmotic_coefficient(salt: Dissociation, ionic_strength: float) -> float:
    """Return Pitzer's osmotic coefficient of one salt at the ionic strength of the mixture."""
    if ionic_strength <= 0.0:
        return 1.0
    root = math.sqrt(ionic_strength)
    charges = salt.cation_charge * salt.anion_charge
    molality = ionic_strength / _strength_per_mole(salt)
    weight = 2.0 * salt.cations * salt.anions / (salt.cations + salt.anions)
    decay = 1.4 if salt.beta2 else 2.0
    pairs = salt.beta0 + salt.beta1 * math.exp(-decay * root) + salt.beta2 * math.exp(-12.0 * root)
    return 1.0 - charges * _DEBYE_HUCKEL_AT_0_DEGC * root / (1.0 + 1.2 * root) + molality * weight * pairs


def _strength_per_mole(salt: Dissociation | None) -> float:
    if salt is None:
        return 0.0
    return 0.5 * (salt.cations * salt.cation_charge**2 + salt.anions * salt.anion_charge**2)


def _water_density(temperature_degC: float) -> float:
    return float(gsw.rho_t_exact(0.0, temperature_degC, 0.0))


def _check_amount(key: str, grams: float) -> None:
    if key not in PRODUCTS:
        near = get_close_matches(key, PRODUCTS, n=1, cutoff=0.4)
        raise InvalidInputError(
            "product", found=key, allowed=", ".join(PRODUCTS) + (f" (nearest: {near[0]})" if near else "")
        )
    if not (math.isfinite(grams) and grams >= 0.0):
        raise InvalidInputError(f"amount of {key}", found=grams, allowed="a number from 0 up, in grams")


def _check_wanted(osmolality_mOsm_kg: float) -> None:
    if not (math.isfinite(osmolality_mOsm_kg) and 0.0 <= osmolality_mOsm_kg <= _HIGHEST_OSMOLALITY_MOSM_KG):
        raise InvalidInputError("wanted osmolality", found=osmolality_mOsm_kg, allowed="0 to 5000 mOsm/kg")
