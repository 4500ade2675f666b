"""The quality tests, the variables they judge, and how their flags are rolled up."""

from __future__ import annotations

from enum import IntEnum
from typing import TYPE_CHECKING, Final

import numpy as np

from analysis.flags import Flag, Quality

if TYPE_CHECKING:
    from analysis.arrays import QualityArray


class Variable(IntEnum):
    """What is judged: the first axis of every array of the quality tests."""

    CONDUCTIVITY = 0
    """At the water's own temperature, compensation undone. [mS/cm]"""
    TEMPERATURE = 1
    """[degC]"""
    SALINITY = 2
    """Practical salinity in seawater, g/kg in other kinds of water."""


class QualityTest(IntEnum):
    """The tests, in the order of their rows in `QualityResult.by_test`.

    The first nine are tests of the QARTOD manual [1]_; the last two are the project's own.

    References
    ----------
    .. [1] U.S. Integrated Ocean Observing System, Manual for Real-Time Quality Control of In-situ Temperature
       and Salinity Data, version 2.1, 2020. DOI 10.25923/x02m-m555.
    """

    GAP = 0
    GROSS_RANGE = 1
    CLIMATOLOGY = 2
    SPIKE = 3
    RATE_OF_CHANGE = 4
    FLAT_LINE = 5
    ATTENUATED_SIGNAL = 6
    MULTI_VARIATE = 7
    NEIGHBOUR = 8
    NOISE = 9
    IN_AIR = 10


TEST_FLAGS: Final = {
    QualityTest.GAP: Flag.GAP,
    QualityTest.GROSS_RANGE: Flag.GROSS_RANGE,
    QualityTest.CLIMATOLOGY: Flag.CLIMATOLOGY,
    QualityTest.SPIKE: Flag.SPIKE,
    QualityTest.RATE_OF_CHANGE: Flag.RATE_OF_CHANGE,
    QualityTest.FLAT_LINE: Flag.FLAT_LINE,
    QualityTest.ATTENUATED_SIGNAL: Flag.ATTENUATED,
    QualityTest.MULTI_VARIATE: Flag.MULTI_VARIATE,
    QualityTest.NEIGHBOUR: Flag.NEIGHBOUR,
    QualityTest.NOISE: Flag.NOISE,
    QualityTest.IN_AIR: Flag.IN_AIR,
}
"""The flag word that goes with a test's suspect or fail."""

VARIABLES: Final = len(Variable)
TESTS: Final = len(QualityTest)

# Precedence when flags meet: missing is never hidden, then fail, suspect, pass, not evaluated.
_RANK = np.zeros(10, dtype=np.uint8)
_RANK[[Quality.NOT_EVALUATED, Quality.PASS, Quality.SUSPECT, Quality.FAIL, Quality.MISSING]] = [0, 1, 2, 3, 4]
_BY_RANK = np.array(
    [Quality.NOT_EVALUATED, Quality.PASS, Quality.SUSPECT, Quality.FAIL, Quality.MISSING], dtype=np.uint8
)


def worst(first: QualityArray, second: QualityArray) -> QualityArray:
    """Return the flag that prevails: missing over fail over suspect over pass over not evaluated."""
    return np.asarray(_BY_RANK[np.maximum(_RANK[first], _RANK[second])])


def rolled_up(flags: QualityArray) -> QualityArray:
    """Return the flag that prevails along the first axis: missing over fail, suspect, pass, not evaluated.

    The manual leaves the roll-up to the operator. A roll-up in which a good flag hides a missing value (a known
    trap of general-purpose implementations) would show a sensor without values as good.

    Parameters
    ----------
    flags : ndarray of uint8
        QARTOD flags, tests (or variables) along the first axis.

    Returns
    -------
    ndarray of uint8
        One axis less.
    """
    return np.asarray(_BY_RANK[_RANK[flags].max(axis=0)])
