"""A hatchery with people to call: a worker on a clock that stands still, its messages real."""

from __future__ import annotations

import sqlite3
from collections.abc import Callable
from contextlib import closing
from pathlib import Path
from typing import Any

from ingest.notify.sending import Post
from ingest.secrets import write_secret
from ingest.worker.calling import Calling
from tests.harness.hatchery import START_US, Bench, site_text
from tests.harness.process import wait_until

PEOPLE = """\
people:
  - {id: ana, name: Ana Reis, channels: [{kind: mail, url_secret: ana-mail}, {kind: push, url_secret: ana-push}]}
  - {id: rui, name: Rui Vale, channels: [{kind: voice, url_secret: rui-voice}]}
call_out:
  - {who: ana, wait_min: 5}
  - {who: rui, wait_min: 5}
"""
ONE_PERSON = """\
people:
  - {id: ana, name: Ana Reis, channels: [{kind: mail, url_secret: ana-mail}, {kind: push, url_secret: ana-push}]}
call_out: [{who: ana, by: [mail, push], wait_min: 60}]
"""
STEP_S = 0.25


class CallBench(Bench):
    """A bench whose calls are driven by the test too."""

    def __init__(
        self,
        folder: Path,
        *,
        people: str = PEOPLE,
        sensors: int = 1,
        secrets: dict[str, str] | None = None,
        post: Post | None = None,
        set_point: float = 31.0,
    ) -> None:
        text = site_text(port=1, sensors=sensors, extra=people, set_point=set_point)
        super().__init__(folder, text, now_us=START_US)
        for name, value in (secrets or {}).items():
            write_secret(name, value, site_file=self.site_file)
        self._post = post
        self._take_post()

    def _take_post(self) -> None:
        if self._post is not None:
            worker = self.worker
            worker.calling = Calling(
                worker.store, self.site_file, clock=self.clock, plant=worker.plant, post=self._post
            )

    def __exit__(self, *_: object) -> None:
        self.worker.calling.stop()
        super().__exit__()

    def restart(self) -> None:
        """As a kill would end it: what the threads have done and not reported is lost."""
        super().restart()
        self._take_post()

    def step(self, seconds: float = STEP_S) -> None:
        """Let the clock go on and the calls take one step."""
        self.clock.advance(seconds)
        self.worker.calling.step(self.worker.plant, self.worker.state, self.worker.intake)

    def step_until(self, condition: Callable[[], bool], what: str) -> None:
        """Take steps until *condition* holds: something real has to happen."""

        def holds() -> bool:
            self.step()
            return condition()

        wait_until(holds, what=what, limit_s=30)

    def minutes(self, count: int, values: dict[str, float]) -> None:
        """Let so many minutes pass with these readings, one a minute; nobody is called meanwhile."""
        for _ in range(count):
            self.clock.advance(60)
            for sensor, value in values.items():
                self.read(sensor, self.clock.now_us(), value)
            self.tick()

    def fall(self, *sensors: str, salinity: float = 27.0) -> None:
        """Let tanks fall out of their band until they alarm."""
        self.minutes(2, dict.fromkeys(sensors, 31.0))
        self.minutes(4, dict.fromkeys(sensors, salinity))

    def rows(self, sql: str) -> list[dict[str, Any]]:
        with closing(sqlite3.connect(self.store / "store.db")) as connection:
            connection.row_factory = sqlite3.Row
            return [dict(row) for row in connection.execute(sql)]

    def deliveries(self) -> list[dict[str, Any]]:
        return self.rows("SELECT * FROM delivery ORDER BY id")

    def phases(self) -> list[str]:
        return [row["phase"] for row in self.rows("SELECT phase FROM call_out ORDER BY id")]

    def open_outbox(self) -> int:
        return int(self.rows("SELECT count(*) AS n FROM outbox WHERE finished_at IS NULL")[0]["n"])
