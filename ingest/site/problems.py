"""What can be wrong with a site file, said so that a person can put it right."""

from __future__ import annotations

from difflib import get_close_matches
from typing import TYPE_CHECKING, NamedTuple

from analysis.errors import EuryhaleError

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

LONGEST_FOUND = 80
LONGEST_LIST = 12


class Problem(NamedTuple):
    """One thing that is wrong.

    Attributes
    ----------
    file : str
        Name of the file.
    line : int
        Line, the first being 1.
    key : str
        Where in the file, such as ``tanks[3] (l3).set_point.salinity``; empty for the file as a whole.
    found : str
        What stands there.
    allowed : str
        What would be right.
    nearest : str
        The right word that comes nearest to what was found; empty if none comes near.
    """

    file: str
    line: int
    key: str
    found: str
    allowed: str
    nearest: str = ""

    def __str__(self) -> str:
        key = f"{self.key}: " if self.key else ""
        hint = f". Did you mean {self.nearest}?" if self.nearest else ""
        return f"{self.file}, line {self.line}: {key}found {self.found}; allowed: {self.allowed}{hint}"


class SiteFileError(EuryhaleError):
    """A site file that cannot be used; `problems` holds everything that is wrong with it, by line."""

    def __init__(self, problems: Iterable[Problem]) -> None:
        self.problems = sorted(problems, key=lambda problem: (problem.line, problem.key))
        super().__init__("\n".join(str(problem) for problem in self.problems))


def shown(value: object) -> str:
    """Return *value* as it is shown in a problem: short, and the way YAML writes it."""
    if value is None:
        return "nothing"
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, dict):
        return f"a group of {len(value)} keys"
    if isinstance(value, list):
        return (
            f"a list of {len(value)}"
            if len(value) > 4 or any(isinstance(v, list | dict) for v in value)
            else str(value)
        )
    text = repr(value)
    return text if len(text) <= LONGEST_FOUND else text[: LONGEST_FOUND - 4] + "..." + text[-1]


def nearest_word(found: object, allowed: Iterable[str]) -> str:
    """Return the allowed word nearest to what was found, or an empty text."""
    if not isinstance(found, str):
        return ""
    by_lower = {word.lower(): word for word in allowed}
    wanted = found.strip().lower()[:LONGEST_FOUND]
    matches = get_close_matches(wanted, list(by_lower), n=1, cutoff=0.6)
    if not matches and wanted:
        matches = [word for word in by_lower if wanted in word]
    return by_lower[matches[0]] if len(matches) == 1 else ""


def listed(words: Sequence[str], what: str) -> str:
    """Return "one of: ..." for a sentence about what is allowed, or how to make the first *what*."""
    if not words:
        return f"the id of {what}; the file has none yet"
    each = list(dict.fromkeys(words))
    return f"the id of {what}: {', '.join(each[:LONGEST_LIST])}" + (", ..." if len(each) > LONGEST_LIST else "")
