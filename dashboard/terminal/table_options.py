"""What the commands that read a table share: which column is which, the zone, the table itself, and a bar on a terminal."""

from __future__ import annotations

import sys
from contextlib import contextmanager
from typing import TYPE_CHECKING, Any
from zoneinfo import ZoneInfo, ZoneInfoNotFoundError

from tqdm import tqdm

from dashboard.terminal.sensor_options import UsageError
from ingest.tables import Table, TableError

if TYPE_CHECKING:
    import argparse
    from collections.abc import Callable, Iterator, Mapping, Sequence

    from ingest.tables import Chunk

REMARKS_TOLD = 3


def columns_of(pairs: Sequence[str], *, roles: Sequence[str]) -> tuple[dict[str, str], list[str]]:
    """Return the column of each quantity and the one or two columns of the time, from `--column QUANTITY=NAME`.

    Raises
    ------
    UsageError
        If a quantity is unknown or given twice, or the time is not given once or twice.
    """
    columns: dict[str, str] = {}
    times: list[str] = []
    for pair in pairs:
        role, found, name = pair.partition("=")
        if not found or not name or role not in roles:
            raise UsageError(f"--column: found {pair!r}; allowed: QUANTITY=NAME with {', '.join(roles)}")
        if role == "time":
            times.append(name)
        elif role in columns:
            raise UsageError(f"--column: {role} is given twice")
        else:
            columns[role] = name
    if not times or len(times) > 2:
        raise UsageError("needs --column time=NAME, once or (for a date and a time of day) twice")
    return columns, times


def table_of(
    args: argparse.Namespace, columns: dict[str, str], times: list[str], *, units: Mapping[str, str] | None = None
) -> Table:
    """Return the table that `--input`, `--zone` and `--time-format` name.

    Raises
    ------
    UsageError
        If the zone or a column that was named does not exist.
    TableError
        If the file cannot be read as a table.
    """
    try:
        zone = ZoneInfo(args.zone) if args.zone else None
    except (ZoneInfoNotFoundError, ValueError) as error:
        raise UsageError(f"--zone: found {args.zone!r}; allowed: an IANA zone such as Europe/Lisbon") from error
    try:
        return Table(
            args.input,
            columns=columns,
            time=times,
            time_format=args.time_format,
            zone=zone,
            units=None if units is None else dict(units),
        )
    except TableError as error:
        if error.column in {*columns.values(), *times} and error.found == "no such column":
            raise UsageError(str(error)) from error
        raise


def tell_remarks(chunk: Chunk) -> None:
    """Say on the error channel which cells held no number."""
    for remark in chunk.remarks[:REMARKS_TOLD]:
        print(f"line {remark.line}, {remark.column}: found {remark.found}; allowed: {remark.allowed}", file=sys.stderr)
    if len(chunk.remarks) > REMARKS_TOLD:
        print(f"and {len(chunk.remarks) - REMARKS_TOLD} more such cells", file=sys.stderr)


@contextmanager
def progress_bar(what: str, unit: str) -> Iterator[Callable[[int, int], Any]]:
    """Yield a function of (done, in all) that moves a bar on the error channel, where that is a terminal."""
    bar = tqdm(desc=what, unit=unit, unit_scale=True, file=sys.stderr, disable=not sys.stderr.isatty(), leave=False)
    with bar:

        def moved(done: int, total: int) -> None:
            bar.total = total
            bar.update(done - bar.n)

        yield moved
