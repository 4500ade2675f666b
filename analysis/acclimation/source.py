"""Source waters: what may be added, by how much, and whether a person has released it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from datetime import datetime
from typing import Final

import numpy as np

from analysis.errors import InvalidInputError

NAN: Final = float("nan")
SEAWATER: Final = "seawater"
SODIUM_CHLORIDE: Final = "sodium-chloride"
CHLORINE_FREE_MG_L: Final = 0.0
RELEASED_WITHIN_K: Final = 2.0
RELEASED_WITHIN_PH: Final = 0.5
"""A source that has changed more than this since its release is closed again. Common practice."""


@dataclass(frozen=True, slots=True)
class Release:
    """A person's word that a source water may be used.

    Parameters
    ----------
    by : str
        Who released it.
    valid_until : datetime
        Aware.
    chlorine_mg_L : float
        Total residual chlorine measured; anything above 0 keeps the source closed. [mg/L]
    temperature_degC, ph : float
        As measured for the release; NaN where not measured.
    ions_mg_L : Mapping of str to float
        For the gates that ask for one, for example ``{"chloride": 150}``. [mg/L]
    """

    by: str
    valid_until: datetime
    chlorine_mg_L: float = NAN
    temperature_degC: float = NAN
    ph: float = NAN
    ions_mg_L: Mapping[str, float] = field(default_factory=dict)

    def __post_init__(self) -> None:
        if not self.by.strip():
            raise InvalidInputError("release of a source water", found=self.by, allowed="the name of the person")
        if self.valid_until.tzinfo is None:
            raise InvalidInputError("valid_until", found=self.valid_until, allowed="a time with its zone")

    def obstacle(self, now: datetime) -> str:
        """Return why the release does not hold at *now*; empty where it does."""
        if now > self.valid_until:
            return f"its release by {self.by} ended {self.valid_until:%Y-%m-%d %H:%M}"
        if np.isnan(self.chlorine_mg_L):
            return "chlorine was not measured"
        if self.chlorine_mg_L > CHLORINE_FREE_MG_L:
            return f"chlorine {self.chlorine_mg_L:g} mg/L: it must be 0"
        return ""


@dataclass(frozen=True, slots=True)
class SourceWater:
    """Water that can be added.

    Parameters
    ----------
    name : str
        As the site calls it.
    salinity : float
        Practical salinity in sea water, g/kg in other kinds.
    temperature_degC : float
        [degC]
    kind : str
        ``seawater`` (and its dilutions) or ``sodium-chloride``.
    ph : float
        NaN where not known.
    max_L_per_h : float
        Highest flow; infinite where nothing limits it. [L/h]
    available_L : float
        What there is of it. [L]
    release : Release or None
        None: nobody has released it yet.
    """

    name: str
    salinity: float
    temperature_degC: float
    kind: str = SEAWATER
    ph: float = NAN
    max_L_per_h: float = float("inf")
    available_L: float = float("inf")
    release: Release | None = None

    def __post_init__(self) -> None:
        where = f"source {self.name!r}"
        if not self.name.strip():
            raise InvalidInputError("name of a source", found=self.name, allowed="a word")
        if not (np.isfinite(self.salinity) and 0.0 <= self.salinity <= 119.0):
            raise InvalidInputError("salinity", found=self.salinity, allowed="0 to 119", where=where)
        if not (np.isfinite(self.temperature_degC) and -2.0 <= self.temperature_degC <= 45.0):
            raise InvalidInputError("temperature", found=self.temperature_degC, allowed="-2 to 45 degC", where=where)
        if not self.max_L_per_h > 0.0:
            raise InvalidInputError("highest flow", found=self.max_L_per_h, allowed="more than 0 L/h", where=where)
        if not self.available_L >= 0.0:
            raise InvalidInputError("amount there is", found=self.available_L, allowed="0 L or more", where=where)

    def obstacle(self, now: datetime) -> str:
        """Return why the source may not be used at *now*; empty where it may."""
        if self.release is None:
            return "nobody has released it"
        return self.release.obstacle(now) or self._changed_since(self.release)

    def _changed_since(self, release: Release) -> str:
        """Return what is no longer as it was when the source was released; empty where nothing is."""
        if abs(self.temperature_degC - release.temperature_degC) > RELEASED_WITHIN_K:
            return f"it was released at {release.temperature_degC:g} degC and has {self.temperature_degC:g} degC"
        if abs(self.ph - release.ph) > RELEASED_WITHIN_PH:
            return f"it was released at pH {release.ph:g} and has {self.ph:g}"
        return ""


@dataclass(frozen=True, slots=True)
class Salt:
    """Salt to be dissolved before it goes in.

    Parameters
    ----------
    name : str
        As on the bag.
    dry_fraction : float
        Kilograms of salt in a kilogram as weighed: mixes hold water. [kg/kg]
    is_sodium_chloride : bool
        True for plain salt: refused for raising sea water unless overridden.
    litres_per_kg : float
        Water to dissolve a kilogram in, before it goes near the animals. [L/kg]
    available_kg : float
        What there is of it. [kg]
    """

    name: str
    dry_fraction: float = 1.0
    is_sodium_chloride: bool = False
    litres_per_kg: float = 10.0
    available_kg: float = float("inf")

    def __post_init__(self) -> None:
        if not 0.0 < self.dry_fraction <= 1.0:
            raise InvalidInputError(
                f"dry fraction of {self.name!r}", found=self.dry_fraction, allowed="more than 0, at most 1"
            )
        if not self.litres_per_kg >= 5.0:
            raise InvalidInputError(
                f"litres to dissolve a kilogram of {self.name!r}", found=self.litres_per_kg, allowed="5 L/kg or more"
            )
