"""Does a sensor report as it is declared: raw, or compensated for temperature? The data themselves tell.

Raw conductivity of the same water follows its temperature by about 2 % a kelvin; a compensated value does not.
From pairs of readings a few hours apart, between which the temperature moved, comes the share of the expected
change that the reported value made: 1 for raw, 0 for compensated, -1 for a value that was compensated twice. In
a tank whose salinity is steady these shares lie close together; where salinity moves with the temperature (a
tidal intake) they do not, and the check says that it cannot tell. A second sensor in the same water helps there:
the ratio of the two does not depend on salinity.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from enum import StrEnum
from typing import TYPE_CHECKING, Final

import numpy as np

from analysis.sensor.trend import DAY_US, block_medians, steps_of_the_water, without_changes
from analysis.water.compensation import Compensation

if TYPE_CHECKING:
    from numpy.typing import ArrayLike

    from analysis.arrays import FloatArray, IntArray

LAGS_US: Final = tuple(round(hours * 3_600e6) for hours in (2.0, 4.0, 8.0))
LEAST_CHANGE: Final = 0.008
"""Pairs count where the compensation factor changed by at least this: about 0.4 K."""
FEWEST_PAIRS: Final = 24
STRETCH_US: Final = LAGS_US[-1]
FEWEST_STRETCHES: Final = 4
"""Pairs must come from so many different stretches of eight hours: one event is no evidence."""
LEAST_CONDUCTIVITY_MS_CM: Final = 0.05

BLOCK_US: Final = round(0.25 * 3_600e6)
"""Medians of quarters of an hour are compared."""
LEAST_STEP: Final = 0.02
"""A larger change of ln(conductivity) between neighbouring blocks may be a step of the water: left out."""

NEAR: Final = 0.35
"""How far the middle share may lie from 1, 0 or -1."""
WIDEST: Final = 0.6
"""Half the distance from the 10th to the 90th percentile beyond which the shares do not agree."""


class CompensationVerdict(StrEnum):
    """What the data say of the declaration."""

    CONSISTENT = "consistent"
    LOOKS_COMPENSATED = "declared-raw-looks-compensated"
    LOOKS_RAW = "declared-compensated-looks-raw"
    LOOKS_COMPENSATED_TWICE = "looks-compensated-twice"
    UNDECIDED = "undecided"
    TOO_LITTLE_CHANGE = "temperature-changed-too-little"


@dataclass(frozen=True, slots=True)
class CompensationEvidence:
    """The verdict and the numbers behind it.

    Parameters
    ----------
    verdict : CompensationVerdict
    share_followed : float
        Middle share of the expected change that the reported value made; NaN with too few pairs. [1]
    share_low, share_high : float
        10th and 90th percentile. [1]
    expected_share : float
        1 for a sensor declared raw, 0 for one declared compensated.
    pairs : int
        How many pairs of readings were compared.
    temperature_span_K : float
        Between the 2nd and the 98th percentile. [K]
    hours : float
        From the first to the last reading used. [h]
    """

    verdict: CompensationVerdict
    share_followed: float
    share_low: float
    share_high: float
    expected_share: float
    pairs: int
    temperature_span_K: float
    hours: float

    @property
    def contradicts_declaration(self) -> bool:
        """Whether the declaration must be wrong."""
        return self.verdict in {
            CompensationVerdict.LOOKS_COMPENSATED,
            CompensationVerdict.LOOKS_RAW,
            CompensationVerdict.LOOKS_COMPENSATED_TWICE,
        }

    @property
    def sentence(self) -> str:
        """The evidence in words, for a terminal or a record."""
        if self.verdict is CompensationVerdict.TOO_LITTLE_CHANGE:
            return (
                f"Cannot tell yet: the temperature moved {self.temperature_span_K:.1f} K in {self.hours:.0f} h, "
                f"which gave {self.pairs} usable pairs of readings."
            )
        figures = (
            f"In {self.pairs} pairs of readings over {self.hours:.0f} h the reported conductivity made "
            f"{100 * self.share_followed:.0f} % of the change that raw conductivity makes with temperature "
            f"(80 % of the pairs between {100 * self.share_low:.0f} and {100 * self.share_high:.0f} %)."
        )
        return f"{figures} {_MEANINGS[self.verdict]}"


_MEANINGS = {
    CompensationVerdict.CONSISTENT: "That fits the declaration.",
    CompensationVerdict.LOOKS_COMPENSATED: (
        "It is declared raw (100 % expected) but behaves as if the sensor compensates already."
    ),
    CompensationVerdict.LOOKS_RAW: "It is declared compensated (0 % expected) but behaves like raw conductivity.",
    CompensationVerdict.LOOKS_COMPENSATED_TWICE: (
        "It falls when the water warms: it looks as if it were compensated twice."
    ),
    CompensationVerdict.UNDECIDED: "The pairs do not agree: salinity moves with temperature here, so nothing follows.",
}


def check_compensation(
    reported_mS_cm: ArrayLike,
    *,
    temperature_degC: ArrayLike,
    measured_at_us: ArrayLike,
    is_declared_compensated: bool,
    compensation: Compensation | None = None,
    neighbour_mS_cm: ArrayLike | None = None,
) -> CompensationEvidence:
    """Return whether reported conductivities bear out how the sensor is declared to report.

    Parameters
    ----------
    reported_mS_cm : array_like, (rows,)
        As the sensor sends them, nothing undone. NaN and nearly dry readings are left out. [mS/cm]
    temperature_degC : array_like, (rows,)
        [degC]
    measured_at_us : array_like of int, (rows,)
        In order of time. [us]
    is_declared_compensated : bool
        What the site file says.
    compensation : Compensation, optional
        The declared method; linear 1.91 %/K at 25 degC by default. The coefficient hardly matters here.
    neighbour_mS_cm : array_like, (rows,), optional
        Conductivity by a believed second sensor of the same water at the same times, at the water's own
        temperature (any compensation undone). [mS/cm]

    Returns
    -------
    CompensationEvidence
    """
    method = compensation or Compensation()
    reported = np.asarray(reported_mS_cm, dtype=np.float64)
    temperature = np.asarray(temperature_degC, dtype=np.float64)
    time_us = np.asarray(measured_at_us, dtype=np.int64)
    # what raw conductivity of this water would be, but for a constant: that of the neighbour, else steady salinity
    beside = np.ones(reported.shape) if neighbour_mS_cm is None else np.asarray(neighbour_mS_cm, dtype=np.float64)
    with np.errstate(invalid="ignore"):
        usable = (reported > LEAST_CONDUCTIVITY_MS_CM) & (beside > LEAST_CONDUCTIVITY_MS_CM)
        usable &= np.isfinite(temperature) & np.isfinite(reported) & np.isfinite(beside)
    logarithm = np.log(reported[usable]) - np.log(beside[usable])
    middle_us, logarithm, warmth = _blocks(time_us[usable], logarithm, temperature[usable])
    steps = steps_of_the_water(logarithm, least_step=LEAST_STEP)
    due = np.log(method.factor(warmth))
    shares, stretches = _shares(middle_us, without_changes(logarithm, steps), without_changes(due, steps))
    if neighbour_mS_cm is not None:
        shares = shares + 1.0  # the neighbour follows its temperature in full
    span = float(np.ptp(np.percentile(warmth, (2.0, 98.0)))) if warmth.shape[0] else 0.0
    length_us = int(middle_us[-1] - middle_us[0]) if middle_us.shape[0] else 0
    expected = 0.0 if is_declared_compensated else 1.0
    low, middle, high = np.percentile(shares, (10.0, 50.0, 90.0)) if shares.shape[0] else (math.nan,) * 3
    is_enough = shares.shape[0] >= FEWEST_PAIRS and stretches >= FEWEST_STRETCHES
    return CompensationEvidence(
        verdict=_verdict(middle, 0.5 * (high - low), expected) if is_enough else CompensationVerdict.TOO_LITTLE_CHANGE,
        share_followed=float(middle),
        share_low=float(low),
        share_high=float(high),
        expected_share=expected,
        pairs=int(shares.shape[0]),
        temperature_span_K=span,
        hours=length_us / 3_600e6,
    )


def _blocks(
    time_us: IntArray, logarithm: FloatArray, temperature: FloatArray
) -> tuple[IntArray, FloatArray, FloatArray]:
    """Return the middles of the blocks that hold readings, with the medians in each."""
    level, day = block_medians(logarithm, time_us=time_us, block_us=BLOCK_US)
    warmth, _ = block_medians(temperature, time_us=time_us, block_us=BLOCK_US)
    return np.rint(day * DAY_US).astype(np.int64), level, warmth


def _shares(time_us: IntArray, logarithm: FloatArray, factor: FloatArray) -> tuple[FloatArray, int]:
    """Return the change of ln(reported) over the change of ln(factor) for pairs with enough change.

    And from how many stretches of eight hours they come.
    """
    found, began = [], []
    for lag in LAGS_US:
        later = np.searchsorted(time_us, time_us + lag)
        first = np.flatnonzero(later < time_us.shape[0])
        second = later[first]
        near = time_us[second] - time_us[first] <= lag + lag // 2
        first, second = first[near], second[near]
        due = factor[second] - factor[first]
        moved = np.abs(due) >= LEAST_CHANGE
        found.append((logarithm[second] - logarithm[first])[moved] / due[moved])
        began.append(time_us[first[moved]] // STRETCH_US)
    return np.concatenate(found), int(np.unique(np.concatenate(began)).shape[0])


def _verdict(middle: float, half_width: float, expected: float) -> CompensationVerdict:
    if not half_width <= WIDEST:
        return CompensationVerdict.UNDECIDED
    if abs(middle - expected) <= NEAR:
        return CompensationVerdict.CONSISTENT
    if abs(middle + 1.0) <= NEAR:
        return CompensationVerdict.LOOKS_COMPENSATED_TWICE
    if expected == 1.0 and abs(middle) <= NEAR:
        return CompensationVerdict.LOOKS_COMPENSATED
    if expected == 0.0 and abs(middle - 1.0) <= NEAR:
        return CompensationVerdict.LOOKS_RAW
    return CompensationVerdict.UNDECIDED
