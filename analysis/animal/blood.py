"""Laboratory values of body fluid: what a sample is worth, and the osmoregulatory capacity that follows from it."""

from __future__ import annotations

import dataclasses
import math
from dataclasses import dataclass
from enum import StrEnum
from functools import lru_cache
from typing import TYPE_CHECKING

import numpy as np

from analysis.errors import InvalidInputError
from analysis.water.seawater import (
    osmolality_from_absolute_salinity,
    osmolality_in_situ_from_absolute_salinity,
)

if TYPE_CHECKING:
    from analysis.animal.osmoregulation import CohortState
    from analysis.arrays import FloatArray

STANDARD_TOLERANCE = 0.02
"""Largest share by which an osmometer may miss a standard before its samples are blocked. Common practice: 1-2 %."""
REPLICATE_LIMIT = 0.03
"""Variation of replicates above which a sample is doubted. Common practice."""
MIN_VOLUME_UL = {"freezing point": 2.0, "vapour pressure": 8.0}
"""Smallest usual sample of the methods. Common practice; the maker's manual of the instrument rules."""
MAX_DELAY_S = 600.0
"""Fluid clots and water evaporates: ten minutes, or frozen. Common practice."""


class OsmometerMethod(StrEnum):
    """How osmolality was measured."""

    FREEZING_POINT = "freezing point"
    VAPOUR_PRESSURE = "vapour pressure"


@dataclass(frozen=True, slots=True)
class Standard:
    """A reference solution and what the osmometer read in it. [mOsm/kg]"""

    nominal_mOsm_kg: float
    read_mOsm_kg: float


@dataclass(frozen=True, slots=True)
class BloodSample:
    """One laboratory value of a cohort.

    Parameters
    ----------
    at_us : int
        When the animals were sampled.
    replicates_mOsm_kg : tuple of float
        The osmometer's readings. [mOsm/kg]
    method : OsmometerMethod
        Freezing point or vapour pressure.
    standards : tuple of Standard
        The two that bracket the sample.
    volume_microlitre, delay_s : float
        Sample volume and time from draw to reading; NaN where not noted. [uL], [s]
    is_pooled : bool
        Whether the fluid of several animals was pooled.
    fluid, moult_stage, by : str
        Haemolymph or plasma; the moult stage of a crustacean; who measured.
    """

    at_us: int
    replicates_mOsm_kg: tuple[float, ...]
    method: OsmometerMethod
    standards: tuple[Standard, ...]
    volume_microlitre: float = math.nan
    delay_s: float = math.nan
    is_pooled: bool = False
    fluid: str = "haemolymph"
    moult_stage: str = ""
    by: str = ""


@dataclass(frozen=True, slots=True)
class BloodValue:
    """What a sample is worth.

    Parameters
    ----------
    osmolality_mOsm_kg : float
        Mean of the replicates, corrected by the standards, on the freezing-point basis. [mOsm/kg]
    variation : float
        Coefficient of variation of the replicates, NaN for a single one.
    is_usable : bool
        False where standards fail or do not bracket the sample: it then resets nothing.
    remarks : tuple of str
        Why it is blocked or doubted, for the record.
    """

    osmolality_mOsm_kg: float
    variation: float
    is_usable: bool
    remarks: tuple[str, ...]


@lru_cache(maxsize=1)
def _vapour_table() -> tuple[FloatArray, FloatArray]:
    """Osmolality at 25 degC and on the freezing-point basis over sea water (TEOS-10): their ratio grows to 1.4 %."""
    salinity = np.linspace(0.0, 60.0, 121)
    warm = osmolality_in_situ_from_absolute_salinity(salinity, temperature_degC=25.0)
    return np.asarray(warm), np.asarray(osmolality_from_absolute_salinity(salinity))


def freezing_point_basis(osmolality_mOsm_kg: float, *, method: OsmometerMethod) -> float:
    """Return a reading on the freezing-point basis; vapour pressure reads 1.3-1.4 % higher at practical salinity 35.

    The relation is that of sea salt at 25 degC; body fluid is mostly sodium chloride, so half a percent of doubt
    stays at high osmolality.
    """
    if method is OsmometerMethod.FREEZING_POINT:
        return osmolality_mOsm_kg
    warm, cold = _vapour_table()
    return float(np.interp(osmolality_mOsm_kg, warm, cold, left=np.nan, right=np.nan))


def blood_value(sample: BloodSample) -> BloodValue:
    """Return what *sample* is worth.

    Raises
    ------
    InvalidInputError
        If there is no reading, or one is not a positive number.
    """
    readings = np.asarray(sample.replicates_mOsm_kg, dtype=np.float64)
    if readings.size == 0 or not np.all(np.isfinite(readings) & (readings > 0.0)):
        raise InvalidInputError(
            "replicates", found=sample.replicates_mOsm_kg, allowed="one or more readings above 0 mOsm/kg"
        )
    mean = float(readings.mean())
    variation = float(readings.std(ddof=1) / mean) if readings.size > 1 else math.nan
    faults = _faults_of_standards(sample.standards, mean)
    corrected = mean if faults else _between_standards(sample.standards, mean)
    value = freezing_point_basis(corrected, method=sample.method)
    return BloodValue(value, variation, not faults and math.isfinite(value), (*faults, *_doubts(sample, variation)))


def _faults_of_standards(standards: tuple[Standard, ...], reading: float) -> tuple[str, ...]:
    if len(standards) < 2:
        return ("fewer than two standards",)
    faults = [
        f"standard {standard.nominal_mOsm_kg:g} read as {standard.read_mOsm_kg:g} mOsm/kg, more than {STANDARD_TOLERANCE:.0%} off"
        for standard in standards
        if not abs(standard.read_mOsm_kg / standard.nominal_mOsm_kg - 1.0) <= STANDARD_TOLERANCE
    ]
    lowest, highest = (choose(standard.read_mOsm_kg for standard in standards) for choose in (min, max))
    if not lowest <= reading <= highest:
        faults.append(f"the standards ({lowest:g}-{highest:g}) do not bracket the sample ({reading:g} mOsm/kg)")
    return tuple(faults)


def _between_standards(standards: tuple[Standard, ...], reading: float) -> float:
    ordered = sorted(standards, key=lambda standard: standard.read_mOsm_kg)
    read, nominal = ([getattr(standard, name) for standard in ordered] for name in ("read_mOsm_kg", "nominal_mOsm_kg"))
    return float(np.interp(reading, read, nominal))


def _doubts(sample: BloodSample, variation: float) -> tuple[str, ...]:
    doubts = []
    if variation > REPLICATE_LIMIT:
        doubts.append(f"replicates vary by {variation:.1%}")
    if math.isnan(variation):
        doubts.append("a single reading")
    if sample.volume_microlitre < MIN_VOLUME_UL[sample.method.value]:
        doubts.append(f"only {sample.volume_microlitre:g} uL of sample")
    if sample.delay_s > MAX_DELAY_S:
        doubts.append(f"read {sample.delay_s / 60:.0f} min after the draw")
    if sample.fluid == "haemolymph" and not sample.moult_stage:
        doubts.append("moult stage not noted: shrimps conform for about 6 h after a moult (FERRARIS1986)")
    return tuple(doubts)


@dataclass(frozen=True, slots=True)
class OsmoregulatoryCapacity:
    """Osmoregulatory capacity against the reference line, after Lignot and others 2000 (LIGNOT2000).

    Parameters
    ----------
    measured_mOsm_kg : float
        Body fluid minus water. [mOsm/kg]
    expected_mOsm_kg : float
        What settled animals of the stage would have, NaN where not known. [mOsm/kg]
    share : float
        Measured over expected, NaN where the expected is near 0 or not known; below 1: capacity lost.
    """

    measured_mOsm_kg: float
    expected_mOsm_kg: float
    share: float


def osmoregulatory_capacity(
    blood_mOsm_kg: float, *, water_mOsm_kg: float, steady_internal_mOsm_kg: float
) -> OsmoregulatoryCapacity:
    """Return the capacity of a sample taken in *water_mOsm_kg*, beside that of settled animals.

    It falls under stress but is not specific: temperature, size, moult and feeding move it too (LIGNOT2000).
    """
    measured, expected = blood_mOsm_kg - water_mOsm_kg, steady_internal_mOsm_kg - water_mOsm_kg
    share = measured / expected if abs(expected) > 20.0 else math.nan
    return OsmoregulatoryCapacity(measured, expected, share)


def capacity_trend_per_d(times_us: FloatArray, shares: FloatArray) -> float:
    """Return the slope of the share of capacity over the samples, NaN for fewer than three. [1/d]"""
    known = np.isfinite(shares)
    if np.count_nonzero(known) < 3:
        return math.nan
    days = (np.asarray(times_us, dtype=np.float64)[known] - times_us[known][0]) / 86.4e9
    spread = days - days.mean()
    return float(spread @ (shares[known] - shares[known].mean()) / (spread @ spread)) if spread.any() else math.nan


def with_blood(state: CohortState, index: int, value: BloodValue) -> CohortState:
    """Return *state* with the modelled body fluid of cohort *index* reset to a usable sample.

    What the animals are used to stays as it was: a regulator's blood does not tell it.

    Raises
    ------
    InvalidInputError
        If the sample is blocked.
    """
    if not value.is_usable:
        raise InvalidInputError(
            "blood sample", found="; ".join(value.remarks), allowed="standards that hold and bracket the sample"
        )
    internal = state.internal.copy()
    internal[index] = value.osmolality_mOsm_kg
    return dataclasses.replace(state, internal=internal)
