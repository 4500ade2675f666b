"""What is allowed of one sensor: the numbers behind each quality test, with defaults by its surroundings.

The QARTOD manual asks the operator for thresholds that are neither arbitrary nor hidden. The defaults below are
engineering choices (no standard prints figures for a hatchery); those for a tidal intake were tuned on a
half-year record of an oyster bar (tests/analysis/sensor/quality/test_oyster_bar.py). A site may replace any.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, fields
from enum import StrEnum
from typing import Final, TypeAlias

from analysis.errors import InvalidInputError

Triple: TypeAlias = tuple[float, float, float]
"""Conductivity [mS/cm], temperature [degC or K], salinity."""

Span: TypeAlias = tuple[float, float]
Spans: TypeAlias = tuple[Span, Span, Span]

OFF: Final = math.nan
"""A threshold that is not set: the test answers "not evaluated"."""

MEMORY_BUCKETS: Final = 25
"""Completed buckets of history that a sensor's state holds: 25 hours by default, a tide and a day."""

HIGHEST_BUCKET_S: Final = 86_400.0


DEFAULT_FAIL_SPAN: Final[Spans] = ((0.0, 200.0), (-2.5, 45.0), (0.0, 120.0))
DEFAULT_SUSPECT_SPAN: Final[Spans] = ((0.0, 100.0), (-2.0, 40.0), (0.0, 60.0))


class Surroundings(StrEnum):
    """Where a sensor hangs."""

    THERMOSTATED_TANK = "thermostated-tank"
    """Water held constant: an unchanging value is what everybody wants."""
    OPEN_TANK = "open-tank"
    """A tank that follows the day."""
    TIDAL_INTAKE = "tidal-intake"
    """Estuary or sea water that moves with the tide."""
    POND = "pond"
    """Outdoors: sun, rain and evaporation."""


@dataclass(frozen=True, slots=True, kw_only=True)
class SensorLimits:
    """Thresholds of one sensor. Three numbers stand for conductivity [mS/cm], temperature [K], salinity.

    Parameters
    ----------
    interval_s : float
        Expected time between readings. [s]
    gap_s : float
        Longest time between readings; also the longest over which two readings are compared. [s]
    bucket_s : float
        Width of the buckets in which history is kept; 25 completed ones are remembered. [s]
    fail_span, suspect_span : three pairs
        Gross range, limits included: what the sensor can measure, and what the site expects.
    climatology : twelve times three pairs, optional
        Seasonal range for each month, January first.
    spike_suspect, spike_fail : three floats
        Size of a spike: the smaller of the steps up to it and down from it.
    rate_deviations : float
        N_DEV: a step is suspect above this many standard deviations of the last `rate_h` hours.
    rate_floor : three floats
        Smallest standard deviation used for that, so that a quiet tank does not cry at every ripple.
    rate_h : float
        TIM_DEV: hours of history behind the standard deviation. [h]
    flat_tolerance : three floats
        A line is flat while its range is not above this (EPS); 0 means exactly repeated values.
    flat_suspect_h, flat_fail_h : three floats
        How long it must be flat. [h]
    attenuated_suspect, attenuated_fail : three floats
        Standard deviation over `attenuated_h` below which the signal is attenuated.
    attenuated_h : float
        [h]
    is_still : bool
        The water is held constant: flat line and attenuated signal are judged only while the temperature, the
        neighbour or a logged water change has moved.
    moved : three floats
        Range within a flat-line window that counts as having moved.
    multi_variate_deviations : float
        N_DEV of the tight rate test on temperature that conductivity must answer to.
    noise_limit : three floats
        A second difference (value against the middle of its two neighbours) above this is noise.
    noise_share : float
        Share of such differences within `noise_h` that makes the sensor noisy. [0-1]
    noise_h : float
        [h]
    neighbour_difference : three floats
        Largest difference between bucket means of two sensors in the same tank.
    in_air_mS_cm : float
        Conductivity at or below which the probe is taken to be dry. [mS/cm]

    Raises
    ------
    InvalidInputError
        If the numbers contradict one another.
    """

    interval_s: float
    gap_s: float
    bucket_s: float
    fail_span: Spans = DEFAULT_FAIL_SPAN
    suspect_span: Spans = DEFAULT_SUSPECT_SPAN
    climatology: tuple[Spans, ...] | None = None
    spike_suspect: Triple
    spike_fail: Triple
    rate_deviations: float = 3.0
    rate_floor: Triple
    rate_h: float = 25.0
    flat_tolerance: Triple = (0.005, 0.005, 0.005)
    flat_suspect_h: Triple
    flat_fail_h: Triple
    attenuated_suspect: Triple
    attenuated_fail: Triple
    attenuated_h: float = 12.0
    is_still: bool = False
    moved: Triple = (1.0, 0.5, 0.7)
    multi_variate_deviations: float = 2.0
    noise_limit: Triple
    noise_share: float = 0.25
    noise_h: float = 6.0
    neighbour_difference: Triple
    in_air_mS_cm: float = OFF

    def __post_init__(self) -> None:
        _check_times(self)
        for index, (inner, outer) in enumerate(zip(self.suspect_span, self.fail_span, strict=True)):
            if inner[0] > inner[1] or outer[0] > outer[1] or inner[0] < outer[0] or inner[1] > outer[1]:
                raise InvalidInputError(
                    f"suspect_span[{index}]", found=inner, allowed=f"low to high, within the fail span {outer}"
                )
        if self.climatology is not None and len(self.climatology) != 12:
            raise InvalidInputError("climatology", found=len(self.climatology), allowed="12 months, January first")
        if any(fail < suspect for suspect, fail in zip(self.spike_suspect, self.spike_fail, strict=True)):
            raise InvalidInputError("spike_fail", found=self.spike_fail, allowed=f"at least {self.spike_suspect}")
        if any(fail < suspect for suspect, fail in zip(self.flat_suspect_h, self.flat_fail_h, strict=True)):
            raise InvalidInputError("flat_fail_h", found=self.flat_fail_h, allowed=f"at least {self.flat_suspect_h}")
        if not 0.0 < self.noise_share <= 1.0:
            raise InvalidInputError("noise_share", found=self.noise_share, allowed="above 0, at most 1")


def _check_times(limits: SensorLimits) -> None:
    if not limits.interval_s > 0:
        raise InvalidInputError("interval_s", found=limits.interval_s, allowed="above 0 s")
    if not limits.interval_s <= limits.bucket_s <= HIGHEST_BUCKET_S:
        raise InvalidInputError(
            "bucket_s", found=limits.bucket_s, allowed=f"{limits.interval_s} (the interval) to {HIGHEST_BUCKET_S} s"
        )
    if not limits.gap_s > 0:
        raise InvalidInputError("gap_s", found=limits.gap_s, allowed="above 0 s")


_BY_SURROUNDINGS: Final[dict[Surroundings, dict[str, object]]] = {
    Surroundings.THERMOSTATED_TANK: {
        "spike_suspect": (1.5, 0.6, 1.0),
        "spike_fail": (4.0, 2.0, 2.5),
        "rate_floor": (0.5, 0.2, 0.35),
        "flat_suspect_h": (3.0, 12.0, 3.0),
        "flat_fail_h": (6.0, 24.0, 6.0),
        "attenuated_suspect": (0.004, 0.004, 0.004),
        "attenuated_fail": (0.001, 0.001, 0.001),
        "is_still": True,
        "noise_limit": (0.5, 0.3, 0.35),
        "neighbour_difference": (OFF, 0.6, 0.8),
    },
    Surroundings.OPEN_TANK: {
        "spike_suspect": (2.0, 0.8, 1.3),
        "spike_fail": (5.0, 2.5, 3.5),
        "rate_floor": (0.7, 0.3, 0.45),
        "flat_suspect_h": (3.0, 12.0, 3.0),
        "flat_fail_h": (6.0, 24.0, 6.0),
        "attenuated_suspect": (0.004, 0.004, 0.004),
        "attenuated_fail": (0.001, 0.001, 0.001),
        "noise_limit": (0.7, 0.4, 0.45),
        "neighbour_difference": (OFF, 0.8, 0.9),
    },
    Surroundings.TIDAL_INTAKE: {
        "spike_suspect": (6.0, 1.5, 4.0),
        "spike_fail": (15.0, 4.0, 10.0),
        "rate_floor": (2.0, 0.5, 1.3),
        "flat_suspect_h": (3.0, 12.0, 3.0),
        "flat_fail_h": (6.0, 24.0, 6.0),
        "attenuated_suspect": (0.02, 0.01, 0.01),
        "attenuated_fail": (0.005, 0.002, 0.003),
        "noise_limit": (6.0, 0.8, 4.0),
        "neighbour_difference": (OFF, 1.0, 1.5),
    },
    Surroundings.POND: {
        "spike_suspect": (2.0, 1.0, 1.3),
        "spike_fail": (5.0, 3.0, 3.5),
        "rate_floor": (0.7, 0.4, 0.45),
        "flat_suspect_h": (6.0, 12.0, 6.0),
        "flat_fail_h": (12.0, 24.0, 12.0),
        "attenuated_suspect": (0.002, 0.02, 0.002),
        "attenuated_fail": (0.0005, 0.005, 0.0005),
        "noise_limit": (0.7, 0.5, 0.45),
        "neighbour_difference": (OFF, 1.0, 1.0),
    },
}

DRY_PROBE_MS_CM: Final = 0.02
"""A dry cell reads up to about this (common practice)."""

DRY_PROBE_PER_SALINITY: Final = 0.06
"""mS/cm for each unit of expected salinity: about 4 % of what the cell should read; a wet film reads less."""


def default_limits(
    surroundings: Surroundings, *, interval_s: float, expected_salinity: float = math.nan, **replaced: object
) -> SensorLimits:
    """Return the thresholds for a sensor in *surroundings*.

    Parameters
    ----------
    surroundings : Surroundings
        Where it hangs.
    interval_s : float
        Expected time between readings. [s]
    expected_salinity : float, optional
        Set point of the tank: a probe that reads almost nothing in salt water is in air. Without it only a
        bone-dry cell is recognised; fresh water is never taken for air.
    **replaced
        Fields of `SensorLimits` that the site sets itself.

    Returns
    -------
    SensorLimits

    Raises
    ------
    InvalidInputError
        If a replaced name is not a threshold or the numbers contradict one another.
    """
    known = {field.name for field in fields(SensorLimits)}
    for name in replaced:
        if name not in known:
            raise InvalidInputError("threshold", found=name, allowed=", ".join(sorted(known)))
    salt = expected_salinity if math.isfinite(expected_salinity) else 0.0
    values: dict[str, object] = {
        "interval_s": interval_s,
        "gap_s": max(3.0 * interval_s, 3600.0),
        "bucket_s": max(3600.0, 4.0 * interval_s),
        "in_air_mS_cm": max(DRY_PROBE_MS_CM, DRY_PROBE_PER_SALINITY * salt),
    }
    return SensorLimits(**{**values, **_BY_SURROUNDINGS[surroundings], **replaced})  # type: ignore[arg-type]
