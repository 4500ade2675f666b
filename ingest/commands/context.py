"""What a command may reach: the alarms of the running chain, and the time."""

from __future__ import annotations

from typing import TYPE_CHECKING, Protocol

if TYPE_CHECKING:
    from analysis.alarm.events import Event
    from analysis.alarm.transition import Transition
    from ingest.store.block import Occurrence


class Context(Protocol):
    """The worker as a command sees it."""

    @property
    def now_us(self) -> int:
        """The time of this ruling. [us UTC]"""
        ...

    def act(self, subject: str, condition: str, event: Event) -> tuple[Transition, ...] | None:
        """Put a person's act to an alarm; None if there is no such alarm."""
        ...

    def occurrences(self, subject: str, condition: str, transitions: tuple[Transition, ...]) -> tuple[Occurrence, ...]:
        """Return what *transitions* leave in the ledger."""
        ...
