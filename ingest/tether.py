"""Run a command that ends with the process that started it, however that one ends.

The starter holds the writing end of a pipe that is this program's standard input. The pipe ends when the
starter closes it, exits or is killed; then the command is asked to end, and killed if it does not. A starter
that dies by `kill -9` leaves nothing behind. The first line on standard output is the command's process id.

It is run by its path, `python -I -S tether.py COMMAND ...`: it needs nothing but the standard library and
starts in a few hundredths of a second.
"""

from __future__ import annotations

import ctypes
import os
import signal
import subprocess
import sys
import threading
from pathlib import Path
from typing import IO

GRACE_S = 10.0
"""How long a command may take to end when asked, before it is killed."""
ASK_AGAIN_S = 0.5
PR_SET_PDEATHSIG = 1
"""Linux, prctl(2): the signal that a process gets when its parent dies."""


def start(command: list[str], *, log: IO[bytes]) -> tuple[subprocess.Popen[bytes], int]:
    """Start *command* on a tether to this process.

    Parameters
    ----------
    command : list of str
        Program and arguments.
    log : binary file
        Takes what the command writes to standard output and standard error.

    Returns
    -------
    (Popen, int)
        The tether, and the process id of the command. Closing the tether's `stdin` ends the command; the
        tether's return code is the command's (128 + number after a signal).
    """
    tether = subprocess.Popen(
        [sys.executable, "-I", "-S", str(Path(__file__).resolve()), *command],
        stdin=subprocess.PIPE,
        stdout=subprocess.PIPE,
        stderr=log,
        start_new_session=True,  # Ctrl-C in the terminal is for the starter, which ends its parts in order
    )
    assert tether.stdout is not None  # noqa: S101 -- a pipe was asked for
    line = tether.stdout.readline()
    if not line.strip():
        tether.wait()
        raise FileNotFoundError(command[0])
    return tether, int(line)


def _end_with_tether() -> None:
    """Ask the kernel of Linux to end this process should the tether itself be killed."""
    ctypes.CDLL(None).prctl(PR_SET_PDEATHSIG, signal.SIGTERM)


def _end_when_pipe_ends(process: subprocess.Popen[bytes]) -> None:
    while sys.stdin.buffer.read(1024):
        pass
    # Asked again and again: some programs forget a signal that comes before they are ready for it.
    for _ in range(int(GRACE_S / ASK_AGAIN_S)):
        process.terminate()
        try:
            process.wait(ASK_AGAIN_S)
        except subprocess.TimeoutExpired:
            continue
        return
    process.kill()


def main(command: list[str]) -> int:
    """Run *command* until it ends or standard input ends; return its exit status, negative for a signal."""
    # One thread still, so the call between fork and exec is safe; and this thread outlives the command.
    process = subprocess.Popen(
        command,
        stdin=subprocess.DEVNULL,
        stdout=sys.stderr,
        preexec_fn=_end_with_tether if sys.platform == "linux" else None,
    )
    sys.stdout.write(f"{process.pid}\n")
    sys.stdout.flush()
    threading.Thread(target=_end_when_pipe_ends, args=(process,), daemon=True).start()
    return process.wait()


if __name__ == "__main__":
    status = main(sys.argv[1:])
    sys.stdout.flush()
    os._exit(status if status >= 0 else 128 - status)
