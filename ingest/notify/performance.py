"""How well the alarms of a site worked, from its ledger and the calls it made (`analysis.alarm.performance`)."""

from __future__ import annotations

from typing import TYPE_CHECKING

from analysis.alarm.kinds import ConditionKind
from analysis.alarm.performance import annunciations, performance
from analysis.alarm.rationale import RATIONALE
from analysis.alarm.transition import transition_from_dict
from ingest.store import calls, ledger
from ingest.store.connection import reader
from ingest.store.store import store_path

if TYPE_CHECKING:
    from collections.abc import Iterator
    from datetime import tzinfo
    from pathlib import Path

    from analysis.alarm.performance import PerformanceReport
    from analysis.alarm.transition import Transition
    from ingest.store.ledger import Event

EARLIER_US = 7 * 24 * 3_600_000_000
"""Alarms raised up to a week before the time count as raised before it, not as new."""


def site_performance(folder: Path, *, from_us: int, until_us: int, zone: tzinfo) -> PerformanceReport:
    """Return how well the alarms worked in a time.

    Parameters
    ----------
    folder : Path
        The store's folder.
    from_us, until_us : int
        The time, by when things were recorded. [us UTC]
    zone : tzinfo
        The site's time zone.

    Raises
    ------
    MissingStoreError
        If there is no store yet.
    """
    with reader(store_path(folder)) as connection:
        made = calls.calls_between(connection, from_us=from_us, until_us=until_us)
        events = [event for _, event in ledger.read(connection, kind_prefix="alarm.")]
    history = _history(event for event in events if from_us - EARLIER_US <= event.recorded_at < until_us)
    priorities = {kind: record.priority for kind, record in RATIONALE.items()}
    alarms = annunciations(history, priorities)
    times = [(call.person, call.at) for call in made]
    return performance(alarms, times, from_us=from_us, until_us=until_us, zone=zone)


def _history(events: Iterator[Event]) -> Iterator[tuple[str, ConditionKind, Transition]]:
    for event in events:
        if "condition" in event.body:
            kind = ConditionKind(event.body["condition"])
            yield event.subject.removeprefix("tank/"), kind, transition_from_dict(event.body)
