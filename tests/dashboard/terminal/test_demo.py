"""The demo as a visitor starts it: everything comes up, lives, and ends with it, however it ends."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from pathlib import Path
from urllib.error import URLError
from urllib.request import urlopen

import pytest

from dashboard.terminal.command import main, parser
from dashboard.terminal.demo import MARK
from ingest.broker import free_port
from ingest.store.errors import StoreError
from ingest.store.queries import Queries
from ingest.store.store import Store
from tests.harness.process import is_gone, wait_until

STARTS_WITHIN_S = 240.0
"""Generous: two cores that are busy with other things."""


def descendants(pid: int) -> set[int]:
    """Return all processes below *pid*, by /proc."""
    parents = {}
    for entry in Path("/proc").iterdir():
        if entry.name.isdigit():
            with suppress(OSError):
                parents[int(entry.name)] = int((entry / "stat").read_text().rpartition(")")[2].split()[1])
    found, grown = {pid}, True
    while grown:
        more = {child for child, parent in parents.items() if parent in found} - found
        found |= more
        grown = bool(more)
    return found - {pid}


class Demo:
    """A demo that runs."""

    def __init__(self, process: subprocess.Popen[bytes], folder: Path, port: int) -> None:
        self.process = process
        self.folder = folder
        self.port = port
        self.queries = Queries(folder / "run" / "store")

    def page(self) -> bytes:
        """Return the first page, empty while there is none."""
        with (
            suppress(URLError, ConnectionError, TimeoutError),
            urlopen(f"http://127.0.0.1:{self.port}/", timeout=10) as it,
        ):
            return bytes(it.read())
        return b""

    def count(self) -> int:
        """Return how many readings are stored."""
        with suppress(StoreError):
            return self.queries.reading_count()
        return 0


@contextmanager
def demo(tmp_path: Path) -> Iterator[Demo]:
    folder, port = tmp_path / "demo", free_port()
    line = [sys.executable, "-P", "-m", "dashboard.terminal.command", "demo", "--days", "0.5"]
    log = tmp_path / "said.txt"
    with log.open("wb") as out:
        process = subprocess.Popen(
            [*line, "--folder", str(folder), "--port", str(port)],
            stdout=out,
            stderr=subprocess.STDOUT,
            start_new_session=True,
            env={**os.environ, "PYTHONPATH": os.environ.get("PYTHONPATH", str(Path(__file__).parents[3]))},
        )
    children: set[int] = set()
    try:
        wait_until(
            lambda: process.poll() is not None or b"http://" in log.read_bytes(),
            what="the board's address",
            limit_s=STARTS_WITHIN_S,
        )
        assert process.poll() is None, log.read_text()
        children = descendants(process.pid)
        found = Demo(process, folder, port)
        found.queries = Queries(next(folder.rglob("store.db")).parent)
        yield found
    finally:
        if process.poll() is None:
            process.kill()
        process.wait()
        for child in children:
            if not is_gone(child):
                os.kill(child, signal.SIGKILL)


@pytest.mark.slow
def test_it_comes_up_lives_and_ends_with_a_key_press(tmp_path):
    with demo(tmp_path) as running:
        wait_until(lambda: b"<html" in running.page().lower(), what="the first page")
        history = running.count()
        assert history > 1000, "there is a past behind the first look"
        wait_until(lambda: running.count() > history + 20, what="readings to come in")
        queries = running.queries
        assert queries.is_worker_running()
        assert len(queries.latest()) >= 10
        assert len(queries.cohorts()) >= 6
        assert queries.latest_stress(since_us=0)
        children = descendants(running.process.pid)
        assert len(children) >= 4
        running.process.send_signal(signal.SIGINT)
        assert running.process.wait(60) == 0
        assert [pid for pid in children if not is_gone(pid)] == []
        assert not queries.is_worker_running()


@pytest.mark.slow
def test_killed_it_leaves_no_process_behind(tmp_path):
    with demo(tmp_path) as running:
        children = descendants(running.process.pid)
        assert len(children) >= 4
        running.process.kill()
        running.process.wait()
        wait_until(lambda: all(is_gone(pid) for pid in children), what="every part to end")
        assert not running.queries.is_worker_running()
        assert running.page() == b""


def test_it_has_a_fortnight_and_a_folder_of_its_own_unless_told_otherwise():
    args = parser(["demo"]).parse_args(["demo"])
    assert (args.folder, args.days, args.port, args.part) == (Path("demo_run"), 14.0, None, None)


def test_a_part_of_it_is_not_for_people(capsys):
    with pytest.raises(SystemExit):
        main(["demo", "--part", "kitchen"])
    assert "invalid choice" in capsys.readouterr().err


def test_a_folder_that_is_not_the_demos_is_left_alone(tmp_path, capsys):
    """The demo empties its folder at each start: it must never be somebody's home."""
    for name in ("thesis.txt", "site.yaml"):
        (tmp_path / name).write_text("years of work")
        assert main(["demo", "--folder", str(tmp_path)]) == 1
        assert "it is emptied at each start" in capsys.readouterr().err
        assert (tmp_path / name).read_text() == "years of work"
        (tmp_path / name).unlink()
    file = tmp_path / "file"
    file.write_text("x")
    assert main(["demo", "--folder", str(file)]) == 1
    assert file.read_text() == "x"


def test_a_folder_in_which_a_demo_runs_is_left_alone(tmp_path, capsys):
    (tmp_path / MARK).touch()
    store = Store(tmp_path / "store")
    assert main(["demo", "--folder", str(tmp_path)]) == 1
    assert "no demo is running" in capsys.readouterr().err
    store.close()
    assert (tmp_path / "store" / "store.db").exists()
