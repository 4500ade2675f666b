"""Where a worker's time goes, step by step."""

from __future__ import annotations

import time


class Stopwatch:
    """Adds up the time between laps under the names of the steps.

    Parameters
    ----------
    steps : tuple of str
        The steps; each starts at 0.
    """

    def __init__(self, steps: tuple[str, ...]) -> None:
        self.spent_s = dict.fromkeys(steps, 0.0)
        self._since_s = time.perf_counter()

    def start(self) -> None:
        """Begin a run of laps; what lies before is nobody's."""
        self._since_s = time.perf_counter()

    def lap(self, step: str) -> None:
        """Book the time since the last lap under *step*."""
        now_s = time.perf_counter()
        self.spent_s[step] += now_s - self._since_s
        self._since_s = now_s
