"""Start a broker on this machine: mosquitto where it is installed, else the embedded one (package `iotcore`).

Both are bound to loopback unless told otherwise and end with the process that started them (`ingest.tether`).
What a broker drops without a word was measured (mosquitto 2.0.11); the lines that stop it are in
`MOSQUITTO_LINES`. Only mosquitto keeps its queue over its own restart: the embedded broker is for the demo
and for light tests.
"""

from __future__ import annotations

import contextlib
import importlib.util
import os
import shutil
import signal
import socket
import subprocess
import sys
import tempfile
import time
from collections.abc import Sequence
from pathlib import Path
from types import TracebackType
from typing import Literal, Self, TypeAlias

from analysis.errors import EuryhaleError, MissingPackageError
from ingest import tether

BrokerKind: TypeAlias = Literal["mosquitto", "embedded"]
Protocol: TypeAlias = Literal["3.1.1", "5"]

START_LIMIT_S = 20.0
STOP_LIMIT_S = 15.0
POLL_S = 0.01
ASK_AGAIN_S = 0.5

MOSQUITTO_LINES = (
    "max_queued_messages 0",  # the default keeps 1,000 for a worker that is away, drops the rest
    "max_inflight_messages 0",  # the default window of 20 stalls a worker that acknowledges after its commit
    "persistence true",
    "autosave_on_changes true",  # without these two a power cut loses up to half an hour
    "autosave_interval 1000",
    "queue_qos0_messages true",  # for sensors that publish at QoS 0
)
"""The configuration a site's own mosquitto needs so that nothing is lost while the worker is away."""

EMBEDDED_SEGMENT_BYTES = 50 * 1024 * 1024
EMBEDDED_SEGMENTS = 10
"""The embedded broker drops its oldest messages beyond segment size times count, without a word."""
EMBEDDED_WINDOW = 100

_EMBEDDED_PROGRAM = (
    "import sys; from iotcore import IotCoreBroker; IotCoreBroker(config_path=sys.argv[1]).run_forever()"
)


class BrokerError(EuryhaleError):
    """The broker did not start, or is not there. The message ends with the last lines of its log."""


def has_mosquitto() -> bool:
    """Return True when a mosquitto broker can be started on this machine."""
    return mosquitto_path() is not None


def mosquitto_path() -> str | None:
    """Return the path of the mosquitto broker; it is often in a folder that only root has on the path."""
    return shutil.which("mosquitto") or shutil.which("mosquitto", path="/usr/sbin:/usr/local/sbin:/opt/homebrew/sbin")


def has_embedded() -> bool:
    """Return True when the embedded broker's package is installed."""
    return importlib.util.find_spec("iotcore") is not None


def available_kind() -> BrokerKind:
    """Return the broker to use here: mosquitto when it is on the path, else the embedded one."""
    if has_mosquitto():
        return "mosquitto"
    if has_embedded():
        return "embedded"
    raise MissingPackageError("iotcore", extra="demo", need="starting a broker where mosquitto is not installed")


def free_port(host: str = "127.0.0.1") -> int:
    """Return a TCP port that is free on *host* now."""
    with socket.socket() as probe:
        probe.bind((host, 0))
        return int(probe.getsockname()[1])


def is_listening(host: str, port: int) -> bool:
    """Return True when something accepts TCP connections on *host*, *port*."""
    try:
        with socket.create_connection((host, port), timeout=1.0):
            return True
    except OSError:
        return False


class Broker:
    """A broker that this process runs.

    Parameters
    ----------
    kind : {"mosquitto", "embedded"}, optional
        Default: `available_kind()`.
    host : str
        Address to bind. Anything but loopback opens the broker to the network without a password.
    port : int
        0 takes a free one, kept over `restart`.
    folder : path, optional
        Keeps configuration, log and (mosquitto) the queues over restarts. Default: a temporary folder,
        removed by `stop`.
    protocol : {"3.1.1", "5"}
        What the embedded broker speaks on its port. mosquitto speaks both.
    lines : sequence of str
        Further lines of mosquitto's configuration, the last of all: they win over ours.
    is_anonymous : bool
        Whether mosquitto takes clients without a password.
    """

    def __init__(
        self,
        kind: BrokerKind | None = None,
        *,
        host: str = "127.0.0.1",
        port: int = 0,
        folder: Path | None = None,
        protocol: Protocol = "3.1.1",
        lines: Sequence[str] = (),
        is_anonymous: bool = True,
    ) -> None:
        self.kind: BrokerKind = kind or available_kind()
        self.host = host
        self.port = port or free_port(host)
        self.protocol = protocol
        self._lines = tuple(lines)
        self._is_anonymous = is_anonymous
        self._is_folder_ours = folder is None
        self.folder = folder or Path(tempfile.mkdtemp(prefix="euryhale-broker-"))
        self._tether: subprocess.Popen[bytes] | None = None
        self._pid: int | None = None

    @property
    def is_alive(self) -> bool:
        """Whether the broker's process runs."""
        return self._tether is not None and self._tether.poll() is None

    @property
    def pid(self) -> int | None:
        """Process id of the broker itself; None while it does not run."""
        return self._pid if self.is_alive else None

    @property
    def log_path(self) -> Path:
        """The file that takes what the broker writes."""
        return self.folder / "broker.log"

    def start(self) -> Self:
        """Start and return when the broker accepts connections; does nothing while it runs.

        Raises
        ------
        BrokerError
            The port is taken, or the broker ended or did not listen within `START_LIMIT_S`.
        """
        if self.is_alive:
            return self
        if is_listening(self.host, self.port):
            raise BrokerError(f"port {self.port} on {self.host} is taken by another program; choose a free one, or 0")
        self.folder.mkdir(parents=True, exist_ok=True)
        command = self._mosquitto_command() if self.kind == "mosquitto" else self._embedded_command()
        with self.log_path.open("ab") as log:
            try:
                self._tether, self._pid = tether.start(command, log=log)
            except FileNotFoundError as error:
                raise BrokerError(f"the broker {command[0]!r} cannot be started{self._log_end()}") from error
        self._wait_until_listening()
        return self

    def stop(self) -> None:
        """Ask the broker to end and wait for it; safe to call twice. A temporary folder goes with it."""
        self._end(signal.SIGTERM)
        if self._is_folder_ours:
            shutil.rmtree(self.folder, ignore_errors=True)

    def kill(self) -> None:
        """End the broker as a power cut does: no farewell, nothing saved. The folder stays for `restart`."""
        self._end(signal.SIGKILL)

    def restart(self) -> Self:
        """Start again on the same port and folder, after ending what still runs in good order."""
        self._end(signal.SIGTERM)
        return self.start()

    def __enter__(self) -> Self:
        return self.start()

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.stop()

    def _end(self, how: signal.Signals) -> None:
        process, self._tether = self._tether, None
        if process is None or self._pid is None:
            return
        limit = time.monotonic() + STOP_LIMIT_S
        while process.poll() is None and time.monotonic() < limit:
            with contextlib.suppress(ProcessLookupError):  # ended by itself in this moment
                os.kill(self._pid, how)
            # Asked again: mosquitto forgets a signal that comes before its loop has begun.
            with contextlib.suppress(subprocess.TimeoutExpired):
                process.wait(ASK_AGAIN_S)
        if process.poll() is None:
            process.kill()  # the tether: the kernel ends the broker with it
            process.wait()
        for stream in (process.stdin, process.stdout):
            if stream is not None:
                stream.close()

    def _wait_until_listening(self) -> None:
        limit = time.monotonic() + START_LIMIT_S
        while not is_listening(self.host, self.port):
            if not self.is_alive or time.monotonic() > limit:
                self._end(signal.SIGKILL)
                raise BrokerError(f"the {self.kind} broker does not listen on {self.host}:{self.port}{self._log_end()}")
            time.sleep(POLL_S)

    def _log_end(self) -> str:
        if not self.log_path.exists():
            return ""
        last = self.log_path.read_text(encoding="utf-8", errors="replace").splitlines()[-5:]
        return "; its log ends: " + " / ".join(last) if last else ""

    def _mosquitto_command(self) -> list[str]:
        path = mosquitto_path()
        if path is None:
            raise BrokerError("mosquitto is not on the path; install it (Debian: apt-get install mosquitto)")
        config = self.folder / "mosquitto.conf"
        config.write_text("\n".join(self._mosquitto_config()) + "\n", encoding="utf-8")
        return [path, "-c", str(config)]

    def _mosquitto_config(self) -> list[str]:
        lines = [
            f"listener {self.port} {self.host}",
            f"allow_anonymous {str(self._is_anonymous).lower()}",
            f"persistence_location {self.folder.resolve()}/",
            *MOSQUITTO_LINES,
        ]
        if hasattr(os, "geteuid") and os.geteuid() == 0:
            lines.append("user root")  # else it changes to a user that cannot write in our folder
        return [*lines, *self._lines]

    def _embedded_command(self) -> list[str]:
        if not has_embedded():
            raise MissingPackageError("iotcore", extra="demo", need="the embedded broker")
        if self._lines or not self._is_anonymous:
            raise BrokerError("passwords and further lines are for mosquitto; the embedded broker takes none here")
        config = self.folder / "embedded.toml"
        config.write_text(self._embedded_config(), encoding="utf-8")
        return [sys.executable, "-P", "-c", _EMBEDDED_PROGRAM, str(config)]

    def _embedded_config(self) -> str:
        table = "v4.1" if self.protocol == "3.1.1" else "v5.1"
        return f"""\
id = 0

[router]
id = 0
max_connections = 1000
max_outgoing_packet_count = 200
max_segment_size = {EMBEDDED_SEGMENT_BYTES}
max_segment_count = {EMBEDDED_SEGMENTS}

[{table}]
name = "loopback"
listen = "{self.host}:{self.port}"
next_connection_delay_ms = 1

[{table}.connections]
connection_timeout_ms = 60000
max_payload_size = 65536
max_inflight_count = {EMBEDDED_WINDOW}
dynamic_filters = true
"""
