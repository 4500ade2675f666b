"""Columns of texts as arrays of numbers, with a flag word for every cell that holds none."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

import numpy as np

from analysis.flags import Flag
from ingest.tables.error import CellRemark, shown

if TYPE_CHECKING:
    from collections.abc import Sequence

    from analysis.arrays import FlagArray, FloatArray, IntArray

_MISSING, _FILLER, _NOT_FINITE = (np.uint32(flag) for flag in (Flag.MISSING, Flag.FILLER, Flag.NOT_FINITE))
_NUMBER = re.compile(r"[-+]?([0-9]+\.?[0-9]*|\.[0-9]+)([eE][-+]?[0-9]+)?\Z")
_DECIMAL_COMMA = re.compile(r"[-+]?[0-9]+,[0-9]+([eE][-+]?[0-9]+)?\Z")
_EMPTY_WORDS = frozenset(
    {"", "-", "--", "---", "n/a", "na", "#n/a", "null", "none", "nil", "nan", "-nan", "missing", "nd", "n.d.", "*", "?", "."}
)  # fmt: skip
"""Texts that loggers and spreadsheets write where there is no value. Common practice."""
_INFINITE_WORDS = frozenset({"inf", "+inf", "-inf", "infinity", "-infinity", "#div/0!", "#num!", "#value!"})


def number_column(
    texts: Sequence[str],
    *,
    lines: IntArray,
    column: str,
    has_decimal_comma: bool,
    fillers: Sequence[float],
) -> tuple[FloatArray, FlagArray, list[CellRemark]]:
    """Return the numbers of a column.

    Parameters
    ----------
    texts : sequence of str
        The cells.
    lines : ndarray of int64
        Their lines in the file.
    column : str
        Name of the column, for the remarks.
    has_decimal_comma : bool
        Whether 25,1 is a number.
    fillers : sequence of float
        Numbers that stand for "no value".

    Returns
    -------
    numbers : ndarray of float64
        NaN where there is no usable number.
    flags : ndarray of uint32
        MISSING, FILLER or NOT_FINITE there; 0 elsewhere.
    remarks : list of CellRemark
        Cells that hold neither a number nor a known word for "no value".
    """
    remarks: list[CellRemark] = []
    flags = np.zeros(len(texts), dtype=np.uint32)
    numbers = _all_numbers(texts, has_decimal_comma=has_decimal_comma)
    if numbers is None:
        numbers = np.empty(len(texts), dtype=np.float64)
        for index, text in enumerate(texts):
            numbers[index], flags[index], remark = _number(text.strip(), has_decimal_comma=has_decimal_comma)
            if remark:
                remarks.append(CellRemark(int(lines[index]), column, shown(text), remark))
    else:
        flags[~np.isfinite(numbers)] = _NOT_FINITE
    flags[np.isin(numbers, fillers)] = _FILLER
    numbers[flags != 0] = np.nan
    return numbers, flags, remarks


def _all_numbers(texts: Sequence[str], *, has_decimal_comma: bool) -> FloatArray | None:
    """Return a column in which every cell is a plain number, all at once; None where one is not."""
    whole = "\n".join(texts)
    if "_" in whole or "n" in whole or "N" in whole or (has_decimal_comma and "." in whole):
        return None  # 1_000, nan, and points beside decimal commas: cell by cell
    if has_decimal_comma:
        texts = whole.replace(",", ".").split("\n")
    try:
        return np.array(texts, dtype=np.float64)
    except ValueError:
        return None


def _number(text: str, *, has_decimal_comma: bool) -> tuple[float, np.uint32, str]:
    """Return number, flag, and what would be allowed where the text is no number."""
    if has_decimal_comma and _DECIMAL_COMMA.match(text):
        text = text.replace(",", ".")
    if _NUMBER.match(text):
        number = float(text)
        return number, np.uint32(0) if np.isfinite(number) else _NOT_FINITE, ""
    word = text.lower()
    if word in _EMPTY_WORDS:
        return np.nan, _MISSING, ""
    if word in _INFINITE_WORDS:
        return np.nan, _NOT_FINITE, ""
    if _DECIMAL_COMMA.match(text):
        return np.nan, _MISSING, "a number with a decimal point (say that the file has a decimal comma)"
    return np.nan, _MISSING, "a number, or nothing"


def has_commas_for_points(texts: Sequence[str]) -> bool:
    """Return whether the numbers of a column are written with a decimal comma: some are, and none has a point."""
    stripped = [text.strip() for text in texts]
    return any(_DECIMAL_COMMA.match(text) for text in stripped) and not any("." in text for text in stripped)


def is_number(text: str, *, has_decimal_comma: bool) -> bool:
    """Return whether a cell holds a number."""
    text = text.strip()
    return bool(_NUMBER.match(text) or (has_decimal_comma and _DECIMAL_COMMA.match(text)))


def is_empty(text: str) -> bool:
    """Return whether a cell holds nothing, or a word for "no value"."""
    return text.strip().lower() in _EMPTY_WORDS
