"""Taking a site file into the store: its revision, the store's numbers for sensors and tanks, and the first animals."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import UTC, datetime, time
from importlib.metadata import version
from typing import TYPE_CHECKING

import msgspec
import numpy as np

from ingest.chain.roster import declaration
from ingest.clock import to_microseconds
from ingest.site.differences import differences
from ingest.site.loading import load, load_text
from ingest.site.problems import SiteFileError
from ingest.store import calibrations, cohorts, registry

if TYPE_CHECKING:
    import sqlite3
    from datetime import date
    from pathlib import Path

    from analysis.arrays import IntArray
    from ingest.site.models import Site


@dataclass(frozen=True, slots=True)
class Numbers:
    """The store's numbers for the things of a site, in the order of the site file."""

    revision: int
    derivation: int
    sensor: IntArray
    declaration: IntArray
    tank: IntArray


def read_site(path: Path) -> tuple[Site, str]:
    """Return the site that the file at *path* describes, and its text.

    Raises
    ------
    SiteFileError
        With every problem of the file.
    """
    try:
        text = path.read_text(encoding="utf-8-sig")
    except (OSError, UnicodeDecodeError):
        load(path)  # It says what is wrong, and where.
        return read_site(path)
    return load_text(text, path.name), text


def register(connection: sqlite3.Connection, site: Site, *, text: str, actor: str, now_us: int) -> Numbers:
    """Write what is new in *site* into the store, inside the caller's transaction, and return the numbers.

    Registering the same file again changes nothing.
    """
    revision = registry.accept_revision(
        connection,
        text=text,
        differences=_changes(connection, site),
        accepted_at=now_us,
        actor=actor,
    )
    tanks = [registry.tank_number(connection, tank.id) for tank in site.tanks]
    sensors = [registry.sensor_number(connection, sensor.id) for sensor in site.sensors]
    declarations = []
    for sensor, number in zip(site.sensors, sensors, strict=True):
        body = declaration(sensor)
        declarations.append(registry.declaration_number(connection, sensor=number, body=body))
        if sensor.tank is not None:
            since_us = now_us if sensor.since is None else _midnight(sensor.since, site)
            registry.place(connection, sensor=number, tank=tanks[site.tank_index[sensor.tank]], since_us=since_us)
    for tank, number in zip(site.tanks, tanks, strict=True):
        if tank.first_stock is not None:
            cohorts.stock_first(
                connection,
                cohorts.FirstStock(
                    cohort=tank.first_stock.id,
                    animal=tank.first_stock.animal,
                    number=tank.first_stock.number,
                    used_to_salinity=tank.first_stock.used_to_salinity,
                    since=_midnight(tank.first_stock.since, site),
                    name=tank.first_stock.name,
                ),
                tank=number,
                tank_slug=tank.id,
                actor=actor,
                now_us=now_us,
            )
    return Numbers(
        revision=revision,
        derivation=registry.derivation_number(
            connection,
            code_version=code_version(),
            revision=revision,
            calibration_set=calibrations.calibration_set(connection),
        ),
        sensor=np.array(sensors, dtype=np.int64),
        declaration=np.array(declarations, dtype=np.int64),
        tank=np.array(tanks, dtype=np.int64),
    )


def code_version() -> str:
    """Return the version of this program: part of the name of a derivation."""
    return version("euryhale")


def _midnight(day: date, site: Site) -> int:
    return to_microseconds(datetime.combine(day, time(), tzinfo=site.zone).astimezone(UTC))


def _changes(connection: sqlite3.Connection, site: Site) -> str:
    number, text = registry.newest_revision(connection)
    if not number:
        return "[]"
    try:
        before = load_text(text, f"revision {number}")
    except SiteFileError as error:
        # A file accepted by an older program may break a newer rule; that is no reason to refuse the new one.
        return msgspec.json.encode(
            [{"what": "all", "before": str(error), "after": None, "needs_restart": False}]
        ).decode()
    return msgspec.json.encode([change._asdict() for change in differences(before, site)]).decode()
