"""The stress test of postlarvae: a sharp drop, a rest, a count. It tells short-term quality and no more.

A fall to half the salinity or to fresh water for 30 minutes and back for 30 minutes; lots with more than
75-80 % alive pass (from memory, FAO450). It foresees only the first days (PALACIOS2007).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

from scipy.special import betaincinv

from analysis.errors import InvalidInputError

USUAL_PASS_MARK = 0.75
"""From memory (FAO450): 75-80 %."""


@dataclass(frozen=True, slots=True)
class PostlarvaeTest:
    """One stress test as it was done.

    Parameters
    ----------
    at_us : int
        When.
    age_d : float
        Days since metamorphosis. [d]
    from_ppt, to_ppt : float
        Rearing and test salinity.
    minutes, recovery_minutes : float
        In the test water, and back in rearing water before the count. [min]
    counted, alive : int
        Animals in the test, and alive after recovery.
    pass_mark : float
        The site's own mark, 0 to 1.
    by : str
        Who did it.
    """

    at_us: int
    age_d: float
    from_ppt: float
    to_ppt: float
    minutes: float
    recovery_minutes: float
    counted: int
    alive: int
    pass_mark: float = USUAL_PASS_MARK
    by: str = ""

    def __post_init__(self) -> None:
        if self.counted < 1:
            raise InvalidInputError("counted", found=self.counted, allowed="at least 1")
        if not 0 <= self.alive <= self.counted:
            raise InvalidInputError("alive", found=self.alive, allowed=f"0 to {self.counted}")
        if not 0.0 < self.pass_mark <= 1.0:
            raise InvalidInputError("pass_mark", found=self.pass_mark, allowed="more than 0, at most 1")
        for name in ("from_ppt", "to_ppt", "minutes", "recovery_minutes"):
            if not getattr(self, name) >= 0.0:
                raise InvalidInputError(name, found=getattr(self, name), allowed="0 or more")


@dataclass(frozen=True, slots=True)
class Verdict:
    """Fraction alive with its 90 % interval (Clopper and Pearson 1934), and what it says of the mark.

    Parameters
    ----------
    alive, low, high : float
        Fraction, and its interval.
    has_passed : bool
        Fraction at or above the mark.
    is_clear : bool
        The interval does not contain the mark: a second count would hardly change the verdict.
    """

    alive: float
    low: float
    high: float
    has_passed: bool
    is_clear: bool


def verdict(test: PostlarvaeTest) -> Verdict:
    """Return the verdict of one test."""
    alive, dead = test.alive, test.counted - test.alive
    low = float(betaincinv(alive, dead + 1, 0.05)) if alive else 0.0
    high = float(betaincinv(alive + 1, dead, 0.95)) if dead else 1.0
    share = alive / test.counted
    return Verdict(share, low, high, share >= test.pass_mark, not low <= test.pass_mark <= high)


def animals_needed(pass_mark: float, *, half_width: float = 0.1) -> int:
    """Return how many animals to count so that a 90 % interval at the mark is this narrow either way."""
    return math.ceil(pass_mark * (1.0 - pass_mark) * (1.645 / half_width) ** 2)
