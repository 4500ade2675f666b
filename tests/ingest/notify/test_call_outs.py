"""From what happens to alarms to whom to call, as stories without a store."""

from __future__ import annotations

from zoneinfo import ZoneInfo

import pytest
from hypothesis import given
from hypothesis import strategies as st

from analysis.alarm.call_out import CallPlan, CallStep, Phase, Reason
from analysis.alarm.duty import DutyCalendar, QuietHours
from analysis.alarm.kinds import ConditionKind
from analysis.alarm.rationale import RATIONALE
from analysis.alarm.rules import Priority
from analysis.alarm.transition import Happening
from ingest.notify.call_outs import CallOuts, News, entry_from_dict, entry_to_dict

T0 = 1_780_000_000_000_000
MIN = 60_000_000
LISBON = ZoneInfo("Europe/Lisbon")
LOW, DRY, FAST = (
    ConditionKind.SALINITY_LOW,
    ConditionKind.PROBE_DRY_OR_TANK_EMPTY,
    ConditionKind.CHANGING_TOO_FAST,
)
STEPS = (CallStep("ana", ("push",), 300), CallStep("rui", ("voice",), 300))
PLAN = CallPlan(STEPS, DutyCalendar(LISBON))


class Story:
    """Call-outs on which each happening is a commit of its own."""

    def __init__(self, plan: CallPlan = PLAN) -> None:
        self.plan = plan
        self.outs = CallOuts(plan)
        self.event = 0
        self.called: list[tuple[str, Reason]] = []

    def hear(self, happening, minute, *, tank="t1", kind=LOW, who="", occurrence=1, is_announced=False, cause="water"):
        self.event += 1
        news = News(
            self.event,
            tank,
            kind,
            happening,
            occurrence,
            T0 + minute * MIN,
            who,
            is_announced,
            RATIONALE[kind].priority,
            cause,
        )
        work = self.outs.copy(self.plan)
        work.hear(news, now_us=news.at_us)
        return self.take(work)

    def raised(self, minute, **more):
        return self.hear(Happening.RAISED, minute, is_announced=True, **more)

    def look(self, minute):
        work = self.outs.copy(self.plan)
        work.look(now_us=T0 + minute * MIN)
        return self.take(work)

    def take(self, work):
        self.outs = work
        found = [(call.who, call.reason) for _, call in work.due_calls()]
        self.called += found
        return found

    @property
    def phases(self):
        return [entry.call.phase for entry in self.outs.entries.values()]


def test_one_alarm_calls_down_the_list_until_a_person_has_it():
    story = Story()
    assert story.raised(0) == [("ana", Reason.RAISED)]
    assert story.look(4) == []
    assert story.look(5) == [("rui", Reason.NOBODY_ANSWERED)]
    assert story.look(10) == [("ana", Reason.NOBODY_ANSWERED)]
    assert story.hear(Happening.ACKNOWLEDGED, 11, who="ana") == []
    assert story.phases == [Phase.PAUSED]
    assert story.look(20) == []
    assert story.look(21) == [("rui", Reason.NOT_TURNING_BACK)]


def test_twelve_tanks_of_one_cause_are_one_call_out_and_each_sounds():
    story = Story()
    for number in range(12):
        assert len(story.raised(0, tank=f"t{number}")) == 1
    assert len(story.outs.entries) == 1
    assert [reason for _, reason in story.called] == [Reason.RAISED] + [Reason.JOINED] * 11


def test_tanks_of_other_causes_have_call_outs_of_their_own():
    story = Story()
    story.raised(0)
    story.raised(1, tank="t2", kind=DRY, cause="tank/t2")
    assert len(story.outs.entries) == 2
    assert sorted(story.outs.entries) == [1, 2], "numbered by their events"


def test_the_group_is_had_only_when_every_tank_is():
    story = Story()
    story.raised(0)
    story.raised(0, tank="t2")
    story.hear(Happening.ACKNOWLEDGED, 1, who="ana")
    assert story.phases == [Phase.CALLING]
    story.hear(Happening.ACKNOWLEDGED, 1, tank="t2", who="ana")
    assert story.phases == [Phase.PAUSED]


def test_a_tank_that_joins_while_somebody_is_going_tells_that_person_first():
    story = Story()
    story.raised(0)
    story.hear(Happening.ACKNOWLEDGED, 1, who="rui")
    assert story.raised(2, tank="t2") == [("rui", Reason.JOINED)]
    assert story.phases == [Phase.CALLING]


def test_an_answer_for_another_occurrence_covers_nothing():
    story = Story()
    story.raised(0, occurrence=2)
    work = story.outs.copy(PLAN)
    work.answer(1, [("t1", LOW, 1)], who="ana", now_us=T0 + MIN)
    story.take(work)
    assert story.phases == [Phase.CALLING]


def test_normal_by_itself_stops_the_waking_but_the_top_goes_on():
    story = Story()
    story.raised(0)
    story.hear(Happening.RETURNED, 2)
    assert story.phases == [Phase.LISTED]
    assert story.look(60) == []
    top = Story()
    top.raised(0, kind=DRY)
    top.hear(Happening.RETURNED, 2, kind=DRY)
    assert top.look(5) == [("rui", Reason.NOBODY_ANSWERED)]
    top.hear(Happening.ACKNOWLEDGED, 6, kind=DRY, who="rui")
    assert top.phases == [Phase.OVER]


def test_one_of_two_tanks_back_to_normal_does_not_stop_the_calls():
    story = Story()
    story.raised(0)
    story.raised(0, tank="t2")
    story.hear(Happening.RETURNED, 2)
    assert story.look(5) == [("rui", Reason.NOBODY_ANSWERED)]
    story.hear(Happening.RETURNED, 6, tank="t2")
    assert story.phases == [Phase.LISTED]


def test_raised_again_before_anybody_had_it_calls_from_the_top_of_the_list():
    story = Story()
    story.raised(0)
    story.look(5)
    story.hear(Happening.RETURNED, 6)
    assert story.raised(8) == [("ana", Reason.RAISED)]


def test_re_alarm_after_an_acknowledgement_is_worse_and_calls_the_next():
    story = Story()
    story.raised(0)
    story.hear(Happening.ACKNOWLEDGED, 1, who="ana")
    assert story.hear(Happening.RE_ALARMED, 8, is_announced=True) == [("rui", Reason.WORSE)]


def test_turning_back_earns_one_more_pause():
    story = Story()
    story.raised(0)
    story.hear(Happening.ACKNOWLEDGED, 0, who="ana")
    story.hear(Happening.RECOVERING, 5)
    assert story.look(11) == []
    assert story.look(22) == [("rui", Reason.NOT_TURNING_BACK)]


@pytest.mark.parametrize("happening", [Happening.SHELVED, Happening.SUPPRESSED, Happening.REMOVED_FROM_SERVICE])
def test_what_is_put_aside_calls_nobody_and_the_rest_goes_on(happening):
    story = Story()
    story.raised(0)
    story.raised(0, tank="t2")
    story.hear(happening, 1)
    assert story.phases == [Phase.CALLING]
    story.hear(happening, 1, tank="t2")
    assert story.phases == [Phase.OVER]
    assert story.look(30) == []


def test_raised_and_back_while_nobody_looked_calls_nobody():
    work = CallOuts(PLAN)
    for event, happening in enumerate((Happening.RAISED, Happening.RETURNED), 1):
        is_announced = happening is Happening.RAISED
        news = News(event, "t1", LOW, happening, 1, T0, "", is_announced, Priority.URGENT, "water")
        work.hear(news, now_us=T0)
    assert work.due_calls() == []


def test_quiet_hours_let_a_lesser_alarm_wait_and_never_an_urgent_one():
    calendar = DutyCalendar(LISBON, quiet=(QuietHours(20 * 60, 22 * 60),))
    story = Story(CallPlan(STEPS, calendar))
    # It is 21:26 in Lisbon.
    assert story.raised(0, kind=FAST, cause="tank/t1") == []
    assert story.raised(0, tank="t2") == [("ana", Reason.RAISED)]
    assert ("ana", Reason.RAISED) in story.look(35), "after the quiet hours"


happenings = st.lists(
    st.tuples(
        st.sampled_from([Happening.RAISED, Happening.RETURNED, Happening.ACKNOWLEDGED, Happening.RE_ALARMED, None]),
        st.sampled_from(["t1", "t2", "t3"]),
        st.sampled_from([LOW, DRY]),
        st.integers(1, 3),
    ),
    max_size=25,
)


@given(happenings)
def test_what_is_kept_comes_back_the_same_and_an_alarm_nobody_has_is_never_forgotten(steps):
    story = Story()
    waiting: set[tuple[str, ConditionKind]] = set()
    minute = 0
    for happening, tank, kind, passed in steps:
        minute += passed
        if happening is None:
            story.look(minute)
        elif happening in {Happening.RAISED, Happening.RE_ALARMED}:
            story.hear(happening, minute, tank=tank, kind=kind, is_announced=True, cause=f"water/{kind}")
            waiting.add((tank, kind))
        else:
            story.hear(happening, minute, tank=tank, kind=kind, who="ana", cause=f"water/{kind}")
            waiting.discard((tank, kind))
        for entry in story.outs.entries.values():
            assert entry_from_dict(entry_to_dict(entry)) == entry
    calling = {alarm for e in story.outs.entries.values() if e.call.phase is Phase.CALLING for alarm in e.alarms}
    paused = {alarm for e in story.outs.entries.values() if e.call.phase is Phase.PAUSED for alarm in e.alarms}
    assert waiting <= calling | paused
    assert not (waiting & paused), "a call-out that somebody has holds no alarm that nobody has"
