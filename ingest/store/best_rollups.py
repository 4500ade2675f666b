"""What corrections change in the rollups: kept beside them, so that what was seen stays and long charts show the best.

For each bucket the sum of (best less seen) is kept. It is added in the transaction that adds the corrected rows, so it is
exactly theirs; when a correction is superseded, what is added is the difference from the one before.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from analysis.flags import Quality
from ingest.store.corrected import BEST
from ingest.store.rollups import LEVELS

if TYPE_CHECKING:
    import sqlite3

    from analysis.arrays import FloatArray
    from ingest.store.readings import ReadingRows

_ADD = (
    "INSERT INTO rollup_change (sensor, level_us, bucket, salinity_sum, temperature_sum, osmolality_sum) VALUES (?, ?, ?, ?, ?, ?)"
    " ON CONFLICT (sensor, level_us, bucket) DO UPDATE SET salinity_sum = salinity_sum + excluded.salinity_sum,"
    " temperature_sum = temperature_sum + excluded.temperature_sum, osmolality_sum = osmolality_sum + excluded.osmolality_sum"
)


def add(connection: sqlite3.Connection, rows: ReadingRows, *, sensor: int) -> None:
    """Add what the corrected *rows* of one sensor (the store's number), in the order of time, change; before they are inserted.

    A reading that failed before or after stays out of it, as it stays out of the rollups.
    """
    if not len(rows):
        return
    before = connection.execute(
        "SELECT measured_at, coalesce(practical_salinity, absolute_salinity_g_kg), temperature_degC, osmolality_mOsm_kg, quality"
        f" FROM ({BEST}) WHERE measured_at >= ? AND measured_at <= ? AND sensor = ? ORDER BY measured_at",
        (int(rows.measured_at[0]), int(rows.measured_at[-1]), sensor),
    ).fetchall()
    columns = [np.array(column, dtype=np.float64) for column in zip(*(tuple(row)[1:] for row in before), strict=True)]
    place = np.searchsorted(np.array([row[0] for row in before], dtype=np.int64), rows.measured_at)
    was_usable = columns[3][place] < Quality.FAIL
    is_usable = was_usable & (rows.quality < Quality.FAIL)
    salinity = np.where(np.isnan(rows.practical_salinity), rows.absolute_salinity_g_kg, rows.practical_salinity)
    changes = [
        _usable(after - own[place], is_usable)
        for own, after in zip(columns, (salinity, rows.temperature_degC, rows.osmolality_mOsm_kg), strict=False)
    ]
    for level_us in LEVELS.values():
        buckets, which = np.unique(rows.measured_at // level_us * level_us, return_inverse=True)
        sums = [np.bincount(which, weights=change).tolist() for change in changes]
        connection.executemany(
            _ADD, [(sensor, level_us, bucket, *values) for bucket, *values in zip(buckets.tolist(), *sums, strict=True)]
        )


def _usable(change: FloatArray, is_usable: np.ndarray) -> FloatArray:
    return np.where(is_usable & np.isfinite(change), change, 0.0)
