"""Quality flags as a table: one column a test and variable."""

from __future__ import annotations

from typing import TYPE_CHECKING, Final, TextIO

import numpy as np

from analysis.flags import words
from analysis.sensor.quality.words import QualityTest, Variable

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator, Mapping

    from analysis.arrays import FloatArray, IntArray, QualityArray
    from analysis.sensor.quality.result import QualityResult

ROWS_AT_ONCE = 8192

ONE_VARIABLE: Final = {
    QualityTest.GAP: Variable.CONDUCTIVITY,
    QualityTest.MULTI_VARIATE: Variable.TEMPERATURE,
    QualityTest.IN_AIR: Variable.CONDUCTIVITY,
}
"""Tests that judge a row as a whole, or one variable: a single column, without the variable's name."""


def flag_columns() -> list[tuple[str, QualityTest, Variable]]:
    """Return the flag columns that are written: name, test, variable."""
    columns = []
    for test in QualityTest:
        if test in ONE_VARIABLE:
            columns.append((test.name.lower(), test, ONE_VARIABLE[test]))
        else:
            columns += [(f"{test.name.lower()}_{variable.name.lower()}", test, variable) for variable in Variable]
    return columns


def write_flags(
    target: TextIO,
    result: QualityResult,
    *,
    rows: IntArray,
    numbers: Mapping[str, FloatArray],
    has_decimal_comma: bool = False,
    progress: Callable[[int, int], None] | None = None,
) -> None:
    """Write one line a reading: time, numbers, a flag for each test and variable, the rolled-up flags, the words.

    Parameters
    ----------
    target : text file
    result : QualityResult
    rows : ndarray of int64
        Which rows of the result, in the order in which they are written.
    numbers : mapping of str to ndarray of float64
        Columns beside the time; NaN is left empty.
    has_decimal_comma : bool
        Write 25,1 and separate by semicolons.
    progress : callable, optional
        Called with (rows written, rows in all).
    """
    separator = ";" if has_decimal_comma else ","
    columns = flag_columns()
    rolled = [f"quality_{variable.name.lower()}" for variable in Variable]
    head = ("time_utc", *numbers, *(name for name, _, _ in columns), *rolled, "quality", "flags")
    print(*head, sep=separator, file=target)
    said: dict[int, str] = {}
    for start in range(0, rows.shape[0], ROWS_AT_ONCE):
        part = rows[start : start + ROWS_AT_ONCE]
        times = np.datetime_as_string(result.measured_at_us[part].astype("datetime64[us]"), unit="ms")
        cells = (_texts(values[part], has_decimal_comma=has_decimal_comma) for values in numbers.values())
        flags = _digit_rows(_digits(result, part, columns), separator)
        for time, *texts, digits, word in zip(times, *cells, flags, result.flags[part].tolist(), strict=True):
            if word not in said:
                said[word] = " ".join(words(word))
            print(f"{time}Z", *texts, digits, said[word], sep=separator, file=target)
        if progress is not None:
            progress(min(start + ROWS_AT_ONCE, rows.shape[0]), rows.shape[0])


def _digits(result: QualityResult, rows: IntArray, columns: list[tuple[str, QualityTest, Variable]]) -> QualityArray:
    by_test = np.stack([result.by_test[test, variable, rows] for _, test, variable in columns])
    return np.concatenate((by_test, result.by_variable[:, rows], result.quality[None, rows]))


def _digit_rows(digits: QualityArray, separator: str) -> Iterator[str]:
    """Yield each column of one-digit flags as text with separators between."""
    characters = np.full((digits.shape[1], 2 * digits.shape[0] - 1), ord(separator), dtype=np.uint8)
    characters[:, ::2] = digits.T + ord("0")
    for row in characters:
        yield row.tobytes().decode("ascii")


def _texts(values: FloatArray, *, has_decimal_comma: bool) -> Iterator[str]:
    for value in values.tolist():
        text = "" if value != value else f"{value:.7g}"
        yield text.replace(".", ",") if has_decimal_comma else text
