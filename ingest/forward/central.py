"""The central store behind a port of three methods: write lines, ask, say whether it is there."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any, Protocol

from analysis.errors import EuryhaleError

if TYPE_CHECKING:
    from collections.abc import Sequence
    from pathlib import Path


class CentralUnreachableError(EuryhaleError):
    """The central store does not answer, or asks to come back later: the lines stay in the queue."""


class LinesRefusedError(EuryhaleError):
    """The central store has read the lines and does not want them; sending them again would change nothing."""


class Central(Protocol):
    """A central store of several sites."""

    def write(self, lines: Sequence[str]) -> None:
        """Write *lines*; returning means that the server has said yes.

        Raises
        ------
        CentralUnreachableError, LinesRefusedError
        """
        ...

    def ask(self, question: str) -> list[dict[str, Any]]:
        """Return the rows that answer an InfluxQL question, times in microseconds UTC."""
        ...

    def close(self) -> None:
        """Let go of the connection."""
        ...


@dataclass
class MemoryCentral:
    """A central store in memory, for tests and dry runs: keeps lines, can be told to fail."""

    lines: list[str] = field(default_factory=list)
    failure: EuryhaleError | None = None
    answers: dict[str, list[dict[str, Any]]] = field(default_factory=dict)

    def write(self, lines: Sequence[str]) -> None:
        """Keep *lines*, or fail as told."""
        if self.failure is not None:
            raise self.failure
        self.lines.extend(lines)

    def ask(self, question: str) -> list[dict[str, Any]]:
        """Return the prepared answer."""
        return self.answers.get(question, [])

    def close(self) -> None:
        """Nothing to let go of."""


@dataclass(frozen=True, slots=True)
class CentralAccess:
    """How the central InfluxDB is reached. Versions 1.8, 2 and 3 take the same writes and the same questions."""

    url: str
    bucket: str
    organisation: str = ""
    token: str = ""
    ca_file: Path | None = None
    timeout_s: float = 10.0
