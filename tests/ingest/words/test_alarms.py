"""Alarms in the words of a hatchery hand."""

from __future__ import annotations

import pytest

from analysis.alarm.kinds import ConditionKind, NoticeKind, TaskKind
from analysis.alarm.state import StateName
from analysis.alarm.transition import Happening, Refusal
from ingest.payloads.reason import Reason
from ingest.words import trust
from ingest.words.alarms import AlarmFacts, alarm_words, priority_letter, priority_word, stress_band
from ingest.words.language import ENGLISH, Language


def test_a_falling_salinity_says_how_fast_and_what_to_do_first():
    words = alarm_words(
        AlarmFacts(
            "salinity_low",
            value=27.42,
            set_point=31,
            band=2,
            rate_per_h=-3.61,
            time_left_min=11,
            time_left_low_min=9,
            time_left_high_min=14,
        )
    )
    assert words.what == "Turning fresh: 27.4, set 31 ± 2, falling 3.6 an hour."
    assert words.do.startswith("Close the fresh-water inflow.")
    assert words.left == "About 11 min (9 to 14 min)"


def test_time_left_names_the_limit_it_counts_to():
    words = alarm_words(AlarmFacts("salinity_low", time_left_min=11, next_limit=25))
    assert words.left == "About 11 min until salinity 25"


def test_a_torrent_is_told_in_ten_minutes():
    words = alarm_words(AlarmFacts("salinity_low", value=25.4, set_point=31, band=2, rate_per_h=-62.5))
    assert words.what == "Turning fresh: 25.4, set 31 ± 2, falling 10.4 in 10 min."


def test_a_tank_that_recovers_is_not_said_to_turn_fresh():
    assert (
        alarm_words(AlarmFacts("salinity_low", value=27.42, set_point=31, rate_per_h=2.0)).what
        == "Too fresh: 27.4, set 31."
    )


def test_the_same_code_with_less_known_says_less_and_never_shows_a_hole():
    assert alarm_words(AlarmFacts("salinity_low")).what == "The water is too fresh."


@pytest.mark.parametrize("code", sorted(ENGLISH.ALARMS))
def test_every_condition_has_a_sentence_and_a_first_action_with_nothing_known(code):
    words = alarm_words(AlarmFacts(code))
    assert words.what.endswith(".")
    assert words.do.endswith(".")
    assert "{" not in words.sentence
    assert "_" not in words.sentence


def test_a_condition_newer_than_the_language_still_sends_somebody():
    words = alarm_words(AlarmFacts("water_level_low"))
    assert words.what == "water level low in this tank."
    assert words.do == "Go and look."


def test_temperature_keeps_its_unit():
    words = alarm_words(AlarmFacts("temperature_high", value=33.17, set_point=28.5, band=2))
    assert words.what == "Too warm: 33.2 °C, set 28.5 ± 2 °C."
    assert "Switch power off" in words.do


def test_rates_say_their_direction():
    fast = alarm_words(AlarmFacts("changing_too_fast", rate_per_h=4.2, limit=3))
    assert fast.what == "Salinity is rising 4.2 an hour; 3 an hour is allowed."


@pytest.mark.parametrize(
    ("stress", "word"),
    [(0, "settled"), (20, "adjusting"), (69.9, "strained"), (70, "in danger"), (100, "in danger"), (float("nan"), "")],
)
def test_stress_bands_are_those_of_the_design(stress, word):
    assert stress_band(stress) == word


def test_every_condition_of_the_alarm_room_has_words():
    assert {*ConditionKind, *NoticeKind, *TaskKind} <= set(ENGLISH.ALARMS)


def test_every_state_and_refusal_of_the_alarm_room_has_words():
    assert set(StateName) <= set(ENGLISH.ALARM_STATES)
    assert {refusal.value for refusal in Refusal if refusal.value} <= set(ENGLISH.COMMAND_REASONS)


def test_every_happening_of_an_alarm_and_every_reason_to_refuse_a_payload_has_words():
    assert set(Happening) <= set(ENGLISH.ALARM_ACTS)
    assert set(Reason) <= set(ENGLISH.REFUSALS)


def test_priorities_are_three_words_and_three_letters():
    assert [priority_word(p) for p in ("urgent", "soon", "note")] == ["urgent", "soon", "note"]
    assert [priority_letter(p) for p in ("urgent", "soon", "note")] == ["U", "S", "N"]


def test_every_flag_and_quality_has_words():
    from analysis.flags import Flag, Quality, words

    every = 0
    for flag in Flag:
        every |= flag
    assert set(words(every)) <= set(ENGLISH.FLAGS)
    assert len(trust.flag_words(every)) == len(words(every))
    assert [trust.quality_word(q) for q in Quality] == ["believe", "not checked", "doubt", "do not believe", "no value"]


def test_a_command_without_a_worker_says_so():
    assert trust.command_words("waiting", is_worker_running=False) == "waiting: the worker is not running"
    assert trust.command_words("refused", "role_too_weak") == "refused: your role may not do this"
    assert trust.command_words("refused", "the tank is being drained") == "refused: the tank is being drained"


def test_a_language_that_does_not_exist_is_refused_by_name():
    from analysis.errors import InvalidInputError

    with pytest.raises(InvalidInputError, match="'xx'"):
        Language("xx")


def test_counts_are_spelled_as_people_say_them():
    assert ENGLISH.counted("tanks_fine", 7) == "Seven tanks are as they should be."
    assert ENGLISH.counted("tanks_fine", 1) == "One tank is as it should be."
    assert ENGLISH.counted("tanks_fine", 40) == "40 tanks are as they should be."
    assert ENGLISH.counted("tanks", 0) == "no tanks"
