"""The only door to the stores: questions answered as sights, orders put into the inbox."""

from __future__ import annotations

import math
import threading
from dataclasses import replace
from datetime import datetime, timedelta
from typing import TYPE_CHECKING, Any

import numpy as np

from analysis.alarm.set_point import HALF_WIDTH
from dashboard.browser.installed import Installed, blood_at_rest, installed
from dashboard.browser.sights import (
    MOST_BELIEVABLE_QUALITY,
    NO_DAY,
    AlarmSight,
    Band,
    DayLine,
    SensorSight,
    Snapshot,
    StressSight,
    TankSight,
)
from dashboard.browser.trend import LOOK_BACK_US, STANDING, Trend, limits_of, trend_of
from ingest.clock import MICROSECONDS_PER_SECOND, to_microseconds
from ingest.site.loading import load, load_text
from ingest.store.errors import MissingStoreError, StoreBusyError
from ingest.store.inbox import DEFAULT_LIFE_US, Command, Inbox
from ingest.store.queries import DAY_US, HOUR_US, Queries
from ingest.words.alarms import QUANTITY_OF_CODE, AlarmFacts
from ingest.words.times import local

if TYPE_CHECKING:
    from pathlib import Path

    from ingest.clock import Clock
    from ingest.site.models import Site
    from ingest.site.sensors import Sensor
    from ingest.store.alarms import AlarmRow
    from ingest.store.ledger import Event
    from ingest.store.queries import Cohort, History, Latest, LatestStress, Outcome, Refused, StressHistory

SNAPSHOT_S = 0.9
"""One look at the store serves all screens for this long."""
SLOW_S = 20.0
"""Day lines and the list of animals change slowly: so long one look serves for them."""
MOST_HISTORIES = 24
"""So many stretches of so many probes are kept for the next refresh; each is at most a megabyte."""
STALE_INTERVALS = 3.0
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
        tanks = _tanks(what, latest={}, alarms=(), days={}, stress={}, now_us=self.clock.now_us())
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
        alarms = tuple(_alarm(row, what) for row in queries.alarms() if row.state != "normal")
        present = tuple(sorted((a for a in alarms if a.is_present), key=lambda a: a.rank))
        stress = queries.latest_stress(since_us=now_us - 2 * HOUR_US)
        latest = queries.latest()
        alive = queries.meta().get("alive_at")
        tanks = _tanks(what, latest=latest, alarms=present, days=days, stress=stress, now_us=now_us)
        tanks = tuple(self._with_trend(tank) if tank.alarms or tank.is_outside else tank for tank in tanks)
        present = tuple(sorted(self._with_trends(present, tanks), key=lambda a: a.rank))
        return replace(
            self._blank(site),
            now_us=now_us,
            has_store=True,
            is_worker_running=queries.is_worker_running(),
            alive_at_us=int(alive) if isinstance(alive, int) else None,
            tanks=tanks,
            waters=tuple(_sensor(s, latest.get(s.id), what) for s in site.sensors if s.tank is None),
            alarms=present,
            hidden_alarms=tuple(a for a in alarms if a.is_hidden),
            today=self._raised_today(site, now_us),
        )

    def _installed(self, site: Site, cohorts: tuple[Cohort, ...]) -> Installed:
        return installed(site, cohorts, tables=self._queries.folder / "ion_tables")

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
        return self._installed(site, tuple(self._queries.cohorts())), days

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


def _number(value: float | None) -> float:
    return math.nan if value is None else float(value)


def _sensor(sensor: Sensor, latest: Latest | None, what: Installed) -> SensorSight:
    sight = SensorSight(
        id=sensor.id,
        name=sensor.name or sensor.id,
        tank=sensor.tank,
        source_water=sensor.source_water,
        interval_s=sensor.interval_s,
        stale_after_s=what.stale_after_s.get(sensor.id, max(60.0, STALE_INTERVALS * sensor.interval_s)),
    )
    if latest is None:
        return sight
    salinity = latest.practical_salinity
    return replace(
        sight,
        measured_at_us=latest.measured_at,
        received_at_us=latest.received_at,
        conductivity_mS_cm=_number(latest.conductivity_mS_cm),
        temperature_degC=_number(latest.temperature_degC),
        salinity=_number(salinity if salinity is not None else latest.absolute_salinity_g_kg),
        osmolality_mOsm_kg=_number(latest.osmolality_mOsm_kg),
        density_kg_m3=_number(latest.density_kg_m3),
        flags=latest.flags,
        quality=latest.quality,
    )


def _alarm(row: AlarmRow, what: Installed) -> AlarmSight:
    body = row.body
    tank = row.subject.partition("/")[2]
    kind = QUANTITY_OF_CODE.get(row.condition, "")
    band = (what.temperature if kind == "temperature" else what.salinity).get(tank, Band())
    facts = AlarmFacts(
        code=row.condition,
        quantity=kind,
        value=_number(row.value),
        limit=_number(row.limit_value),
        set_point=band.target if kind else math.nan,
        band=band.half_width if kind else math.nan,
        since_us=row.raised_at,
        sensor=str(body.get("sensor", "")),
    )
    return AlarmSight(
        subject=row.subject,
        condition=row.condition,
        state=row.state,
        priority=row.priority,
        occurrence=row.occurrence,
        raised_at_us=row.raised_at,
        updated_at_us=row.updated_at,
        acknowledged_by=str(body.get("acknowledged_by", "")),
        acknowledged_at_us=int(body.get("acknowledged_at_us", 0)) or None,
        facts=facts,
    )


def _tanks(
    what: Installed,
    *,
    latest: dict[str, Latest],
    alarms: tuple[AlarmSight, ...],
    days: dict[str, DayLine],
    stress: dict[str, LatestStress],
    now_us: int,
) -> tuple[TankSight, ...]:
    site = what.site
    hall_names = {hall.id: hall.name for hall in site.halls}
    by_subject: dict[str, list[AlarmSight]] = {}
    for alarm in alarms:
        by_subject.setdefault(alarm.subject, []).append(alarm)
    sights = []
    for tank in site.tanks:
        sensors = tuple(_sensor(s, latest.get(s.id), what) for s in site.sensors_of_tank(tank.id))
        band = what.salinity[tank.id]
        shown = shown_sensor(sensors, band, now_us)
        felt = stress.get(tank.id)
        animals = what.animals.get(tank.id)
        if animals is not None:
            animals = replace(animals, blood_mOsm_kg=_blood(animals.id, shown, felt))
        sights.append(
            TankSight(
                id=tank.id,
                name=tank.name,
                hall=tank.hall,
                hall_name=hall_names.get(tank.hall, tank.hall),
                volume_L=tank.volume_L,
                water=tank.water,
                salinity_unit="g/kg" if tank.water != "seawater" else "",
                salinity=band,
                temperature=what.temperature[tank.id],
                animals=animals,
                sensors=sensors,
                shown=shown,
                stress=_stress(felt),
                alarms=tuple(by_subject.get(f"tank/{tank.id}", ())),
                day=days.get(shown.id, NO_DAY) if shown is not None else NO_DAY,
                is_unwatched=shown is None or not (shown.is_fresh(now_us) and shown.is_believable),
            )
        )
    return tuple(sights)


def shown_sensor(sensors: tuple[SensorSight, ...], band: Band, now_us: int) -> SensorSight | None:
    """Return the sensor whose value stands for the tank: the believable one nearest to a limit, never an average.

    Without a believable fresh one: the one heard last, so that its age can be seen.
    """
    good = [s for s in sensors if s.is_fresh(now_us) and s.is_believable]
    if good:
        middle = band.target if math.isfinite(band.target) else (band.low + band.high) / 2
        half = band.half_width if math.isfinite(band.half_width) else HALF_WIDTH
        return max(good, key=lambda s: abs(s.salinity - middle) / half if math.isfinite(middle) else 0.0)
    heard = [s for s in sensors if s.measured_at_us is not None]
    return max(heard, key=lambda s: s.measured_at_us or 0, default=sensors[0] if sensors else None)


def _blood(animal: str, shown: SensorSight | None, felt: LatestStress | None) -> float | None:
    if felt is not None and felt.internal_mOsm_kg is not None:
        return felt.internal_mOsm_kg
    if shown is None or not animal:
        return None
    return blood_at_rest(animal, shown.osmolality_mOsm_kg)


def _stress(felt: LatestStress | None) -> StressSight | None:
    if felt is None or felt.stress is None:
        return None
    return StressSight(
        measured_at_us=felt.measured_at,
        stress=felt.stress,
        strains={
            "range": _number(felt.range_strain),
            "change": _number(felt.change_strain),
            "exposure": _number(felt.exposure_strain),
            "thermal": _number(felt.thermal_strain),
        },
        driver=felt.driver or "",
        gap_mOsm_kg=_number(felt.gap_mOsm_kg),
    )
