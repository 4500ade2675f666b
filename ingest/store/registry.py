"""The store's own numbers for things of the site: sensors, tanks, declarations, derivations, revisions. Numbers are never reused."""

from __future__ import annotations

import hashlib
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    import sqlite3


def _number(connection: sqlite3.Connection, table: str, slug: str) -> int:
    connection.execute(f"INSERT OR IGNORE INTO {table} (slug) VALUES (?)", (slug,))
    return int(connection.execute(f"SELECT id FROM {table} WHERE slug = ?", (slug,)).fetchone()[0])


def sensor_number(connection: sqlite3.Connection, slug: str) -> int:
    """Return the store's number of a sensor, given at first sight."""
    return _number(connection, "sensor", slug)


def tank_number(connection: sqlite3.Connection, slug: str) -> int:
    """Return the store's number of a tank, given at first sight."""
    return _number(connection, "tank", slug)


def place(connection: sqlite3.Connection, *, sensor: int, tank: int, since_us: int) -> None:
    """Record that *sensor* sits in *tank* from *since_us* on, unless its newest placement says so already."""
    row = connection.execute(
        "SELECT tank FROM placement WHERE sensor = ? ORDER BY since DESC LIMIT 1", (sensor,)
    ).fetchone()
    if row is None or int(row["tank"]) != tank:
        connection.execute("INSERT OR REPLACE INTO placement VALUES (?, ?, ?)", (sensor, since_us, tank))


def declaration_number(connection: sqlite3.Connection, *, sensor: int, body: str) -> int:
    """Return the number of a sensor's declaration (units, compensation), given at first sight."""
    connection.execute("INSERT OR IGNORE INTO declaration (sensor, body) VALUES (?, ?)", (sensor, body))
    return int(
        connection.execute("SELECT id FROM declaration WHERE sensor = ? AND body = ?", (sensor, body)).fetchone()[0]
    )


def derivation_number(connection: sqlite3.Connection, *, code_version: str, revision: int, calibration_set: str) -> int:
    """Return the number of the way in which values are derived now."""
    values = (code_version, revision, calibration_set)
    connection.execute(
        "INSERT OR IGNORE INTO derivation (code_version, revision, calibration_set) VALUES (?, ?, ?)", values
    )
    row = connection.execute(
        "SELECT id FROM derivation WHERE code_version = ? AND revision = ? AND calibration_set = ?", values
    ).fetchone()
    return int(row[0])


def known_derivation(connection: sqlite3.Connection, *, code_version: str, revision: int, calibration_set: str) -> int:
    """Return the number of a way of deriving that is in the store."""
    row = connection.execute(
        "SELECT id FROM derivation WHERE code_version = ? AND revision = ? AND calibration_set = ?",
        (code_version, revision, calibration_set),
    ).fetchone()
    return int(row[0])


def newest_revision(connection: sqlite3.Connection) -> tuple[int, str]:
    """Return number and text of the newest accepted site file; (0, "") before the first."""
    row = connection.execute("SELECT number, text FROM revision ORDER BY number DESC LIMIT 1").fetchone()
    return (0, "") if row is None else (int(row["number"]), str(row["text"]))


def accept_revision(
    connection: sqlite3.Connection, *, text: str, differences: str, accepted_at: int, actor: str
) -> int:
    """Number and keep an accepted site file; the same text twice in a row is one revision."""
    number, newest_text = newest_revision(connection)
    if number and newest_text == text:
        return number
    connection.execute(
        "INSERT INTO revision VALUES (?, ?, ?, ?, ?, ?)",
        (number + 1, hashlib.sha256(text.encode()).hexdigest(), text, differences, accepted_at, actor),
    )
    return number + 1
