"""What a conductivity sensor is calibrated with: potassium chloride, bottles, standard seawater, dry air."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum
from typing import TYPE_CHECKING, Final

import numpy as np

from analysis.errors import InvalidInputError
from analysis.water import potassium_chloride
from analysis.water.seawater import conductivity_from_practical_salinity, practical_salinity_from_conductivity

if TYPE_CHECKING:
    from numpy.typing import ArrayLike

    from analysis.arrays import FloatArray

STANDARD_SEAWATER_MS_CM: Final = 42.9140
"""Conductivity of seawater of practical salinity 35 at 15 degC on the scale of 1968 (PSS-78)."""

STANDARD_SEAWATER_DEGC: Final = 15.0 / 1.00024
"""That temperature on the scale of 1990."""


class StandardKind(StrEnum):
    """What a sensor is held into."""

    POTASSIUM_CHLORIDE = "potassium-chloride"
    """A solution of known molality."""
    BOTTLE = "bottle"
    """A bought solution with its conductivity at 25 degC on the label: potassium chloride."""
    STANDARD_SEAWATER = "standard-seawater"
    """An ampoule or bottle with its conductivity ratio K15 on the label."""
    DRY_AIR = "dry-air"
    """The clean, dry cell: zero."""


@dataclass(frozen=True, slots=True)
class Standard:
    """A calibration standard.

    Made by `potassium_chloride_standard`, `bottled_standard`, `standard_seawater` or `dry_air`.

    Parameters
    ----------
    kind : StandardKind
    value : float
        Molality [mol/kg], label at 25 degC [mS/cm], K15 [1] or 0, after its kind.
    lot : str
        As printed on the bottle; empty where made on site.
    expires_us : int or None
        End of the day printed on the bottle. [us]
    """

    kind: StandardKind
    value: float
    lot: str = ""
    expires_us: int | None = None

    def conductivity_mS_cm(self, temperature_degC: ArrayLike) -> FloatArray:
        """Return what the standard conducts at its own temperature.

        Parameters
        ----------
        temperature_degC : array_like
            Of the standard, not of the room. [degC]

        Returns
        -------
        ndarray of float64
            NaN outside 0 to 55 degC. [mS/cm]

        References
        ----------
        Potassium chloride: McKee 2009. Standard seawater: PSS-78 from K15.
        """
        temperature = np.asarray(temperature_degC, dtype=np.float64)
        match self.kind:
            case StandardKind.POTASSIUM_CHLORIDE:
                return potassium_chloride.conductivity_from_molality(self.value, temperature_degC=temperature)
            case StandardKind.BOTTLE:
                return potassium_chloride.conductivity_of_labelled_standard(self.value, temperature_degC=temperature)
            case StandardKind.STANDARD_SEAWATER:
                salinity = practical_salinity_from_k15(self.value)
                return conductivity_from_practical_salinity(salinity, temperature_degC=temperature)
        return np.where(np.isfinite(temperature), 0.0, np.nan)


def practical_salinity_from_k15(k15: ArrayLike) -> FloatArray:
    """Return practical salinity from the conductivity ratio to the standard solution at 15 degC (PSS-78)."""
    ratio = np.asarray(k15, dtype=np.float64)
    return practical_salinity_from_conductivity(
        ratio * STANDARD_SEAWATER_MS_CM, temperature_degC=STANDARD_SEAWATER_DEGC
    )


def potassium_chloride_standard(molality_mol_kg: float, *, lot: str = "", expires_us: int | None = None) -> Standard:
    """Return a potassium chloride solution of known molality, 0.0001 to 4.5 mol/kg water."""
    if not 1e-4 <= molality_mol_kg <= potassium_chloride.HIGHEST_MOLALITY:
        raise InvalidInputError("molality of the standard", found=molality_mol_kg, allowed="0.0001 to 4.5 mol/kg")
    return Standard(StandardKind.POTASSIUM_CHLORIDE, molality_mol_kg, lot, expires_us)


def bottled_standard(label_mS_cm: float, *, lot: str = "", expires_us: int | None = None) -> Standard:
    """Return a bought standard with its conductivity at 25 degC on the label, 0.01 to 250 mS/cm."""
    if not 0.01 <= label_mS_cm <= 250.0:
        raise InvalidInputError("label of the standard", found=label_mS_cm, allowed="0.01 to 250 mS/cm at 25 degC")
    return Standard(StandardKind.BOTTLE, label_mS_cm, lot, expires_us)


def standard_seawater(k15: float, *, lot: str = "", expires_us: int | None = None) -> Standard:
    """Return standard seawater with its ratio K15 on the label, 0.2 to 1.2 (practical salinity 6 to 43)."""
    if not 0.2 <= k15 <= 1.2:
        raise InvalidInputError("K15 of the standard", found=k15, allowed="0.2 to 1.2")
    return Standard(StandardKind.STANDARD_SEAWATER, k15, lot, expires_us)


def dry_air() -> Standard:
    """Return the zero point: the clean, dry cell in air."""
    return Standard(StandardKind.DRY_AIR, 0.0)


def standard_of(kind: StandardKind, value: float, *, lot: str = "", expires_us: int | None = None) -> Standard:
    """Return the standard of a kind, checked as its own maker checks it (for records that are read back)."""
    match kind:
        case StandardKind.POTASSIUM_CHLORIDE:
            return potassium_chloride_standard(value, lot=lot, expires_us=expires_us)
        case StandardKind.BOTTLE:
            return bottled_standard(value, lot=lot, expires_us=expires_us)
        case StandardKind.STANDARD_SEAWATER:
            return standard_seawater(value, lot=lot, expires_us=expires_us)
    return dry_air()
