"""The rolling windows of the limits: may the tank go where a candidate step would take it?"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Final

import numpy as np

if TYPE_CHECKING:
    from analysis.acclimation.limits import RollingLimit
    from analysis.acclimation.scenarios import ScenarioTank
    from analysis.arrays import BoolArray, FloatArray

ROUNDING: Final = 1e-9
"""Slack for rounding of floating-point numbers, as a share of a limit."""


@dataclass(frozen=True, slots=True)
class Mark:
    """What the tank was when a step began (or when a reading was taken), as efforts of every limit.

    Parameters
    ----------
    minute : float
        After the start of the plan; negative before it. [min]
    duration_min : float
        Of the step that began then. [min]
    levels : ndarray, shape (limits, scenarios)
        Of the limited quantity.
    down, up : ndarray, shape (limits, scenarios)
        Effort coordinates.
    """

    minute: float
    duration_min: float
    levels: FloatArray
    down: FloatArray
    up: FloatArray


@dataclass(frozen=True, slots=True)
class Windows:
    """The marks that a next step is judged against.

    Two steps count as within one window when the end of the first, done late, and the begin of the second, done
    on time, come so near: the window of every limit is longer by the allowed lateness and the first step itself.

    Parameters
    ----------
    limits : tuple of RollingLimit
        Those that can matter.
    late_min : float
        [min]
    marks : tuple of Mark
        Oldest first.
    slowness : float
        1, or less: every limit is kept with this share of its cap.
    """

    limits: tuple[RollingLimit, ...]
    late_min: float
    marks: tuple[Mark, ...] = ()
    slowness: float = 1.0

    def cap(self, number: int) -> float:
        """Return the effort that limit *number* allows within its window."""
        return self.limits[number].cap * self.slowness

    def efforts(self, tank: ScenarioTank) -> tuple[list[FloatArray], list[FloatArray], list[FloatArray]]:
        """Return levels and effort coordinates of the tank, one array a limit."""
        known: dict[str, FloatArray] = {}
        levels: list[FloatArray] = []
        for limit in self.limits:
            if limit.quantity not in known:
                known[limit.quantity] = tank.level(limit.quantity)
            levels.append(known[limit.quantity])
        down = [limit.down.effort(level) for limit, level in zip(self.limits, levels, strict=True)]
        up = [down[n] if limit.up is limit.down else limit.up.effort(levels[n]) for n, limit in enumerate(self.limits)]
        return levels, down, up

    def marked(self, tank: ScenarioTank, *, minute: float, duration_min: float) -> Windows:
        """Return the windows with the tank as it is when a step begins; marks out of every window are dropped."""
        if not self.limits:
            return self
        levels, down, up = self.efforts(tank)
        longest = max(limit.window_min for limit in self.limits) + self.late_min
        kept = tuple(mark for mark in self.marks if minute - mark.minute < longest + mark.duration_min)
        mark = Mark(minute, duration_min, np.array(levels), np.array(down), np.array(up))
        return replace(self, marks=(*kept, mark))

    def allows(self, candidates: ScenarioTank, *, minute: float) -> BoolArray:
        """Return True for candidates that keep every limit in every scenario.

        The tank as it is before the step must have been marked at *minute* (see `marked`).

        Parameters
        ----------
        candidates : ScenarioTank
            Arrays of shape (candidates, scenarios).
        minute : float
            When the step begins. [min]
        """
        allowed = np.isfinite(candidates.water.mass_kg).all(axis=-1)
        if not self.limits or not self.marks:
            return np.asarray(allowed)
        levels, down, up = self.efforts(candidates)
        ages = minute - np.array([mark.minute for mark in self.marks])
        durations = np.array([mark.duration_min for mark in self.marks])
        for number, limit in enumerate(self.limits):
            which = np.flatnonzero(ages < limit.window_min + self.late_min + durations - ROUNDING)
            if not which.size:
                continue
            before = np.array([self.marks[mark].levels[number] for mark in which])[:, np.newaxis]
            before_down = np.array([self.marks[mark].down[number] for mark in which])[:, np.newaxis]
            before_up = np.array([self.marks[mark].up[number] for mark in which])[:, np.newaxis]
            effort = np.where(levels[number] < before, before_down - down[number], up[number] - before_up)
            broken = (effort > self.cap(number) * (1.0 + ROUNDING)).any(axis=-1)
            allowed &= ~broken.any(axis=0)
        return np.asarray(allowed)

    def room(self, *, minute: float) -> float:
        """Return the least share of a salinity limit that is still free at *minute*, in the worst scenario.

        The tank must have been marked at *minute*. 1: the windows are empty; 0: nothing may change now.
        """
        now, room = self.marks[-1], 1.0
        for number, limit in enumerate(self.limits):
            if limit.quantity != "salinity":
                continue
            for mark in self.marks:
                if minute - mark.minute < limit.window_min + self.late_min + mark.duration_min - ROUNDING:
                    used = np.maximum(mark.down[number] - now.down[number], now.up[number] - mark.up[number])
                    room = min(room, 1.0 - float(used.max()) / self.cap(number))
        return room

    def next_release(self, *, after: float) -> float:
        """Return the first minute after *after* at which a mark leaves a window; infinite when none does."""
        leaving = [
            mark.minute + limit.window_min + self.late_min + mark.duration_min
            for mark in self.marks
            for limit in self.limits
        ]
        later = [minute for minute in leaving if minute > after + ROUNDING]
        return min(later, default=float("inf"))
