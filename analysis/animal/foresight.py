"""The truth loop: mortality counts beside past scores. Did the score foresee the losses?"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from analysis.animal.strains import BAND_EDGES

if TYPE_CHECKING:
    from collections.abc import Sequence

    from analysis.arrays import FloatArray, IntArray

US_PER_H = 3_600_000_000
LOOK_BACK_H = 72.0
"""Losses show within three to four days of a salinity event (BUIKE2018)."""
RAISED_FACTOR = 3.0
"""Losses above this many times the usual rate count as raised. Assumed."""
MIN_RAISED_PER_D = 0.01
"""And above this share a day. Assumed."""


@dataclass(frozen=True, slots=True)
class DeathCount:
    """Dead animals taken out over a time.

    Parameters
    ----------
    from_us, to_us : int
        The time that the count covers.
    dead, before : int
        Dead, and alive at its start.
    """

    from_us: int
    to_us: int
    dead: int
    before: int

    @property
    def share_per_d(self) -> float:
        """Share of the animals lost a day."""
        days = max(1e-9, (self.to_us - self.from_us) / (24 * US_PER_H))
        return 1.0 - (1.0 - self.dead / self.before) ** (1.0 / days) if self.before else float("nan")


@dataclass(frozen=True, slots=True)
class Foreseen:
    """One count beside the worst score before it."""

    count: DeathCount
    worst_stress: float
    is_raised: bool
    was_warned: bool


@dataclass(frozen=True, slots=True)
class Foresight:
    """The record of the score.

    Parameters
    ----------
    rows : tuple of Foreseen
        Every count with a score in the days before it.
    foreseen, missed, unfounded, quiet : int
        Raised losses with and without a warning; warnings without raised loss; neither.
    """

    rows: tuple[Foreseen, ...]
    foreseen: int
    missed: int
    unfounded: int
    quiet: int


def foresight(
    counts: Sequence[DeathCount], *, times_us: IntArray, stress: FloatArray, warned_from: float = BAND_EDGES[1]
) -> Foresight:
    """Return how the score and the losses went together.

    A count is raised when its share a day is over `RAISED_FACTOR` times the median of all counts and over
    `MIN_RAISED_PER_D`; it was warned of when the stress reached *warned_from* within `LOOK_BACK_H` before its end.

    Parameters
    ----------
    counts : sequence of DeathCount
        In any order.
    times_us, stress : arrays
        Scores, times rising; NaN where not known. [us]
    warned_from : float
        Default: the band "strained".
    """
    usual = float(np.nanmedian([count.share_per_d for count in counts])) if counts else 0.0
    rows = []
    for count in sorted(counts, key=lambda each: each.to_us):
        first, last = np.searchsorted(times_us, [count.to_us - int(LOOK_BACK_H * US_PER_H), count.to_us + 1])
        seen = stress[first:last]
        if not np.any(np.isfinite(seen)):
            continue
        worst = float(np.nanmax(seen))
        share = count.share_per_d
        is_raised = share > MIN_RAISED_PER_D and share > RAISED_FACTOR * usual
        rows.append(Foreseen(count, worst, is_raised, worst >= warned_from))
    tally = [(row.is_raised, row.was_warned) for row in rows]
    return Foresight(
        tuple(rows), tally.count((True, True)), tally.count((True, False)), tally.count((False, True)), tally.count((False, False))
    )  # fmt: skip
