"""How a table is laid out: encoding, separator, header line, decimal sign. Found from the names that are asked for."""

from __future__ import annotations

import csv
import re
from dataclasses import dataclass
from difflib import get_close_matches
from itertools import islice
from typing import TYPE_CHECKING

from ingest.tables.encoding import encoding_of
from ingest.tables.error import TableError, shown
from ingest.tables.numbers import has_commas_for_points, is_empty, is_number

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence
    from pathlib import Path

SEPARATORS = (",", ";", "\t", "|", " ")
HEADER_WITHIN_LINES = 200
SAMPLE_ROWS = 2000
_NUMBERED = re.compile(r"#([1-9][0-9]{0,3})\Z")
_UNIT_TAIL = re.compile(r"\s*[(\[].*[)\]]\s*\Z")


@dataclass(frozen=True, slots=True)
class Layout:
    """What a table looks like.

    Attributes
    ----------
    encoding : str
        Name of the encoding.
    separator : str
        One character; a blank stands for any number of blanks.
    header_line : int
        Line of the names; 0 where there is none.
    names : tuple of str
        Names of all columns; ``#1``, ``#2``, ... where there is no header.
    has_decimal_comma : bool
        Whether 25,1 is a number.
    first_line : int
        Line of the first reading.
    """

    encoding: str
    separator: str
    header_line: int
    names: tuple[str, ...]
    has_decimal_comma: bool
    first_line: int


@dataclass(frozen=True, slots=True)
class Hints:
    """What the caller knows already; None is to be found out.

    Attributes
    ----------
    separator, encoding : str, optional
    has_decimal_comma : bool, optional
    header_line : int, optional
        The first being 1.
    """

    separator: str | None = None
    encoding: str | None = None
    has_decimal_comma: bool | None = None
    header_line: int | None = None


def layout_of(path: Path, *, wanted: Sequence[str], number_columns: Sequence[str], hints: Hints) -> Layout:
    """Return the layout of the file at *path*.

    Parameters
    ----------
    path : pathlib.Path
        The file.
    wanted : sequence of str
        Names of columns that are asked for; ``#3`` means the third column. The header is the line that has them all.
    number_columns : sequence of str
        Those of them that hold numbers: they tell where the readings begin, and the decimal sign.
    hints : Hints
        What is known already.

    Raises
    ------
    TableError
        If no line has all the names; the nearest names are told.
    """
    encoding = hints.encoding or encoding_of(path)
    lines = _first_lines(path, encoding)
    named = [name for name in wanted if not _NUMBERED.match(name)]
    separators = (hints.separator,) if hints.separator else SEPARATORS
    header_line, separator, names = _header(lines, named, separators, hints.header_line, path.name)
    if not named:
        separator = hints.separator or _separator_without_header(lines, wanted)
        header_line = hints.header_line or 0
        count = max((len(row) for _, row in rows_of(lines[header_line:], separator)), default=0)
        names = tuple(f"#{number}" for number in range(1, count + 1))
    positions = {name: position_of(name, names, file=path.name, line=header_line) for name in wanted}
    checked = [positions[name] for name in number_columns]
    body = [(number + header_line, row) for number, row in rows_of(lines[header_line:], separator)]
    comma = hints.has_decimal_comma
    if comma is None:
        cells = [[row[place] for _, row in body if place < len(row)] for place in checked]
        comma = any(has_commas_for_points(column) for column in cells)
    first_line = _first_reading(body, checked, has_decimal_comma=comma, after=header_line)
    return Layout(encoding, separator, header_line, names, comma, first_line)


def rows_of(lines: Sequence[str], separator: str) -> Iterator[tuple[int, list[str]]]:
    """Yield line number (of the given lines, the first being 1) and cells of every row that is not blank."""
    reader = csv.reader(lines, delimiter=separator, skipinitialspace=separator == " ")
    try:
        for row in reader:
            if row:
                yield reader.line_num, row
    except csv.Error:
        return


def position_of(name: str, names: Sequence[str], *, file: str, line: int) -> int:
    """Return the place of a column: by its number, its exact name, its name in any case, or without its unit.

    Raises
    ------
    TableError
        If there is none, or more than one.
    """
    if numbered := _NUMBERED.match(name):
        place = int(numbered[1]) - 1
        if place >= len(names):
            raise TableError(
                file, line=line, column=name, found=f"{len(names)} columns", allowed=f"#1 to #{len(names)}"
            )
        return place
    for kind in (str, str.casefold, _bare):
        found = [place for place, known in enumerate(names) if kind(known) == kind(name)]
        if len(found) == 1:
            return found[0]
        if found:
            numbers = ", ".join(f"#{place + 1}" for place in found)
            allowed = f"a name that is there once; or the column's number: {numbers}"
            raise TableError(file, line=line, column=name, found=f"the name {len(found)} times", allowed=allowed)
    near = get_close_matches(name, names, n=1)
    hint = f"; nearest: {near[0]}" if near else ""
    allowed = f"one of: {', '.join(names)}{hint}"
    raise TableError(file, line=line, column=name, found="no such column", allowed=allowed)


def _bare(name: str) -> str:
    """Return a column's name in lower case and without its unit."""
    return _UNIT_TAIL.sub("", name).strip().casefold()


def _first_lines(path: Path, encoding: str) -> list[str]:
    with path.open(encoding=encoding, errors="replace", newline="") as file:
        return list(islice(file, HEADER_WITHIN_LINES + SAMPLE_ROWS))


def _header(
    lines: Sequence[str], named: Sequence[str], separators: Sequence[str], given: int | None, file: str
) -> tuple[int, str, tuple[str, ...]]:
    """Return line, separator and names of the header: the first line that holds every name asked for."""
    if not named:
        return 0, separators[0], ()
    numbers = [given] if given else range(1, min(len(lines), HEADER_WITHIN_LINES) + 1)
    best: tuple[int, int, str, tuple[str, ...]] = (-1, 0, separators[0], ())
    for number in numbers:
        for separator in separators:
            names = _names(lines[number - 1 : number], separator)
            known = {kind(name) for name in names for kind in (str, str.casefold, _bare)}
            held = sum(1 for name in named if {name, name.casefold(), _bare(name)} & known)
            score = held * 1000 + min(len(names), 999)
            if score > best[0] and len(names) >= min(len(named), 2):
                best = (score, number, separator, names)
        if best[0] >= len(named) * 1000:
            break
    if best[0] < 1000:
        found = shown(", ".join(best[3])) if best[3] else "no line of names"
        allowed = f"a line with the names {', '.join(named)}; or columns by number, such as #1"
        raise TableError(file, line=best[1], column="", found=found, allowed=allowed)
    return best[1], best[2], best[3]


def _names(line: Sequence[str], separator: str) -> tuple[str, ...]:
    row = next((row for _, row in rows_of(line, separator)), [])
    return tuple(name.strip().lstrip("\ufeff") for name in row)


def _separator_without_header(lines: Sequence[str], wanted: Sequence[str]) -> str:
    """Return the separator that gives most lines the columns asked for."""
    needed = max((int(match[1]) for name in wanted if (match := _NUMBERED.match(name))), default=1)
    fit = {separator: sum(1 for _, row in rows_of(lines, separator) if len(row) >= needed) for separator in SEPARATORS}
    return max(SEPARATORS, key=lambda separator: fit[separator])


def _first_reading(
    body: Sequence[tuple[int, list[str]]], places: Sequence[int], *, has_decimal_comma: bool, after: int
) -> int:
    """Return the line of the first reading: lines of units or words between the header and it are passed over."""
    for line, row in body:
        cells = [row[place] for place in places if place < len(row)]
        if any(is_number(cell, has_decimal_comma=has_decimal_comma) for cell in cells):
            return line
        if cells and all(is_empty(cell) for cell in cells):
            return line  # a reading without values
    return after + 1
