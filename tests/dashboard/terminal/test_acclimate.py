from __future__ import annotations

import argparse
import csv
import json
from pathlib import Path

import pytest

from analysis.acclimation.cautions import ALWAYS
from dashboard.terminal import acclimate

SHORT = (
    "--animal", "penaeus-vannamei/pl10", "--from-salinity", "20", "--to-salinity", "14", "--volume-L", "1000",
    "--source", "tap:0:28", "--start", "2026-12-01T08:00", "--zone", "Europe/Lisbon",
)  # fmt: skip


def run(*options: str) -> int:
    parser = argparse.ArgumentParser()
    acclimate.add_parser(parser.add_subparsers(dest="command"))
    return acclimate.run(parser.parse_args(["acclimate", *options]))


def test_json_has_the_promised_keys(capsys: pytest.CaptureFixture[str]) -> None:
    assert run(*SHORT, "--json") == 0
    answer = json.loads(capsys.readouterr().out)
    assert {"steps", "total_hours", "water_used_L", "limits", "survival", "feasible", "reason"} <= set(answer)
    assert answer["feasible"] is True
    step = answer["steps"][0]
    assert step["start"] == "2026-12-01T08:00:00+00:00"
    assert step["drain_L"] == step["add"]["tap"]
    assert step["salt"] == {}
    assert {"practical_salinity", "temperature_degC", "osmolality_mOsm_kg", "stress"} <= set(step)
    assert all({"name", "value", "source"} <= set(limit) for limit in answer["limits"])


def test_a_person_reads_table_totals_chart_limits_and_cautions(capsys: pytest.CaptureFixture[str]) -> None:
    assert run(*SHORT) == 0
    out = capsys.readouterr().out
    assert "drain_L" in out
    assert "Limits:" in out
    assert "MCGRAW2002" in out
    assert "Expected survival" in out
    assert "█" in out
    assert "L tap; drained" in out
    for caution in ALWAYS:
        assert caution in out


def test_an_infeasible_task_is_answered_with_the_reason(capsys: pytest.CaptureFixture[str]) -> None:
    options = [option if option != "tap:0:28" else "pond:18:28" for option in SHORT]
    assert run(*options, "--json") == 0
    answer = json.loads(capsys.readouterr().out)
    assert answer["feasible"] is False
    assert "no source is fresh enough" in answer["reason"]
    assert answer["steps"] == []
    assert run(*options) == 0
    assert "No plan: no source is fresh enough" in capsys.readouterr().out


def test_pdf_and_csv_are_written(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    pdf, table = tmp_path / "sheet.pdf", tmp_path / "steps.csv"
    assert run(*SHORT, "--pdf", str(pdf), "--csv", str(table)) == 0
    capsys.readouterr()
    assert pdf.read_bytes().startswith(b"%PDF-")
    with table.open(encoding="utf-8", newline="") as file:
        rows = list(csv.DictReader(file))
    assert rows[0]["number"] == "1"
    assert rows[0]["add"].endswith(" tap")
    assert float(rows[-1]["practical_salinity"]) == pytest.approx(14.0, abs=0.25)


def test_a_file_that_cannot_be_written_is_another_error(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert run(*SHORT, "--csv", str(tmp_path / "no" / "such" / "folder.csv")) == 1
    assert "folder.csv" in capsys.readouterr().err


def test_sources_flows_releases_work_hours_and_overrides_arrive_in_the_plan(capsys: pytest.CaptureFixture[str]) -> None:
    options = (
        "--animal", "penaeus-vannamei/pl12", "--from-salinity", "20", "--to-salinity", "18", "--volume-L", "500",
        "--source", "well:1:27:400", "--source", "sea:35:27", "--source-ph", "well:7.9", "--source-ph", "sea:8.1", "--ph", "8.0",
        "--released", "well=Ines,2026-12-02T00:00,0,150", "--released-only", "--start", "2026-12-01T06:00", "--zone", "Europe/Lisbon",
        "--work", "07:00-19:00", "--rest", "12:00-13:00", "--override", "salinity per hour=2", "--by", "Marta",
        "--because", "a weak batch", "--confirm", "moult", "--governs", "hour", "--litres", "5", "--clock-min", "15",
        "--allow-volume-percent", "5", "--allow-source", "0.5", "--allow-late-min", "10",
    )  # fmt: skip
    assert run(*options, "--json") == 0
    answer = json.loads(capsys.readouterr().out)
    assert answer["feasible"] is True
    assert answer["water_used_by_source_L"].keys() == {"well"}
    assert any("sea (nobody has released it)" in caution for caution in answer["cautions"])
    (hour,) = [limit for limit in answer["limits"] if limit["name"] == "salinity per hour"]
    assert (hour["overridden_by"], hour["reason"]) == ("Marta", "a weak batch")
    assert [gate["confirmed_by"] for gate in answer["gates"] if gate["kind"] == "moult"] == ["Marta"]
    assert answer["allowances"] == {"volume_share": 0.05, "source_salinity": 0.5, "late_min": 10.0}
    assert all(step["start"][11:16] >= "07:00" and step["drain_L"] % 5 == 0 for step in answer["steps"])


def test_a_bag_with_ammonia_is_told_to_move_first(capsys: pytest.CaptureFixture[str]) -> None:
    options = (
        "--animal", "penaeus-vannamei/pl10", "--from-salinity", "30", "--to-salinity", "8", "--volume-L", "12", "--max-volume-L",
        "80", "--vessel", "bag", "--method", "add", "--source", "pond:4:28", "--source-ph", "pond:8.3", "--ph", "6.8",
        "--hours-packed", "9", "--ammonia", "6", "--oxygen", "12", "--density", "450",
    )  # fmt: skip
    assert run(*options, "--json") == 0
    answer = json.loads(capsys.readouterr().out)
    assert answer["feasible"] is False
    assert "move to an aerated acclimation tank first" in answer["reason"]


def test_the_arrival_sheet_is_written_with_what_was_told(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    sheet = tmp_path / "arrival.pdf"
    options = (
        *SHORT,
        "--hours-packed",
        "6",
        "--density",
        "400",
        "--number",
        "80000",
        "--sender",
        "Marta",
        "--arrival-pdf",
        str(sheet),
    )
    assert run(*options) == 2
    assert "--since" in capsys.readouterr().err
    assert run(*options, "--since", "2026-11-28T08:00") == 0
    assert sheet.read_bytes().startswith(b"%PDF-")


def test_dosing_salt_by_name(capsys: pytest.CaptureFixture[str]) -> None:
    options = (
        "--animal", "oreochromis-niloticus/juvenile", "--from-salinity", "0", "--to-salinity", "3", "--from-temperature", "27",
        "--volume-L", "1000", "--method", "dose", "--salt", "reef mix:0.9", "--start", "8:00",
    )  # fmt: skip
    assert run(*options, "--json") == 0
    answer = json.loads(capsys.readouterr().out)
    assert answer["salt_used_kg"]["reef mix"] == pytest.approx(3.0 / 0.9, rel=0.1)
    assert answer["steps"][0]["salt"].keys() == {"reef mix"}
    assert run(*options, "--plain-salt", "--json") == 0
    assert "plain sodium chloride" in json.loads(capsys.readouterr().out)["reason"]


def changed(**values: str) -> list[str]:
    options = list(SHORT)
    for name, value in values.items():
        option = "--" + name.replace("_", "-").removesuffix("-x")
        if option in options:
            options[options.index(option) + 1] = value
        else:
            options += [option, value]
    return options


@pytest.mark.parametrize(
    ("options", "words"),
    [
        (changed(animal="penaeus-vannamei/pl99"), "penaeus-vannamei/pl"),
        (changed(source="tap:0"), "NAME:SALINITY:TEMPERATURE"),
        (changed(source="tap:fresh:28"), "a number"),
        (changed(source="tap:inf:28"), "finite"),
        (changed(volume_L="-5"), "volume"),
        (changed(from_salinity="nan"), "salinity"),
        (changed(start="tomorrow"), "a time such as"),
        (changed(start="25:00"), "HH:MM"),
        (changed(zone="Atlantis/Poseidonis"), "IANA"),
        (changed(work="8-16"), "HH:MM"),
        (changed(work="all day"), "HH:MM"),
        (changed(override="salinity per hour"), "LIMIT=VALUE"),
        (changed(override="salinity per hour=2"), "a name and a reason"),
        (changed(confirm="moult"), "--by NAME"),
        (changed(source_ph="sea:8"), "tap"),
        (changed(source_ph="sea"), "NAME:VALUE"),
        (changed(source_kind="tap:holy"), "sodium-chloride"),
        (changed(released="tap"), "PERSON"),
        (changed(allow_late_min="999"), "0 to 120"),
        (changed(salt="mix:0"), "dry fraction"),
    ],
)
def test_usage_errors_exit_with_2_and_say_what_is_allowed(
    options: list[str], words: str, capsys: pytest.CaptureFixture[str]
) -> None:
    assert run(*options) == 2
    captured = capsys.readouterr()
    assert captured.out == ""
    assert captured.err.startswith("euryhale acclimate: ")
    assert words in captured.err


def test_missing_options_exit_with_2() -> None:
    with pytest.raises(SystemExit) as stop:
        run("--animal", "penaeus-vannamei/pl10")
    assert stop.value.code == 2


def test_without_a_start_it_begins_now_and_without_a_source_it_needs_a_temperature(
    capsys: pytest.CaptureFixture[str],
) -> None:
    assert run("--animal", "penaeus-vannamei/pl10", "--from-salinity", "20", "--to-salinity", "20", "--volume-L", "10",
               "--source", "tap:0:25") == 0  # fmt: skip
    assert "Nothing to do" in capsys.readouterr().out
    assert run("--animal", "penaeus-vannamei/pl10", "--from-salinity", "20", "--to-salinity", "21", "--volume-L", "10",
               "--salt", "mix", "--method", "dose") == 2  # fmt: skip
    assert "--from-temperature" in capsys.readouterr().err
