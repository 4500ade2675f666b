"""The sections about people: what is accepted, what is refused with its line, and what the calendar makes of it."""

from __future__ import annotations

from datetime import UTC, datetime

import pytest

from analysis.alarm.duty import on_duty
from ingest.clock import to_microseconds
from ingest.notify.duty import calendar_of, plan_of, source_water_of
from ingest.site import Problem, SiteFileError, load_text
from tests.ingest.site.examples import FULL, SMALL

PEOPLE = """\
people:
  - {id: ana, name: Ana Reis, channels: [{kind: mail, url_secret: ana-mail}, {kind: push, url_secret: ana-push}]}
  - {id: rui, name: Rui Vale, role: biologist, channels: [{kind: webhook, url_secret: rui-hook, rings: true}]}
duty:
  shifts:
    - {who: ana, begin: '18:00', end: '06:00', days: workday}
    - {who: rui, begin: '18:00', end: '06:00', days: holiday}
  holidays: [2026-12-25]
  stand_ins: [{absent: ana, who: rui, begin: 2026-12-28T12:00, end: 2026-12-29T12:00}]
  quiet_hours: [{begin: '22:00', end: '06:00'}]
call_out:
  - {who: duty, by: [push, mail], wait_min: 4}
  - {who: rui}
heartbeat: {url_secret: watch-url, every_s: 30}
test_message: {at: '09:30'}
acknowledgements: {host: broker.example, topic: larkfen/answers}
"""
FIRST_LINE = SMALL.count("\n") + 1


def at(text: str) -> int:
    return to_microseconds(datetime.fromisoformat(text).replace(tzinfo=UTC))


def problems(old: str, new: str) -> list[Problem]:
    assert old in PEOPLE
    with pytest.raises(SiteFileError) as caught:
        load_text(SMALL + PEOPLE.replace(old, new, 1), "lark.yaml")
    return caught.value.problems


def test_people_are_read_with_their_defaults():
    site = load_text(SMALL + PEOPLE)
    ana, rui = site.people
    assert [channel.is_ringing for channel in ana.channels] == [False, True]
    assert rui.channels[0].is_ringing
    assert (ana.role, rui.role) == ("operator", "biologist")
    assert site.acknowledgements.port == 8883
    assert site.acknowledgements.tls


def test_a_site_without_people_has_no_plan():
    assert plan_of(load_text(SMALL)) is None


@pytest.mark.parametrize(
    ("moment", "who"),
    [
        ("2026-12-22T19:00", ("ana",)),
        ("2026-12-23T05:59", ("ana",)),
        ("2026-12-23T06:00", ()),
        ("2026-12-25T19:00", ("rui",)),
        ("2026-12-26T05:00", ("rui",)),
        ("2026-12-28T19:00", ("rui",)),
        ("2026-12-29T19:00", ("ana",)),
    ],
)
def test_shifts_holidays_and_stand_ins_are_on_the_sites_clock(moment, who):
    # Lisbon keeps UTC in winter.
    assert on_duty(calendar_of(load_text(SMALL + PEOPLE)), at(moment)) == who


def test_in_summer_the_shift_begins_an_hour_earlier_in_utc():
    calendar = calendar_of(load_text(SMALL + PEOPLE))
    assert on_duty(calendar, at("2026-07-01T17:00")) == ("ana",)
    assert on_duty(calendar, at("2026-07-01T16:59")) == ()


def test_the_list_is_taken_as_written_and_made_where_there_is_none():
    plan = plan_of(load_text(SMALL + PEOPLE))
    assert [(step.who, step.by[:2], step.wait_s) for step in plan.steps] == [
        ("duty", ("push", "mail"), 240.0),
        ("rui", ("mail", "sms"), 300.0),
    ]
    without = PEOPLE.replace("call_out:\n  - {who: duty, by: [push, mail], wait_min: 4}\n  - {who: rui}\n", "")
    assert [step.who for step in plan_of(load_text(SMALL + without)).steps] == ["duty", "ana", "rui"]


@pytest.mark.parametrize(
    ("old", "new", "line", "key", "words"),
    [
        (", {kind: push, url_secret: ana-push}", "", 2, "people[1] (ana).channels", "mail or chat alone"),
        ("rings: true", "rings: false", 3, "people[2] (rui).channels", "mail or chat alone"),
        ("by: [push, mail]", "by: [mail]", 12, "call_out[1].by", "nothing here rings for ana"),
        ("ana-mail}", "ana-mail, rings: true}", 2, "people[1] (ana).channels[1].rings", "a mail wakes nobody"),
        ("{who: rui}", "{who: ruy}", 13, "call_out[2].who", "the id of a person: ana, rui"),
        ("- {who: ana, begin", "- {who: anna, begin", 6, "duty.shifts[1].who", "the id of a person"),
        ("absent: ana", "absent: eva", 9, "duty.stand_ins[1].absent", "the id of a person"),
        ("begin: '18:00'", "begin: '18:60'", 6, "duty.shifts[1].begin", "a time of day"),
        ("end: '06:00'}]", "end: '06:00', priorities: [urgent]}]", 10, "duty.quiet_hours[1].priorities[1]", "never kept waiting"),
        ("begin: '22:00', end: '06:00'}]", "begin: '22:00', end: '22:00'}]", 10, "duty.quiet_hours", "some of the day"),
        ("role: biologist", "role: viewer", 3, "people[2] (rui).role", "operator"),
        ("id: rui, name", "id: ana, name", 3, "people[2] (ana).id", "an id used once"),
        ("every_s: 30", "every_s: 0", 14, "heartbeat.every_s", "a number from 1"),
        ("at: '09:30'", "at: noon", 15, "test_message.at", "a time of day"),
    ],
)  # fmt: skip
def test_every_mistake_is_told_with_its_line(old, new, line, key, words):
    found = [p for p in problems(old, new) if p.key == key]
    assert found, problems(old, new)
    assert found[0].line == FIRST_LINE + line - 1
    assert words in found[0].allowed


def test_a_duty_that_nobody_has_is_refused():
    without = PEOPLE[: PEOPLE.index("duty:")] + "call_out: [{who: duty}]\n"
    with pytest.raises(SiteFileError, match="duty: has no shifts"):
        load_text(SMALL + without)


def test_a_list_without_people_is_refused():
    with pytest.raises(SiteFileError, match="the file declares none"):
        load_text(SMALL + "test_message: {at: '09:30'}\n")


def test_tanks_of_the_only_source_of_their_water_share_a_cause():
    site = load_text(FULL)
    assert source_water_of(site, "l3") == "intake"
    assert source_water_of(site, "p1") == "well"
    assert source_water_of(load_text(SMALL), "t1") == "seawater"
