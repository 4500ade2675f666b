"""Checks of people, duty and call-out: everybody named is declared, and what is most pressing rings."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING, Any

from ingest.site.calls import LESSER_PRIORITIES, RINGING_KINDS, TIME_PATTERN, minutes_of
from ingest.site.problems import listed, nearest_word

if TYPE_CHECKING:
    from collections.abc import Iterator

    from ingest.site.document import Document, Path
    from ingest.site.problems import Problem

DAY_MIN = 24 * 60
DUTY_WORDS = ("duty", "second duty")
RING_WORDS = (
    "at least one channel that rings (sms, push, voice, or a webhook with rings: true): "
    "mail or chat alone does not wake anybody for the top priority"
)


def problems_of_calls(document: Document) -> list[Problem]:
    """Return what is wrong between the sections about people."""
    people = _people(document)
    return [
        *_rings_of_mail(document),
        *_named(document, list(people)),
        *_silent_people(document, people),
        *_silent_lines(document, people),
        *_nobody(document, people),
        *_endless_quiet(document),
    ]


def _groups(document: Document, *path: str) -> Iterator[tuple[Path, dict[str, Any]]]:
    entries = document.value(path)
    for index, entry in enumerate(entries if isinstance(entries, list) else ()):
        if isinstance(entry, dict):
            yield (*path, index), entry


def _people(document: Document) -> dict[str, tuple[Path, dict[str, Any]]]:
    return {
        entry["id"]: (path, entry)
        for path, entry in _groups(document, "people")
        if isinstance(entry.get("id"), str) and isinstance(entry.get("channels"), list)
    }


def _channels(person: dict[str, Any]) -> list[dict[str, Any]]:
    return [channel for channel in person["channels"] if isinstance(channel, dict)]


def _is_ringing(channel: dict[str, Any]) -> bool:
    rings = channel.get("rings")
    return rings if isinstance(rings, bool) else channel.get("kind") in RINGING_KINDS


def _rings_of_mail(document: Document) -> Iterator[Problem]:
    for path, person in _people(document).values():
        for index, channel in enumerate(person["channels"]):
            if isinstance(channel, dict) and channel.get("kind") == "mail" and channel.get("rings") is True:
                at = (*path, "channels", index, "rings")
                yield document.problem(at, True, "false, or left out: a mail wakes nobody")


def _named(document: Document, people: list[str]) -> Iterator[Problem]:
    places: list[Path] = [(*path, "who") for path, _ in _groups(document, "duty", "shifts")]
    for path, _ in _groups(document, "duty", "stand_ins"):
        places += [(*path, "who"), (*path, "absent")]
    for place in places:
        name = document.value(place)
        if isinstance(name, str) and name not in people:
            yield document.problem(place, name, listed(people, "a person"), nearest_word(name, people))
    for path, line in _groups(document, "call_out"):
        name = line.get("who")
        if isinstance(name, str) and name not in people and name not in DUTY_WORDS:
            allowed = f"duty, second duty, or {listed(people, 'a person')}"
            yield document.problem((*path, "who"), name, allowed, nearest_word(name, [*DUTY_WORDS, *people]))


def _silent_people(document: Document, people: dict[str, tuple[Path, dict[str, Any]]]) -> Iterator[Problem]:
    for path, person in people.values():
        channels = _channels(person)
        if channels and not any(map(_is_ringing, channels)):
            kinds = ", ".join(str(channel.get("kind")) for channel in channels)
            yield document.problem((*path, "channels"), kinds, RING_WORDS)


def _silent_lines(document: Document, people: dict[str, tuple[Path, dict[str, Any]]]) -> Iterator[Problem]:
    """Yield lines of the call-out list whose channels ring for nobody whom they may lead to."""
    stand_ins = {str(entry.get("who")) for _, entry in _groups(document, "duty", "stand_ins")}
    on_shift = {str(entry.get("who")) for _, entry in _groups(document, "duty", "shifts")} | stand_ins
    for path, line in _groups(document, "call_out"):
        by, who = line.get("by"), line.get("who")
        if not isinstance(by, list) or not by:
            continue
        names = on_shift if who in DUTY_WORDS else {str(who)}
        for name in sorted(names & people.keys()):
            channels = [channel for channel in _channels(people[name][1]) if channel.get("kind") in by]
            # Who has none of these channels is called by all of his own.
            if channels and not any(map(_is_ringing, channels)):
                yield document.problem((*path, "by"), by, f"{RING_WORDS}; nothing here rings for {name}")


def _nobody(document: Document, people: dict[str, tuple[Path, dict[str, Any]]]) -> Iterator[Problem]:
    """Yield sections that speak of people where there are none, and calls to a duty that nobody has."""
    has_shifts = any(True for _ in _groups(document, "duty", "shifts"))
    for section in ("call_out", "test_message", "acknowledgements"):
        found = document.value((section,))
        if found and document.value(("people",)) is None:
            yield document.problem((section,), found, "people: to call; the file declares none")
    for path, line in _groups(document, "call_out"):
        if people and line.get("who") in DUTY_WORDS and not has_shifts:
            yield document.problem((*path, "who"), line["who"], "the id of a person: duty: has no shifts")


def _endless_quiet(document: Document) -> Iterator[Problem]:
    """Yield quiet hours that leave an alarm no minute of the day to call in."""
    for priority in LESSER_PRIORITIES:
        quiet: set[int] = set()
        for _, entry in _groups(document, "duty", "quiet_hours"):
            begin, end = entry.get("begin"), entry.get("end")
            priorities = entry.get("priorities", LESSER_PRIORITIES)
            if not (_is_time(begin) and _is_time(end)) or priority not in priorities:
                continue
            first, last = minutes_of(str(begin)), minutes_of(str(end))
            quiet |= {minute % DAY_MIN for minute in range(first, last if last > first else last + DAY_MIN)}
        if len(quiet) == DAY_MIN:
            found = f"the whole day for {priority}"
            yield document.problem(("duty", "quiet_hours"), found, "hours that leave some of the day to call in")
            return


def _is_time(value: object) -> bool:
    return isinstance(value, str) and re.match(TIME_PATTERN, value) is not None
