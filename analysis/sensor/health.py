"""The health of a sensor on one page: believe, doubt, or do not use, and why.

It looks at the last days of one sensor with everything that can confirm or contradict it: its own quality flags, a
second sensor in the same tank, bench samples, the declared compensation, its calibration. A steep slope or a step
of the water is no finding: the tests behind it do not take one for a fault.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from enum import IntEnum, StrEnum
from typing import TYPE_CHECKING, Final

import numpy as np

from analysis.arrays import MICROSECONDS_PER_SECOND
from analysis.errors import InvalidInputError
from analysis.flags import Quality
from analysis.sensor.quality.words import QualityTest
from analysis.sensor.trend import Trend, trend

if TYPE_CHECKING:
    from collections.abc import Sequence

    from analysis.arrays import FloatArray, IntArray, QualityArray
    from analysis.sensor.compensation_check import CompensationEvidence

HOUR_US: Final = 3600 * MICROSECONDS_PER_SECOND
DAY_US: Final = 24 * HOUR_US

RECENT_US: Final = HOUR_US
"""In air, stuck and missing are judged on the last hour."""
NOISE_WINDOW_US: Final = 6 * HOUR_US

FALL_TO_DOUBT_PERCENT: Final = 1.0
"""A slow fall of this size is worth a look (a third of the 3 % at which USGS TM 1-D3 corrects a record)."""
FALL_TO_REFUSE_PERCENT: Final = 10.0
"""Beyond this the record is fair at best after TM 1-D3."""
STEADY: Final = 0.7
CREEP: Final = 0.5

NEIGHBOUR_DOUBT_PERCENT: Final = 3.0
SAMPLE_WINDOW_US: Final = HOUR_US // 2
SAMPLE_AGE_US: Final = 7 * DAY_US
COVERAGE: Final = 2.0
"""Two uncertainties: about 95 %."""


class Belief(IntEnum):
    """What to do with a sensor."""

    BELIEVE = 0
    DOUBT = 1
    DO_NOT_USE = 2


class Finding(StrEnum):
    """Why. The words for the screen live with the screen."""

    SILENT = "silent"
    VALUES_MISSING = "values-missing"
    IN_AIR = "in-air"
    OUT_OF_RANGE = "out-of-range"
    STUCK = "stuck"
    ATTENUATED = "attenuated"
    NOISY = "noisy"
    FOULING = "fouling"
    SLOW_FALL = "slow-fall"
    NEIGHBOUR_FALLS = "neighbour-falls"
    """The other sensor creeps down against this one: that one is fouling."""
    NEIGHBOUR_DISAGREES = "neighbour-disagrees"
    SAMPLE_DISAGREES = "sample-disagrees"
    SAMPLE_AGREES = "sample-agrees"
    COMPENSATION_DOUBTED = "compensation-doubted"
    CALIBRATION_OVERDUE = "calibration-overdue"


class SampleKind(StrEnum):
    """How a bench sample was measured."""

    REFRACTOMETER = "refractometer"
    HYDROMETER = "hydrometer"
    OSMOMETER = "osmometer"
    SECOND_METER = "second-meter"


SAMPLE_UNCERTAINTY: Final = {
    SampleKind.REFRACTOMETER: 1.0,
    SampleKind.HYDROMETER: 0.7,
    SampleKind.OSMOMETER: 0.3,
    SampleKind.SECOND_METER: 0.3,
}
"""Standard uncertainty in units of salinity where the site states none (common practice)."""


@dataclass(frozen=True, slots=True)
class BenchSample:
    """A sample taken beside the sensor and measured at the bench.

    Parameters
    ----------
    measured_at_us : int
        When it was taken. [us]
    salinity : float
        In the sensor's own scale.
    kind : SampleKind
    uncertainty : float, optional
        Standard uncertainty; by the kind where not given.
    """

    measured_at_us: int
    salinity: float
    kind: SampleKind
    uncertainty: float = math.nan

    @property
    def standard_uncertainty(self) -> float:
        """Its own or its kind's."""
        return self.uncertainty if math.isfinite(self.uncertainty) else SAMPLE_UNCERTAINTY[self.kind]


@dataclass(frozen=True, slots=True)
class Reason:
    """One finding with its weight and its figures.

    Parameters
    ----------
    finding : Finding
    belief : Belief
        What this finding alone would have one do.
    figures : dict of str to float
        The evidence; names carry their units.
    """

    finding: Finding
    belief: Belief
    figures: dict[str, float] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Health:
    """What to do with a sensor, and why, the weightiest reason first."""

    belief: Belief
    reasons: tuple[Reason, ...]

    @property
    def findings(self) -> tuple[Finding, ...]:
        """The codes of the reasons."""
        return tuple(reason.finding for reason in self.reasons)


@dataclass(frozen=True, slots=True, kw_only=True)
class Period:
    """The last days of one sensor, rows in order of time.

    Parameters
    ----------
    measured_at_us : ndarray of int64, (rows,)
    temperature_degC, salinity : ndarray of float64, (rows,)
        NaN where missing.
    by_test : ndarray of uint8, (11, 3, rows)
        Quality flags of the same rows.
    neighbour_salinity : ndarray of float64, (rows,), optional
        A second sensor of the same tank at the same times (`aligned`); NaN where it said nothing.
    level_m : ndarray of float64, (rows,), optional
        Water level or depth: salinity of a tidal intake goes with it.
    cleaned_at_us : int, optional
        When the sensor was last cleaned or calibrated: trends begin there.

    Raises
    ------
    InvalidInputError
        If lengths differ.
    """

    measured_at_us: IntArray
    temperature_degC: FloatArray
    salinity: FloatArray
    by_test: QualityArray
    neighbour_salinity: FloatArray | None = None
    level_m: FloatArray | None = None
    cleaned_at_us: int | None = None

    def __post_init__(self) -> None:
        rows = self.measured_at_us.shape[0]
        lengths = [self.temperature_degC.shape[0], self.salinity.shape[0], self.by_test.shape[-1]]
        beside = (self.neighbour_salinity, self.level_m)
        lengths += [column.shape[0] for column in beside if column is not None]
        if any(length != rows for length in lengths):
            raise InvalidInputError("lengths of a sensor's period", found=lengths, allowed=f"{rows} rows each")

    def since(self, from_us: int) -> slice:
        """Return the rows from a time on."""
        return slice(int(np.searchsorted(self.measured_at_us, from_us)), self.measured_at_us.shape[0])


def aligned(values: FloatArray, *, measured_at_us: IntArray, to_us: IntArray, within_us: int) -> FloatArray:
    """Return for each time of *to_us* the newest of *values* not older than *within_us*, else NaN."""
    if not values.shape[0]:
        return np.full(to_us.shape, np.nan)
    place = np.searchsorted(measured_at_us, to_us, side="right") - 1
    held = np.maximum(place, 0)
    fresh = (place >= 0) & (to_us - measured_at_us[held] <= within_us)
    return np.where(fresh, values[held], np.nan)


def assess(
    period: Period,
    *,
    now_us: int,
    interval_s: float,
    samples: Sequence[BenchSample] = (),
    compensation: CompensationEvidence | None = None,
    calibration_due_us: int | None = None,
    standard_uncertainty: float = 0.2,
) -> Health:
    """Return what to do with a sensor, and why.

    Parameters
    ----------
    period : Period
    now_us : int
        The time of asking. [us]
    interval_s : float
        Expected time between readings. [s]
    samples : sequence of BenchSample
    compensation : CompensationEvidence, optional
        What the data say of the declared compensation.
    calibration_due_us : int, optional
        A calibration that is overdue is mentioned; it changes nothing by itself.
    standard_uncertainty : float
        Of the sensor's salinity. [salinity]

    Returns
    -------
    Health
    """
    reasons = [
        *_presence(period, now_us, interval_s),
        *_flagged(period, now_us),
        *_trends(period),
        *_compared_with_neighbour(period, now_us),
        *_compared_with_samples(period, now_us, samples, standard_uncertainty),
    ]
    if compensation is not None and compensation.contradicts_declaration:
        reasons.append(
            Reason(
                Finding.COMPENSATION_DOUBTED,
                Belief.DO_NOT_USE,
                {"share_followed": compensation.share_followed, "expected_share": compensation.expected_share},
            )
        )
    if calibration_due_us is not None and calibration_due_us < now_us:
        overdue = (now_us - calibration_due_us) / DAY_US
        reasons.append(Reason(Finding.CALIBRATION_OVERDUE, Belief.BELIEVE, {"overdue_days": overdue}))
    ranked = tuple(sorted(_weighed(reasons), key=lambda reason: -reason.belief))
    return Health(max((reason.belief for reason in ranked), default=Belief.BELIEVE), ranked)


def _weighed(reasons: list[Reason]) -> list[Reason]:
    """A bench sample that agrees outweighs a neighbour that does not: then the neighbour is the doubtful one."""
    if not any(reason.finding is Finding.SAMPLE_AGREES for reason in reasons):
        return reasons
    softened = {Finding.NEIGHBOUR_DISAGREES, Finding.SLOW_FALL}
    return [
        Reason(reason.finding, Belief.BELIEVE, reason.figures) if reason.finding in softened else reason
        for reason in reasons
    ]


def _presence(period: Period, now_us: int, interval_s: float) -> list[Reason]:
    times = period.measured_at_us
    age_us = now_us - int(times[-1]) if times.shape[0] else math.inf
    if age_us > max(3.0 * interval_s * MICROSECONDS_PER_SECOND, RECENT_US):
        figures = {"silent_h": age_us / HOUR_US} if times.shape[0] else {}
        return [Reason(Finding.SILENT, Belief.DO_NOT_USE, figures)]
    recent = period.salinity[period.since(now_us - RECENT_US)]
    absent = float(np.isnan(recent).mean()) if recent.shape[0] else 0.0
    if absent > 0.5:
        return [Reason(Finding.VALUES_MISSING, Belief.DO_NOT_USE, {"missing_percent": 100.0 * absent})]
    return []


def _share(flags: QualityArray, *qualities: Quality) -> float:
    """Return the largest share over the variables of rows with one of *qualities*, among those evaluated."""
    shares = [0.0]
    for variable in flags:
        evaluated = variable[(variable != Quality.NOT_EVALUATED) & (variable != Quality.MISSING)]
        if evaluated.shape[0]:
            shares.append(float(np.isin(evaluated, qualities).mean()))
    return max(shares)


def _flagged(period: Period, now_us: int) -> list[Reason]:
    recent = period.by_test[:, :, period.since(now_us - RECENT_US)]
    out = []
    dry = _share(recent[QualityTest.IN_AIR], Quality.FAIL)
    if dry > 0.5:
        out.append(Reason(Finding.IN_AIR, Belief.DO_NOT_USE, {"in_air_percent": 100.0 * dry}))
    beyond = _share(recent[QualityTest.GROSS_RANGE], Quality.FAIL)
    if beyond > 0.5:
        out.append(Reason(Finding.OUT_OF_RANGE, Belief.DO_NOT_USE, {"out_of_range_percent": 100.0 * beyond}))
    for test, finding in ((QualityTest.FLAT_LINE, Finding.STUCK), (QualityTest.ATTENUATED_SIGNAL, Finding.ATTENUATED)):
        failed, doubted = _share(recent[test], Quality.FAIL), _share(recent[test], Quality.SUSPECT, Quality.FAIL)
        if doubted > 0.5:
            belief = Belief.DO_NOT_USE if failed > 0.5 else Belief.DOUBT
            out.append(Reason(finding, belief, {"flagged_percent": 100.0 * doubted}))
    noisy = _share(period.by_test[QualityTest.NOISE][:, period.since(now_us - NOISE_WINDOW_US)], Quality.SUSPECT)
    if noisy > 0.3:
        belief = Belief.DO_NOT_USE if noisy > 0.9 else Belief.DOUBT
        out.append(Reason(Finding.NOISY, belief, {"noisy_percent": 100.0 * noisy}))
    return out


def _believable(period: Period) -> FloatArray:
    """Return salinity without the rows that failed on their own account."""
    failed = (period.by_test == Quality.FAIL).any(axis=(0, 1))
    return np.where(failed, np.nan, period.salinity)


def _trends(period: Period) -> list[Reason]:
    """Look for fouling: a slow one-sided fall with no match in temperature, level or neighbour."""
    rows = period.since(period.cleaned_at_us if period.cleaned_at_us is not None else -(1 << 62))
    own, times = _believable(period)[rows], period.measured_at_us[rows]
    neighbour = None if period.neighbour_salinity is None else period.neighbour_salinity[rows]
    has_neighbour = neighbour is not None and bool(np.isfinite(neighbour).sum() > 0.5 * neighbour.shape[0])
    with np.errstate(invalid="ignore", divide="ignore"):
        judged = own / neighbour if has_neighbour and neighbour is not None else own
    causes = [] if has_neighbour else [period.temperature_degC[rows]]
    if period.level_m is not None and not has_neighbour:
        causes.append(period.level_m[rows])
    found = trend(judged, time_us=times, explained_by=causes)
    if found is None or not _is_creep(found):
        return []
    figures = {
        "change_percent": found.percent,
        "change_percent_per_day": found.percent_per_day,
        "days": found.days,
    }
    if found.percent > 0.0:  # alone it is evaporation; against a neighbour it is the neighbour that falls
        return [Reason(Finding.NEIGHBOUR_FALLS, Belief.BELIEVE, figures)] if has_neighbour else []
    if not has_neighbour:
        return [Reason(Finding.SLOW_FALL, Belief.DOUBT, figures)]
    refused = found.percent <= -FALL_TO_REFUSE_PERCENT
    return [Reason(Finding.FOULING, Belief.DO_NOT_USE if refused else Belief.DOUBT, figures)]


def _is_creep(found: Trend) -> bool:
    one_sided = found.high_percent_per_day < 0.0 or found.low_percent_per_day > 0.0
    return (
        one_sided
        and abs(found.percent) >= FALL_TO_DOUBT_PERCENT
        and found.steadiness >= STEADY
        and found.largest_step_share <= CREEP
    )


def _compared_with_neighbour(period: Period, now_us: int) -> list[Reason]:
    if period.neighbour_salinity is None:
        return []
    rows = period.since(now_us - NOISE_WINDOW_US)
    own, other = _believable(period)[rows], period.neighbour_salinity[rows]
    both = np.isfinite(own) & np.isfinite(other)
    if both.sum() < 3:
        return []
    difference = float(np.median(own[both] - other[both]))
    level = float(np.median(other[both]))
    percent = 100.0 * difference / max(abs(level), 1.0)
    if abs(percent) <= NEIGHBOUR_DOUBT_PERCENT:
        return []
    return [
        Reason(Finding.NEIGHBOUR_DISAGREES, Belief.DOUBT, {"difference": difference, "difference_percent": percent})
    ]


def _compared_with_samples(
    period: Period, now_us: int, samples: Sequence[BenchSample], standard_uncertainty: float
) -> list[Reason]:
    """Compare with the newest sample of the last week that was taken while the sensor spoke."""
    own = _believable(period)
    for sample in sorted(samples, key=lambda one: -one.measured_at_us):
        if not 0 <= now_us - sample.measured_at_us <= SAMPLE_AGE_US:
            continue
        near = np.abs(period.measured_at_us - sample.measured_at_us) <= SAMPLE_WINDOW_US
        beside = own[near & np.isfinite(own)]
        if not beside.shape[0]:
            continue
        difference = float(np.median(beside)) - sample.salinity
        allowed = COVERAGE * math.hypot(standard_uncertainty, sample.standard_uncertainty)
        figures = {
            "difference": difference,
            "allowed_difference": allowed,
            "age_days": (now_us - sample.measured_at_us) / DAY_US,
        }
        if abs(difference) <= allowed:
            return [Reason(Finding.SAMPLE_AGREES, Belief.BELIEVE, figures)]
        belief = Belief.DO_NOT_USE if abs(difference) > 2.0 * allowed else Belief.DOUBT
        return [Reason(Finding.SAMPLE_DISAGREES, belief, figures)]
    return []
