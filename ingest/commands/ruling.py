"""What the worker decides on a command."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal, Self

if TYPE_CHECKING:
    from ingest.store.block import Occurrence, SensorWork
    from ingest.store.corrected import JobRow

Verdict = Literal["applied", "refused", "expired"]


@dataclass(frozen=True, slots=True)
class Ruling:
    """The outcome of a command, with what it leaves in the ledger.

    `reason` is a code that `ingest.words` turns into a sentence, empty when there is nothing to explain.
    """

    outcome: Verdict
    reason: str = ""
    occurrences: tuple[Occurrence, ...] = ()
    has_to_reload: bool = False
    work: SensorWork | None = None
    jobs: tuple[JobRow, ...] = ()

    @classmethod
    def refused(cls, reason: str) -> Self:
        """Return a refusal."""
        return cls("refused", reason)
