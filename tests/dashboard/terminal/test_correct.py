from __future__ import annotations

import argparse
import json
from pathlib import Path

import pytest

from analysis.acclimation.cautions import ALWAYS
from dashboard.terminal import correct

FALLEN = (
    "--animal", "penaeus-vannamei/pl10", "--from-salinity", "12", "--to-salinity", "30", "--volume-L", "1000",
    "--source", "sea:36:28", "--hours-away", "1", "--start", "2026-12-01T08:00", "--zone", "Europe/Lisbon",
)  # fmt: skip


def run(*options: str) -> int:
    parser = argparse.ArgumentParser()
    correct.add_parser(parser.add_subparsers(dest="command"))
    return correct.run(parser.parse_args(["correct", *options]))


def test_the_card_says_urgency_first_steps_and_both_ways(capsys: pytest.CaptureFixture[str]) -> None:
    assert run(*FALLEN) == 0
    out = capsys.readouterr().out
    assert out.startswith("Urgent: ")
    assert "The animals are used to salinity" in out
    assert "away from it for 1 h" in out
    assert out.index("Stop what brings fresh water") < out.index("Then at once") < out.index("Cautions:")
    assert out.count("Cautions:") == 1
    for caution in ALWAYS:
        assert caution in out


def test_json_has_the_keys_of_acclimate_and_the_card(capsys: pytest.CaptureFixture[str]) -> None:
    assert run(*FALLEN, "--json") == 0
    answer = json.loads(capsys.readouterr().out)
    assert {"steps", "total_hours", "water_used_L", "limits", "survival", "feasible", "reason"} <= set(answer)
    assert {"urgency", "why", "acclimated_salinity", "hours_away", "first", "back", "onward"} <= set(answer)
    assert answer["steps"][0]["practical_salinity"] > 15.0
    assert answer["feasible"] is True


def test_within_the_tolerance_nothing_is_moved(capsys: pytest.CaptureFixture[str]) -> None:
    options = [option if option != "12" else "29.9" for option in FALLEN]
    assert run(*options) == 0
    assert "No water needs to be moved" in capsys.readouterr().out


def test_the_sheet_is_written(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert run(*FALLEN, "--pdf", str(tmp_path / "way.pdf")) == 0
    assert (tmp_path / "way.pdf").read_bytes().startswith(b"%PDF-")
    assert run(*FALLEN, "--pdf", str(tmp_path / "no" / "way.pdf")) == 1
    assert "way.pdf" in capsys.readouterr().err


@pytest.mark.parametrize("hours", ["-1", "nan", "inf"])
def test_impossible_hours_are_a_usage_error(hours: str, capsys: pytest.CaptureFixture[str]) -> None:
    options = list(FALLEN)
    options[options.index("--hours-away") + 1] = hours
    assert run(*options) == 2
    assert "--hours-away" in capsys.readouterr().err
