"""The times of a table: from the cells of one or two columns to microseconds, UTC."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

import numpy as np

from ingest.tables.error import CellRemark, TableError, shown
from ingest.tables.local_time import LocalClock
from ingest.tables.time_format import format_of, parser_of

if TYPE_CHECKING:
    from collections.abc import Sequence
    from zoneinfo import ZoneInfo

    from analysis.arrays import BoolArray, IntArray

_MOMENT = r"\d{4}-\d\d-\d\d[T ]\d\d:\d\d(?::\d\d(?:\.\d{1,6})?)?"
_WITHOUT_Z = re.compile(rf"{_MOMENT}(?:\n{_MOMENT})*", re.ASCII)
_WITH_Z = re.compile(rf"{_MOMENT}Z(?:\n{_MOMENT}Z)*", re.ASCII)


class TimeColumn:
    """One column of times, or a column of dates and one of times of day.

    Parameters
    ----------
    places : sequence of int
        The columns, the first being 0.
    name, file : str
        Names of the columns and of the file, for errors.
    time_format : str, optional
        As for `ingest.tables.time_format.parser_of`; found out by `settle` where not given.
    zone : ZoneInfo, optional
        Zone of times that bear no offset.
    """

    def __init__(
        self,
        places: Sequence[int],
        *,
        name: str,
        file: str,
        time_format: str | None = None,
        zone: ZoneInfo | None = None,
    ) -> None:
        self.places = tuple(places)
        self.time_format = time_format or ""
        self._name, self._file, self._zone = name, file, zone
        self._clock = LocalClock(zone) if zone else None

    def settle(self, columns: Sequence[Sequence[str]]) -> None:
        """Find out the format from the columns of some rows, and refuse local times without a zone.

        Raises
        ------
        TableError
            If no format fits, or the times bear no offset and no zone is given.
        """
        texts = self._texts(columns)
        try:
            self.time_format = self.time_format or format_of(texts)
            parse = parser_of(self.time_format)
        except ValueError as error:
            raise self._error(texts[0] if texts else "", str(error)) from error
        for text in texts:
            try:
                is_utc = parse(text)[1]
            except (ValueError, OverflowError, KeyError):
                continue
            if not is_utc and self._clock is None:
                raise self._error(text, "times with an offset or Z; or give the time zone of the logger's clock")
            return
        if texts:
            raise self._error(texts[0], f"times in the format {self.time_format}")

    def restarted(self) -> TimeColumn:
        """Return the same column for another run over the file."""
        return TimeColumn(self.places, name=self._name, file=self._file, time_format=self.time_format, zone=self._zone)

    def times(
        self, columns: Sequence[Sequence[str]], *, lines: IntArray
    ) -> tuple[IntArray, BoolArray, list[CellRemark]]:
        """Return times, whether each row has one, and a remark for each row that has none.

        Parameters
        ----------
        columns : sequence of columns of cells
            All columns of the table, in their places.
        lines : ndarray of int64
            Their lines in the file.
        """
        texts = self._texts(columns)
        remarks: list[CellRemark] = []
        is_kept = np.ones(len(texts), dtype=np.bool_)
        at_once = _iso_at_once(texts) if self.time_format == "iso" else None
        if at_once is not None:
            time_us, is_utc = at_once
        else:
            time_us, is_utc = np.zeros(len(texts), dtype=np.int64), np.ones(len(texts), dtype=np.bool_)
            parse = parser_of(self.time_format)
            for index, text in enumerate(texts):
                try:
                    time_us[index], is_utc[index] = parse(text)
                except (ValueError, OverflowError, KeyError):
                    is_kept[index] = False
                    allowed = f"a time in the format {self.time_format}; the row was left out"
                    remarks.append(CellRemark(int(lines[index]), self._name, shown(text), allowed))
        local = np.flatnonzero(~is_utc & is_kept)
        if local.size:
            self._to_utc(time_us, is_kept, local, texts, lines, remarks)
        return time_us, is_kept, remarks

    def _to_utc(
        self,
        time_us: IntArray,
        is_kept: BoolArray,
        local: IntArray,
        texts: Sequence[str],
        lines: IntArray,
        remarks: list[CellRemark],
    ) -> None:
        """Turn the local ones of the times to UTC in place; a time that never was leaves its row out."""
        if self._clock is None:
            allowed = "a time with an offset or Z, as in the rows before; the row was left out"
            remarks += [CellRemark(int(lines[index]), self._name, shown(texts[index]), allowed) for index in local]
            is_kept[local] = False
            return
        time_us[local], exists = self._clock.to_utc(time_us[local])
        for index in local[~exists]:
            is_kept[index] = False
            allowed = f"a time that was in {self._zone}, where clocks went forward then; the row was left out"
            remarks.append(CellRemark(int(lines[index]), self._name, shown(texts[index]), allowed))

    def _texts(self, columns: Sequence[Sequence[str]]) -> list[str]:
        """Return the times as written, date and time of day joined by a blank."""
        parts = [[cell.strip() for cell in columns[place]] for place in self.places]
        return parts[0] if len(parts) == 1 else [" ".join(cells) for cells in zip(*parts, strict=True)]

    def _error(self, found: str, allowed: str) -> TableError:
        return TableError(self._file, line=0, column=self._name, found=shown(found), allowed=allowed)


def _iso_at_once(texts: Sequence[str]) -> tuple[IntArray, BoolArray] | None:
    """Return times of one plain shape (2026-01-31T06:30, with or without seconds and Z); None for any other."""
    whole = "\n".join(texts)
    has_z = "Z" in whole
    # numpy takes odd characters for a zone, and warns; only what is plain goes there.
    if not (_WITH_Z if has_z else _WITHOUT_Z).fullmatch(whole):
        return None
    try:
        moments = np.array([text[:-1] for text in texts] if has_z else texts, dtype="datetime64[us]")
    except ValueError:
        return None
    return moments.astype(np.int64), np.full(len(texts), has_z, dtype=np.bool_)
