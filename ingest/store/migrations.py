"""The schema of store.db, as numbered steps, each in one transaction. A released step is never edited; a change is a new step."""

from __future__ import annotations

from typing import TYPE_CHECKING, NamedTuple

from ingest.store.connection import transaction
from ingest.store.errors import NewerSchemaError

if TYPE_CHECKING:
    import sqlite3


class Migration(NamedTuple):
    """One numbered step of a schema."""

    number: int
    name: str
    statements: tuple[str, ...]


# The columns of a key come first: the integrity check of older SQLite counts columns of a table without row ids that way.
READING_COLUMNS = """
    measured_at INTEGER NOT NULL,
    sensor INTEGER NOT NULL,
    derivation INTEGER NOT NULL,
    received_at INTEGER NOT NULL,
    declaration INTEGER NOT NULL,
    conductivity REAL,
    temperature REAL,
    pressure REAL,
    conductivity_mS_cm REAL,
    temperature_degC REAL,
    practical_salinity REAL,
    absolute_salinity_g_kg REAL,
    density_kg_m3 REAL,
    osmolality_mOsm_kg REAL,
    osmolality_in_situ_mOsm_kg REAL,
    flags INTEGER NOT NULL,
    quality INTEGER NOT NULL,
    tests INTEGER NOT NULL
"""

ROLLUP_COLUMNS = """
    sensor INTEGER NOT NULL,
    bucket INTEGER NOT NULL,
    n INTEGER NOT NULL,
    salinity_n INTEGER NOT NULL,
    salinity_sum REAL, salinity_min REAL, salinity_max REAL,
    temperature_n INTEGER NOT NULL,
    temperature_sum REAL, temperature_min REAL, temperature_max REAL,
    osmolality_sum REAL, osmolality_min REAL, osmolality_max REAL,
    suspect_n INTEGER NOT NULL,
    PRIMARY KEY (sensor, bucket)
"""

STORE: tuple[Migration, ...] = (
    Migration(
        1,
        "the first schema",
        (
            "CREATE TABLE meta (name TEXT PRIMARY KEY, value) WITHOUT ROWID",
            # Slugs are never reused; a row lives for ever.
            "CREATE TABLE sensor (id INTEGER PRIMARY KEY, slug TEXT NOT NULL UNIQUE)",
            "CREATE TABLE tank (id INTEGER PRIMARY KEY, slug TEXT NOT NULL UNIQUE)",
            "CREATE TABLE placement (sensor INTEGER NOT NULL REFERENCES sensor(id), since INTEGER NOT NULL,"
            " tank INTEGER NOT NULL REFERENCES tank(id), PRIMARY KEY (sensor, since)) WITHOUT ROWID",
            "CREATE TABLE revision (number INTEGER PRIMARY KEY, sha256 TEXT NOT NULL, text TEXT NOT NULL,"
            " differences TEXT NOT NULL, accepted_at INTEGER NOT NULL, actor TEXT NOT NULL)",
            "CREATE TABLE declaration (id INTEGER PRIMARY KEY, sensor INTEGER NOT NULL REFERENCES sensor(id),"
            " body TEXT NOT NULL, UNIQUE (sensor, body))",
            "CREATE TABLE derivation (id INTEGER PRIMARY KEY, code_version TEXT NOT NULL, revision INTEGER NOT NULL,"
            " calibration_set TEXT NOT NULL, UNIQUE (code_version, revision, calibration_set))",
            # Time first: neighbours in time are neighbours on disk, whatever the number of sensors.
            f"CREATE TABLE reading ({READING_COLUMNS}, PRIMARY KEY (measured_at, sensor)) WITHOUT ROWID",
            f"CREATE TABLE corrected ({READING_COLUMNS}, reason TEXT NOT NULL, recorded_at INTEGER NOT NULL,"
            " PRIMARY KEY (measured_at, sensor, derivation)) WITHOUT ROWID",
            "CREATE TABLE latest (sensor INTEGER PRIMARY KEY REFERENCES sensor(id), measured_at INTEGER NOT NULL,"
            " received_at INTEGER NOT NULL, conductivity_mS_cm REAL, temperature_degC REAL, practical_salinity REAL,"
            " absolute_salinity_g_kg REAL, density_kg_m3 REAL, osmolality_mOsm_kg REAL, flags INTEGER NOT NULL,"
            # newest_at: the newest measured time admitted, which a sensor whose clock is doubted may show less of.
            " quality INTEGER NOT NULL, state BLOB, newest_at INTEGER NOT NULL)",
            "CREATE TABLE sensor_ring (sensor INTEGER PRIMARY KEY REFERENCES sensor(id), body BLOB NOT NULL)",
            "CREATE TABLE channel_reading (measured_at INTEGER NOT NULL, sensor INTEGER NOT NULL, channel TEXT NOT NULL,"
            " received_at INTEGER NOT NULL, value REAL, flags INTEGER NOT NULL,"
            " PRIMARY KEY (measured_at, sensor, channel)) WITHOUT ROWID",
            "CREATE TABLE conflict (id INTEGER PRIMARY KEY, measured_at INTEGER NOT NULL, sensor INTEGER NOT NULL,"
            " received_at INTEGER NOT NULL, conductivity REAL, temperature REAL, pressure REAL, reason TEXT NOT NULL)",
            f"CREATE TABLE q15 ({ROLLUP_COLUMNS}) WITHOUT ROWID",
            f"CREATE TABLE h1 ({ROLLUP_COLUMNS}) WITHOUT ROWID",
            f"CREATE TABLE d1 ({ROLLUP_COLUMNS}) WITHOUT ROWID",
            "CREATE TABLE stress (measured_at INTEGER NOT NULL, tank INTEGER NOT NULL, cohort TEXT NOT NULL, stress REAL,"
            " range_strain REAL, change_strain REAL, exposure_strain REAL, thermal_strain REAL, driver TEXT, band TEXT,"
            " acclimated_mOsm_kg REAL, internal_mOsm_kg REAL, gap_mOsm_kg REAL,"
            " PRIMARY KEY (measured_at, tank, cohort)) WITHOUT ROWID",
            "CREATE TABLE tank_state (tank INTEGER PRIMARY KEY REFERENCES tank(id), measured_at INTEGER, body TEXT NOT NULL)",
            "CREATE TABLE animal_state (cohort TEXT PRIMARY KEY, tank INTEGER NOT NULL REFERENCES tank(id), measured_at INTEGER,"
            " body TEXT NOT NULL) WITHOUT ROWID",
            # The ledger: append-only, each row carries the hash of the one before.
            "CREATE TABLE event (id INTEGER PRIMARY KEY, kind TEXT NOT NULL, subject TEXT NOT NULL, measured_at INTEGER,"
            " recorded_at INTEGER NOT NULL, actor TEXT NOT NULL, cause_id INTEGER REFERENCES event(id), body TEXT NOT NULL,"
            " body_version INTEGER NOT NULL, previous_hash TEXT NOT NULL, hash TEXT NOT NULL)",
            "CREATE INDEX event_subject ON event (subject, id)",
            "CREATE INDEX event_kind ON event (kind, id)",
            "CREATE TRIGGER event_is_never_changed BEFORE UPDATE ON event BEGIN SELECT RAISE(ABORT, 'the ledger is append-only'); END",
            "CREATE TRIGGER event_is_never_deleted BEFORE DELETE ON event BEGIN SELECT RAISE(ABORT, 'the ledger is append-only'); END",
            # INSERT OR REPLACE deletes without asking the trigger above: an id that is there is never written again.
            "CREATE TRIGGER event_only_grows BEFORE INSERT ON event WHEN EXISTS (SELECT 1 FROM event WHERE id >= NEW.id)"
            " BEGIN SELECT RAISE(ABORT, 'the ledger is append-only'); END",
            # Projections of the ledger and of the chain, rebuilt by replay.
            "CREATE TABLE alarm (subject TEXT NOT NULL, condition TEXT NOT NULL, state TEXT NOT NULL, priority TEXT NOT NULL,"
            " is_active INTEGER NOT NULL, occurrence INTEGER NOT NULL, raised_at INTEGER, value REAL, limit_value REAL,"
            " updated_at INTEGER NOT NULL, event_id INTEGER REFERENCES event(id), body TEXT NOT NULL,"
            " PRIMARY KEY (subject, condition)) WITHOUT ROWID",
            "CREATE TABLE cohort (id TEXT PRIMARY KEY, tank INTEGER REFERENCES tank(id), animal TEXT NOT NULL,"
            " number INTEGER, since INTEGER NOT NULL, ended_at INTEGER, event_id INTEGER NOT NULL REFERENCES event(id),"
            " changed_at INTEGER NOT NULL, body TEXT NOT NULL) WITHOUT ROWID",
            "CREATE TABLE animal_sample (cohort TEXT NOT NULL, taken_at INTEGER NOT NULL, event_id INTEGER NOT NULL REFERENCES event(id),"
            " kind TEXT NOT NULL, actor TEXT NOT NULL, body TEXT NOT NULL, PRIMARY KEY (cohort, taken_at, event_id)) WITHOUT ROWID",
            # An acclimation plan on a tank, with what the worker remembers of the water.
            "CREATE TABLE plan (tank INTEGER NOT NULL REFERENCES tank(id), started_at INTEGER NOT NULL, ended_at INTEGER,"
            " animal TEXT NOT NULL, progress TEXT NOT NULL, target REAL, updated_at INTEGER NOT NULL, body TEXT NOT NULL,"
            " PRIMARY KEY (tank, started_at)) WITHOUT ROWID",
            # Work done on a sensor: a calibration or a cleaning. Of two rows of one moment the later event holds.
            "CREATE TABLE service (sensor INTEGER NOT NULL REFERENCES sensor(id), performed_at INTEGER NOT NULL,"
            " event_id INTEGER NOT NULL REFERENCES event(id), kind TEXT NOT NULL, actor TEXT NOT NULL, next_due INTEGER,"
            " body TEXT NOT NULL, PRIMARY KEY (sensor, performed_at, event_id)) WITHOUT ROWID",
            "CREATE TABLE record_period (sensor INTEGER NOT NULL REFERENCES sensor(id), to_us INTEGER NOT NULL, from_us INTEGER,"
            " fouling_percent REAL, drift_percent REAL, temperature_error_K REAL, rating TEXT, temperature_rating TEXT,"
            " is_corrected INTEGER NOT NULL, PRIMARY KEY (sensor, to_us)) WITHOUT ROWID",
            "CREATE TABLE rederivation (id INTEGER PRIMARY KEY, sensor INTEGER NOT NULL REFERENCES sensor(id),"
            " from_us INTEGER NOT NULL, to_us INTEGER NOT NULL, reason TEXT NOT NULL, event_id INTEGER REFERENCES event(id),"
            " created_at INTEGER NOT NULL, next_us INTEGER NOT NULL, row_count INTEGER NOT NULL DEFAULT 0, finished_at INTEGER)",
            "CREATE INDEX rederivation_open ON rederivation (id) WHERE finished_at IS NULL",
            # Sums of (best less seen) beside the rollups, which stay as seen.
            "CREATE TABLE rollup_change (sensor INTEGER NOT NULL, level_us INTEGER NOT NULL, bucket INTEGER NOT NULL,"
            " salinity_sum REAL NOT NULL, temperature_sum REAL NOT NULL, osmolality_sum REAL NOT NULL,"
            " PRIMARY KEY (sensor, level_us, bucket)) WITHOUT ROWID",
            "CREATE TABLE bench_sample (taken_at INTEGER NOT NULL, event_id INTEGER NOT NULL REFERENCES event(id),"
            " tank INTEGER REFERENCES tank(id), sensor INTEGER REFERENCES sensor(id), actor TEXT NOT NULL, body TEXT NOT NULL,"
            " PRIMARY KEY (taken_at, event_id)) WITHOUT ROWID",
            "CREATE TABLE sensor_health (sensor INTEGER PRIMARY KEY REFERENCES sensor(id), assessed_at INTEGER NOT NULL,"
            " belief INTEGER NOT NULL, since INTEGER NOT NULL, body TEXT NOT NULL)",
            "CREATE TABLE outbox (id INTEGER PRIMARY KEY, event_id INTEGER NOT NULL REFERENCES event(id), channel TEXT NOT NULL,"
            " body TEXT NOT NULL, created_at INTEGER NOT NULL, next_attempt_at INTEGER NOT NULL, attempts INTEGER NOT NULL DEFAULT 0,"
            " outcome TEXT, finished_at INTEGER)",
            "CREATE INDEX outbox_open ON outbox (next_attempt_at) WHERE finished_at IS NULL",
            # Calls to people: a call-out's id is that of the event that began it.
            "CREATE TABLE call_out (id INTEGER PRIMARY KEY, phase TEXT NOT NULL, updated_at INTEGER NOT NULL, body TEXT NOT NULL)",
            "CREATE INDEX call_out_open ON call_out (id) WHERE phase <> 'over'",
            "CREATE TABLE call_made (call_out INTEGER NOT NULL, number INTEGER NOT NULL, person TEXT NOT NULL, at INTEGER NOT NULL,"
            " reason TEXT NOT NULL, covered TEXT NOT NULL, answered_at INTEGER, PRIMARY KEY (call_out, number)) WITHOUT ROWID",
            "CREATE TABLE delivery (id INTEGER PRIMARY KEY, call_out INTEGER NOT NULL, number INTEGER NOT NULL, person TEXT NOT NULL,"
            " channel TEXT NOT NULL, address TEXT NOT NULL, reason TEXT NOT NULL, title TEXT NOT NULL, body TEXT NOT NULL,"
            " created_at INTEGER NOT NULL, next_attempt_at INTEGER NOT NULL, attempts INTEGER NOT NULL DEFAULT 0,"
            " outcome TEXT, finished_at INTEGER)",
            "CREATE INDEX delivery_open ON delivery (next_attempt_at) WHERE finished_at IS NULL",
            "CREATE TABLE delivery_attempt (delivery INTEGER NOT NULL, number INTEGER NOT NULL, begun_at INTEGER NOT NULL,"
            " ended_at INTEGER NOT NULL, is_delivered INTEGER NOT NULL, detail TEXT NOT NULL,"
            " PRIMARY KEY (delivery, number)) WITHOUT ROWID",
            "CREATE TABLE command_outcome (id TEXT PRIMARY KEY, kind TEXT NOT NULL, subject TEXT NOT NULL, actor TEXT NOT NULL,"
            " outcome TEXT NOT NULL, reason TEXT NOT NULL, event_id INTEGER REFERENCES event(id), decided_at INTEGER NOT NULL)"
            " WITHOUT ROWID",
            "CREATE TABLE refused (id INTEGER PRIMARY KEY, topic TEXT NOT NULL, received_at INTEGER NOT NULL, payload BLOB NOT NULL,"
            " code TEXT NOT NULL, place TEXT NOT NULL, found TEXT NOT NULL, allowed TEXT NOT NULL, is_partly_kept INTEGER NOT NULL)",
            "CREATE TABLE amendment (sensor INTEGER NOT NULL, from_us INTEGER NOT NULL, to_us INTEGER NOT NULL,"
            " test INTEGER NOT NULL, variable INTEGER NOT NULL, quality INTEGER NOT NULL,"
            " PRIMARY KEY (sensor, from_us, to_us, test, variable)) WITHOUT ROWID",
            "CREATE TABLE forward_queue (id INTEGER PRIMARY KEY AUTOINCREMENT, queued_at INTEGER NOT NULL, lines TEXT NOT NULL)",
            "CREATE TABLE counter (name TEXT PRIMARY KEY, value INTEGER NOT NULL) WITHOUT ROWID",
        ),
    ),
)

INBOX: tuple[Migration, ...] = (
    Migration(
        1,
        "the first schema",
        (
            "CREATE TABLE command (seq INTEGER PRIMARY KEY AUTOINCREMENT, id TEXT NOT NULL UNIQUE, kind TEXT NOT NULL,"
            " subject TEXT NOT NULL, body TEXT NOT NULL, body_version INTEGER NOT NULL, actor TEXT NOT NULL, role TEXT NOT NULL,"
            " expected TEXT, submitted_at INTEGER NOT NULL, expires_at INTEGER NOT NULL)",
        ),
    ),
)


def migrate(connection: sqlite3.Connection, migrations: tuple[Migration, ...], *, path: str) -> int:
    """Bring the schema up to the newest step and return its number.

    Raises
    ------
    NewerSchemaError
        If the file was written by a newer program.
    """
    found = int(connection.execute("PRAGMA user_version").fetchone()[0])
    known = migrations[-1].number
    if found > known:
        raise NewerSchemaError(path, found=found, known=known)
    for migration in migrations:
        if migration.number <= found:
            continue
        with transaction(connection):
            # Another opener may have taken this very step while we waited for the lock.
            if int(connection.execute("PRAGMA user_version").fetchone()[0]) >= migration.number:
                continue
            for statement in migration.statements:
                connection.execute(statement)
            connection.execute(f"PRAGMA user_version={migration.number}")
    return known
