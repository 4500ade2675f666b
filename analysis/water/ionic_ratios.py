"""Ion ratios that matter to shrimp in inland water, their published thresholds, and the salts that restore them.

None of this can be seen by a conductivity sensor: a potassium deficiency that kills moves conductivity by 1.7 %.
It is said of laboratory analyses only.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from types import MappingProxyType
from typing import TYPE_CHECKING, Final, NamedTuple

from analysis.errors import InvalidInputError
from analysis.water.ions import IONS
from analysis.water.seawater import REFERENCE_SALINITY_PER_SP

if TYPE_CHECKING:
    from collections.abc import Mapping

    from analysis.water.ions import IonAnalysis

SEAWATER_MG_KG_PER_SP: Final[Mapping[str, float]] = MappingProxyType(
    {"Na": 308.0, "K": 11.40, "Mg": 36.68, "Ca": 11.77, "Cl": 552.9, "SO4": 77.5, "HCO3": 3.00, "Sr": 0.23, "Br": 1.92}
)
"""mg/kg of each ion in sea water for one unit of practical salinity (Reference Composition, Millero et al. 2008)."""


@dataclass(frozen=True, slots=True)
class IonRatios:
    """Ratios by mass, and shares of what sea water diluted to the same salinity holds; NaN where an ion is absent.

    Parameters
    ----------
    sodium_per_potassium, magnesium_per_calcium, calcium_per_potassium : float
        [mg/mg]; sea water has 27, 3.1 and 1.0.
    share_of_seawater_percent : mapping of str to float
        For each ion of `SEAWATER_MG_KG_PER_SP`, per litre against sea water of the same dissolved mass. [%]
    """

    sodium_per_potassium: float
    magnesium_per_calcium: float
    calcium_per_potassium: float
    share_of_seawater_percent: Mapping[str, float]


def seawater_equivalent_mg_L(analysis: IonAnalysis, ion: str) -> float:
    """Return what sea water diluted to the same dissolved mass per litre would hold of an ion. [mg/L]"""
    practical_salinity = analysis.dissolved_g_L / REFERENCE_SALINITY_PER_SP
    return SEAWATER_MG_KG_PER_SP[ion] * practical_salinity


def ratios(analysis: IonAnalysis) -> IonRatios:
    """Return the ratios of an analysis."""
    found = analysis.mg_L
    return IonRatios(
        sodium_per_potassium=_ratio(found, "Na", "K"),
        magnesium_per_calcium=_ratio(found, "Mg", "Ca"),
        calcium_per_potassium=_ratio(found, "Ca", "K"),
        share_of_seawater_percent={
            ion: 100.0 * found.get(ion, math.nan) / seawater_equivalent_mg_L(analysis, ion)
            for ion in SEAWATER_MG_KG_PER_SP
        },
    )


def _ratio(found: Mapping[str, float], over: str, under: str) -> float:
    divisor = found.get(under, math.nan)
    return found.get(over, math.nan) / divisor if divisor > 0.0 else math.nan


class Threshold(NamedTuple):
    """A published figure for Pacific white shrimp in inland water.

    Parameters
    ----------
    code : str
        Stable word for screens and records.
    quantity : str
        Key of the quantity judged: an ion in mg/L, a ratio, or ``alkalinity_mg_L_CaCO3``.
    limit : float
        In the unit of the quantity.
    is_upper : bool
        True where more is worse.
    salinity_g_L : tuple of float
        Dissolved mass at which the figure was found or is usually applied. [g/L]
    finding : str
        What was found.
    source : str
        Where, and whether it was looked up.
    """

    code: str
    quantity: str
    limit: float
    is_upper: bool
    salinity_g_L: tuple[float, float]
    finding: str
    source: str


THRESHOLDS: Final = (
    Threshold(
        "potassium_low",
        "K",
        40.0,
        False,
        (2.0, 8.0),
        "at 4 g/L weight gain rises with potassium from 5 to 40 mg/L",
        "Roy et al. 2007, Aquaculture 262, 461 (looked up)",
    ),
    Threshold(
        "potassium_very_low",
        "K",
        10.0,
        False,
        (0.5, 40.0),
        "farms below 10 mg/L gained survival at 50 mg/L; 5 to 15 mg/L went with mortality",
        "Boyd, Thunjai and Boonyaratpalin, globalseafood.org (looked up)",
    ),
    Threshold(
        "sodium_to_potassium_high",
        "Na:K",
        40.0,
        True,
        (0.5, 40.0),
        "at 4 g/L growth is better at 40:1 than at 120:1; sea water has 27:1",
        "Perez-Velazquez et al. 2012, Aquaculture 342, 13 (looked up)",
    ),
    Threshold(
        "magnesium_low",
        "Mg",
        20.0,
        False,
        (2.0, 8.0),
        "at 4 g/L survival 60 % at 10 mg/L of magnesium, 90 to 97 % at 20 to 160",
        "Roy et al. 2007, Aquaculture 262, 461 (looked up)",
    ),
    Threshold(
        "magnesium_to_calcium_low",
        "Mg:Ca",
        1.0,
        False,
        (0.5, 40.0),
        "inland waters with trouble have 0.5 to 1.0, sea water about 3",
        "was.org abstract 156288 (looked up); the limit itself is common practice",
    ),
    Threshold(
        "alkalinity_low",
        "alkalinity_mg_L_CaCO3",
        50.0,
        False,
        (0.0, 40.0),
        "below 50 mg/L as calcium carbonate moulting suffers",
        "Boyd, Thunjai and Boonyaratpalin, globalseafood.org (looked up)",
    ),
)


class Verdict(NamedTuple):
    """One threshold held against an analysis: `found` is NaN where the laboratory did not measure it."""

    threshold: Threshold
    found: float
    is_crossed: bool


def verdicts(analysis: IonAnalysis) -> list[Verdict]:
    """Return every threshold that applies at the salinity of the analysis, crossed or not.

    What was not measured is never crossed: its `found` is NaN.
    """
    quantities = _quantities(analysis)
    applicable = [t for t in THRESHOLDS if t.salinity_g_L[0] <= analysis.dissolved_g_L <= t.salinity_g_L[1]]
    found = [(threshold, quantities.get(threshold.quantity, math.nan)) for threshold in applicable]
    return [Verdict(t, value, value > t.limit if t.is_upper else value < t.limit) for t, value in found]


def _quantities(analysis: IonAnalysis) -> dict[str, float]:
    of = ratios(analysis)
    has_alkalinity = {"HCO3", "CO3"} & set(analysis.amounts)
    alkalinity = analysis.alkalinity_mmol_L * CALCIUM_CARBONATE_MG_MMOL_CHARGE if has_alkalinity else math.nan
    return {
        **analysis.mg_L,
        "Na:K": of.sodium_per_potassium,
        "Mg:Ca": of.magnesium_per_calcium,
        "alkalinity_mg_L_CaCO3": alkalinity,
    }


CALCIUM_CARBONATE_MG_MMOL_CHARGE: Final = 50.043
"""Half the molar mass of calcium carbonate: alkalinity in mg/L as CaCO3 for one mmol/L of charge."""


class Amendment(NamedTuple):
    """A salt as it is sold.

    Parameters
    ----------
    name : str
        Name in the trade with its formula.
    content : mapping of str to float
        Mass of each ion in a gram of the product. [g/g]
    source : str
        Of the content.
    """

    name: str
    content: Mapping[str, float]
    source: str


def _stoichiometric(formula_mass: float, **ions: int) -> dict[str, float]:
    return {ion: count * IONS[ion].molar_mass_g_mol / formula_mass for ion, count in ions.items()}


_BOYD = "aquaculturealliance.org, Revisiting ionic imbalance (looked up)"
_FORMULA = "from the formula, pure salt"
_SULFATE_PER_MAGNESIUM = IONS["SO4"].molar_mass_g_mol / IONS["Mg"].molar_mass_g_mol
_CHLORIDE_PER_POTASSIUM = IONS["Cl"].molar_mass_g_mol / IONS["K"].molar_mass_g_mol
_CHLORIDE_PER_MAGNESIUM = 2.0 * IONS["Cl"].molar_mass_g_mol / IONS["Mg"].molar_mass_g_mol

AMENDMENTS: Final[Mapping[str, Amendment]] = MappingProxyType(
    {
        "potassium-chloride": Amendment(
            "potassium chloride (muriate of potash)", {"K": 0.50, "Cl": 0.50 * _CHLORIDE_PER_POTASSIUM}, _BOYD
        ),
        "potassium-magnesium-sulfate": Amendment(
            "potassium magnesium sulfate, K2SO4.2MgSO4",
            {
                "K": 0.178,
                "Mg": 0.105,
                "SO4": 3.0 * 0.178 / (2.0 * IONS["K"].molar_mass_g_mol) * IONS["SO4"].molar_mass_g_mol,
            },
            _BOYD,
        ),
        "magnesium-sulfate": Amendment(
            "magnesium sulfate, MgSO4.7H2O", {"Mg": 0.0986, "SO4": 0.0986 * _SULFATE_PER_MAGNESIUM}, _BOYD
        ),
        "magnesium-chloride": Amendment(
            "magnesium chloride, MgCl2.6H2O", {"Mg": 0.120, "Cl": 0.120 * _CHLORIDE_PER_MAGNESIUM}, _BOYD
        ),
        "calcium-chloride": Amendment("calcium chloride, CaCl2.2H2O", _stoichiometric(147.01, Ca=1, Cl=2), _FORMULA),
        "calcium-sulfate": Amendment("gypsum, CaSO4.2H2O", _stoichiometric(172.17, Ca=1, SO4=1), _FORMULA),
        "sodium-bicarbonate": Amendment("sodium bicarbonate, NaHCO3", _stoichiometric(84.007, Na=1, HCO3=1), _FORMULA),
    }
)
"""Salts by their key. The contents are those of products as sold, water of crystallisation included."""


class Dose(NamedTuple):
    """Grams of one salt that bring one ion to a wanted amount, and what comes along.

    Parameters
    ----------
    salt : str
        Key of `AMENDMENTS`.
    grams : float
        As weighed. [g]
    added_mg_L : mapping of str to float
        Every ion that the dose adds. [mg/L]
    """

    salt: str
    grams: float
    added_mg_L: Mapping[str, float]


def doses(
    analysis: IonAnalysis,
    *,
    ion: str,
    wanted_mg_L: float,
    volume_L: float,
    dry_fractions: Mapping[str, float] | None = None,
) -> list[Dose]:
    """Return, for each salt that holds an ion, the grams that bring it to a wanted amount.

    Parameters
    ----------
    analysis : IonAnalysis
        The water as it is.
    ion : str
        Ion that is short, such as ``K``.
    wanted_mg_L : float
        For instance `seawater_equivalent_mg_L`. [mg/L]
    volume_L : float
        [L]
    dry_fractions : mapping of str to float, optional
        For each salt its mass without the moisture it has drawn, over its mass as weighed; 1 where not given.
        (Water of crystallisation is in the content already.)

    Returns
    -------
    list of Dose
        Smallest first; empty where the water has enough.

    Raises
    ------
    InvalidInputError
        If no salt holds the ion, or an amount, volume or fraction cannot be.
    """
    salts = {key: salt.content[ion] for key, salt in AMENDMENTS.items() if ion in salt.content}
    if not salts:
        held = sorted({held for salt in AMENDMENTS.values() for held in salt.content})
        raise InvalidInputError("ion to restore", found=ion, allowed=", ".join(held))
    for what, value in (("wanted amount", wanted_mg_L), ("volume", volume_L)):
        if not (math.isfinite(value) and value >= 0.0):
            raise InvalidInputError(what, found=value, allowed="a number from 0 up")
    short_mg_L = wanted_mg_L - analysis.mg_L.get(ion, 0.0)
    if short_mg_L <= 0.0:
        return []
    found = [_dose(key, ion, short_mg_L, volume_L, (dry_fractions or {}).get(key, 1.0)) for key in salts]
    return sorted(found, key=lambda dose: dose.grams)


RESTORED_IONS: Final = ("K", "Mg", "Ca")
"""Ions in which inland waters fall short of sea water, and that farms restore (common practice)."""


def restorations(
    analysis: IonAnalysis,
    *,
    volume_L: float,
    share_percent: float = 100.0,
    dry_fractions: Mapping[str, float] | None = None,
) -> dict[str, list[Dose]]:
    """Return, for each of potassium, magnesium and calcium that is short, what would bring it to sea water's share.

    The doses for one ion are alternatives, not a sum; each brings other ions along (`Dose.added_mg_L`), so the
    water wants a new analysis afterwards. Try it on a few animals first.

    Parameters
    ----------
    analysis : IonAnalysis
        The water as it is.
    volume_L : float
        [L]
    share_percent : float
        Of what sea water diluted to the same dissolved mass would hold; farms often aim lower. [%]
    dry_fractions : mapping of str to float, optional
        As in `doses`.

    Returns
    -------
    dict of str to list of Dose
        By ion; an ion that is not short is left out.

    Raises
    ------
    InvalidInputError
        If the share, a volume or a fraction cannot be.
    """
    if not (math.isfinite(share_percent) and 0.0 < share_percent <= 200.0):
        raise InvalidInputError("share of sea water", found=share_percent, allowed="above 0, up to 200 %")
    found = {
        ion: doses(
            analysis,
            ion=ion,
            wanted_mg_L=0.01 * share_percent * seawater_equivalent_mg_L(analysis, ion),
            volume_L=volume_L,
            dry_fractions=dry_fractions,
        )
        for ion in RESTORED_IONS
    }
    return {ion: alternatives for ion, alternatives in found.items() if alternatives}


def _dose(key: str, ion: str, short_mg_L: float, volume_L: float, dry_fraction: float) -> Dose:
    if not 0.0 < dry_fraction <= 1.0:
        raise InvalidInputError(f"dry fraction of {key}", found=dry_fraction, allowed="above 0, up to 1")
    content = AMENDMENTS[key].content
    grams_per_L = short_mg_L / 1000.0 / content[ion]
    added = {held: 1000.0 * grams_per_L * share for held, share in content.items()}
    return Dose(key, grams_per_L * volume_L / dry_fraction, added)
