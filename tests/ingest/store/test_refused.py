from __future__ import annotations

import pytest

from ingest.store import refused
from ingest.store.block import BlockCommit
from ingest.store.queries import Queries
from tests.ingest.store.samples import START_US, store_with


@pytest.fixture
def store(tmp_path):
    store = store_with(tmp_path)
    yield store
    store.close()


def refusal(index: int, payload: bytes = b"{", **changes) -> refused.Refusal:
    given = refused.Refusal("quay/s0", START_US + index, payload, "unreadable", "payload", "{", "JSON", False)
    return given._replace(**changes)


def test_bytes_and_reason_are_kept_newest_first(store):
    store.commit(BlockCommit(refusals=[refusal(0, b"\x00\xff"), refusal(1, is_partly_kept=True)]))
    newest, oldest = Queries(store.folder).refused()
    assert (oldest.payload, oldest.code, oldest.is_partly_kept) == (b"\x00\xff", "unreadable", False)
    assert newest.is_partly_kept
    assert len(Queries(store.folder).refused(most=1)) == 1


def test_a_huge_payload_is_cut(store):
    store.commit(BlockCommit(refusals=[refusal(0, b"x" * 1_000_000, found="y" * 10_000)]))
    (kept,) = Queries(store.folder).refused()
    assert kept.payload == b"x" * refused.KEEP_BYTES
    assert len(kept.found) == 500


def test_only_the_newest_are_kept_and_all_are_counted(store, monkeypatch):
    monkeypatch.setattr(refused, "KEEP_ROWS", 10)
    for start in range(0, 35, 7):
        store.commit(
            BlockCommit(refusals=[refusal(start + index) for index in range(7)], counts={"refused": 7, "none": 0})
        )
    kept = Queries(store.folder).refused()
    assert [item.received_at - START_US for item in kept] == list(range(34, 24, -1))
    assert Queries(store.folder).counters() == {"refused": 35}


def test_the_bound_is_worth_a_few_dozen_megabytes_at_most():
    assert refused.KEEP_ROWS * (refused.KEEP_BYTES + 1000) < 110e6
