"""One language: the tables of its file, with the rules for filling them."""

from __future__ import annotations

import importlib
import string
from collections.abc import Iterable, Mapping
from types import ModuleType
from typing import Any

from analysis.errors import InvalidInputError

TABLES = (
    "UNITS", "QUANTITIES", "TIMES", "PRIORITIES", "ALARMS", "ALARM_STATES", "STRAINS", "FLAGS", "QUALITIES",
    "SENSOR_STATES", "SENSOR_BELIEFS", "SENSOR_FINDINGS", "REFUSALS", "COMMAND_STATES",
    "COMMAND_REASONS", "BALANCE", "PROVENANCE", "COUNTS", "BOARD", "ALARM_ACTS", "CALLS",
)  # fmt: skip


class Language:
    """The words of one language.

    Parameters
    ----------
    code : str
        Name of the file beside this one: "en".

    Raises
    ------
    InvalidInputError
        If there is no such file, or a table in it lacks a word that English has.
    """

    def __init__(self, code: str = "en") -> None:
        self.code = code
        self._tables = _tables(code)

    def __getattr__(self, name: str) -> Any:
        try:
            return getattr(self._tables, name)
        except AttributeError:
            raise AttributeError(f"the language {self.code!r} has no table {name!r}") from None

    def text(self, key: str, /, **values: object) -> str:
        """Return the board's text *key*, filled with *values*."""
        template: str = self._tables.BOARD[key]
        return template.format(**values) if values else template

    def counted(self, key: str, number: int) -> str:
        """Return "no tanks", "1 tank", "12 tanks" for the noun *key*."""
        none, one, many = self._tables.COUNTS[key]
        words = self._tables.NUMBER_WORDS
        spelled = words[number] if number < len(words) else str(number)
        return str((none, one)[number] if number < 2 else many.format(n=number, words=spelled))


def _tables(code: str) -> ModuleType:
    try:
        tables = importlib.import_module(f"ingest.words.{code}")
    except ModuleNotFoundError as error:
        raise InvalidInputError("language", found=code, allowed="a file of ingest/words, for example en") from error
    english = importlib.import_module("ingest.words.en")
    for table in TABLES:
        lacking = sorted(set(map(str, getattr(english, table))) - set(map(str, getattr(tables, table, ()))))
        if lacking:
            raise InvalidInputError(
                f"words of {table}", found=f"no {', '.join(lacking)}", allowed="every word of en", where=code
            )
    return tables


def fields(template: str) -> frozenset[str]:
    """Return the names of the values that *template* needs."""
    return frozenset(name for _, name, _, _ in string.Formatter().parse(template) if name)


def fullest(templates: Iterable[str], values: Mapping[str, str]) -> str:
    """Return the first of *templates* for which every value is known, filled."""
    return next((text.format(**values) for text in templates if fields(text) <= values.keys()), "")


ENGLISH = Language("en")
