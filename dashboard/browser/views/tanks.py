"""All tanks at a glance: what needs somebody first, worst first; the rest by place, where it stands in the hall."""

from __future__ import annotations

from html import escape

from dashboard.browser.sights import PRIORITY_RANK, Snapshot, TankSight
from dashboard.browser.views.card import card, tile
from dashboard.browser.views.frame import framed, teach
from dashboard.browser.visit import Visit

MOST_CARDS = 30
"""Above this many tanks those that are as they should be shrink to tiles."""


def page(snapshot: Snapshot, visit: Visit) -> str:
    """Return the page."""
    if not snapshot.tanks:
        body = teach(
            visit.text("no_tanks_title"),
            visit.text("no_tanks"),
            steps=(visit.text("no_tanks_1"), visit.text("no_tanks_2"), visit.text("no_tanks_3")),
        )
    else:
        body = _counts(snapshot, visit) + _first(snapshot, visit) + _rest(snapshot, visit)
    return framed(snapshot, visit, title=visit.language.text("tanks"), place=snapshot.site_name, body=body)


def _counts(snapshot: Snapshot, visit: Visit) -> str:
    seen = [tank for tank in snapshot.tanks if not tank.is_unwatched]
    now, today = (sum(tank.priority == word for tank in seen) for word in ("urgent", "soon"))
    unwatched = len(snapshot.tanks) - len(seen)
    leaving = sum(tank.is_outside and tank.priority not in ("urgent", "soon") for tank in seen)
    figures = (
        (now, "needs_now", "urgent"),
        (today, "needs_today", "soon"),
        *(((leaving, "leaving_band", "soon"),) if leaving else ()),
        (len(seen) - now - today - leaving, "as_should_be", ""),
        (unwatched, "unwatched_count", "urgent"),
    )
    sensors = [sensor for tank in snapshot.tanks for sensor in tank.sensors] + list(snapshot.waters)
    heard = sum(sensor.is_fresh(snapshot.now_us) for sensor in sensors)
    probes = visit.text("probes_heard", heard=heard, all=len(sensors))
    boxes = "".join(
        f'<div><b class="{mood if number else ""}">{number}</b><span>{visit.text(key)}</span></div>'
        for number, key, mood in figures
    )
    return f'<div class="counts" data-k="counts">{boxes}<div class="aside"><span>{probes}</span></div></div>'


def worst_first(tank: TankSight) -> tuple[int, int]:
    """Return the order of the tanks that need somebody: the most pressing, then who has waited longest."""
    if not tank.alarms:
        return (0, 0) if tank.is_unwatched else (len(PRIORITY_RANK), 0)
    return PRIORITY_RANK[tank.priority], tank.alarms[0].raised_at_us or 0


def _first(snapshot: Snapshot, visit: Visit) -> str:
    first = sorted((tank for tank in snapshot.tanks if tank.needs_somebody), key=worst_first)
    if not first:
        return ""
    cards = "".join(card(tank, snapshot, visit) for tank in first)
    head = f"<h2>{visit.text('first')} <small>{visit.text('worst_first')}</small></h2>"
    return f'<section data-k="first">{head}<div class="grid">{cards}</div></section>'


def _rest(snapshot: Snapshot, visit: Visit) -> str:
    """Return the others by hall. Halls flow into one another on one grid; a rule above its cells holds each together."""
    rest = [tank for tank in snapshot.tanks if not tank.needs_somebody]
    if not rest:
        return ""
    form = visit.query.get("form", "")
    is_tiled = form == "tiles" or (len(snapshot.tanks) > MOST_CARDS and form != "cards")
    halls: dict[str, list[TankSight]] = {}
    for tank in rest:
        halls.setdefault(tank.hall, []).append(tank)
    draw = _tiles if is_tiled else _cells
    inside = "".join(draw(hall, tanks, snapshot, visit) for hall, tanks in halls.items())
    grid = "" if is_tiled else "grid cells"
    count = visit.text("by_place", count=visit.language.counted("tanks", len(rest)))
    return (
        f'<section data-k="rest"><h2>{visit.text("rest")} <small>{count}</small>{_turn(visit, is_tiled=is_tiled)}</h2>'
        f'<div class="{grid}" data-k="{"tiles" if is_tiled else "cells"}">{inside}</div></section>'
    )


def _cells(hall: str, tanks: list[TankSight], snapshot: Snapshot, visit: Visit) -> str:
    out = []
    for i, tank in enumerate(tanks):
        name = f"<h3>{escape(tank.hall_name)}</h3>" if i == 0 else ""
        last = " last" if i == len(tanks) - 1 else ""
        inside = card(tank, snapshot, visit)
        out.append(f'<div class="cell{last}" data-k="cell-{escape(hall)}-{escape(tank.id)}">{name}{inside}</div>')
    return "".join(out)


def _tiles(hall: str, tanks: list[TankSight], snapshot: Snapshot, visit: Visit) -> str:
    inside = "".join(tile(tank, snapshot, visit) for tank in tanks)
    count = escape(visit.language.counted("tanks", len(tanks)))
    return (
        f'<div data-k="hall-{escape(hall)}"><h3 class="hall">{escape(tanks[0].hall_name)} <small>{count}</small></h3>'
        f'<div class="tiles">{inside}</div></div>'
    )


def _turn(visit: Visit, *, is_tiled: bool) -> str:
    other = "cards" if is_tiled else "tiles"
    return (
        f'<a class="word turn" href="?form={other}" data-do="form" data-form="{other}">{visit.text(f"as_{other}")}</a>'
    )
