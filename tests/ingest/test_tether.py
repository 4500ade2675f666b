from __future__ import annotations

import os
import signal
import subprocess
import sys
from pathlib import Path

import pytest

from ingest import tether
from tests.harness.process import is_gone, wait_until

STARTER = """
import sys, time
from pathlib import Path
from ingest import tether
process, pid = tether.start([sys.executable, "-c", sys.argv[1]], log=Path(sys.argv[2]).open("wb"))
print(pid, flush=True)
time.sleep(600)
"""
STUBBORN = """
import signal, time
signal.signal(signal.SIGTERM, signal.SIG_IGN)
print("deaf", flush=True)
time.sleep(600)
"""


def test_closing_the_tether_ends_the_command(tmp_path: Path) -> None:
    with (tmp_path / "log").open("wb") as log:
        process, pid = tether.start([sys.executable, "-c", "import time; time.sleep(600)"], log=log)
    assert process.stdin is not None
    assert process.stdout is not None
    process.stdin.close()
    assert process.wait(30) == 128 + signal.SIGTERM
    process.stdout.close()
    assert is_gone(pid)


def test_the_status_of_the_command_is_passed_on_and_its_words_go_to_the_log(tmp_path: Path) -> None:
    with (tmp_path / "log").open("wb") as log:
        process, _ = tether.start([sys.executable, "-c", "print('said'); raise SystemExit(7)"], log=log)
    assert process.wait(30) == 7
    assert (tmp_path / "log").read_bytes() == b"said\n"
    for stream in (process.stdin, process.stdout):
        assert stream is not None
        stream.close()


def test_a_command_that_is_not_there_is_said_at_once(tmp_path: Path) -> None:
    with (tmp_path / "log").open("wb") as log, pytest.raises(FileNotFoundError, match="no-such-program"):
        tether.start(["no-such-program"], log=log)


def test_killing_the_starter_ends_the_command(tmp_path: Path) -> None:
    starter = subprocess.Popen(
        [sys.executable, "-P", "-c", STARTER, "import time; time.sleep(600)", str(tmp_path / "log")],
        stdout=subprocess.PIPE,
    )
    assert starter.stdout is not None
    pid = int(starter.stdout.readline())
    assert not is_gone(pid)
    os.kill(starter.pid, signal.SIGKILL)
    starter.wait()
    starter.stdout.close()
    wait_until(lambda: is_gone(pid), what="the command to end after its starter")


@pytest.mark.slow  # waits out the grace
def test_a_command_that_does_not_listen_is_killed(tmp_path: Path) -> None:
    starter = subprocess.Popen(
        [sys.executable, "-P", "-c", STARTER, STUBBORN, str(tmp_path / "log")], stdout=subprocess.PIPE
    )
    assert starter.stdout is not None
    pid = int(starter.stdout.readline())
    wait_until(lambda: (tmp_path / "log").read_bytes() == b"deaf\n", what="the command to be deaf")
    os.kill(starter.pid, signal.SIGKILL)
    starter.wait()
    starter.stdout.close()
    wait_until(lambda: is_gone(pid), what="the deaf command to be killed")
