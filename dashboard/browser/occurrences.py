"""The history of alarms as people tell it: one line an occurrence, not one an event."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from ingest.store.ledger import Event

BEGINNINGS = frozenset({"raised"})
ENDS = frozenset({"returned", "returned_auto_acknowledged"})
AGAIN = frozenset({"re_alarmed"})


@dataclass(frozen=True, slots=True)
class Occurrence:
    """One alarm from its raising to its end.

    Attributes
    ----------
    raised_at_us, ended_at_us : int or None
        None: before the oldest event looked at, or not ended.
    taken_by : str
        Who acknowledged it first.
    again : int
        How often it was raised again before somebody had it in hand.
    """

    subject: str
    condition: str
    number: int
    priority: str
    raised_at_us: int | None = None
    ended_at_us: int | None = None
    taken_by: str = ""
    taken_at_us: int | None = None
    again: int = 0

    @property
    def newest_us(self) -> int:
        """Return the time by which it is listed."""
        return self.raised_at_us or self.taken_at_us or self.ended_at_us or 0


def occurrences(events: Iterable[Event]) -> list[Occurrence]:
    """Return what *events* of alarms, oldest first, tell; the newest occurrence first."""
    found: dict[tuple[str, str, int], Occurrence] = {}
    for event in events:
        after = event.body.get("after")
        number = int(after.get("occurrence", 0)) if isinstance(after, dict) else int(event.body.get("occurrence", 0))
        key = event.subject, str(event.body.get("condition", "unknown")), number
        known = found.get(key) or Occurrence(*key, priority=str(event.body.get("priority", "note")))
        found[key] = _told(known, event)
    return sorted(found.values(), key=lambda occurrence: occurrence.newest_us, reverse=True)


def _told(known: Occurrence, event: Event) -> Occurrence:
    at_us = event.measured_at or event.recorded_at
    what = event.kind.partition(".")[2]
    if what in BEGINNINGS:
        # A return and a new rise before anybody had seen it are one occurrence: it has not ended yet.
        first = known.raised_at_us if known.raised_at_us is not None else at_us
        return replace(known, raised_at_us=first, ended_at_us=None)
    if what in ENDS:
        return replace(known, ended_at_us=at_us)
    if what in AGAIN:
        return replace(known, again=known.again + 1)
    if what == "acknowledged" and not known.taken_by:
        return replace(known, taken_by=event.actor, taken_at_us=event.recorded_at)
    return known
