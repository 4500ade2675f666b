"""What the animals of a tank are used to, and how their body fluid follows the water: the state that is carried.

Water is taken as constant between two readings: a reading holds until the next valid one. So the state at any
moment does not depend on how the time before was cut. Three things follow the water with their own settling
times: the acclimated osmolality, the body fluid and the temperature the animals are used to.
"""

from __future__ import annotations

import dataclasses
import math
from dataclasses import dataclass, fields
from typing import TYPE_CHECKING, Any

import numpy as np

from analysis.animal.exposure import limits_at as limits_at
from analysis.animal.stage_arrays import StageArrays as StageArrays
from analysis.errors import InvalidInputError

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from numpy.typing import NDArray

    from analysis.arrays import FloatArray, IntArray

SPREAD_MOSM_KG = 300.0
"""Standard uncertainty of the acclimated osmolality where nothing is known: about 10 ppt. Assumed."""


UNKNOWN_ABOVE_MOSM_KG = 100.0
"""Above this uncertainty change and exposure are "not known". Assumed: about 3 ppt."""


@dataclass(frozen=True, slots=True)
class GapRule:
    """How long a reading may stand for the water.

    Parameters
    ----------
    hold_s : float
        Up to here the last reading holds without remark. [s]
    unknown_after_s : float
        After this what the animals are used to is unknown. Between the two its uncertainty grows. [s]
    """

    hold_s: float = 6 * 3600.0
    unknown_after_s: float = 24 * 3600.0


@dataclass(frozen=True, slots=True)
class CohortState:
    """What a row of cohorts carries from one reading to the next, one element a cohort.

    Parameters
    ----------
    acclimated : FloatArray
        Osmolality the animals are used to. [mOsm/kg]
    internal : FloatArray
        Modelled osmolality of the body fluid, NaN where not known. [mOsm/kg]
    exposure : FloatArray
        Part of the published median dose, 1 at the median. Not capped.
    acclimated_degC : FloatArray
        Temperature the animals are used to: the thermal load is their distance from it. [degC]
    osmolality, temperature : FloatArray
        The last valid reading, which holds until the next. [mOsm/kg], [degC]
    uncertainty : FloatArray
        Standard uncertainty of *acclimated*. [mOsm/kg]
    pending_s : FloatArray
        Time since the last valid reading that has not been integrated yet. [s]
    updated_at_us : IntArray
        Time of the last advance, microseconds UTC; the caller's own clock.
    """

    acclimated: FloatArray
    internal: FloatArray
    exposure: FloatArray
    acclimated_degC: FloatArray
    osmolality: FloatArray
    temperature: FloatArray
    uncertainty: FloatArray
    pending_s: FloatArray
    updated_at_us: IntArray

    @classmethod
    def unknown(cls, count: int, *, at_us: int = 0) -> CohortState:
        """Return the state of *count* cohorts of which nothing is known yet."""
        empty = [np.full(count, np.nan) for _ in range(6)]
        return cls(
            acclimated=empty[0], internal=empty[1], exposure=np.zeros(count), acclimated_degC=empty[2], osmolality=empty[3],
            temperature=empty[4], uncertainty=np.full(count, SPREAD_MOSM_KG), pending_s=np.zeros(count),
            updated_at_us=np.full(count, at_us, dtype=np.int64),
        )  # fmt: skip

    @classmethod
    def used_to(
        cls,
        osmolality_mOsm_kg: FloatArray,
        *,
        temperature_degC: FloatArray | None = None,
        uncertainty_mOsm_kg: float = 0.0,
        at_us: int = 0,
    ) -> CohortState:
        """Return the state of cohorts that have lived in water of this osmolality (and temperature) until now."""
        water = np.asarray(osmolality_mOsm_kg, dtype=np.float64)
        warmth = (
            np.full(water.shape, np.nan) if temperature_degC is None else np.asarray(temperature_degC, dtype=np.float64)
        )
        state = cls.unknown(water.size, at_us=at_us)
        return dataclasses.replace(
            state, acclimated=water.copy(), osmolality=water.copy(), temperature=warmth.copy(), acclimated_degC=warmth.copy(),
            uncertainty=np.full(water.shape, uncertainty_mOsm_kg),
        )  # fmt: skip

    def __len__(self) -> int:
        return int(self.acclimated.size)

    def to_dicts(self) -> list[dict[str, float | int | None]]:
        """Return one mapping a cohort that JSON can hold; NaN becomes None."""
        names = [member.name for member in fields(self)]
        columns = [getattr(self, name).tolist() for name in names]
        return [
            {
                name: (None if isinstance(value, float) and math.isnan(value) else value)
                for name, value in zip(names, row, strict=True)
            }
            for row in zip(*columns, strict=True)
        ]

    @classmethod
    def from_dicts(cls, rows: Sequence[Mapping[str, Any]]) -> CohortState:
        """Return the state that `to_dicts` wrote.

        Raises
        ------
        InvalidInputError
            If a row lacks a member.
        """
        columns: dict[str, Any] = {}
        for member in fields(cls):
            missing = [number for number, row in enumerate(rows) if member.name not in row]
            if missing:
                raise InvalidInputError(
                    member.name, found=f"rows {missing} without it", allowed="every member of CohortState"
                )
            if member.name == "updated_at_us":
                columns[member.name] = np.array([int(row[member.name]) for row in rows], dtype=np.int64)
            else:
                values = [np.nan if row[member.name] is None else float(row[member.name]) for row in rows]
                columns[member.name] = np.array(values, dtype=np.float64)
        return cls(**columns)

    def take(self, index: NDArray[np.intp]) -> CohortState:
        """Return the cohorts at *index*, for tanks that were added, emptied or put in another order."""
        columns: dict[str, Any] = {member.name: getattr(self, member.name)[index] for member in fields(self)}
        return CohortState(**columns)


def steady_internal(figures: StageArrays, osmolality_mOsm_kg: FloatArray) -> FloatArray:
    """Return the body fluid that animals settle to in this water, NaN where not known. [mOsm/kg]"""
    return np.asarray(figures.isosmotic + figures.slope * (osmolality_mOsm_kg - figures.isosmotic))
