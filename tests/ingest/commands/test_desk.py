from __future__ import annotations

from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from analysis.alarm.events import Acknowledge
from analysis.alarm.transition import Happening, Refusal
from ingest.commands import alarms, calibration, desk
from ingest.commands.roles import ROLES, is_at_least, weaker
from ingest.store.inbox import Command
from tests.harness.hatchery import START_US

KINDS = sorted(desk.NEEDED_ROLE)
PEOPLE = {role.title(): role for role in ROLES}


class Reached(Exception):
    """The command has passed every check and reached its room."""


class NothingBehind:
    """A context with nothing behind it but the time: whoever gets here has been let in."""

    now_us = START_US

    def __getattr__(self, name: str) -> Any:
        raise Reached(name)


def command(kind: str, **changes: Any) -> Command:
    given = {
        "kind": kind,
        "subject": "tank/t0",
        "actor": "Manager",
        "role": "manager",
        "submitted_at": START_US - 1,
        "expires_at": START_US + 1,
        "body": {"condition": "salinity_low", "why": "seen", "until_us": START_US + 60_000_000},
        "expected": "1",
    }
    return Command(**{**given, **changes})


def ruled(kind: str, **changes: Any):
    return desk.rule(command(kind, **changes), NothingBehind(), roles=PEOPLE)


def is_let_in(kind: str, **changes: Any) -> bool:
    try:
        return ruled(kind, **changes).outcome == "applied"
    except Reached:
        return True


@pytest.mark.parametrize("kind", KINDS)
def test_every_kind_of_command_asks_for_a_role_that_there_is(kind):
    assert desk.NEEDED_ROLE[kind] in ROLES
    assert ROLES.index(desk.NEEDED_ROLE[kind]) > ROLES.index("viewer"), "a viewer looks and does nothing"


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("person", PEOPLE)
@pytest.mark.parametrize("role", [*ROLES, "", "admin"])
def test_the_weaker_of_what_a_person_is_and_claims_to_be_counts(kind, person, role):
    strength = min(ROLES.index(PEOPLE[person]), ROLES.index(role) if role in ROLES else -1)
    expected = strength >= ROLES.index(desk.NEEDED_ROLE[kind])
    assert is_let_in(kind, actor=person, role=role) is expected
    if not expected:
        assert ruled(kind, actor=person, role=role).reason == "role_too_weak"


@pytest.mark.parametrize("kind", KINDS)
def test_nobody_unknown_is_heard(kind):
    assert ruled(kind, actor="Somebody").reason == "unknown_person"
    assert ruled(kind, actor="").reason == "unknown_person"


@pytest.mark.parametrize("kind", ["", "alarm", "alarm.", "alarm.destroy", "site.reload ", "ALARM.ACKNOWLEDGE"])
def test_what_is_not_known_is_refused(kind):
    assert ruled(kind).reason == "unknown_kind"


@pytest.mark.parametrize(("expires_at", "is_in_time"), [(START_US - 1, False), (START_US, False), (START_US + 1, True)])
def test_an_order_whose_moment_has_passed_is_dropped(expires_at, is_in_time):
    ruling = ruled("site.reload", expires_at=expires_at)
    assert (ruling.outcome, ruling.reason) == (("applied", "") if is_in_time else ("expired", "too_late"))


def test_a_reload_is_asked_of_the_worker():
    assert ruled("site.reload").has_to_reload


JSON = st.recursive(
    st.none() | st.booleans() | st.integers() | st.floats() | st.text(max_size=10),
    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(st.text(max_size=8), inner, max_size=3),
    max_leaves=5,
)
BODIES = st.fixed_dictionaries(
    {},
    optional={
        name: JSON | st.sampled_from(["salinity_low", 0, -1, 2**70, True])
        for name in ("condition", "why", "until_us", "expected_return_us", "as_found", "as_left", "performed_at_us", "note")
    },
)  # fmt: skip


@given(
    kind=st.sampled_from(sorted(alarms.NEEDED_ROLE)),
    body=BODIES,
    expected=st.none() | st.text(max_size=6) | st.sampled_from(["²", "1" * 5000, "-1", "٣", "1"]),
    subject=st.text(max_size=12) | st.just("tank/t0"),
)
def test_whatever_is_in_an_order_the_answer_is_a_ruling(kind, body, expected, subject):
    try:
        ruling = ruled(kind, body=body, expected=expected, subject=subject)
    except Reached:
        return
    assert ruling.outcome == "refused"
    assert ruling.reason == "unusable_details"


@pytest.mark.parametrize("expected", ["²", "٣", "-1", "one", "1.0", "1" * 400])
def test_an_occurrence_that_is_no_number_is_refused_rather_than_ignored(expected):
    """Ignored, the acknowledgement would meet whatever occurrence there is now, which nobody has seen."""
    assert ruled("alarm.acknowledge", expected=expected).reason == "unusable_details"


class OneAlarm(NothingBehind):
    """A context that notes what reaches the alarm."""

    def __init__(self, answer: Any) -> None:
        self.answer = answer
        self.asked: list[Any] = []

    def act(self, subject: str, condition: str, event: Any) -> Any:
        self.asked.append((subject, condition, event))
        return self.answer

    def occurrences(self, *_: Any) -> tuple[Any, ...]:
        return ("left in the ledger",)


class Entry:
    happening = Happening.ACKNOWLEDGED

    def __init__(self, refusal: Refusal) -> None:
        self.refusal = refusal


def test_an_acknowledgement_carries_who_why_and_which_occurrence():
    context = OneAlarm((Entry(Refusal.NONE),))
    ruling = desk.rule(command("alarm.acknowledge"), context, roles=PEOPLE)
    assert context.asked == [("tank/t0", "salinity_low", Acknowledge(who="Manager", why="seen", occurrence=1))]
    assert (ruling.outcome, ruling.occurrences) == ("applied", ("left in the ledger",))


def test_what_the_alarm_refuses_is_refused_with_its_reason():
    ruling = desk.rule(command("alarm.acknowledge"), OneAlarm((Entry(Refusal.OTHER_OCCURRENCE),)), roles=PEOPLE)
    assert (ruling.outcome, ruling.reason, ruling.occurrences) == ("refused", "other_occurrence", ())


def test_an_alarm_that_is_not_there_is_said():
    assert desk.rule(command("alarm.acknowledge"), OneAlarm(None), roles=PEOPLE).reason == "no_such_alarm"


@pytest.mark.parametrize("kind", sorted(alarms.NEEDED_ROLE))
def test_every_order_on_an_alarm_reaches_it(kind):
    context = OneAlarm((Entry(Refusal.NONE),))
    assert desk.rule(command(kind), context, roles=PEOPLE).outcome == "applied"
    assert len(context.asked) == 1


@given(st.sampled_from(ROLES), st.sampled_from(ROLES))
def test_roles_are_in_one_line(one, other):
    assert is_at_least(one, other) or is_at_least(other, one)
    assert weaker(one, other) == weaker(other, one)
    assert is_at_least(one, weaker(one, other))
    assert is_at_least(other, weaker(one, other))


def test_an_unknown_role_is_the_weakest_and_may_nothing():
    assert weaker("manager", "root") == "root"
    assert not is_at_least("root", "viewer")


def test_orders_on_sensors_are_known_to_the_desk():
    assert set(calibration.NEEDED_ROLE) <= set(desk.NEEDED_ROLE)
