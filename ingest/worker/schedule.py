"""What is due when, by the monotonic clock: steps of the wall clock move nothing."""

from __future__ import annotations

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from ingest.clock import Clock


class Schedule:
    """Remembers when each task was last done."""

    def __init__(self, clock: Clock) -> None:
        self._clock = clock
        self._done_at_s: dict[str, float] = {}

    def is_due(self, task: str, every_s: float) -> bool:
        """Return whether *task* is due, and take it as done now if so. A task is due at first sight."""
        now_s = self._clock.monotonic_s()
        done_at_s = self._done_at_s.get(task)
        if done_at_s is not None and now_s - done_at_s < every_s:
            return False
        self._done_at_s[task] = now_s
        return True

    def make_due(self, task: str) -> None:
        """Let *task* be due at the next look."""
        self._done_at_s.pop(task, None)
