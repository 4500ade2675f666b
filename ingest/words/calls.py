"""The message that calls a person: short, the most pressing first, the way to answer last."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

from ingest.words import numbers, times
from ingest.words.alarms import QUANTITY_OF_CODE, AlarmFacts, alarm_words, priority_word
from ingest.words.language import ENGLISH, Language

if TYPE_CHECKING:
    from collections.abc import Sequence
    from datetime import tzinfo

MOST_TANKS = 12
"""More tanks than this are counted, not listed."""


@dataclass(frozen=True, slots=True)
class CalledAlarm:
    """One alarm of a call: its facts, and which animals live there (empty where none are known)."""

    facts: AlarmFacts
    priority: str
    animals: str = ""
    number: int | None = None
    is_normal: bool = False
    is_steady: bool = False
    """Watched for long enough, and no trend."""


@dataclass(frozen=True, slots=True)
class Answering:
    """How a person can answer; empty where there is no such way."""

    code: str = ""
    topic: str = ""
    host: str = ""


@dataclass(frozen=True, slots=True)
class Message:
    """What is sent."""

    title: str
    body: str


def call_message(
    alarms: Sequence[CalledAlarm],
    *,
    site: str,
    person: str,
    reason: str,
    answering: Answering,
    now_us: int,
    zone: tzinfo,
    language: Language = ENGLISH,
) -> Message:
    """Return the message of a call.

    Parameters
    ----------
    alarms : sequence of CalledAlarm
        Those that the answer will cover, the shortest time left first. At least one.
    site, person : str
        Names.
    reason : str
        Why this person is called, a word of `analysis.alarm.call_out.Reason`.
    answering : Answering
        How to say "I am going".
    now_us : int
        The present time. [us UTC]
    zone : tzinfo
        The site's time zone.
    """
    words = language.CALLS
    lead, others = alarms[0], alarms[1:]
    said = alarm_words(lead.facts, now_us=now_us, zone=zone, language=language)
    title = words["title"].format(
        priority=priority_word(lead.priority, language=language).upper(), tank=lead.facts.tank, what=said.title
    )
    if others:
        title += words["and_more"].format(n=len(others))
    lines = [words["where"].format(tank=lead.facts.tank, what=said.what)]
    if lead.is_normal:
        lines.append(words["normal_again"])
    lines += _numbers(lead, said.what, language)
    if lead.animals:
        lines.append(_animals(lead, language))
    if said.left and said.left not in said.what:
        lines.append(words["left"].format(left=said.left))
    lines.append(words["do"].format(do=said.do))
    if others:
        lines.append(
            words["also"].format(tanks="; ".join(_short(item, now_us, zone, language) for item in others[:MOST_TANKS]))
        )
        if len(others) > MOST_TANKS:
            lines.append(words["and_others"].format(n=len(others) - MOST_TANKS))
    if why := words["reasons"].get(reason, ""):
        lines.append(why)
    lines += _answer(answering, person, language)
    lines.append(words["stamp"].format(site=site, time=times.masthead(now_us, zone, language=language)))
    return Message(title, "\n".join(lines))


def daily_message(*, site: str, person: str, now_us: int, zone: tzinfo, language: Language = ENGLISH) -> Message:
    """Return the daily test message."""
    words = language.CALLS
    body = words["test"].format(person=person)
    stamp = words["stamp"].format(site=site, time=times.masthead(now_us, zone, language=language))
    return Message(words["test_title"].format(site=site), f"{body}\n{stamp}")


def problem_words(problem: str, *, language: Language = ENGLISH, **values: str) -> str:
    """Return what keeps calls from going out, a key of the table CALLS, problems."""
    return str(language.CALLS["problems"][problem].format(**values))


def _numbers(alarm: CalledAlarm, what: str, language: Language) -> list[str]:
    """Return value and trend where the sentence does not say them."""
    facts, words = alarm.facts, language.CALLS
    kind = facts.quantity or QUANTITY_OF_CODE.get(facts.code, "")
    if not kind:
        return []
    found = []
    value = numbers.quantity(facts.value, kind, language=language)
    if math.isfinite(facts.value) and value not in what:
        found.append(words["now"].format(quantity=language.QUANTITIES.get(kind, kind), value=value))
    if math.isfinite(facts.rate_per_h):
        rate = numbers.quantity(abs(facts.rate_per_h), kind, language=language)
        is_said = any(word in what for word in words["trend_words"])
        if not is_said and rate.strip("0. °C"):
            found.append(words["falling" if facts.rate_per_h < 0 else "rising"].format(rate=rate))
    elif alarm.is_steady:
        found.append(words["no_trend"])
    return [" ".join(found)] if found else []


def _animals(alarm: CalledAlarm, language: Language) -> str:
    if alarm.number is None:
        return str(language.CALLS["animals"].format(animals=alarm.animals))
    number = f"{alarm.number:,}".replace(",", " ")
    return str(language.CALLS["animals_counted"].format(animals=alarm.animals, number=number))


def _short(alarm: CalledAlarm, now_us: int, zone: tzinfo, language: Language) -> str:
    said = alarm_words(replace(alarm.facts), now_us=now_us, zone=zone, language=language)
    kind = alarm.facts.quantity or QUANTITY_OF_CODE.get(alarm.facts.code, "")
    value = numbers.quantity(alarm.facts.value, kind, language=language) if kind else numbers.NO_VALUE
    text = f"{alarm.facts.tank} {said.title}"
    return text if value == numbers.NO_VALUE else f"{text} {value}"


def _answer(answering: Answering, person: str, language: Language) -> list[str]:
    words = language.CALLS
    if not answering.code:
        return [words["answer_board"].format(person=person)]
    return [
        words["answer_code"].format(person=person, topic=answering.topic, host=answering.host),
        answering.code,
    ]
