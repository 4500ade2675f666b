from __future__ import annotations

import math
import sqlite3

import numpy as np
import pytest

from ingest.store.block import BlockCommit, ChannelRow, Conflict
from ingest.store.readings import COLUMNS, as_sent
from tests.ingest.store.samples import MINUTE_US, START_US, put, rows, store_with


@pytest.fixture
def store(tmp_path):
    store = store_with(tmp_path, sensors=("s0", "s1"))
    yield store
    store.close()


def stored(store, column="practical_salinity"):
    return [row[0] for row in store.connection.execute(f"SELECT {column} FROM reading ORDER BY measured_at, sensor")]


def test_what_is_not_known_is_null_and_never_zero(store):
    put(store, [START_US, START_US + 1], salinity=[math.nan, 0.0], temperature=[28.0, math.nan])
    assert stored(store) == [None, 0.0]
    assert stored(store, "temperature_degC") == [28.0, None]
    assert stored(store, "pressure") == [None, None]
    assert stored(store, "osmolality_mOsm_kg") == [None, 0.0]


def test_columns_of_the_table_are_those_of_the_rows(store):
    assert {row[1] for row in store.connection.execute("PRAGMA table_info(reading)")} == set(COLUMNS)


def test_numbers_come_back_to_the_last_bit(store):
    value = 31.000000000000004
    put(store, [START_US], salinity=value)
    assert stored(store) == [value]
    assert as_sent(store.connection, measured_at=START_US, sensor=1)[:2] == (50.0, 28.0)


def test_what_was_sent_is_found_by_moment_and_sensor(store):
    put(store, [START_US], temperature=math.nan)
    conductivity, temperature, pressure = as_sent(store.connection, measured_at=START_US, sensor=1)
    assert conductivity == 50.0
    assert math.isnan(temperature)
    assert math.isnan(pressure)
    assert as_sent(store.connection, measured_at=START_US, sensor=2) is None
    assert as_sent(store.connection, measured_at=START_US + 1, sensor=1) is None


def test_a_second_row_of_one_moment_and_sensor_takes_the_whole_block_down_and_leaves_nothing(store):
    put(store, [START_US])
    block = BlockCommit(readings=rows([START_US + 1, START_US], sensor=[1, 1]), counts={"readings": 2})
    with pytest.raises(sqlite3.IntegrityError):
        store.commit(block)
    assert len(stored(store)) == 1
    assert store.connection.execute("SELECT count(*) FROM counter").fetchone()[0] == 0
    assert not store.connection.in_transaction


def test_a_contradiction_is_kept_aside_with_its_reason(store):
    put(store, [START_US])
    store.commit(BlockCommit(conflicts=[Conflict(START_US, 1, START_US + 9, (51.0, math.nan, math.nan))]))
    row = store.connection.execute("SELECT * FROM conflict").fetchone()
    assert (row["measured_at"], row["sensor"], row["conductivity"], row["temperature"]) == (START_US, 1, 51.0, None)
    assert "came first" in row["reason"]
    assert stored(store, "conductivity") == [50.0]


def test_the_latest_row_of_a_sensor_is_the_one_that_was_chosen(store):
    block = rows([START_US, START_US + MINUTE_US, START_US], sensor=[1, 1, 2], salinity=[30.0, 31.0, 32.0])
    store.commit(BlockCommit(readings=block, latest=np.array([1, 2]), sensor_states=[b"one", b"two"], newest_at=[1, 2]))
    store.commit(
        BlockCommit(
            readings=rows([START_US + 2 * MINUTE_US], salinity=29.0),
            latest=np.array([0]),
            sensor_states=[b"three"],
            newest_at=[0],
        )
    )
    found = store.connection.execute("SELECT sensor, practical_salinity, state FROM latest ORDER BY sensor").fetchall()
    assert [tuple(row) for row in found] == [(1, 29.0, b"three"), (2, 32.0, b"two")]
    # What is shown may go back with a clock; what has been admitted never does.
    assert [row[0] for row in store.connection.execute("SELECT newest_at FROM latest ORDER BY sensor")] == [1, 2]


def test_a_channel_row_is_stored_once(store):
    row = ChannelRow(START_US, 1, "oxygen", START_US, 7.1, 0)
    store.commit(BlockCommit(channels=[row, row._replace(channel="ph", value=math.nan)]))
    store.commit(BlockCommit(channels=[row]))
    found = store.connection.execute("SELECT channel, value FROM channel_reading ORDER BY channel").fetchall()
    assert [tuple(item) for item in found] == [("oxygen", 7.1), ("ph", None)]
