from __future__ import annotations

import pytest

from analysis.sensor.health import Belief, Finding
from ingest.commands import bench_sample, calibration
from ingest.words.language import ENGLISH
from ingest.words.trust import belief_word, command_words, finding_words


def test_every_belief_and_every_finding_has_words():
    assert [belief_word(belief) for belief in Belief] == ["believe", "doubt", "do not use"]
    assert {finding.value for finding in Finding} <= set(ENGLISH.SENSOR_FINDINGS)


@pytest.mark.parametrize(
    ("finding", "figures", "said"),
    [
        ("silent", {"silent_h": 2.26}, "silent for 2.3 h"),
        ("silent", {}, "never heard"),
        ("fouling", {"change_percent": -3.42, "days": 6.9, "change_percent_per_day": -0.5},
         "creeps away from its neighbour: -3.4 % in 6.9 days"),
        ("fouling", {"change_percent": None, "days": 6.9}, "fouling"),
        ("a new one", {}, "something is wrong with it"),
    ],
)  # fmt: skip
def test_a_finding_is_told_with_its_figures(finding, figures, said):
    assert finding_words({"finding": finding, "figures": figures}) == said


@pytest.mark.parametrize(
    "reason",
    [
        *calibration.REASONS.values(),
        *calibration.REFUSING_REMARKS.values(),
        *bench_sample.REASONS,
        "no_such_sensor",
        "in_the_future",
    ],
)
def test_every_refusal_of_work_on_a_sensor_is_explained(reason):
    assert reason in ENGLISH.COMMAND_REASONS
    assert "{" not in command_words("refused", reason)
