from __future__ import annotations

import sqlite3
import subprocess
import sys
import threading
from contextlib import closing
from pathlib import Path

import pytest

from ingest.store.connection import open_writer
from ingest.store.errors import NewerSchemaError
from ingest.store.inbox import Inbox
from ingest.store.ledger import first_broken_id
from ingest.store.migrations import INBOX, STORE, Migration, migrate
from ingest.store.queries import Queries
from ingest.store.store import Store
from tests.ingest.store.schemas import make

SCHEMAS = Path(__file__).parent / "schemas"
ONE = Migration(1, "one", ("CREATE TABLE a (x)",))
TWO = Migration(2, "two", ("ALTER TABLE a ADD COLUMN y", "INSERT INTO a VALUES (1, 2)"))
BROKEN = Migration(2, "broken", ("ALTER TABLE a ADD COLUMN y", "INSERT INTO nowhere VALUES (1)"))


def version(connection: sqlite3.Connection) -> int:
    return int(connection.execute("PRAGMA user_version").fetchone()[0])


@pytest.mark.parametrize("steps", [STORE, INBOX])
def test_steps_are_numbered_from_one_without_a_hole(steps):
    assert [step.number for step in steps] == list(range(1, len(steps) + 1))
    assert len({step.name for step in steps}) == len(steps)


def test_every_step_is_taken_once_and_in_order(tmp_path):
    with closing(open_writer(tmp_path / "x.db")) as connection:
        assert migrate(connection, (ONE,), path="x.db") == 1
        assert migrate(connection, (ONE, TWO), path="x.db") == 2
        assert migrate(connection, (ONE, TWO), path="x.db") == 2
        assert [tuple(row) for row in connection.execute("SELECT x, y FROM a")] == [(1, 2)]


def test_a_step_that_fails_leaves_nothing_of_itself(tmp_path):
    with closing(open_writer(tmp_path / "x.db")) as connection:
        migrate(connection, (ONE,), path="x.db")
        with pytest.raises(sqlite3.OperationalError, match="nowhere"):
            migrate(connection, (ONE, BROKEN), path="x.db")
        assert version(connection) == 1
        assert [row[1] for row in connection.execute("PRAGMA table_info(a)")] == ["x"]
        assert migrate(connection, (ONE, TWO), path="x.db") == 2


def test_a_newer_schema_is_refused_with_words_and_left_alone(tmp_path):
    store = Store(tmp_path)
    store.connection.execute(f"PRAGMA user_version={len(STORE) + 1}")
    store.close()
    before = (tmp_path / "store.db").read_bytes()
    with pytest.raises(NewerSchemaError, match=r"newer than this program knows \(up to \d+\); run the newer euryhale"):
        Store(tmp_path)
    assert (tmp_path / "store.db").read_bytes() == before
    with closing(sqlite3.connect(tmp_path / "store.db")) as connection:
        connection.execute(f"PRAGMA user_version={len(STORE)}")
    Store(tmp_path).close()  # the refusal let go of the lock


def test_many_openers_at_once_make_one_schema(tmp_path):
    inbox = Inbox(tmp_path)
    start, problems = threading.Barrier(8), []

    def prepare() -> None:
        start.wait()
        try:
            inbox.prepare()
        except sqlite3.Error as error:
            problems.append(error)

    threads = [threading.Thread(target=prepare) for _ in range(8)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert problems == []
    with closing(sqlite3.connect(inbox.path)) as connection:
        assert version(connection) == len(INBOX)


def test_processes_that_open_at_once_make_one_schema(tmp_path):
    line = (
        "import sys; from pathlib import Path; from ingest.store.inbox import Inbox; Inbox(Path(sys.argv[1])).prepare()"
    )
    openers = [
        subprocess.Popen([sys.executable, "-P", "-c", line, str(tmp_path)], stderr=subprocess.PIPE) for _ in range(4)
    ]
    said = [opener.communicate()[1] for opener in openers]
    assert [opener.returncode for opener in openers] == [0] * 4, said


@pytest.mark.parametrize("number", range(1, len(STORE) + 1))
def test_a_filled_store_of_every_released_schema_opens_and_answers(tmp_path, number):
    """The files were made by `tests.ingest.store.schemas.make` with the program of their day and are never made anew."""
    kept = SCHEMAS / f"schema{number}.db"
    (tmp_path / "store.db").write_bytes(kept.read_bytes())
    with closing(sqlite3.connect(tmp_path / "store.db")) as connection:
        assert version(connection) == number
    Store(tmp_path).close()
    queries = Queries(tmp_path)
    with closing(sqlite3.connect(tmp_path / "store.db")) as connection:
        assert version(connection) == len(STORE)
        connection.row_factory = sqlite3.Row
        assert first_broken_id(connection) is None
        assert connection.execute("PRAGMA integrity_check").fetchone()[0] == "ok"
        assert connection.execute("PRAGMA foreign_key_check").fetchall() == []
    assert queries.reading_count() == make.READINGS
    assert set(queries.latest()) == {"s0", "s1"}
    assert {row.condition for row in queries.alarms()} >= {"salinity_low"}
    assert queries.site_text()[0] == 1
    assert [cohort.id for cohort in queries.cohorts()] == ["b0", "b1"]
    assert [item.code for item in queries.refused()] == ["unreadable"]
    assert queries.events(kind_prefix="alarm.raised")
    history = queries.history("s0", from_us=make.START_US, to_us=make.START_US + 2 * make.DAY_US)
    assert history.resolution_us == make.QUARTER_US
    assert history.salinity.size > 0
    assert queries.outcome(make.COMMAND_ID).outcome == "applied"


def laid_out(path: Path) -> list[tuple[str, ...]]:
    with closing(sqlite3.connect(path)) as connection:
        return connection.execute("SELECT type, name, sql FROM sqlite_master ORDER BY 1, 2").fetchall()


def test_the_steps_make_of_every_kept_store_what_they_make_anew(tmp_path):
    """So an edited step is noticed: what is released stays, and a change is a new step."""
    (tmp_path / "fresh").mkdir()
    Store(tmp_path / "fresh").close()
    for kept in sorted(SCHEMAS.glob("schema*.db")):
        folder = tmp_path / kept.stem
        folder.mkdir()
        (folder / "store.db").write_bytes(kept.read_bytes())
        Store(folder).close()
        assert laid_out(folder / "store.db") == laid_out(tmp_path / "fresh" / "store.db")
