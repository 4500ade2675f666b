"""`euryhale stress`."""

from __future__ import annotations

import csv
import json
from datetime import UTC, datetime, timedelta

import pytest

from dashboard.terminal.command import main

HEAD = [
    "time",
    "stress",
    "range_strain",
    "change_strain",
    "exposure_strain",
    "thermal_strain",
    "driver",
    "band",
    "minutes_to_limit",
]
START = datetime(2026, 5, 4, 6, 0, tzinfo=UTC)


def written(path, rows, head="when,S,T"):
    path.write_text("\n".join([head, *rows]) + "\n", encoding="utf-8")
    return path


def falling(path, *, minutes=600, per_min=0.05, start=30.0, floor=3.0):
    rows = []
    for minute in range(minutes):
        at = (START + timedelta(minutes=minute)).isoformat().replace("+00:00", "Z")
        rows.append(f"{at},{max(floor, start - per_min * minute):.3f},28.5")
    return written(path, rows)


def command(path, *more):
    columns = ["--column", "time=when", "--column", "salinity=S", "--column", "temperature=T"]
    return ["stress", "--input", str(path), *columns, "--animal", "penaeus-vannamei/pl10", *more]


def table(path):
    with path.open(encoding="utf-8", newline="") as file:
        return list(csv.DictReader(file))


def test_a_fall_is_told_row_by_row(tmp_path):
    out = tmp_path / "out.csv"
    assert main(command(falling(tmp_path / "in.csv"), "--acclimated-to", "30", "--output", str(out))) == 0
    rows = table(out)
    assert list(rows[0]) == HEAD
    assert len(rows) == 600
    assert rows[0]["time"] == "2026-05-04T06:00:00.000Z"
    assert float(rows[0]["stress"]) == 0.0
    assert rows[0]["band"] == "settled"
    worst = max(rows, key=lambda row: float(row["stress"]))
    assert worst["band"] in ("strained", "in danger")
    assert worst["driver"] in ("change", "exposure", "salinity itself")


def test_the_minutes_left_are_those_to_the_tolerable_limit(tmp_path):
    out = tmp_path / "out.csv"
    main(command(falling(tmp_path / "in.csv"), "--acclimated-to", "30", "--output", str(out)))
    row = table(out)[320]  # salinity 14, 0.05 a minute, tolerable to 4
    assert float(row["minutes_to_limit"]) == pytest.approx(200.0, rel=0.06)
    assert float(row["minutes_to_limit"]) <= 203.0
    assert table(out)[599]["minutes_to_limit"] == "0.0"


def test_the_summary_holds_its_keys(tmp_path, capsys):
    assert main(command(falling(tmp_path / "in.csv"), "--acclimated-to", "30", "--json")) == 0
    summary = json.loads(capsys.readouterr().out)
    assert {"worst_stress", "worst_at", "driver", "band", "survival"} <= set(summary)
    assert summary["worst_at"].endswith("Z")
    survival = summary["survival"]
    assert 0.0 <= survival["low"] <= survival["alive"] <= survival["high"] <= 1.0
    assert "SAMOCHA1998" in survival["sources"]
    assert summary["osmotic_part_only"] is False


def test_survival_is_not_told_where_it_is_not_known(tmp_path, capsys):
    path = falling(tmp_path / "in.csv")
    assert main(command(path, "--json")) == 0  # nobody said what they are used to
    assert json.loads(capsys.readouterr().out)["survival"] is None
    args = command(path, "--json", "--acclimated-to", "30")
    args[args.index("penaeus-vannamei/pl10")] = "lates-calcarifer/egg"
    assert main(args) == 0
    summary = json.loads(capsys.readouterr().out)
    assert (summary["survival"], summary["worst_stress"], summary["band"]) == (None, None, "not known")


def test_rows_keep_the_order_of_the_file_and_holes_stay_empty(tmp_path):
    path = written(
        tmp_path / "in.csv",
        [
            "2026-05-04T06:10:00Z,28,28",
            "2026-05-04T06:00:00Z,30,28",
            "2026-05-04T06:20:00Z,-999,28",
            "2026-05-04T06:30:00Z,26,28",
        ],
    )
    out = tmp_path / "out.csv"
    assert main(command(path, "--acclimated-to", "30", "--output", str(out))) == 0
    rows = table(out)
    assert [row["time"][11:16] for row in rows] == ["06:10", "06:00", "06:20", "06:30"]
    assert rows[2]["stress"] == ""
    assert rows[2]["band"] == "not known"
    assert rows[3]["stress"] != ""


def test_a_decimal_comma_is_kept(tmp_path):
    path = written(
        tmp_path / "in.csv", ["2026-05-04T06:00:00Z;30,0;28,0", "2026-05-04T06:10:00Z;29,5;28,0"], head="when;S;T"
    )
    out = tmp_path / "out.csv"
    assert main(command(path, "--acclimated-to", "30", "--output", str(out))) == 0
    lines = out.read_text(encoding="utf-8").splitlines()
    assert lines[0] == ";".join(HEAD)
    assert lines[1].split(";")[1] == "0,0"


def test_other_water_is_the_osmotic_part_only(tmp_path, capsys):
    path = falling(tmp_path / "in.csv", minutes=30)
    assert main(command(path, "--acclimated-to", "30", "--json", "--water", "sodium-chloride")) == 0
    assert json.loads(capsys.readouterr().out)["osmotic_part_only"] is True


def test_without_a_thermometer_temperature_is_not_told(tmp_path):
    out = tmp_path / "out.csv"
    args = [
        "stress",
        "--input",
        str(falling(tmp_path / "in.csv", minutes=20)),
        "--column",
        "time=when",
        "--column",
        "salinity=S",
    ]
    assert main([*args, "--animal", "penaeus-vannamei/pl10", "--acclimated-to", "30", "--output", str(out)]) == 0
    assert {row["thermal_strain"] for row in table(out)} == {""}


@pytest.mark.parametrize(
    ("change", "words"),
    [
        (["--animal", "penaeus-vannamei/pl99"], "penaeus-vannamei"),
        (["--column", "salinity=nowhere"], "twice"),
        (["--column", "depth=S"], "QUANTITY=NAME"),
        (["--acclimated-to", "500"], "0 to 120"),
        (["--water", "lemonade"], "--water"),
        (["--zone", "Atlantis/Harbour"], "--zone"),
    ],
)
def test_what_does_not_go_together_is_a_usage_error(tmp_path, capsys, change, words):
    assert main([*command(falling(tmp_path / "in.csv", minutes=3)), *change]) == 2
    assert words in capsys.readouterr().err


def test_missing_columns_are_usage_errors(tmp_path, capsys):
    path = falling(tmp_path / "in.csv", minutes=3)
    for columns in (
        ["--column", "time=when"],
        ["--column", "salinity=S"],
        ["--column", "time=when", "--column", "salinity=X"],
    ):
        assert main(["stress", "--input", str(path), *columns, "--animal", "penaeus-vannamei/pl10"]) == 2
    assert capsys.readouterr().out == ""


def test_a_missing_file_is_another_error(tmp_path, capsys):
    assert main(command(tmp_path / "none.csv")) == 1
    assert "none.csv" in capsys.readouterr().err


def test_the_input_is_never_overwritten(tmp_path):
    path = falling(tmp_path / "in.csv", minutes=3)
    before = path.read_text(encoding="utf-8")
    assert main(command(path, "--output", str(path))) == 2
    assert path.read_text(encoding="utf-8") == before
