"""What is wrong now, what is put aside, and what was."""

from __future__ import annotations

from html import escape

from dashboard.browser.sights import AlarmSight, Snapshot
from dashboard.browser.views.frame import framed, teach
from dashboard.browser.views.say import flag_of, going, who_has_it, words_of
from dashboard.browser.visit import Visit, link
from ingest.store.ledger import Event
from ingest.words import times
from ingest.words.alarms import AlarmFacts, alarm_words

MACHINES = ("worker", "monitor")
"""What the program does by itself has no person beside it."""


def page(snapshot: Snapshot, visit: Visit, *, events: list[Event]) -> str:
    """Return the page."""
    body = _present(snapshot, visit) + _hidden(snapshot, visit) + _history(snapshot, visit, events)
    return framed(snapshot, visit, title=visit.language.text("alarms"), place=snapshot.site_name, body=body)


def _present(snapshot: Snapshot, visit: Visit) -> str:
    if not snapshot.alarms:
        if not snapshot.is_watching:
            return teach(visit.text("nobody_watches_title"), visit.text("nobody_watches"))
        return f'<p class="calm" data-k="calm">{visit.text("no_alarm")}</p>'
    rows = "".join(row(alarm, snapshot, visit) for alarm in snapshot.alarms)
    return f'<section data-k="present"><h2 class="hidden">{visit.text("present")}</h2>{rows}</section>'


def row(alarm: AlarmSight, snapshot: Snapshot, visit: Visit) -> str:
    """Return one present alarm: pennant, place, what and what to do, who has it, and the button."""
    words = words_of(alarm, snapshot, visit)
    name = escape(snapshot.subject_name(alarm.subject))
    kind, _, tank = alarm.subject.partition("/")
    place = (
        link("tank", f'<span class="name">{name}</span>', tank=tank)
        if kind == "tank"
        else f'<span class="name">{name}</span>'
    )
    waiting = " unacked" if alarm.is_waiting else ""
    left = f' <b class="left">{escape(words.left)}.</b>' if words.left else ""
    return (
        f'<article class="alarm {alarm.priority}{waiting}" data-k="{escape(alarm.key)}">'
        f"<span>{flag_of(alarm.priority, visit, size=22)}</span>"
        f'<div>{place}</div><div><p class="what">{escape(words.what)}</p><p>{escape(words.do)}{left}</p>'
        f'<p class="meta">{who_has_it(alarm, snapshot, visit)}</p></div><div class="verbs">{going(alarm, snapshot, visit)}</div></article>'
    )


def _hidden(snapshot: Snapshot, visit: Visit) -> str:
    if not snapshot.hidden_alarms:
        return ""
    rows = "".join(
        f'<tr><th scope="row">{escape(snapshot.subject_name(a.subject))}</th><td>{escape(words_of(a, snapshot, visit).title)}</td>'
        f"<td>{escape(visit.language.ALARM_STATES[a.state])}</td></tr>"
        for a in snapshot.hidden_alarms
    )
    head = f"<h2>{visit.text('put_aside')} <small>{visit.text('put_aside_small')}</small></h2>"
    return f'<section data-k="hidden">{head}<table><tbody>{rows}</tbody></table></section>'


def _history(snapshot: Snapshot, visit: Visit, events: list[Event]) -> str:
    if not events:
        return ""
    rows = "".join(_event(event, snapshot, visit) for event in reversed(events))
    head = "".join(f"<th>{visit.text(key)}</th>" for key in ("when", "where", "what", "happened", "by"))
    return (
        f'<section data-k="history"><h2>{visit.text("earlier")}</h2><div class="scroll"><table class="stack"><thead><tr>{head}</tr></thead>'
        f"<tbody>{rows}</tbody></table></div></section>"
    )


def _event(event: Event, snapshot: Snapshot, visit: Visit) -> str:
    at = event.measured_at or event.recorded_at
    moment = times.moment(at, snapshot.zone, now_us=snapshot.now_us, language=visit.language)
    words = alarm_words(AlarmFacts(str(event.body.get("condition", "unknown"))), language=visit.language)
    act = event.kind.partition(".")[2]
    acts = visit.language.ALARM_ACTS
    who = "" if event.actor in MACHINES else event.actor
    return (
        f'<tr><td class="quiet">{escape(moment)}</td><th scope="row">{escape(snapshot.subject_name(event.subject))}</th>'
        f"<td>{escape(words.title)}</td><td>{escape(acts.get(act, act.replace('_', ' ')))}</td><td>{escape(who)}</td></tr>"
    )
