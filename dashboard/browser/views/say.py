"""An alarm on the page: the pennant, what is wrong, what to do first, who has it, and the button."""

from __future__ import annotations

from html import escape

from dashboard.browser.glyphs import pennant
from dashboard.browser.sights import AlarmSight, Snapshot, TankSight
from dashboard.browser.visit import Order, Visit
from ingest.words import times
from ingest.words.alarms import AlarmWords, alarm_words, priority_letter, priority_word
from ingest.words.trust import command_words, flag_words, quality_word


def words_of(alarm: AlarmSight, snapshot: Snapshot, visit: Visit) -> AlarmWords:
    """Return the alarm in words."""
    return alarm_words(alarm.facts, now_us=snapshot.now_us, zone=snapshot.zone, language=visit.language)


def flag_of(priority: str, visit: Visit, *, size: int = 18) -> str:
    """Return the pennant of a priority."""
    letter, word = (f(priority, language=visit.language) for f in (priority_letter, priority_word))
    return pennant(priority, letter=letter, word=word, size=size)


def say(alarm: AlarmSight, snapshot: Snapshot, visit: Visit, *, size: int = 18, more: int = 0) -> str:
    """Return what is wrong and what to do, as a line with its pennant."""
    words = words_of(alarm, snapshot, visit)
    left = f' <span class="left">{escape(words.left)}.</span>' if words.left else ""
    rest = f' <span class="quiet">{visit.text("and_more", n=more)}</span>' if more else ""
    waiting = " unacked" if alarm.is_waiting else ""
    return (
        f'<div class="say {alarm.priority}{waiting}">{flag_of(alarm.priority, visit, size=size)}'
        f"<p><b>{escape(words.what)}</b> {escape(words.do)}{left}{rest}</p></div>"
    )


def say_unwatched(tank: TankSight, snapshot: Snapshot, visit: Visit) -> str:
    """Return the line of a tank whose water nobody can see, where no alarm says so yet."""
    del snapshot
    key = (
        "no_probe"
        if not tank.sensors
        else "never_heard"
        if tank.shown is None or tank.shown.measured_at_us is None
        else "silent"
    )
    return f'<div class="say urgent"><p><b>{visit.text("unwatched")}</b> {visit.text(key)}</p></div>'


def say_outside(visit: Visit) -> str:
    """Return the line of a tank that has left its band and has no alarm yet."""
    return f'<div class="say soon"><p><b>{visit.text("outside")}</b> {visit.text("outside_waits")}</p></div>'


def say_doubted(tank: TankSight, visit: Visit, *, has_title: bool = True) -> str:
    """Return the line of a tank whose number may be wrong, with the reason."""
    if tank.shown is None:
        return ""
    word = quality_word(tank.shown.quality, language=visit.language)
    reason = ", ".join(flag_words(tank.shown.flags, language=visit.language))
    title = f"<b>{visit.text('doubt')}</b> " if has_title else ""
    text = f"{word[:1].upper()}{word[1:]}: {reason}." if reason else f"{word[:1].upper()}{word[1:]}."
    return f'<div class="say note"><p>{title}{escape(text)}</p></div>'


def who_has_it(alarm: AlarmSight, snapshot: Snapshot, visit: Visit) -> str:
    """Return who has the alarm and since when, as text."""
    moment = times.moment(alarm.raised_at_us, snapshot.zone, now_us=snapshot.now_us, language=visit.language)
    since = visit.text("since", moment=moment)
    if alarm.acknowledged_by and not alarm.is_waiting:
        at = times.moment(alarm.acknowledged_at_us, snapshot.zone, now_us=snapshot.now_us, language=visit.language)
        return f"{since} · {visit.text('has_it', who=alarm.acknowledged_by, moment=at)}"
    return f"{since} · {escape(visit.language.ALARM_STATES[alarm.state])}"


def going(alarm: AlarmSight, snapshot: Snapshot, visit: Visit, *, is_main: bool = True) -> str:
    """Return the button "I am going", or what became of having pressed it."""
    order = visit.order_for(alarm.key)
    if order is not None and order.state != "unsent":
        return _became(order, snapshot, visit)
    if not alarm.is_waiting:
        return ""
    failed = _became(order, snapshot, visit) if order is not None else ""
    return (
        f'<button class="verb{" fill" if is_main else ""}" data-k="go {escape(alarm.key)}" data-once data-do="going"'
        f' data-subject="{escape(alarm.subject)}" data-condition="{escape(alarm.condition)}"'
        f' data-occurrence="{alarm.occurrence}">{visit.text("going")}</button>{failed}'
    )


def _became(order: Order, snapshot: Snapshot, visit: Visit) -> str:
    words = (
        visit.language.text("not_sent")
        if order.state == "unsent"
        else command_words(order.state, order.reason, is_worker_running=snapshot.is_watching, language=visit.language)
    )
    mood = "no_worker" if order.state == "waiting" and not snapshot.is_watching else order.state
    return f'<span class="sent {mood}" role="status" data-order="{escape(order.command_id)}">{visit.text("going")}: {escape(words)}</span>'
