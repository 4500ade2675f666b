"""What leaves for the central store: lines of every block, put into the queue in the block's own transaction."""

from __future__ import annotations

from typing import TYPE_CHECKING

import structlog

from ingest.clock import MICROSECONDS_PER_SECOND
from ingest.forward.central import CentralAccess
from ingest.forward.forwarder import Forwarder
from ingest.forward.lines import alarm_lines, reading_lines, stress_lines, tag
from ingest.secrets import read_secret
from ingest.store import forwarding

if TYPE_CHECKING:
    from pathlib import Path

    from ingest.forward.central import Central
    from ingest.site.models import Site
    from ingest.site.services import CentralStore
    from ingest.store.block import BlockCommit
    from ingest.store.store import Store
    from ingest.worker.plant import Plant

log = structlog.get_logger(__name__)

WARN_SHARE = 0.8
"""The queue is called nearly full from this share of its bound on."""


class Outgoing:
    """The worker's end of the forwarding.

    Parameters
    ----------
    plant : Plant
    central : Central
        Where the lines go.
    largest_queue_bytes : int
        Bound of the queue on disk.
    store : Store
    """

    def __init__(self, plant: Plant, central: Central, *, largest_queue_bytes: int, store: Store) -> None:
        self._store = store
        self._largest_queue_bytes = largest_queue_bytes
        self._confirmed_id = 0
        self.forwarder = Forwarder(store.path, central)
        self.backlog = forwarding.backlog(store.connection)
        self.dropped_entries = 0
        self.take(plant)

    def take(self, plant: Plant) -> None:
        """Take up a plant, at the start and after a reload: the tags of its sensors and tanks."""
        site = plant.site
        self._site = site.id
        tanks = [f"site={tag(site.id)},hall={tag(tank.hall)},tank={tag(tank.id)}" for tank in site.tanks]
        self._tank_tags = dict(zip(plant.numbers.tank.tolist(), tanks, strict=True))
        heads = []
        for sensor in site.sensors:
            place = f"site={tag(site.id)}" if sensor.tank is None else tanks[site.tank_index[sensor.tank]]
            heads.append(f"reading,{place},sensor={tag(sensor.id)}")
        self._reading_heads = dict(zip(plant.numbers.sensor.tolist(), heads, strict=True))

    def add_lines(self, commit: BlockCommit, *, now_us: int) -> None:
        """Put the lines of what *commit* holds into it."""
        lines: list[str] = []
        if commit.readings is not None:
            heads = [self._reading_heads[sensor] for sensor in commit.readings.sensor.tolist()]
            lines += reading_lines(commit.readings, tags=heads)
        lines += stress_lines(commit.stress, tags=self._tank_tags)
        lines += alarm_lines(commit.occurrences, site=self._site)
        commit.forward = lines
        commit.queued_at = now_us

    def keep_house(self) -> None:
        """Let go of what has arrived, and keep the queue within its bound."""
        confirmed_id = self.forwarder.confirmed_id
        with self._store.transaction() as connection:
            if confirmed_id > self._confirmed_id:
                forwarding.confirm(connection, confirmed_id)
            dropped = forwarding.drop_oldest(connection, keep_bytes=self._largest_queue_bytes)
            self.backlog = forwarding.backlog(connection)
        self._confirmed_id = confirmed_id
        if dropped:
            self.dropped_entries += dropped
            log.error("queue to the central store is full; its oldest entries are left out", entries=dropped)

    def condition(self, now_us: int) -> dict[str, str | int]:
        """Return how the forwarding is, for the screen."""
        oldest_at = self.backlog.oldest_at
        behind_s = 0 if oldest_at is None else (now_us - oldest_at) // MICROSECONDS_PER_SECOND
        return {
            "forward_behind_s": max(behind_s, 0),
            "forward_waiting_bytes": self.backlog.size_bytes,
            "forward_is_nearly_full": int(self.backlog.size_bytes > WARN_SHARE * self._largest_queue_bytes),
            "forward_dropped": self.dropped_entries,
            "forward_problem": self.forwarder.problem,
        }


def outgoing(site: Site, plant: Plant, *, site_file: Path, store: Store) -> Outgoing | None:
    """Return the site's forwarding, started; None where the site has no central store."""
    if site.central is None:
        return None
    # Opened only where it is needed: the client library takes its time to load, and most sites stand alone.
    from ingest.forward.influx import InfluxCentral

    made = Outgoing(
        plant,
        InfluxCentral(_access(site.central, site_file)),
        largest_queue_bytes=round(site.central.largest_queue_MB * 1e6),
        store=store,
    )
    made.forwarder.start()
    return made


def _access(central: CentralStore, site_file: Path) -> CentralAccess:
    return CentralAccess(
        url=central.url,
        bucket=central.bucket,
        organisation=central.organisation or "",
        token="" if central.token_secret is None else read_secret(central.token_secret, site_file=site_file),
        ca_file=None if central.ca_file is None else (site_file.parent / central.ca_file).resolve(),
    )
