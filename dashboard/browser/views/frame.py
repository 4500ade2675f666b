"""What stands around every page: masthead, rule of the day, and the words for a board that can not be trusted just now."""

from __future__ import annotations

from html import escape

from dashboard.browser import glyphs
from dashboard.browser.access import next_midnight
from dashboard.browser.sights import Snapshot
from dashboard.browser.visit import Visit, link
from ingest.words import times

PAGES = ("tanks", "alarms", "sensors", "night")
"""In the order of the masthead; a tank's page is reached from its tank."""


def framed(snapshot: Snapshot, visit: Visit, *, title: str, place: str, body: str) -> str:
    """Return a whole page: masthead, state of the board, body, foot."""
    return (
        masthead(snapshot, visit, title=title, place=place)
        + states(snapshot, visit)
        + f'<div class="live">{body}</div>'
        + foot(visit)
    )


def masthead(snapshot: Snapshot, visit: Visit, *, title: str, place: str) -> str:
    """Return title, place, ways to the other pages, the site's clock, and the rule of the day."""
    now = escape(times.masthead(snapshot.now_us, snapshot.zone, language=visit.language))
    weekdays = escape(" ".join(visit.language.WEEKDAYS))
    links = "".join(_way(snapshot, visit, page) for page in PAGES)
    return (
        f'<header class="mast" data-k="mast"><h1>{escape(title)}</h1><span class="place">{escape(place)}</span>'
        f'<nav aria-label="{visit.text("pages")}">{links}</nav>'
        f'<span class="clock" data-clock="{weekdays}">{now}</span></header>{_rule_of_the_day(snapshot, visit)}'
    )


def _way(snapshot: Snapshot, visit: Visit, page: str) -> str:
    words = visit.text(page)
    if page == "alarms" and snapshot.alarms:
        worst = snapshot.alarms[0].priority
        words += f' <b class="{worst}">{len(snapshot.alarms)}</b>'
    here = ' aria-current="page"' if page == visit.page else ""
    return link(page, words).replace("<a ", f"<a{here} ", 1)


def _rule_of_the_day(snapshot: Snapshot, visit: Visit) -> str:
    now = times.local(snapshot.now_us, snapshot.zone)
    start = now.replace(hour=0, minute=0, second=0, microsecond=0)
    begin = start.timestamp()
    length = next_midnight(start).timestamp() - begin
    marks = tuple(((at / 1e6 - begin) / length, priority) for at, priority in snapshot.today)
    label = visit.language.text("day_rule", alarms=visit.language.counted("alarms", len(marks)))
    return f'<div data-k="rule">{glyphs.day_rule((now.timestamp() - begin) / length, marks, label=label)}</div>'


def states(snapshot: Snapshot, visit: Visit) -> str:
    """Return the lines that say when this page must not be believed: connection lost, nobody watching, no store."""
    lost = f'<p class="word-of-state lost-line" role="alert" data-k="lost">{visit.text("connection_lost")}</p>'
    if not snapshot.has_store:
        word = visit.text("no_store")
    elif not snapshot.is_worker_running:
        since = times.moment(snapshot.alive_at_us, snapshot.zone, now_us=snapshot.now_us, language=visit.language)
        word = visit.text("no_worker", since=since)
    else:
        return lost
    return lost + f'<p class="word-of-state on" role="alert" data-k="unwatched">{word}</p>'


def foot(visit: Visit) -> str:
    """Return the cautions that stand under every page."""
    return f'<footer data-k="foot"><span>{visit.text("caution_estimate")}</span><span>{visit.text("caution_rounds")}</span></footer>'


def teach(title: str, *paragraphs: str, steps: tuple[str, ...] = ()) -> str:
    """Return an empty state that teaches the next step; all parts are HTML."""
    listed = "".join(f"<li>{step}</li>" for step in steps)
    ordered = f"<ol>{listed}</ol>" if steps else ""
    return f'<div class="teach"><h2>{title}</h2>{"".join(f"<p>{text}</p>" for text in paragraphs)}{ordered}</div>'
