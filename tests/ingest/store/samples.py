"""Rows for tests of the store: plain numbers, made without the chain."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import numpy as np

from analysis.flags import Quality
from ingest.store import registry
from ingest.store.block import BlockCommit
from ingest.store.readings import ReadingRows
from ingest.store.store import Store

MINUTE_US = 60_000_000
HOUR_US = 60 * MINUTE_US
DAY_US = 24 * HOUR_US
START_US = 20_600 * DAY_US
"""A midnight in 2026 from which test rows count."""


def rows(
    measured_at: Sequence[int],
    *,
    sensor: Sequence[int] | int = 1,
    salinity: Sequence[float] | float = 31.0,
    temperature: Sequence[float] | float = 28.0,
    quality: Sequence[int] | int = Quality.PASS,
    absolute: Sequence[float] | float | None = None,
) -> ReadingRows:
    """Return rows of the table `reading`; osmolality is thirty times the salinity, so that a mix-up shows."""
    count = len(measured_at)

    def floats(value: Sequence[float] | float) -> np.ndarray:
        return np.broadcast_to(np.asarray(value, dtype=np.float64), (count,)).copy()

    def ints(value: Sequence[int] | int) -> np.ndarray:
        return np.broadcast_to(np.asarray(value, dtype=np.int64), (count,)).copy()

    return ReadingRows(
        measured_at=ints(measured_at),
        sensor=ints(sensor),
        received_at=ints(measured_at) + 5,
        declaration=ints(1),
        derivation=ints(1),
        conductivity=floats(50.0),
        temperature=floats(temperature),
        pressure=floats(np.nan),
        conductivity_mS_cm=floats(50.0),
        temperature_degC=floats(temperature),
        practical_salinity=floats(salinity),
        absolute_salinity_g_kg=floats(salinity if absolute is None else absolute),
        density_kg_m3=floats(1020.0),
        osmolality_mOsm_kg=floats(salinity) * 30.0,
        osmolality_in_situ_mOsm_kg=floats(salinity) * 30.0,
        flags=np.zeros(count, dtype=np.uint32),
        quality=ints(quality).astype(np.uint8),
        tests=ints(0),
    )


def store_with(folder: Path, *, sensors: Sequence[str] = ("s0",), tanks: Sequence[str] = ("t0",)) -> Store:
    """Return a store that knows sensors and tanks; the first has number 1."""
    store = Store(folder)
    with store.transaction() as connection:
        for slug in sensors:
            registry.sensor_number(connection, slug)
        for slug in tanks:
            registry.tank_number(connection, slug)
    return store


def put(store: Store, measured_at: Sequence[int], **columns: object) -> None:
    """Commit rows in one block."""
    store.commit(BlockCommit(readings=rows(measured_at, **columns)))  # type: ignore[arg-type]
