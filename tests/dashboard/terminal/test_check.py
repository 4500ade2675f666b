"""The command that checks a site file."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from dashboard.terminal.command import main
from tests.ingest.site.examples import FULL, SMALL


@pytest.fixture
def site_file(tmp_path: Path) -> Path:
    path = tmp_path / "lark.yaml"
    path.write_text(FULL, encoding="utf-8")
    return path


def test_a_usable_file_is_summed_up(site_file: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["check", str(site_file)]) == 0
    said = capsys.readouterr()
    assert said.err == ""
    assert said.out.splitlines() == [
        "Larkfen Shore Hatchery (larkfen), Europe/Lisbon",
        "2 tanks in 1 hall, 4 sensors, 2 source waters",
        "broker 127.0.0.1, port 1883, MQTT 5, as larkfen-worker",
        "  l3      1,000 L seawater; salinity 31 ± 2; 80,000 penaeus-vannamei/pl10; l3-ct (compensated)",
        "  p1      500,000 L borehole; salinity 2 to 6 with the tide; p1-ct (raw), p1-low (raw)",
        "  intake  seawater, source water; intake-ct (raw)",
        "the file can be used",
    ]


def test_a_tank_without_sensor_or_set_point_is_named(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = tmp_path / "lark.yaml"
    path.write_text(SMALL.replace("sensors:", "  - {id: t2, name: T2, volume_L: 5}\nsensors:"))
    assert main(["check", str(path)]) == 0
    said = capsys.readouterr().out
    assert "  t2  5 L seawater; no set point; no sensor" in said
    assert "no sensor sits in: t2" in said


def test_every_problem_goes_to_standard_error(site_file: Path, capsys: pytest.CaptureFixture[str]) -> None:
    site_file.write_text(FULL.replace("{salinity: 31,", "{salinty: 31,").replace("mS/cm\n", "mS\n"), encoding="utf-8")
    assert main(["check", str(site_file)]) == 1
    said = capsys.readouterr()
    assert said.out == ""
    lines = said.err.splitlines()
    assert "lark.yaml, line 41: tanks[1] (l3).set_point.salinty" in said.err
    assert "Did you mean salinity?" in said.err
    assert "Did you mean mS/cm?" in said.err
    assert lines[-1] == "2 problems; nothing was changed"


def test_json_for_programs(site_file: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["check", str(site_file), "--json"]) == 0
    found = json.loads(capsys.readouterr().out)
    assert found["is_usable"] is True
    assert found["installed"]["tanks"] == ["l3", "p1"]
    site_file.write_text(FULL.replace("volume_L: 1000", "volume_L: 1000 L"), encoding="utf-8")
    assert main(["check", str(site_file), "--json"]) == 1
    (problem,) = json.loads(capsys.readouterr().out)["problems"]
    assert (problem["line"], problem["key"], problem["nearest"]) == (39, "tanks[1] (l3).volume_L", "1000")


def test_a_file_that_is_not_there(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["check", str(tmp_path / "absent.yaml")]) == 1
    assert "a file that can be read" in capsys.readouterr().err


def test_without_a_file_the_usage_is_told() -> None:
    with pytest.raises(SystemExit) as caught:
        main(["check"])
    assert caught.value.code == 2
