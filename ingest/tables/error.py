"""What can be wrong with a table as a whole, and with a cell of it."""

from __future__ import annotations

from typing import NamedTuple

from analysis.errors import EuryhaleError

LONGEST_FOUND = 80


class TableError(EuryhaleError):
    """A table that cannot be read as asked.

    Parameters
    ----------
    file : str
        Name of the file.
    line : int
        Line, the first being 1; 0 where the file as a whole is meant.
    column : str
        Name of the column; empty where the line as a whole is meant.
    found : str
        What is there.
    allowed : str
        What would be right, and what to change.
    """

    def __init__(self, file: str, *, line: int, column: str, found: str, allowed: str) -> None:
        self.file = file
        self.line = line
        self.column = column
        self.found = found
        self.allowed = allowed
        place = f"{file}, line {line}" if line else file
        place += f", column {column}" if column else ""
        super().__init__(f"{place}: found {found}; allowed: {allowed}")


class CellRemark(NamedTuple):
    """A cell, or a row, that could not be used; the rest of the table goes on.

    Attributes
    ----------
    line : int
        Line in the file, the first being 1.
    column : str
        Name of the column; empty where the row as a whole is meant.
    found : str
        What is there, shortened.
    allowed : str
        What would be right.
    """

    line: int
    column: str
    found: str
    allowed: str


def shown(text: str) -> str:
    """Return *text* in quotes and in a length that fits a line."""
    return repr(text if len(text) <= LONGEST_FOUND else text[:LONGEST_FOUND] + "...")
