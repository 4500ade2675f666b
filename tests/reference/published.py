"""Reading the tables of published values that lie beside this file: one CSV a source."""

from __future__ import annotations

import csv
import math
from pathlib import Path
from typing import NamedTuple

FOLDER = Path(__file__).parent


class PublishedRow(NamedTuple):
    """One published value: what it is of, what went in, what is printed, how near we must come."""

    table: str
    id: str
    quantity: str
    inputs: dict[str, float]
    expected: float
    tolerance: float


def header(table: str) -> dict[str, str]:
    """Return the `# key: value` lines at the top of a table."""
    lines = (FOLDER / f"{table}.csv").read_text(encoding="utf-8").splitlines()
    pairs = (line.removeprefix("#").split(":", 1) for line in lines if line.startswith("#"))
    return {key.strip(): value.strip() for key, value in pairs}


def rows(table: str) -> list[PublishedRow]:
    """Return the rows of a table whose columns are id, quantity, inputs, expected, unit, tolerance."""
    lines = (FOLDER / f"{table}.csv").read_text(encoding="utf-8").splitlines()
    found = csv.DictReader(line for line in lines if not line.startswith("#"))
    return [
        PublishedRow(
            table=table,
            id=row["id"],
            quantity=row["quantity"],
            inputs=_inputs(row["inputs"]),
            expected=float(row["expected"]),
            tolerance=float(row["tolerance"]),
        )
        for row in found
    ]


def _inputs(text: str) -> dict[str, float]:
    pairs = (pair.split("=", 1) for pair in text.split(";") if pair.strip())
    return {name.strip(): float(value) for name, value in pairs}


def is_met(found: float, row: PublishedRow) -> bool:
    """Return True where *found* is the printed value within its tolerance (a printed nan is met by nan)."""
    if math.isnan(row.expected):
        return math.isnan(found)
    return abs(found - row.expected) <= row.tolerance
