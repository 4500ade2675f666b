"""The flag words: one documented enum for everything that can be said about a single reading.

A reading carries a set of these words as one integer (bits or-ed together) and one rolled-up quality after
the QARTOD scheme. The integers are stored: never renumber, only add.
"""

from __future__ import annotations

from enum import IntEnum, IntFlag

import numpy as np

from analysis.arrays import FlagArray, FloatArray, QualityArray


class Quality(IntEnum):
    """QARTOD data flags.

    References
    ----------
    U.S. Integrated Ocean Observing System, Manual for Real-Time Quality Control of In-situ Temperature and
    Salinity Data, version 2.1, 2020, section 2. DOI 10.25923/x02m-m555.
    """

    PASS = 1
    NOT_EVALUATED = 2
    SUSPECT = 3
    FAIL = 4
    MISSING = 9


class Flag(IntFlag):
    """Words that stand beside a reading."""

    NONE = 0
    EXTRAPOLATED = 1 << 0
    """Outside the published range of the relation but physical; the value is kept and alarms judge it."""
    BELOW_RANGE = 1 << 1
    """Conductivity from 0 to 0.002 mS/cm: practical salinity is taken as 0."""
    NEGATIVE = 1 << 2
    """Negative conductivity or pressure-free salinity: the value is null."""
    NOT_FINITE = 1 << 3
    """Not a number or infinite: the value is null."""
    OUT_OF_RANGE = 1 << 4
    """Unphysical: the value is null."""
    MISSING = 1 << 5
    """A field that the sensor should send was not there."""
    FILLER = 1 << 6
    """A number that loggers write where there is no value (-99, -100, -999, ...): the value is null."""
    TIME_RECEIVED = 1 << 7
    """The payload had no time of its own; measured_at is the time received."""
    LATE = 1 << 8
    """Older than the newest processed reading of the same sensor: stored, neither raises nor clears an alarm."""
    GROSS_RANGE = 1 << 9
    """Outside the span that the site gives for this sensor."""
    CLOCK_DOUBTED = 1 << 10
    """The sensor's clock differs from the time received by more than two intervals."""
    CORRECTED = 1 << 11
    """A calibration record or drift proration has been applied."""
    SPIKE = 1 << 12
    """QARTOD spike test suspect or fail."""
    RATE_OF_CHANGE = 1 << 13
    """QARTOD rate of change test suspect."""
    FLAT_LINE = 1 << 14
    """QARTOD flat line test suspect or fail."""
    ATTENUATED = 1 << 15
    """QARTOD attenuated signal test suspect or fail."""
    CLIMATOLOGY = 1 << 16
    """QARTOD climatology test suspect."""
    MULTI_VARIATE = 1 << 17
    """QARTOD multi-variate test suspect."""
    NEIGHBOUR = 1 << 18
    """QARTOD neighbour test suspect: a second sensor in the same tank does not agree."""
    IN_AIR = 1 << 19
    """Near-zero conductivity where there should be salt water: probe dry or tank empty."""
    GAP = 1 << 20
    """QARTOD gap test fail: the time since the reading before is longer than allowed."""
    WATER_KIND_DOUBTED = 1 << 21
    """The kind of water was outside the table made for it (for example beyond the tabulated dilution)."""
    NOISE = 1 << 22
    """The sensor jumps about more than its water does: many large second differences in a few hours."""


NULLING_FLAGS = Flag.NEGATIVE | Flag.NOT_FINITE | Flag.OUT_OF_RANGE | Flag.MISSING | Flag.FILLER
"""Flags that go with a null value."""

FILLER_VALUES = (
    -9999.0,
    -999.0,
    -100.0,
    -99.99,
    -99.9,
    -99.0,
    -9999.9,
    -999.9,
    -6999.0,
    -7999.0,
    9999.0,
    99999.0,
)
"""Numbers that loggers write where there is no value. Common practice; -99, -99.99 and -100 were seen in public estuarine records."""


def words(flags: int) -> list[str]:
    """Return the flag words in *flags*, lower case, in the order of the enum."""
    return [member.name.lower() for member in Flag if member.value and member.name and flags & member.value]


def is_filler(values: FloatArray) -> np.ndarray:
    """Return True where a value is one of the numbers that loggers write for "no value"."""
    return np.isin(values, FILLER_VALUES)


def rolled_up(flags: FlagArray) -> QualityArray:
    """Return the QARTOD quality that follows from flag words alone: 9 where null, 3 where doubted, else 1."""
    quality = np.full(flags.shape, Quality.PASS, dtype=np.uint8)
    doubted = int(
        Flag.EXTRAPOLATED
        | Flag.GROSS_RANGE
        | Flag.RATE_OF_CHANGE
        | Flag.CLIMATOLOGY
        | Flag.MULTI_VARIATE
        | Flag.NEIGHBOUR
    )
    quality[(flags & np.uint32(doubted)) != 0] = Quality.SUSPECT
    failed = int(Flag.NEGATIVE | Flag.OUT_OF_RANGE)
    quality[(flags & np.uint32(failed)) != 0] = Quality.FAIL
    missing = int(Flag.MISSING | Flag.FILLER | Flag.NOT_FINITE)
    quality[(flags & np.uint32(missing)) != 0] = Quality.MISSING
    return quality
