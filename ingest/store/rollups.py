"""Rollups: 15 minutes, hours and days, so that a year's chart opens as fast as an hour's.

A sweep follows the data: once in a while all rows between the mark `rolled_until` and a little before the newest
row are added in one statement. Rows that arrive behind the mark are added at once by the block that brings them. Both happen
in the transaction that moves the mark or stores the rows, so each reading is counted exactly once, whenever the worker dies.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    import sqlite3

    from analysis.arrays import IntArray

MINUTE_US = 60_000_000
LEVELS: dict[str, int] = {"q15": 15 * MINUTE_US, "h1": 60 * MINUTE_US, "d1": 24 * 60 * MINUTE_US}
"""Table and bucket length. [us]"""

BEFORE_ALL_US = -(2**63)
SWEEP_SPAN_US = 6 * 60 * MINUTE_US
"""No sweep takes more than this at once, so that none holds up a block for long."""

_SUM = "CASE WHEN {t}.{c} IS NULL THEN excluded.{c} ELSE {t}.{c} + coalesce(excluded.{c}, 0) END"
_EXTREME = "coalesce({f}({t}.{c}, excluded.{c}), {t}.{c}, excluded.{c})"


def _merge(table: str) -> str:
    parts = [f"{name} = {table}.{name} + excluded.{name}" for name in ("n", "salinity_n", "temperature_n", "suspect_n")]
    for quantity in ("salinity", "temperature", "osmolality"):
        parts.append(f"{quantity}_sum = " + _SUM.format(t=table, c=f"{quantity}_sum"))
        parts.append(f"{quantity}_min = " + _EXTREME.format(f="min", t=table, c=f"{quantity}_min"))
        parts.append(f"{quantity}_max = " + _EXTREME.format(f="max", t=table, c=f"{quantity}_max"))
    return ", ".join(parts)


def _add(table: str, bucket_us: int, where: str) -> str:
    # Failed readings stay out of the sums: a probe in air is no salinity. A kind of water without a practical salinity charts g/kg.
    salinity = "CASE WHEN quality < 4 THEN coalesce(practical_salinity, absolute_salinity_g_kg) END"
    temperature = "CASE WHEN quality < 4 THEN temperature_degC END"
    osmolality = "CASE WHEN quality < 4 THEN osmolality_mOsm_kg END"
    columns = []
    for expression in (salinity, temperature):
        columns += [f"count({expression})", f"sum({expression})", f"min({expression})", f"max({expression})"]
    columns += [f"sum({osmolality})", f"min({osmolality})", f"max({osmolality})"]
    return (
        f"INSERT INTO {table} SELECT sensor, measured_at / {bucket_us} * {bucket_us}, count(*), {', '.join(columns)},"
        f" sum(quality IN (3, 4)) FROM reading WHERE {where} GROUP BY 1, 2"
        f" ON CONFLICT (sensor, bucket) DO UPDATE SET {_merge(table)}"
    )


_SWEEPS = tuple(_add(table, bucket_us, "measured_at >= ? AND measured_at < ?") for table, bucket_us in LEVELS.items())
_SINGLES = tuple(_add(table, bucket_us, "measured_at = ? AND sensor = ?") for table, bucket_us in LEVELS.items())


def rolled_until(connection: sqlite3.Connection) -> int | None:
    """Return the mark: all rows measured before it are in the rollups. None before the first sweep."""
    row = connection.execute("SELECT value FROM meta WHERE name = 'rolled_until'").fetchone()
    return None if row is None else int(row[0])


def add_behind_mark(connection: sqlite3.Connection, measured_at: IntArray, sensor: IntArray, mark: int | None) -> None:
    """Add the rows just stored that lie behind the *mark*, inside the caller's transaction."""
    if mark is None:
        return
    behind = measured_at < mark
    if not behind.any():
        return
    keys = list(zip(measured_at[behind].tolist(), sensor[behind].tolist(), strict=True))
    for statement in _SINGLES:
        connection.executemany(statement, keys)


def sweep(connection: sqlite3.Connection, *, until_us: int) -> int | None:
    """Add rows up to *until_us*, or a bounded part of them, inside the caller's transaction; return the mark.

    The mark that is returned is always the one that is stored: a mark moved in memory alone would count the rows that
    come before it twice, once singly and once by the next sweep.
    """
    mark = rolled_until(connection)
    oldest = "SELECT min(measured_at) FROM reading WHERE measured_at >= ?"
    first = connection.execute(oldest, (BEFORE_ALL_US if mark is None else mark,)).fetchone()[0]
    if first is None:
        return mark
    # Begin at the first row, to skip over empty stretches instead of creeping through them.
    start, end = int(first), min(until_us, int(first) + SWEEP_SPAN_US)
    if end <= start:
        return mark
    for statement in _SWEEPS:
        connection.execute(statement, (start, end))
    connection.execute(
        "INSERT INTO meta VALUES ('rolled_until', ?) ON CONFLICT (name) DO UPDATE SET value = excluded.value",
        (end,),
    )
    return end
