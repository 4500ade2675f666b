"""The night: what is wrong, what to do, who has it; to be read at three metres, in the dark."""

from __future__ import annotations

from dataclasses import replace
from html import escape

from dashboard.browser.sights import AlarmSight, Snapshot
from dashboard.browser.views.frame import framed
from dashboard.browser.views.say import flag_of, going, who_has_it, words_of
from dashboard.browser.visit import Visit, link

MOST_ROWS = 8


def page(snapshot: Snapshot, visit: Visit) -> str:
    """Return the page."""
    rows = [alarm for alarm in snapshot.alarms if alarm.priority != "note"]
    listed = "".join(row(alarm, snapshot, visit) for alarm in rows[:MOST_ROWS])
    more = (
        f'<p class="nightcalm">{visit.text("and_more", n=len(rows) - MOST_ROWS)}</p>' if len(rows) > MOST_ROWS else ""
    )
    body = f'<div class="nightlist">{listed}</div>{more}{_calm(snapshot, visit)}'
    return framed(snapshot, visit, title=visit.language.text("night"), place=snapshot.site_name, body=body)


def row(alarm: AlarmSight, snapshot: Snapshot, visit: Visit) -> str:
    """Return one alarm in three lines."""
    # Since when it is so stands in the last line; the first has to be short.
    words = words_of(replace(alarm, facts=replace(alarm.facts, since_us=None)), snapshot, visit)
    name = escape(snapshot.subject_name(alarm.subject))
    kind, _, tank = alarm.subject.partition("/")
    place = link("tank", name, tank=tank) if kind == "tank" else name
    what = escape(words.what[:1].lower() + words.what[1:])
    left = f" {escape(words.left)}." if words.left else ""
    waiting = " unacked" if alarm.is_waiting else ""
    return (
        f'<article class="nightrow {alarm.priority}{waiting}" data-k="{escape(alarm.key)}">'
        f"<div>{flag_of(alarm.priority, visit, size=42)}</div>"
        f'<div><p class="what">{place}: {what}</p><p class="do">{escape(words.do)}{left}</p>'
        f'<p class="has">{who_has_it(alarm, snapshot, visit)}</p><div class="verbs">'
        f"{going(alarm, snapshot, visit, is_main=False)}</div></div></article>"
    )


def _calm(snapshot: Snapshot, visit: Visit) -> str:
    if not snapshot.is_watching:
        return ""
    fine = sum(not tank.needs_somebody for tank in snapshot.tanks)
    unwatched = sum(tank.is_unwatched for tank in snapshot.tanks)
    lines = [visit.language.counted("tanks_fine", fine)]
    if unwatched:
        lines.insert(0, visit.language.counted("tanks_unwatched", unwatched))
    return f'<p class="nightcalm" data-k="calm">{escape(" ".join(lines))}</p>'
