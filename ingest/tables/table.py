"""A delimited table, read by the names of its columns in blocks of arrays."""

from __future__ import annotations

import csv
from contextlib import contextmanager
from dataclasses import dataclass, field
from itertools import islice
from typing import TYPE_CHECKING

import numpy as np

from analysis.flags import FILLER_VALUES
from ingest.tables.encoding import WESTERN
from ingest.tables.error import CellRemark, TableError, shown
from ingest.tables.layout import SAMPLE_ROWS, Hints, Layout, layout_of, position_of
from ingest.tables.numbers import number_column
from ingest.tables.time_column import TimeColumn
from ingest.tables.units import check_units

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator, Mapping, Sequence
    from pathlib import Path
    from typing import TextIO
    from zoneinfo import ZoneInfo

    from analysis.arrays import FlagArray, FloatArray, IntArray

ROWS_A_CHUNK = 4096


@dataclass(frozen=True, slots=True)
class Chunk:
    """Some rows of a table, in their order. All arrays are of one length.

    Attributes
    ----------
    lines : ndarray of int64
        Line of each row in the file, the first being 1.
    time_us : ndarray of int64 or None
        Microseconds since 1970, UTC; None where no time was asked for.
    values : dict of str to ndarray of float64
        By quantity, as written; NaN where there is no usable number.
    flags : dict of str to ndarray of uint32
        By quantity: MISSING, FILLER or NOT_FINITE of `analysis.flags.Flag`, 0 for a usable number.
    texts : dict of str to list of str
        Columns that were asked for as texts, stripped.
    rows : list of list of str
        All cells as written, where asked for; else empty.
    remarks : list of CellRemark
        Rows that were left out and cells that hold no number, nor a known word for "no value".
    """

    lines: IntArray
    time_us: IntArray | None
    values: dict[str, FloatArray]
    flags: dict[str, FlagArray]
    texts: dict[str, list[str]] = field(default_factory=dict)
    rows: list[list[str]] = field(default_factory=list)
    remarks: list[CellRemark] = field(default_factory=list)

    def __len__(self) -> int:
        return int(self.lines.size)


class Table:
    """A delimited file, understood and ready to be read.

    Parameters
    ----------
    path : pathlib.Path
        The file.
    columns : mapping of str to str
        Quantity to name of its column (``#3`` for the third), for numbers.
    time : str or sequence of str, optional
        Column of the time, or the columns of date and time.
    time_format : str, optional
        iso, unix_s, unix_ms, unix_us, or a pattern such as ``%d.%m.%Y %H:%M``; found out where not given.
    zone : ZoneInfo, optional
        Zone of times that bear no offset. Without it such times are refused.
    texts : mapping of str to str, optional
        Key to name of a column that is wanted as text.
    units : mapping of str to str, optional
        Quantity to the unit that it is taken to be in; a header that names another unit is refused.
    fillers : mapping of str to sequence of float, optional
        Quantity to the numbers that stand for "no value"; `analysis.flags.FILLER_VALUES` where not given.
    hints : Hints, optional
        Separator, encoding, decimal comma, header line, where they are known.

    Raises
    ------
    TableError
        If the file cannot be read as asked: names file, line, column, what was found and what to change.
    """

    def __init__(
        self,
        path: Path,
        *,
        columns: Mapping[str, str],
        time: str | Sequence[str] | None = None,
        time_format: str | None = None,
        zone: ZoneInfo | None = None,
        texts: Mapping[str, str] | None = None,
        units: Mapping[str, str] | None = None,
        fillers: Mapping[str, Sequence[float]] | None = None,
        hints: Hints | None = None,
    ) -> None:
        self.path = path
        self._fillers = fillers or {}
        time_names = [time] if isinstance(time, str) else list(time or ())
        wanted = [*columns.values(), *time_names, *(texts or {}).values()]
        with _readable(path):
            self.layout: Layout = layout_of(
                path, wanted=wanted, number_columns=list(columns.values()), hints=hints or Hints()
            )
            self._columns = self._places(columns)
            self._texts = self._places(texts or {})
            times = [self._place(name) for name in time_names]
            self.units = check_units(
                {quantity: self.layout.names[place] for quantity, place in self._columns.items()},
                expected=units or {},
                file=path.name,
                line=self.layout.header_line,
            )
            self._time: TimeColumn | None = None
            if times:
                names = " ".join(self.layout.names[place] for place in times)
                self._time = TimeColumn(times, name=names, file=path.name, time_format=time_format, zone=zone)
                self._time.settle(self._sample(times))

    @property
    def quantities(self) -> tuple[str, ...]:
        """Return the quantities asked for."""
        return tuple(self._columns)

    @property
    def text_keys(self) -> tuple[str, ...]:
        """Return the keys of the columns asked for as texts."""
        return tuple(self._texts)

    @property
    def time_format(self) -> str:
        """Return the format of the time, empty where no time was asked for."""
        return self._time.time_format if self._time else ""

    def chunks(
        self,
        *,
        progress: Callable[[int, int], None] | None = None,
        rows: int = ROWS_A_CHUNK,
        has_rows: bool = False,
    ) -> Iterator[Chunk]:
        """Yield the table in blocks.

        Parameters
        ----------
        progress : callable, optional
            Called with (bytes read, bytes in all) after each block.
        rows : int
            Rows in a block.
        has_rows : bool
            Whether each block also carries all cells as written.

        Raises
        ------
        TableError
            If the file breaks off in a quoted cell, or is not in its encoding.
        """
        total = self.path.stat().st_size
        with self._opened() as file:
            # The clock's memory of the hour that comes twice starts anew with the file.
            time = self._time.restarted() if self._time else None
            for lines, cells in self._blocks(file, rows):
                yield self._chunk(lines, cells, time, has_rows=has_rows)
                if progress is not None:
                    progress(min(_position(file), total), total)

    def _chunk(self, lines: list[int], cells: list[list[str]], time: TimeColumn | None, *, has_rows: bool) -> Chunk:
        width = max([*self._columns.values(), *self._texts.values(), *(time.places if time else ())], default=0) + 1
        line_array = np.array(lines, dtype=np.int64)
        time_us: IntArray | None = None
        remarks: list[CellRemark] = []
        by_place = _transposed(cells, width)
        if time is not None:
            time_us, is_kept, remarks = time.times(by_place, lines=line_array)
            if not is_kept.all():
                kept = np.flatnonzero(is_kept)
                line_array, time_us, cells = line_array[kept], time_us[kept], [cells[index] for index in kept]
                by_place = _transposed(cells, width)
        values: dict[str, FloatArray] = {}
        flags: dict[str, FlagArray] = {}
        for quantity, place in self._columns.items():
            values[quantity], flags[quantity], found = number_column(
                by_place[place],
                lines=line_array,
                column=self.layout.names[place],
                has_decimal_comma=self.layout.has_decimal_comma,
                fillers=self._fillers.get(quantity, FILLER_VALUES),
            )
            remarks += found
        texts = {key: [text.strip() for text in by_place[place]] for key, place in self._texts.items()}
        return Chunk(line_array, time_us, values, flags, texts, cells if has_rows else [], sorted(remarks))

    def _blocks(self, file: TextIO, rows: int) -> Iterator[tuple[list[int], list[list[str]]]]:
        """Yield line numbers and cells of the rows that follow the header."""
        before = self.layout.first_line - 1
        blank_joined = self.layout.separator == " "
        reader = csv.reader(file, delimiter=self.layout.separator, skipinitialspace=blank_joined)
        lines: list[int] = []
        cells: list[list[str]] = []
        try:
            for _ in islice(file, before):
                pass
            for row in reader:
                if not any(row):
                    continue
                lines.append(reader.line_num + before)
                cells.append(row)
                if len(cells) == rows:
                    yield lines, cells
                    lines, cells = [], []
        except csv.Error as error:
            line = reader.line_num + before
            allowed = "rows of cells, every quote closed again"
            raise TableError(self.path.name, line=line, column="", found=str(error), allowed=allowed) from error
        except UnicodeError as error:
            raise self._wrong_encoding(error, reader.line_num + before) from error
        if cells:
            yield lines, cells

    def _sample(self, times: Sequence[int]) -> list[tuple[str, ...]]:
        """Return the columns of the first rows, from which the format of the time is found out."""
        with self._opened() as file:
            cells = next((cells for _, cells in self._blocks(file, SAMPLE_ROWS)), [])
        return _transposed(cells, max(times) + 1)

    @contextmanager
    def _opened(self) -> Iterator[TextIO]:
        # cp1252 is what is left when it is not UTF-8: a byte that it lacks need not stop the numbers.
        errors = "replace" if self.layout.encoding == WESTERN else "strict"
        with _readable(self.path), self.path.open(encoding=self.layout.encoding, errors=errors, newline="") as file:
            yield file

    def _places(self, names: Mapping[str, str]) -> dict[str, int]:
        return {key: self._place(name) for key, name in names.items()}

    def _place(self, name: str) -> int:
        return position_of(name, self.layout.names, file=self.path.name, line=self.layout.header_line)

    def _wrong_encoding(self, error: UnicodeError, line: int) -> TableError:
        allowed = f"text in {self.layout.encoding}; or give the encoding"
        return TableError(self.path.name, line=line, column="", found=str(error)[:100], allowed=allowed)


def _transposed(rows: list[list[str]], width: int) -> list[tuple[str, ...]]:
    """Return the first *width* columns of some rows; rows that end early are filled up with empty cells."""
    if not rows:
        return [()] * width
    if min(map(len, rows)) < width:
        rows = [row if len(row) >= width else row + [""] * (width - len(row)) for row in rows]
    # Rows of one length are the rule; longer ones bring cells that nobody asked for.
    return list(islice(zip(*rows, strict=False), width))


@contextmanager
def _readable(path: Path) -> Iterator[None]:
    """Turn what the system says of a file into a table's error."""
    try:
        yield
    except OSError as error:
        found = error.strerror or type(error).__name__
        raise TableError(path.name, line=0, column="", found=found, allowed="a file that can be read") from error
    except LookupError as error:
        raise TableError(path.name, line=0, column="", found=shown(str(error)), allowed="a known encoding") from error


def _position(file: TextIO) -> int:
    """Return how many bytes of a text file have been taken from the disk."""
    return int(file.buffer.tell())
