from __future__ import annotations

import sqlite3
import threading
from contextlib import closing

import pytest

from ingest.store.block import BlockCommit
from ingest.store.connection import open_writer, reader
from ingest.store.errors import MissingStoreError
from ingest.store.queries import Queries
from ingest.store.store import Store
from tests.ingest.store.samples import START_US, put, rows, store_with


def test_a_reader_in_the_middle_of_its_query_never_holds_up_the_writer(tmp_path):
    store = store_with(tmp_path)
    put(store, range(START_US, START_US + 100))
    with reader(store.path) as connection:
        connection.execute("BEGIN")
        before = connection.execute("SELECT count(*) FROM reading").fetchone()[0]
        store.connection.execute("PRAGMA busy_timeout=0")  # the least wait would be an error
        for index in range(50):
            store.commit(BlockCommit(readings=rows([START_US + 1000 + index])))
        assert connection.execute("SELECT count(*) FROM reading").fetchone()[0] == before == 100
    assert Queries(tmp_path).reading_count() == 150
    store.close()


def test_a_checkpoint_gives_way_to_a_reader_and_works_without_one(tmp_path):
    store = store_with(tmp_path)
    put(store, range(START_US, START_US + 2000))
    wal = tmp_path / "store.db-wal"
    with reader(store.path) as connection:
        connection.execute("BEGIN")
        connection.execute("SELECT count(*) FROM reading").fetchone()
        store.checkpoint()
        put(store, [START_US + 5000])
        assert wal.stat().st_size > 0
    store.checkpoint()
    assert wal.stat().st_size == 0
    assert store.connection.execute("PRAGMA busy_timeout").fetchone()[0] == 5000
    assert Queries(tmp_path).reading_count() == 2001
    store.close()


def test_readers_cannot_write(tmp_path):
    store_with(tmp_path).close()
    with (
        reader(tmp_path / "store.db") as connection,
        pytest.raises(sqlite3.OperationalError, match="readonly"),
    ):
        connection.execute("INSERT INTO counter VALUES ('x', 1)")


def test_every_commit_is_on_disk_before_it_is_believed(tmp_path):
    with closing(open_writer(tmp_path / "x.db")) as connection:
        assert connection.execute("PRAGMA synchronous").fetchone()[0] == 2
        assert connection.execute("PRAGMA journal_mode").fetchone()[0] == "wal"
        assert connection.execute("PRAGMA foreign_keys").fetchone()[0] == 1


def test_who_asks_while_a_store_is_being_made_gets_an_answer_or_that_it_is_missing(tmp_path):
    done, problems, answers = threading.Event(), [], set()

    def ask(folder) -> None:
        queries = Queries(folder)
        while not done.is_set():
            try:
                answers.add(queries.reading_count())
            except MissingStoreError:
                answers.add("missing")
            except sqlite3.Error as error:
                problems.append(repr(error))

    for attempt in range(15):
        done.clear()
        folder = tmp_path / str(attempt)
        asker = threading.Thread(target=ask, args=(folder,))
        asker.start()
        Store(folder).close()
        done.set()
        asker.join()
    assert problems == []
    assert "missing" in answers
