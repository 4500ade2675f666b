"""What the quality tests say of a block of readings, and what they say later of readings before it."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Final, Self

import numpy as np

from analysis.flags import Quality
from analysis.sensor.quality.words import TEST_FLAGS, QualityTest, worst

if TYPE_CHECKING:
    from collections.abc import Sequence

    from analysis.arrays import FlagArray, IntArray, QualityArray


@dataclass(frozen=True, slots=True)
class Amendments:
    """Verdicts on readings that were judged before the evidence was in; arrays of one length.

    Each line says: the readings of `sensor` measured from `from_us` to `to_us` (both included) have `quality` in
    `test` for `variable`. Real-time flags stay as they were given; amendments are a second set beside them.

    Parameters
    ----------
    sensor, variable, test : ndarray of int64
    from_us, to_us : ndarray of int64
    quality : ndarray of uint8
    """

    sensor: IntArray
    variable: IntArray
    test: IntArray
    from_us: IntArray
    to_us: IntArray
    quality: QualityArray

    def __len__(self) -> int:
        return int(self.sensor.shape[0])

    @classmethod
    def joined(cls, parts: Sequence[Self]) -> Self:
        """Return the amendments of one or more blocks, in order."""
        full = [part for part in parts if len(part)]
        if not full:
            return parts[0]
        if len(full) == 1:
            return full[0]
        return cls(
            *(
                np.concatenate([getattr(part, name) for part in full])
                for name in ("sensor", "variable", "test", "from_us", "to_us", "quality")
            )
        )


_NOTHING = np.zeros(0, dtype=np.int64)
NO_AMENDMENTS: Final = Amendments(_NOTHING, _NOTHING, _NOTHING, _NOTHING, _NOTHING, np.zeros(0, dtype=np.uint8))


@dataclass(frozen=True, slots=True)
class QualityResult:
    """Flags of a block of readings as given at their arrival, rows in the order in which they were handed in.

    Parameters
    ----------
    sensor, measured_at_us : ndarray of int64, (rows,)
        As handed in.
    by_test : ndarray of uint8, (11, 3, rows)
        QARTOD flags by test and variable (`QualityTest`, `Variable`); a test that does not concern a variable
        is 2 there.
    by_variable : ndarray of uint8, (3, rows)
        Rolled up over the tests that judge a value. The gap test is not among them: it says that readings before
        this one are wanting, not that this one is wrong.
    quality : ndarray of uint8, (rows,)
        Rolled up over the variables: 9 where any of the three is missing.
    flags : ndarray of uint32, (rows,)
        Words of `analysis.flags.Flag`: those handed in and those of the tests that found something.
    ring_changed : ndarray of int64
        Sensors that completed a bucket: their part of the state's ring is to be stored anew.
    amendments : Amendments
        What this block revealed of earlier readings.
    """

    sensor: IntArray
    measured_at_us: IntArray
    by_test: QualityArray
    by_variable: QualityArray
    quality: QualityArray
    flags: FlagArray
    ring_changed: IntArray
    amendments: Amendments

    def test(self, test: QualityTest) -> QualityArray:
        """Return the flags of one test, (3, rows)."""
        return np.asarray(self.by_test[test])

    def amended(self, amendments: Amendments | None = None) -> QualityResult:
        """Return the flags with *amendments* (this block's own by default) worked in: for a file, or a second look.

        A rolled-up flag can only get worse by it, and a missing value stays missing.
        """
        lines = self.amendments if amendments is None else amendments
        if not len(lines):
            return self
        by_test, by_variable, flags = self.by_test.copy(), self.by_variable.copy(), self.flags.copy()
        order = np.lexsort((self.measured_at_us, self.sensor))
        for sensor in np.unique(lines.sensor):
            rows = order[
                np.searchsorted(self.sensor[order], sensor) : np.searchsorted(self.sensor[order], sensor, "right")
            ]
            mine = lines.sensor == sensor
            first = np.searchsorted(self.measured_at_us[rows], lines.from_us[mine])
            stop = np.searchsorted(self.measured_at_us[rows], lines.to_us[mine], "right")
            for a, b, test, variable, quality in zip(
                first, stop, lines.test[mine], lines.variable[mine], lines.quality[mine], strict=True
            ):
                _work_in(by_test, by_variable, flags, rows[a:b], int(test), int(variable), int(quality))
        quality = worst(worst(by_variable[0], by_variable[1]), by_variable[2])
        return replace(self, by_test=by_test, by_variable=by_variable, quality=quality, flags=flags)


def _work_in(
    by_test: QualityArray,
    by_variable: QualityArray,
    flags: FlagArray,
    rows: IntArray,
    test: int,
    variable: int,
    quality: int,
) -> None:
    there = rows[by_test[test, variable, rows] != Quality.MISSING]
    verdict = np.full(there.shape, quality, dtype=np.uint8)
    by_test[test, variable, there] = verdict
    by_variable[variable, there] = worst(by_variable[variable, there], verdict)
    if quality in (Quality.SUSPECT, Quality.FAIL):
        flags[there] |= np.uint32(TEST_FLAGS[QualityTest(test)])


def joined(results: Sequence[QualityResult]) -> QualityResult:
    """Return the results of consecutive blocks as one."""
    if len(results) == 1:
        return results[0]
    return QualityResult(
        sensor=np.concatenate([one.sensor for one in results]),
        measured_at_us=np.concatenate([one.measured_at_us for one in results]),
        by_test=np.concatenate([one.by_test for one in results], axis=2),
        by_variable=np.concatenate([one.by_variable for one in results], axis=1),
        quality=np.concatenate([one.quality for one in results]),
        flags=np.concatenate([one.flags for one in results]),
        ring_changed=np.unique(np.concatenate([one.ring_changed for one in results])),
        amendments=Amendments.joined([one.amendments for one in results]),
    )
