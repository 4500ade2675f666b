"""The history of alarms, one line an occurrence."""

from __future__ import annotations

from dashboard.browser.occurrences import occurrences
from ingest.store.ledger import Event

MINUTE_US = 60_000_000


def event(
    what: str, minute: int, *, occurrence: int = 1, actor: str = "monitor", condition: str = "salinity_low"
) -> Event:
    at = 10**15 + minute * MINUTE_US
    body = {"condition": condition, "priority": "urgent", "after": {"occurrence": occurrence}}
    return Event(f"alarm.{what}", "tank/l3", at, measured_at=at, actor=actor, body=body)


def test_an_occurrence_is_told_in_one_line():
    told = occurrences(
        [
            event("raised", 0),
            event("acknowledged", 4, actor="Duty 1"),
            event("re_alarmed", 20),
            event("acknowledged", 25, actor="Duty 2"),
            event("returned", 40),
        ]
    )
    assert len(told) == 1
    assert (told[0].ended_at_us - told[0].raised_at_us) // MINUTE_US == 40
    assert told[0].taken_by == "Duty 1"
    assert (told[0].taken_at_us - told[0].raised_at_us) // MINUTE_US == 4
    assert told[0].again == 1


def test_a_new_rise_of_the_same_occurrence_has_not_ended():
    told = occurrences([event("raised", 0), event("returned", 5), event("raised", 7)])
    assert told[0].ended_at_us is None
    assert told[0].raised_at_us == 10**15


def test_the_newest_stands_first_and_conditions_are_kept_apart():
    told = occurrences(
        [event("raised", 0), event("raised", 3, condition="temperature_low"), event("raised", 60, occurrence=2)]
    )
    assert [(o.condition, o.number) for o in told] == [("salinity_low", 2), ("temperature_low", 1), ("salinity_low", 1)]


def test_an_occurrence_whose_beginning_is_out_of_sight_is_still_listed():
    told = occurrences([event("returned", 9)])
    assert told[0].raised_at_us is None
    assert told[0].newest_us > 0
