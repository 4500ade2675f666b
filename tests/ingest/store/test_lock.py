from __future__ import annotations

import subprocess
import sys
import threading
from pathlib import Path

import pytest

from ingest.store.errors import StoreLockedError
from ingest.store.lock import SiteLock, is_held
from ingest.store.store import Store
from tests.harness.process import wait_until

HOLD = """
import sys, time
from pathlib import Path
from ingest.store.store import Store
store = Store(Path(sys.argv[1]))
print("held", flush=True)
time.sleep(600)
"""


@pytest.fixture
def holder(tmp_path: Path):
    process = subprocess.Popen(
        [sys.executable, "-P", "-c", HOLD, str(tmp_path)], stdout=subprocess.PIPE, stdin=subprocess.DEVNULL
    )
    assert process.stdout is not None
    assert process.stdout.readline() == b"held\n"
    yield process
    process.kill()
    process.wait()


def test_a_second_holder_is_refused_and_told_of_the_first(tmp_path, holder):
    with pytest.raises(StoreLockedError, match=rf"in use by another worker \(process {holder.pid}\)"):
        Store(tmp_path)
    assert is_held(tmp_path)


def test_a_killed_holder_frees_it_at_once(tmp_path, holder):
    holder.kill()
    holder.wait()
    assert not is_held(tmp_path)
    Store(tmp_path).close()


def test_it_is_free_again_after_closing(tmp_path):
    store = Store(tmp_path)
    assert is_held(tmp_path)
    store.close()
    assert not is_held(tmp_path)


def test_a_folder_that_is_not_there_is_held_by_nobody(tmp_path):
    assert not is_held(tmp_path / "nowhere")


def test_looking_whether_it_is_held_never_keeps_a_worker_out(tmp_path):
    """The board looks all the time; a look must not be taken for another worker."""
    (tmp_path / "worker.lock").touch()
    done = threading.Event()

    def look() -> None:
        while not done.is_set():
            is_held(tmp_path)

    watchers = [threading.Thread(target=look) for _ in range(3)]
    for watcher in watchers:
        watcher.start()
    try:
        for _ in range(300):
            lock = SiteLock(tmp_path)
            lock.take()
            lock.free()
    finally:
        done.set()
        for watcher in watchers:
            watcher.join()


def test_a_store_that_cannot_be_opened_lets_go_of_its_lock(tmp_path):
    (tmp_path / "store.db").write_bytes(b"this is no database, however long it may be" * 100)
    with pytest.raises(Exception, match="not a database"):
        Store(tmp_path)
    wait_until(lambda: not is_held(tmp_path), what="the lock to be free")
