"""The short ways to a table: block by block, or all of it at once."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from ingest.tables.table import Chunk, Table

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator, Mapping, Sequence
    from pathlib import Path
    from zoneinfo import ZoneInfo

    from ingest.tables.layout import Hints


def read(
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
    progress: Callable[[int, int], None] | None = None,
) -> Iterator[Chunk]:
    """Yield the table at *path* in blocks; the parameters are those of `Table` and `Table.chunks`.

    Raises
    ------
    TableError
        If the file cannot be read as asked.
    """
    table = Table(
        path,
        columns=columns,
        time=time,
        time_format=time_format,
        zone=zone,
        texts=texts,
        units=units,
        fillers=fillers,
        hints=hints,
    )
    yield from table.chunks(progress=progress)


def whole(table: Table, *, progress: Callable[[int, int], None] | None = None) -> Chunk:
    """Return all of a table as one block: for files that fit the memory, about 50 bytes a row and column."""
    chunks = list(table.chunks(progress=progress))
    times = [chunk.time_us for chunk in chunks if chunk.time_us is not None]
    nothing: list[np.ndarray] = [np.empty(0)]
    return Chunk(
        lines=np.concatenate([chunk.lines for chunk in chunks] or nothing).astype(np.int64),
        time_us=np.concatenate(times) if times else None,
        values={
            key: np.concatenate([chunk.values[key] for chunk in chunks] or nothing).astype(np.float64)
            for key in table.quantities
        },
        flags={
            key: np.concatenate([chunk.flags[key] for chunk in chunks] or nothing).astype(np.uint32)
            for key in table.quantities
        },
        texts={key: [text for chunk in chunks for text in chunk.texts[key]] for key in table.text_keys},
        remarks=[remark for chunk in chunks for remark in chunk.remarks],
    )
