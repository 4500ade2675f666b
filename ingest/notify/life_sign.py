"""The dead-man's sign: a POST with the time to an address outside, whose owner raises the alarm when it stays away.

The main loop asks for each one: a worker that hangs gives no sign, though its threads may live on.
"""

from __future__ import annotations

import queue
import threading
from http.client import HTTPException
from typing import TYPE_CHECKING, Any
from urllib.error import URLError
from urllib.request import HTTPRedirectHandler, Request, build_opener

import msgspec

from ingest.secrets import MissingSecretError, read_secret

if TYPE_CHECKING:
    from pathlib import Path

TIMEOUT_S = 5.0
LEAVE_S = 1.0


class _NoRedirect(HTTPRedirectHandler):
    def redirect_request(self, *_: Any) -> None:
        """Follow nothing: an answer from somewhere else is no answer."""


class LifeSign:
    """The thread that gives the signs.

    Parameters
    ----------
    secret : str
        Name of the secret that holds the address.
    site_file : Path
    """

    def __init__(self, secret: str, *, site_file: Path) -> None:
        self._secret = secret
        self._site_file = site_file
        self._asked: queue.Queue[dict[str, Any] | None] = queue.Queue(maxsize=1)
        self._stop = threading.Event()
        self._opener = build_opener(_NoRedirect)
        self.given = 0
        self.failed = 0
        self.problem = ""
        self._thread = self._started()

    def ask(self, body: dict[str, Any]) -> None:
        """Have a sign given; one that is still on its way is enough."""
        if not self._thread.is_alive() and not self._stop.is_set():
            self._thread = self._started()
        if not self._asked.full():
            self._asked.put_nowait(body)

    def stop(self) -> None:
        """Give no more signs."""
        self._stop.set()
        if not self._asked.full():
            self._asked.put_nowait(None)
        self._thread.join(LEAVE_S)

    def _started(self) -> threading.Thread:
        thread = threading.Thread(target=self._give_all, name="notify-life-sign", daemon=True)
        thread.start()
        return thread

    def _give_all(self) -> None:
        while (body := self._asked.get()) is not None and not self._stop.is_set():
            self.problem = self._give(body)
            if self.problem:
                self.failed += 1
            else:
                self.given += 1

    def _give(self, body: dict[str, Any]) -> str:
        """Try once and return what went wrong, empty if nothing did."""
        try:
            url = read_secret(self._secret, site_file=self._site_file).strip()
        except (MissingSecretError, OSError, ValueError) as error:
            return str(error)
        if not url.startswith(("http://", "https://")):
            return f"the address in secret {self._secret!r} begins with neither http:// nor https://"
        try:
            request = Request(url, data=msgspec.json.encode(body), headers={"Content-Type": "application/json"})  # noqa: S310 - the scheme was looked at above
            with self._opener.open(request, timeout=TIMEOUT_S) as answer:
                answer.read(1)
                status = int(answer.status)
        except (URLError, HTTPException, OSError, ValueError) as error:
            return f"no answer: {getattr(error, 'reason', error)}"[:200]
        return "" if 200 <= status < 300 else f"answered with status {status}"
