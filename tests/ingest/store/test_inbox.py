from __future__ import annotations

import sqlite3
import subprocess
import sys
import threading
from contextlib import closing

import pytest

from ingest.store.inbox import Command, Inbox, InboxTaker
from tests.ingest.store.samples import START_US


def command(**changes) -> Command:
    given = {
        "kind": "alarm.acknowledge",
        "subject": "tank/t0",
        "actor": "Duty",
        "role": "operator",
        "submitted_at": START_US,
        "expires_at": START_US + 1,
        "body": {"condition": "salinity_low", "why": "–±"},
        "expected": "3",
    }
    return Command(**{**given, **changes})


@pytest.fixture
def inbox(tmp_path):
    return Inbox(tmp_path)


def taken(inbox, seq=0, **options):
    taker = InboxTaker(inbox)
    try:
        return taker.after(seq, **options)
    finally:
        taker.close()


def test_a_command_comes_out_as_it_went_in(inbox):
    asked = command()
    inbox.submit(asked)
    assert taken(inbox) == [(1, asked)]


def test_the_same_id_twice_is_one_command_the_first(inbox):
    first = command(id="one")
    inbox.submit(first)
    inbox.submit(command(id="one", kind="alarm.shelve"))
    assert taken(inbox) == [(1, first)]


def test_commands_come_in_the_order_in_which_they_were_given(inbox):
    for index in range(5):
        inbox.submit(command(id=str(index)))
    assert [item.id for _, item in taken(inbox, 2)] == ["2", "3", "4"]
    assert [item.id for _, item in taken(inbox, 0, limit=2)] == ["0", "1"]


def test_every_command_has_an_id_of_its_own():
    assert command().id != command().id


def test_many_people_at_once_on_a_fresh_folder(inbox):
    start, problems = threading.Barrier(8), []

    def submit(index: int) -> None:
        start.wait()
        try:
            inbox.submit(command(id=str(index)))
        except sqlite3.Error as error:
            problems.append(error)

    threads = [threading.Thread(target=submit, args=(index,)) for index in range(8)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert problems == []
    assert sorted(item.id for _, item in taken(inbox)) == sorted(map(str, range(8)))


def test_a_file_that_another_has_begun_but_not_finished_is_no_obstacle(inbox):
    inbox.path.touch()
    inbox.submit(command())
    assert len(taken(inbox)) == 1


def test_other_processes_may_write_while_the_worker_looks(inbox):
    inbox.prepare()
    line = (
        "import sys\nfrom pathlib import Path\nfrom ingest.store.inbox import Command, Inbox\n"
        "for index in range(20):\n"
        "    Inbox(Path(sys.argv[1])).submit(Command('site.reload', 'site', 'A', 'manager', 1, 2, id=sys.argv[2] + str(index)))\n"
    )
    taker = InboxTaker(inbox)
    writers = [
        subprocess.Popen([sys.executable, "-P", "-c", line, str(inbox.path.parent), name]) for name in ("a", "b")
    ]
    seen, seq = [], 0
    while any(writer.poll() is None for writer in writers) or taker.after(seq):
        for number, item in taker.after(seq):
            seen.append(item.id)
            seq = number
    taker.close()
    assert [writer.returncode for writer in writers] == [0, 0]
    assert sorted(seen) == sorted(f"{name}{index}" for name in "ab" for index in range(20))


def test_the_worker_only_reads_it(inbox):
    inbox.submit(command())
    with closing(sqlite3.connect(inbox.path)) as connection:
        before = connection.execute("PRAGMA data_version").fetchone()
        taken(inbox)
        assert connection.execute("PRAGMA data_version").fetchone() == before
