"""The live half of the simulated hatchery: goes on in real time where the history ended, and publishes."""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

import structlog

from ingest.mqtt import Access
from ingest.simulator.feed import US_PER_SECOND, Feed
from ingest.simulator.publishing import Publisher
from ingest.simulator.scenario import Scenario

if TYPE_CHECKING:
    import threading

    from ingest.clock import Clock
    from ingest.site.models import Site

log = structlog.get_logger(__name__)

TICK_S: Final = 0.5
"""How often the sensors whose turn has come are read."""
WARM_UP_S: Final = 14 * 86_400
"""The tanks are run through this before the anchor, as for a history of two weeks: so both find the same water."""
LONGEST_CATCH_UP_S: Final = 3600
"""After a longer halt (a laptop asleep) the sensors were off too: only this much is sent afterwards."""
PATIENCE_S: Final = 5.0
"""A sensor waits this long for a place in flight, then this reading is lost, as with a sensor that has no memory."""


def run_live(
    site: Site,
    broker_host: str,
    broker_port: int,
    *,
    clock: Clock,
    seed: int,
    stop: threading.Event,
    scenario: Scenario | None = None,
    anchor_us: int | None = None,
    since_us: int | None = None,
    warm_up_s: float = WARM_UP_S,
    is_version_5: bool = False,
) -> int:
    """Publish what the sensors of *site* send, as it comes, until *stop* is set.

    Parameters
    ----------
    site : Site
        Tanks and sensors.
    broker_host, broker_port : str, int
        Where to publish; while the broker is away this keeps trying.
    clock : Clock
        Its wall time decides which sensors' turn has come.
    seed : int
        The history's seed.
    stop : threading.Event
        Ends it.
    scenario : Scenario, optional
        The history's scenario; a quiet hatchery by default.
    anchor_us : int, optional
        The history's anchor; default now. Same anchor, seed and warm-up: the water goes on without a seam.
    since_us : int, optional
        First send what the sensors have measured since then; at most an hour. Default now. [us since 1970, UTC]
    warm_up_s : float
        How long before the anchor the history began. [s]
    is_version_5 : bool
        Speak MQTT 5 instead of 3.1.1.

    Returns
    -------
    int
        Messages that the broker has acknowledged.
    """
    now_us = clock.now_us()
    anchor_us = now_us if anchor_us is None else anchor_us
    feed = Feed(site, anchor_us - round(warm_up_s * US_PER_SECOND), seed, scenario or Scenario(), anchor_us)
    access = Access(broker_host, broker_port, f"{site.id}-sensors", is_version_5=is_version_5)
    sent_until_us = now_us if since_us is None else since_us
    with Publisher(access) as publisher:
        while not stop.is_set():
            now_us = clock.now_us()
            sent_until_us = max(sent_until_us, now_us - LONGEST_CATCH_UP_S * US_PER_SECOND)
            _send(feed, publisher, sent_until_us, now_us)
            sent_until_us = max(sent_until_us, now_us)
            stop.wait(TICK_S)
        if publisher.waiting:
            log.info("simulator.stopped", unacknowledged=publisher.waiting)
        return publisher.acknowledged


def _send(feed: Feed, publisher: Publisher, start_us: int, end_us: int) -> None:
    if end_us <= start_us:
        return
    for _, topic, payload in feed.between(start_us, end_us):
        if not publisher.publish(topic, payload, limit_s=PATIENCE_S):
            break
    feed.forget_before(end_us)
