"""The pages by name: how each is drawn, and what only it can do."""

from __future__ import annotations

from typing import TYPE_CHECKING

from dashboard.browser.live import Room
from dashboard.browser.tank_chart import SPANS_S, moved, stretch_of, tank_chart
from dashboard.browser.views import alarms, night, sensors, tank, tanks
from ingest.store.errors import MissingStoreError

if TYPE_CHECKING:
    from collections.abc import Mapping

    from dashboard.browser.access import Access
    from dashboard.browser.charts import Chart
    from dashboard.browser.sights import Snapshot, TankSight
    from dashboard.browser.tank_chart import Stretch
    from dashboard.browser.visit import Visit

SHOWN_EVENTS = 300


def _draw_tanks(_access: Access, snapshot: Snapshot, visit: Visit) -> str:
    return tanks.page(snapshot, visit)


def _draw_alarms(access: Access, snapshot: Snapshot, visit: Visit) -> str:
    events = access.alarm_events(most=SHOWN_EVENTS) if snapshot.has_store else []
    return alarms.page(snapshot, visit, events=events)


def _draw_sensors(access: Access, snapshot: Snapshot, visit: Visit) -> str:
    if not snapshot.has_store:
        return sensors.page(snapshot, visit, refused=[], counters={})
    return sensors.page(snapshot, visit, refused=access.refused(), counters=access.counters())


def _draw_night(_access: Access, snapshot: Snapshot, visit: Visit) -> str:
    return night.page(snapshot, visit)


def _draw_tank(access: Access, snapshot: Snapshot, visit: Visit) -> str:
    stretch = stretch_of(visit.query, now_s=snapshot.now_us / 1e6)
    found = snapshot.tank(visit.query.get("id", ""))
    chart = None
    if found is not None and found.shown is not None and snapshot.has_store:
        chart = _chart(access, found, snapshot, visit, stretch)
    return tank.page(snapshot, visit, tank=found, chart=chart, stretch=stretch)


def _chart(access: Access, found: TankSight, snapshot: Snapshot, visit: Visit, stretch: Stretch) -> Chart | None:
    from_us, to_us = round(stretch.from_s * 1e6), round(stretch.to_s * 1e6)
    in_order = sorted(found.sensors, key=lambda sensor: sensor is not found.shown)
    try:
        histories = [(s, access.history(s.id, from_us=from_us, to_us=to_us)) for s in in_order]
        stress = access.stress_history(found.id, from_us=from_us, to_us=to_us)
        events = access.alarm_events(subject=f"tank/{found.id}", from_us=from_us, to_us=to_us)
    except MissingStoreError:
        return None
    return tank_chart(
        found,
        snapshot,
        visit,
        stretch=stretch,
        histories=histories,
        stress=stress,
        events=events,
        trend=access.trend(found, "salinity"),
    )


def _choose_form(done: Mapping[str, str], _snapshot: Snapshot, _visit: Visit) -> dict[str, str] | None:
    return {"form": done["form"]} if done["do"] == "form" and done.get("form") in ("cards", "tiles") else None


def _choose_stretch(done: Mapping[str, str], snapshot: Snapshot, visit: Visit) -> dict[str, str] | None:
    keep = {"id": visit.query.get("id", "")}
    now_s = snapshot.now_us / 1e6
    if done["do"] == "span" and done.get("span") in SPANS_S:
        return {**keep, "span": done["span"]}
    if done["do"] == "span" and {"from", "to"} <= done.keys():
        return {**keep, "from": done["from"], "to": done["to"]}
    if done["do"] == "move":
        from_s, to_s = moved(stretch_of(visit.query, now_s=now_s), float(done["share"]), now_s=now_s)
        return {**keep, "from": f"{from_s:.0f}", "to": f"{to_s:.0f}"}
    return None


ROOMS: dict[str, Room] = {
    "tanks": Room(_draw_tanks, _choose_form),
    "tank": Room(_draw_tank, _choose_stretch),
    "alarms": Room(_draw_alarms),
    "sensors": Room(_draw_sensors),
    "night": Room(_draw_night, is_night=True),
}
FIRST = "tanks"
