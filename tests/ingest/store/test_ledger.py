from __future__ import annotations

import sqlite3

import pytest
from hypothesis import given
from hypothesis import strategies as st

from ingest.store.alarms import AlarmRow
from ingest.store.block import BlockCommit, Occurrence, OutboxRow
from ingest.store.cohorts import FirstStock, stock_first
from ingest.store.ledger import Event, append, first_broken_id, from_row, newest_hash, read
from ingest.store.migrations import STORE, migrate
from ingest.store.queries import Queries
from tests.ingest.store.samples import START_US, store_with


def event(index: int, **changes) -> Event:
    return Event(kind="alarm.raised", subject=f"tank/t{index}", recorded_at=START_US + index, **changes)


@pytest.fixture
def store(tmp_path):
    store = store_with(tmp_path)
    yield store
    store.close()


@pytest.fixture
def filled(store):
    with store.transaction() as connection:
        for index in range(5):
            append(connection, event(index, body={"value": index, "why": "naïve – ±"}))
    return store


def without_triggers(connection: sqlite3.Connection) -> None:
    """Do what somebody would do who edits the file by hand."""
    for name in ("event_is_never_changed", "event_is_never_deleted"):
        connection.execute(f"DROP TRIGGER {name}")


@pytest.mark.parametrize(
    "statement", ["UPDATE event SET actor = 'x' WHERE id = 3", "DELETE FROM event WHERE id = 3", "DELETE FROM event"]
)
def test_it_can_only_grow(filled, statement):
    with pytest.raises(sqlite3.IntegrityError, match="append-only"):
        filled.connection.execute(statement)
    assert filled.connection.execute("SELECT count(*) FROM event").fetchone()[0] == 5


def test_replacing_a_row_is_a_change_too(filled):
    with pytest.raises(sqlite3.IntegrityError, match="append-only"):
        filled.connection.execute("INSERT OR REPLACE INTO event SELECT * FROM event WHERE id = 3")
    assert first_broken_id(filled.connection) is None


def test_an_untouched_chain_holds(filled):
    assert first_broken_id(filled.connection) is None
    assert [identifier for identifier, _ in read(filled.connection)] == [1, 2, 3, 4, 5]


def test_an_empty_chain_holds(store):
    assert first_broken_id(store.connection) is None
    assert newest_hash(store.connection) == ""


@pytest.mark.parametrize(
    "column", ["kind", "subject", "measured_at", "recorded_at", "actor", "cause_id", "body_version"]
)
def test_a_changed_field_is_found(filled, column):
    without_triggers(filled.connection)
    filled.connection.execute(f"UPDATE event SET {column} = 1 + coalesce({column}, 0) WHERE id = 3")
    assert first_broken_id(filled.connection) == 3


def test_changed_details_are_found(filled):
    without_triggers(filled.connection)
    filled.connection.execute("UPDATE event SET body = replace(body, '2', '9') WHERE id = 3")
    assert first_broken_id(filled.connection) == 3


@pytest.mark.parametrize(("gone", "found"), [(1, 2), (3, 4)])
def test_a_missing_event_is_found(filled, gone, found):
    without_triggers(filled.connection)
    filled.connection.execute("DELETE FROM event WHERE id = ?", (gone,))
    assert first_broken_id(filled.connection) == found


def test_a_chain_that_was_cut_short_no_longer_ends_in_the_hash_that_was_noted(filled):
    noted = newest_hash(filled.connection)
    without_triggers(filled.connection)
    filled.connection.execute("DELETE FROM event WHERE id = 5")
    assert first_broken_id(filled.connection) is None
    assert newest_hash(filled.connection) != noted


def test_a_rewritten_tail_no_longer_ends_in_the_hash_that_was_noted(filled):
    noted = newest_hash(filled.connection)
    without_triggers(filled.connection)
    filled.connection.execute("DELETE FROM event WHERE id >= 4")
    append(filled.connection, event(3, body={"value": 99}))
    append(filled.connection, event(4, body={"value": 4, "why": "naïve – ±"}))
    assert first_broken_id(filled.connection) is None
    assert newest_hash(filled.connection) != noted


JSON = st.recursive(
    st.none() | st.booleans() | st.integers(-(2**53), 2**53) | st.floats(allow_nan=False, allow_infinity=False)
    | st.text(st.characters(codec="utf-8"), max_size=20),
    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(st.text(st.characters(codec="utf-8"), max_size=5), inner),
    max_leaves=6,
)  # fmt: skip


@given(st.lists(st.dictionaries(st.text(st.characters(codec="utf-8"), max_size=6), JSON, max_size=3), max_size=5))
def test_whatever_is_written_comes_back_and_the_chain_holds(bodies):
    connection = sqlite3.connect(":memory:", isolation_level=None)
    connection.row_factory = sqlite3.Row
    migrate(connection, STORE, path="memory")
    written = [event(index, body=body, measured_at=index or None) for index, body in enumerate(bodies)]
    for item in written:
        append(connection, item)
    assert [item for _, item in read(connection)] == written
    assert first_broken_id(connection) is None
    connection.close()


def test_reading_by_kind_and_from_an_event_on(filled):
    append(filled.connection, Event(kind="stock.received", subject="tank/t0", recorded_at=START_US))
    assert [identifier for identifier, _ in read(filled.connection, kind_prefix="stock.")] == [6]
    assert [identifier for identifier, _ in read(filled.connection, kind_prefix="alarm.", after_id=3)] == [4, 5]
    # A prefix is plain text: what means something in a pattern means itself.
    assert [*read(filled.connection, kind_prefix="%")] == [*read(filled.connection, kind_prefix="alarm_")] == []


def test_the_newest_events_that_fit_come_oldest_first(filled):
    queries = Queries(filled.folder)
    assert [identifier for identifier, _ in queries.events(most=2)] == [4, 5]
    assert [identifier for identifier, _ in queries.events(subject="tank/t1")] == [2]
    assert [identifier for identifier, _ in queries.events(from_us=START_US + 1, to_us=START_US + 3)] == [2, 3]


ALARM = AlarmRow("tank/t0", "salinity_low", "unacknowledged", "soon", True, 1, START_US, 28.0, 29.0, START_US, {})


def occurrence(subject="tank/t0", channel="duty") -> Occurrence:
    return Occurrence(
        event(0, body={"condition": "salinity_low"}), ALARM._replace(subject=subject), (OutboxRow(channel, {"a": 1}),)
    )


def counts(store) -> tuple[int, int, int]:
    return tuple(
        store.connection.execute(f"SELECT count(*) FROM {table}").fetchone()[0]
        for table in ("event", "alarm", "outbox")
    )


def test_an_alarm_its_event_and_its_notification_are_one(store):
    store.commit(BlockCommit(occurrences=[occurrence()]))
    assert counts(store) == (1, 1, 1)
    row = store.connection.execute("SELECT * FROM outbox JOIN event ON event.id = outbox.event_id").fetchone()
    assert (row["channel"], row["attempts"], row["finished_at"]) == ("duty", 0, None)
    assert row["created_at"] == row["next_attempt_at"] == START_US
    assert from_row(row).kind == "alarm.raised"


@pytest.mark.parametrize("table", ["event", "alarm", "outbox"])
def test_an_alarm_cannot_be_without_its_notification(store, table):
    """Whichever of the three writes fails, none of the three is there."""
    store.connection.execute(
        f"CREATE TRIGGER refuse BEFORE INSERT ON {table} BEGIN SELECT RAISE(ABORT, 'no room'); END"
    )
    with pytest.raises(sqlite3.IntegrityError, match="no room"):
        store.commit(BlockCommit(occurrences=[occurrence()]))
    assert counts(store) == (0, 0, 0)
    store.connection.execute("DROP TRIGGER refuse")
    store.commit(BlockCommit(occurrences=[occurrence()]))
    assert counts(store) == (1, 1, 1)


def test_an_alarm_keeps_naming_its_event_when_only_its_pending_state_changes(store):
    store.commit(BlockCommit(occurrences=[occurrence()]))
    store.commit(BlockCommit(pending_alarms=[ALARM._replace(state="acknowledged")]))
    row = store.connection.execute("SELECT state, event_id FROM alarm").fetchone()
    assert tuple(row) == ("acknowledged", 1)


def test_a_cohort_is_stocked_once_and_its_id_is_never_used_again(store):
    stock = FirstStock("b0", "penaeus-vannamei/pl10", 80_000, 31.0, START_US)
    with store.transaction() as connection:
        for number in (80_000, 1):
            stock_first(
                connection,
                FirstStock(**{**_plain(stock), "number": number}),
                tank=1,
                tank_slug="t0",
                actor="Duty",
                now_us=START_US,
            )
    assert counts(store)[0] == 1
    (cohort,) = Queries(store.folder).cohorts()
    assert (cohort.id, cohort.tank, cohort.number, cohort.body["used_to_salinity"]) == ("b0", "t0", 80_000, 31.0)


def _plain(stock: FirstStock) -> dict[str, object]:
    return {name: getattr(stock, name) for name in stock.__slots__}
