"""What is wrong now, what is put aside, and what was."""

from __future__ import annotations

from html import escape

from dashboard.browser.occurrences import Occurrence, occurrences
from dashboard.browser.sights import AlarmSight, Snapshot
from dashboard.browser.views.frame import framed, teach
from dashboard.browser.views.say import flag_of, going, who_has_it, words_of
from dashboard.browser.visit import Visit, link
from ingest.store.ledger import Event
from ingest.words import times
from ingest.words.alarms import AlarmFacts, alarm_words


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
    told = occurrences(events)
    if not told:
        return ""
    rows = "".join(_told(occurrence, snapshot, visit) for occurrence in told)
    head = "".join(f"<th>{visit.text(key)}</th>" for key in ("when", "where", "what", "lasted", "taken", "again"))
    return (
        f'<section data-k="history"><h2>{visit.text("history")}</h2><div class="scroll"><table class="stack">'
        f"<thead><tr>{head}</tr></thead><tbody>{rows}</tbody></table></div></section>"
    )


def _told(occurrence: Occurrence, snapshot: Snapshot, visit: Visit) -> str:
    language = visit.language
    moment = times.moment(occurrence.newest_us, snapshot.zone, now_us=snapshot.now_us, language=language)
    words = alarm_words(AlarmFacts(occurrence.condition), language=language)
    kind, _, tank = occurrence.subject.partition("/")
    name = escape(snapshot.subject_name(occurrence.subject))
    where = link("tank", name, tank=tank) if kind == "tank" else name
    again = visit.text("times", n=occurrence.again) if occurrence.again else ""
    return (
        f'<tr><td class="quiet">{escape(moment)}</td><th scope="row">{where}</th><td><span class="flagged">'
        f"{flag_of(occurrence.priority, visit, size=13)}{escape(words.title)}</span></td>"
        f'<td data-l="{visit.text("lasted")}">{_lasted(occurrence, visit)}</td>'
        f'<td data-l="{visit.text("taken")}">{_taken(occurrence, visit)}</td><td>{again}</td></tr>'
    )


def _lasted(occurrence: Occurrence, visit: Visit) -> str:
    if occurrence.ended_at_us is None:
        return visit.text("still_there")
    if occurrence.raised_at_us is None:
        return ""
    seconds = (occurrence.ended_at_us - occurrence.raised_at_us) / 1e6
    return escape(times.duration(seconds, language=visit.language))


def _taken(occurrence: Occurrence, visit: Visit) -> str:
    if not occurrence.taken_by:
        return f'<span class="quiet">{visit.text("by_nobody")}</span>'
    who = escape(occurrence.taken_by)
    if occurrence.raised_at_us is None or occurrence.taken_at_us is None:
        return who
    waited = times.duration(max(0.0, (occurrence.taken_at_us - occurrence.raised_at_us) / 1e6), language=visit.language)
    return f'{who} <span class="quiet">{visit.text("after", waited=waited)}</span>'
