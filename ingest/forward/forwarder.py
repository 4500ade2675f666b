"""The forwarder: a thread that empties the queue towards the central store, in order, with back-off, and never touches the store itself."""

from __future__ import annotations

import threading
from typing import TYPE_CHECKING

import structlog

from ingest.forward.central import CentralUnreachableError, LinesRefusedError
from ingest.store.connection import reader
from ingest.store.errors import MissingStoreError
from ingest.store.forwarding import oldest

if TYPE_CHECKING:
    from pathlib import Path

    from ingest.forward.central import Central
    from ingest.store.forwarding import Waiting

log = structlog.get_logger(__name__)

LINES_AT_ONCE = 5_000
IDLE_S = 0.5
BACK_OFF_S = (1.0, 2.0, 5.0, 15.0, 60.0)
"""Waits between attempts while the central store is out of reach; the last one repeats, for days if need be."""


class Forwarder:
    """Sends what waits and reports what has arrived.

    Parameters
    ----------
    store_path : Path
        The store; read only.
    central : Central
        Where the lines go.
    """

    def __init__(self, store_path: Path, central: Central) -> None:
        self._path = store_path
        self._central = central
        self._stop = threading.Event()
        self._thread = threading.Thread(target=self._run, name="forwarder", daemon=True)
        self.confirmed_id = 0
        """The newest entry that the server has taken; the worker lets go of all up to it."""
        self.sent_lines = 0
        self.refused_lines = 0
        self.problem = ""

    def start(self) -> None:
        """Begin."""
        self._thread.start()

    def stop(self) -> None:
        """End after the attempt under way."""
        self._stop.set()
        self._thread.join(timeout=30)
        self._central.close()

    @property
    def is_alive(self) -> bool:
        """Whether the thread runs."""
        return self._thread.is_alive()

    def _run(self) -> None:
        failures = 0
        while not self._stop.is_set():
            waiting = self._waiting()
            if not waiting:
                self._stop.wait(IDLE_S)
                continue
            try:
                self._send(waiting)
            except CentralUnreachableError as error:
                self.problem = str(error)
                if failures == 0:
                    log.warning("central store out of reach", reason=str(error))
                self._stop.wait(BACK_OFF_S[min(failures, len(BACK_OFF_S) - 1)])
                failures += 1
                continue
            if failures:
                log.info("central store is back", attempts=failures)
            failures = 0
            self.problem = ""
            self.confirmed_id = waiting[-1].id

    def _waiting(self) -> list[Waiting]:
        try:
            with reader(self._path) as connection:
                return oldest(connection, after_id=self.confirmed_id, most_lines=LINES_AT_ONCE)
        except MissingStoreError:
            return []

    def _send(self, waiting: list[Waiting]) -> None:
        lines = [line for entry in waiting for line in entry.lines.split("\n")]
        try:
            self._central.write(lines)
        except LinesRefusedError as error:
            self._send_singly(lines, error)
        self.sent_lines += len(lines)

    def _send_singly(self, lines: list[str], error: LinesRefusedError) -> None:
        """Find the lines that are refused: the good ones of the batch must not be lost with them."""
        log.error("lines refused by the central store", reason=str(error), count=len(lines))
        if len(lines) == 1:
            self.refused_lines += 1
            return
        middle = len(lines) // 2
        for half in (lines[:middle], lines[middle:]):
            try:
                self._central.write(half)
            except LinesRefusedError as refusal:
                self._send_singly(half, refusal)
