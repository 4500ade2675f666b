"""The message that calls a person."""

from __future__ import annotations

from datetime import UTC

import pytest

from analysis.alarm.call_out import Reason
from analysis.alarm.kinds import ConditionKind
from ingest.words.alarms import AlarmFacts
from ingest.words.calls import Answering, CalledAlarm, call_message, daily_message, problem_words
from ingest.words.language import ENGLISH

NOW_US = 1_780_000_000_000_000
FALLING = AlarmFacts(
    "salinity_low",
    tank="L3",
    value=27.42,
    set_point=31,
    band=2,
    rate_per_h=-3.6,
    time_left_min=11,
    time_left_low_min=9,
    time_left_high_min=14,
    next_limit=25,
)
BOARD_ONLY = Answering()
SHRIMP = CalledAlarm(FALLING, "urgent", animals="Pacific whiteleg shrimp, PL10", number=80_000)


def message(*alarms: CalledAlarm, reason: str = "raised", answering: Answering = BOARD_ONLY):
    return call_message(
        alarms, site="Larkfen", person="Ana Reis", reason=reason, answering=answering, now_us=NOW_US, zone=UTC
    )


def test_the_message_says_it_all_in_a_few_lines():
    said = message(SHRIMP, answering=Answering("ana.1.1.abc", "larkfen/answers", "broker.example"))
    assert said.title == "URGENT: L3 too fresh"
    assert said.body.splitlines() == [
        "L3: Turning fresh: 27.4, set 31 ± 2, falling 3.6 an hour.",
        "Animals: Pacific whiteleg shrimp, PL10, 80 000.",
        "Time left: About 11 min (9 to 14 min) until salinity 25.",
        "First: Close the fresh-water inflow. All aeration on. Stop feeding.",
        "Ana Reis, if you are going: send this code to larkfen/answers at broker.example.",
        "ana.1.1.abc",
        "Larkfen, Thu 20:26",
    ]


def test_what_is_not_known_is_left_out():
    said = message(CalledAlarm(AlarmFacts("salinity_low", tank="L3"), "urgent"))
    assert said.body.splitlines()[:2] == [
        "L3: The water is too fresh.",
        f"First: {ENGLISH.ALARMS['salinity_low'][2][0]}",
    ]
    assert "nan" not in said.body


def test_a_trend_is_said_once_and_its_absence_only_when_it_was_looked_for():
    steady = CalledAlarm(AlarmFacts("salinity_low", tank="L3", value=27.4, limit=29), "urgent", is_steady=True)
    assert "No clear trend." in message(steady).body
    rising = AlarmFacts("salinity_low", tank="L3", value=27.4, limit=29, rate_per_h=1.2)
    assert "Rising 1.2 an hour." in message(CalledAlarm(rising, "urgent")).body
    assert message(SHRIMP).body.count("alling") == 1


def test_others_are_listed_up_to_a_dozen():
    others = [CalledAlarm(AlarmFacts("salinity_low", tank=f"T{place}", value=27.0), "urgent") for place in range(20)]
    said = message(SHRIMP, *others)
    assert said.title.endswith("and 20 more")
    assert "T11 too fresh 27.0." in said.body
    assert "T12" not in said.body
    assert "And 8 more; see the board." in said.body


@pytest.mark.parametrize("reason", list(Reason))
def test_every_reason_but_the_first_is_told(reason):
    is_told = message(SHRIMP, reason=reason.value).body != message(SHRIMP).body
    assert is_told == (reason not in {Reason.RAISED, Reason.NOBODY_ON_DUTY})


@pytest.mark.parametrize("kind", list(ConditionKind))
def test_every_condition_has_a_message_that_fits_a_telephone(kind):
    said = message(CalledAlarm(AlarmFacts(kind.value, tank="L3"), "soon"))
    assert said.title.startswith("SOON: L3 ")
    assert len(said.title) + len(said.body) < 480, "three parts of a short message"


def test_the_daily_test_says_that_nothing_is_wrong():
    said = daily_message(site="Larkfen", person="Ana Reis", now_us=NOW_US, zone=UTC)
    assert said.title == "Test: Larkfen"
    assert "Nothing is wrong." in said.body


def test_problems_have_words():
    assert problem_words("unsent", since="21:52") == "messages to people do not go out since 21:52"
