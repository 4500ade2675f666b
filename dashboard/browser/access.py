"""The only door to the stores: questions answered as sights, orders put into the inbox."""

from __future__ import annotations

import threading
from dataclasses import replace
from datetime import datetime, timedelta
from typing import TYPE_CHECKING, Any

import numpy as np

from dashboard.browser.installed import Installed, installed
from dashboard.browser.sighting import Trust, alarm_sight, sensor_sight, tank_sights
from dashboard.browser.sights import (
    MOST_BELIEVABLE_QUALITY,
    AlarmSight,
    DayLine,
    Snapshot,
    TankSight,
)
from dashboard.browser.trend import LOOK_BACK_US, STANDING, Trend, limits_of, trend_of
from ingest.chain.uncertainty import latest_uncertainties
from ingest.clock import MICROSECONDS_PER_SECOND, to_microseconds
from ingest.site.loading import load, load_text
from ingest.store.errors import MissingStoreError, StoreBusyError
from ingest.store.inbox import DEFAULT_LIFE_US, Command, Inbox
from ingest.store.queries import DAY_US, HOUR_US, Queries
from ingest.words.alarms import QUANTITY_OF_CODE
from ingest.words.times import local

if TYPE_CHECKING:
    from collections.abc import Sequence
    from pathlib import Path

    from ingest.clock import Clock
    from ingest.site.models import Site
    from ingest.store.ledger import Event
    from ingest.store.plans import TankPlan
    from ingest.store.queries import Cohort, History, Outcome, Refused, StressHistory

SNAPSHOT_S = 0.9
"""One look at the store serves all screens for this long."""
SLOW_S = 20.0
"""Day lines and the list of animals change slowly: so long one look serves for them."""
MOST_HISTORIES = 24
"""So many stretches of so many probes are kept for the next refresh; each is at most a megabyte."""
TREND_S = 5.0


class Access:
    """The board's door to one site.

    Parameters
    ----------
    site_file : Path
        Says where the store is; once the worker has accepted a revision, the store's own copy counts.
    clock : Clock
        The present time.

    Raises
    ------
    SiteFileError
        If there is no revision in the store yet and the file has problems.
    """

    def __init__(self, site_file: Path, *, clock: Clock) -> None:
        self._file_site = load(site_file)
        folder = self._file_site.store.folder(site_file)
        self.clock = clock
        self._queries = Queries(folder)
        self._inbox = Inbox(folder)
        self._lock = threading.Lock()
        self._kept: dict[str, tuple[float, Any]] = {}
        self._histories: dict[tuple[str, int, int], History] = {}
        self._revision: tuple[int, Site] = (0, self._file_site)

    @property
    def site(self) -> Site:
        """The site as last seen."""
        return self._revision[1]

    # --- questions ----------------------------------------------------------------------------

    def snapshot(self) -> Snapshot:
        """Return the whole site as it stands; at most one look at the store a second, whatever the number of screens."""
        with self._lock:
            snapshot: Snapshot = self._keep("snapshot", SNAPSHOT_S, self._look)
        return snapshot

    def history(self, sensor: str, *, from_us: int, to_us: int) -> History:
        """Return one sensor over time; a chart that has not moved on is not read again."""
        key = (sensor, from_us, to_us)
        with self._lock:
            kept = self._histories.get(key)
        if kept is None:
            kept = self._queries.history(sensor, from_us=from_us, to_us=to_us)
            with self._lock:
                self._histories[key] = kept
                while len(self._histories) > MOST_HISTORIES:
                    del self._histories[next(iter(self._histories))]
        return kept

    def stress_history(self, tank: str, *, from_us: int, to_us: int) -> StressHistory:
        """Return what the animals of a tank felt over time."""
        return self._queries.stress_history(tank, from_us=from_us, to_us=to_us)

    def alarm_events(
        self, *, subject: str | None = None, from_us: int = 0, to_us: int = 2**62, most: int = 200
    ) -> list[Event]:
        """Return what happened to alarms, oldest first."""
        events = self._queries.events(kind_prefix="alarm.", subject=subject, from_us=from_us, to_us=to_us, most=most)
        return [event for _, event in events]

    def refused(self, *, most: int = 50) -> list[Refused]:
        """Return the newest payloads that could not be used."""
        return self._queries.refused(most=most)

    def counters(self) -> dict[str, int]:
        """Return the worker's counters."""
        return self._queries.counters()

    def outcome(self, command_id: str) -> Outcome | None:
        """Return what became of an order, None while it waits."""
        return self._queries.outcome(command_id)

    # --- orders ----------------------------------------------------------------------------

    def submit(
        self, kind: str, subject: str, *, command_id: str, body: dict[str, Any], expected: str | None = None
    ) -> Command:
        """Put an order into the inbox under the client's own id; the same id twice is one order.

        Raises
        ------
        StoreBusyError
            If the inbox can not be written.
        """
        now_us = self.clock.now_us()
        actor = self.site.identity.default_actor
        command = Command(
            kind=kind,
            subject=subject,
            actor=actor.name,
            role=actor.role,
            submitted_at=now_us,
            expires_at=now_us + DEFAULT_LIFE_US,
            body=body,
            expected=expected,
            id=command_id,
        )
        self._inbox.submit(command)
        return command

    # --- how a snapshot is made ----------------------------------------------------------------------------

    def _keep(self, name: str, seconds: float, make: Any) -> Any:
        now = self.clock.monotonic_s()
        kept = self._kept.get(name)
        if kept is None or now - kept[0] >= seconds:
            kept = (now, make())
            self._kept[name] = kept
        return kept[1]

    def _look(self) -> Snapshot:
        try:
            return self._look_at_store()
        except MissingStoreError:
            return self._without_store()
        except StoreBusyError:
            # The last look stays; its ages go on ticking and turn to warnings by themselves.
            kept = self._kept.get("snapshot")
            return self._without_store() if kept is None else kept[1]

    def _without_store(self) -> Snapshot:
        what = self._keep("without store", SLOW_S, lambda: self._installed(self._file_site, ()))
        tanks = tank_sights(what, latest={}, alarms=(), days={}, stress={}, now_us=self.clock.now_us())
        return replace(self._blank(what.site), tanks=tanks)

    def _blank(self, site: Site) -> Snapshot:
        return Snapshot(
            now_us=self.clock.now_us(),
            site_name=site.name,
            zone=site.zone,
            zone_name=site.identity.time_zone,
            salinity_label=site.identity.salinity_label,
            is_worker_running=False,
            has_store=False,
            alive_at_us=None,
        )

    def _look_at_store(self) -> Snapshot:
        queries = self._queries
        number, text = queries.site_text()
        if number and number != self._revision[0]:
            self._revision = (number, load_text(text, "the store's copy of the site file"))
            self._kept.pop("slow", None)
        site = self._revision[1]
        now_us = self.clock.now_us()
        what, days = self._keep("slow", SLOW_S, lambda: self._slow(site, now_us))
        alarms = tuple(alarm_sight(row, what) for row in queries.alarms() if row.state != "normal")
        present = tuple(sorted((a for a in alarms if a.is_present), key=lambda a: a.rank))
        stress = queries.latest_stress(since_us=now_us - 2 * HOUR_US)
        latest = queries.latest()
        alive = queries.meta().get("alive_at")
        trust = Trust(
            uncertainties=latest_uncertainties(site, what.kinds, latest),
            channels=self._keep("channels", TREND_S, lambda: queries.latest_channels(since_us=now_us - HOUR_US)),
            health=self._keep("health", SLOW_S, queries.sensor_health),
        )
        tanks = tank_sights(what, latest=latest, alarms=present, days=days, stress=stress, now_us=now_us, trust=trust)
        tanks = tuple(self._with_trend(tank) if tank.alarms or tank.is_outside else tank for tank in tanks)
        present = tuple(sorted(self._with_trends(present, tanks), key=lambda a: a.rank))
        return replace(
            self._blank(site),
            now_us=now_us,
            has_store=True,
            is_worker_running=queries.is_worker_running(),
            alive_at_us=int(alive) if isinstance(alive, int) else None,
            tanks=tanks,
            waters=tuple(sensor_sight(s, latest.get(s.id), what, trust) for s in site.sensors if s.tank is None),
            alarms=present,
            hidden_alarms=tuple(a for a in alarms if a.is_hidden),
            today=self._raised_today(site, now_us),
        )

    def _installed(
        self, site: Site, cohorts: tuple[Cohort, ...], plans: Sequence[TankPlan] = (), now_us: int = 0
    ) -> Installed:
        return installed(site, cohorts, tables=self._queries.folder / "ion_tables", plans=plans, now_us=now_us)

    def trend(self, tank: TankSight, kind: str) -> Trend:
        """Return where a tank's "salinity" or "temperature" is heading; looked up anew every few seconds."""
        sensor = tank.shown
        if sensor is None or not sensor.is_fresh(self.clock.now_us()):
            return STANDING
        name = f"trend {kind} {sensor.id}"
        found: Trend = self._keep(name, TREND_S, lambda: self._trend(tank, sensor.id, kind))
        return found

    def _trend(self, tank: TankSight, sensor: str, kind: str) -> Trend:
        now_us = self.clock.now_us()
        history = self._queries.history(sensor, from_us=now_us - LOOK_BACK_US, to_us=now_us + HOUR_US)
        is_salinity = kind == "salinity"
        values = history.salinity if is_salinity else history.temperature_degC
        species = (
            () if tank.animals is None else tank.animals.limits if is_salinity else tank.animals.temperature_limits
        )
        band = (tank.salinity if is_salinity else tank.temperature).limits
        believed = np.where(history.quality > MOST_BELIEVABLE_QUALITY, np.nan, values)
        return trend_of(history.time_us, believed, kind=kind, limits=limits_of(band, species))

    def _with_trend(self, tank: TankSight) -> TankSight:
        return replace(tank, alarms=tuple(self._moving(alarm, tank) for alarm in tank.alarms))

    def _with_trends(self, alarms: tuple[AlarmSight, ...], tanks: tuple[TankSight, ...]) -> list[AlarmSight]:
        moving = {alarm.key: alarm for tank in tanks for alarm in tank.alarms}
        return [moving.get(alarm.key, alarm) for alarm in alarms]

    def _moving(self, alarm: AlarmSight, tank: TankSight) -> AlarmSight:
        """Return the alarm with the value of now instead of the one that raised it, and the way the water goes."""
        kind = QUANTITY_OF_CODE.get(alarm.condition, "")
        shown = tank.shown
        if kind not in ("salinity", "temperature") or shown is None or tank.is_unwatched:
            return alarm
        trend = self.trend(tank, kind)
        facts = replace(
            alarm.facts,
            quantity=tank.salinity_kind if kind == "salinity" else kind,
            value=shown.salinity if kind == "salinity" else shown.temperature_degC,
            rate_per_h=trend.per_h,
            next_limit=trend.next_limit,
            time_left_min=trend.likely_min,
            time_left_low_min=trend.soonest_min,
            time_left_high_min=trend.latest_min,
        )
        return replace(alarm, facts=facts)

    def _slow(self, site: Site, now_us: int) -> tuple[Installed, dict[str, DayLine]]:
        lines = self._queries.day_lines(from_us=now_us - DAY_US, to_us=now_us + HOUR_US)
        days = {sensor: DayLine(times / MICROSECONDS_PER_SECOND, values) for sensor, (times, values) in lines.items()}
        plans = self._queries.plans()
        return self._installed(site, tuple(self._queries.cohorts()), plans, now_us), days

    def _raised_today(self, site: Site, now_us: int) -> tuple[tuple[int, str], ...]:
        events = self._queries.events(kind_prefix="alarm.raised", from_us=midnight_us(now_us, site), most=200)
        marks = ((event.measured_at or event.recorded_at, event.body.get("priority")) for _, event in events)
        return tuple((at, str(priority)) for at, priority in marks if priority in ("urgent", "soon", "note"))


def midnight_us(now_us: int, site: Site) -> int:
    """Return when the site's day began."""
    start = local(now_us, site.zone).replace(hour=0, minute=0, second=0, microsecond=0)
    return to_microseconds(start)


def next_midnight(start: datetime) -> datetime:
    """Return the end of the day that began at *start*, by the wall clock: a day is not always 24 h long."""
    return (start.replace(tzinfo=None) + timedelta(days=1)).replace(tzinfo=start.tzinfo)
