"""Major ions of a laboratory analysis: amounts, charge balance, molality."""

from __future__ import annotations

import math
from dataclasses import dataclass
from difflib import get_close_matches
from types import MappingProxyType
from typing import TYPE_CHECKING, Final, NamedTuple

from analysis.errors import InvalidInputError

if TYPE_CHECKING:
    from collections.abc import Mapping


class Ion(NamedTuple):
    """An ion as laboratories report it.

    Parameters
    ----------
    molar_mass_g_mol : float
        IUPAC atomic weights. [g/mol]
    charge : int
        Boron is reported as the element and is mostly uncharged boric acid.
    """

    molar_mass_g_mol: float
    charge: int


IONS: Final[Mapping[str, Ion]] = MappingProxyType(
    {
        "Na": Ion(22.98977, 1),
        "K": Ion(39.0983, 1),
        "Mg": Ion(24.305, 2),
        "Ca": Ion(40.078, 2),
        "Sr": Ion(87.62, 2),
        "Cl": Ion(35.453, -1),
        "SO4": Ion(96.0626, -2),
        "HCO3": Ion(61.0168, -1),
        "CO3": Ion(60.0089, -2),
        "Br": Ion(79.904, -1),
        "F": Ion(18.9984, -1),
        "NO3": Ion(62.0049, -1),
        "B": Ion(10.811, 0),
    }
)
"""Ions of an analysis, by the symbol that laboratories print."""

UNITS: Final = ("mg/L", "mmol/L")

LARGEST_CHARGE_ERROR_PERCENT: Final = 10.0
"""Beyond this the analysis is refused: something has been left out or mistyped (common practice)."""

GOOD_CHARGE_ERROR_PERCENT: Final = 5.0
"""Up to this an analysis counts as balanced (common practice of water laboratories)."""

HIGHEST_DISSOLVED_G_L: Final = 120.0


@dataclass(frozen=True, slots=True)
class IonAnalysis:
    """What a laboratory found in a water.

    Parameters
    ----------
    name : str
        The analysis' id: the name of this kind of water.
    amounts : mapping of str to float
        Amount of each ion of `IONS`. [`unit`]
    unit : str
        ``mg/L`` or ``mmol/L``.
    temperature_degC : float
        Temperature to which the litre refers. [degC]
    density_kg_m3 : float, optional
        Of the sample at that temperature; computed where not given. [kg/m3]
    pH : float, optional
        8 where not given (assumed; it matters for waters rich in carbonate only).
    conductivity_mS_cm : float, optional
        Of the sample at that temperature, raw. [mS/cm]
    osmolality_mOsm_kg : float, optional
        Of the sample by freezing point: calibrates the model. [mOsm/kg water]

    Raises
    ------
    InvalidInputError
        If an ion is not known, an amount is negative or not finite, cations or anions are missing, or the charge
        error is beyond 10 %.
    """

    name: str
    amounts: Mapping[str, float]
    unit: str = "mg/L"
    temperature_degC: float = 25.0
    density_kg_m3: float | None = None
    pH: float | None = None  # noqa: N815 - the name of the quantity
    conductivity_mS_cm: float | None = None
    osmolality_mOsm_kg: float | None = None

    def __post_init__(self) -> None:
        object.__setattr__(self, "amounts", MappingProxyType(dict(self.amounts)))
        if self.unit not in UNITS:
            raise InvalidInputError("unit of the analysis", found=self.unit, allowed=", ".join(UNITS), where=self.name)
        for ion, amount in self.amounts.items():
            _check_ion(ion, amount, where=self.name)
        self._check_conditions()
        cations, anions = self.equivalents_mmol_L
        if cations <= 0.0 or anions <= 0.0:
            raise InvalidInputError(
                "ions", found=sorted(self.amounts), allowed="at least one cation and one anion", where=self.name
            )
        if self.dissolved_g_L > HIGHEST_DISSOLVED_G_L:
            raise InvalidInputError(
                "dissolved salt", found=self.dissolved_g_L, allowed="up to 120 g/L", where=self.name
            )
        if abs(self.charge_error_percent) > LARGEST_CHARGE_ERROR_PERCENT:
            raise InvalidInputError(
                "charge balance",
                found=f"{self.charge_error_percent:+.1f} % ({cations:.2f} mmol/L cations, {anions:.2f} anions)",
                allowed="-10 to 10 %: an ion is missing, or an amount or unit is wrong",
                where=self.name,
            )

    def _check_conditions(self) -> None:
        for what, found, low, high, unit in (
            ("temperature of the analysis", self.temperature_degC, 0.0, 45.0, "degC"),
            ("density of the sample", self.density_kg_m3, 980.0, 1300.0, "kg/m3"),
            ("pH", self.pH, 4.0, 11.0, ""),
            ("conductivity of the sample", self.conductivity_mS_cm, 0.01, 300.0, "mS/cm"),
            ("osmolality of the sample", self.osmolality_mOsm_kg, 0.1, 5000.0, "mOsm/kg"),
        ):
            if found is not None and not (math.isfinite(found) and low <= found <= high):
                raise InvalidInputError(what, found=found, allowed=f"{low:g} to {high:g} {unit}", where=self.name)

    @property
    def mmol_L(self) -> dict[str, float]:
        """Amounts in mmol/L."""
        if self.unit == "mmol/L":
            return dict(self.amounts)
        return {ion: amount / IONS[ion].molar_mass_g_mol for ion, amount in self.amounts.items()}

    @property
    def mg_L(self) -> dict[str, float]:
        """Amounts in mg/L."""
        return {ion: amount * IONS[ion].molar_mass_g_mol for ion, amount in self.mmol_L.items()}

    @property
    def dissolved_g_L(self) -> float:
        """Mass of all ions. [g/L]"""
        return sum(self.mg_L.values()) / 1000.0

    @property
    def equivalents_mmol_L(self) -> tuple[float, float]:
        """Equivalents of cations and of anions. [mmol/L of charge]"""
        charges = {ion: IONS[ion].charge * amount for ion, amount in self.mmol_L.items()}
        return sum(c for c in charges.values() if c > 0), -sum(c for c in charges.values() if c < 0)

    @property
    def charge_error_percent(self) -> float:
        """100 * (cations - anions) / (cations + anions), in equivalents. [%]"""
        cations, anions = self.equivalents_mmol_L
        return 100.0 * (cations - anions) / (cations + anions)

    @property
    def is_balanced(self) -> bool:
        """True up to 5 % of charge error."""
        return abs(self.charge_error_percent) <= GOOD_CHARGE_ERROR_PERCENT

    @property
    def balanced_mmol_L(self) -> dict[str, float]:
        """Amounts with the charge error shared out: cations down and anions up by the same fraction, or the reverse."""
        error = 0.01 * self.charge_error_percent
        return {ion: amount * (1.0 - _sign(ion) * error) for ion, amount in self.mmol_L.items()}

    @property
    def alkalinity_mmol_L(self) -> float:
        """Equivalents of bicarbonate and carbonate. [mmol/L of charge]"""
        found = self.mmol_L
        return found.get("HCO3", 0.0) + 2.0 * found.get("CO3", 0.0)

    def molalities(self, *, density_kg_m3: float) -> dict[str, float]:
        """Return balanced amounts per kilogram of water [mol/kg water], from the density of the sample."""
        balanced = self.balanced_mmol_L
        dissolved_kg_m3 = sum(amount * IONS[ion].molar_mass_g_mol for ion, amount in balanced.items()) / 1000.0
        water_kg_L = (density_kg_m3 - dissolved_kg_m3) / 1000.0
        return {ion: amount / 1000.0 / water_kg_L for ion, amount in balanced.items() if amount > 0.0}


def _sign(ion: str) -> int:
    charge = IONS[ion].charge
    return (charge > 0) - (charge < 0)


def _check_ion(ion: str, amount: float, *, where: str) -> None:
    if ion not in IONS:
        near = get_close_matches(ion, IONS, n=1, cutoff=0.3)
        hint = f" (nearest: {near[0]})" if near else ""
        raise InvalidInputError("ion", found=ion, allowed=", ".join(IONS) + hint, where=where)
    if not (math.isfinite(amount) and amount >= 0.0):
        raise InvalidInputError(f"amount of {ion}", found=amount, allowed="a number from 0 up", where=where)


def grams_per_kg_water(molalities: Mapping[str, float]) -> float:
    """Return the mass of all ions per kilogram of water. [g/kg water]"""
    return sum(molality * IONS[ion].molar_mass_g_mol for ion, molality in molalities.items())
