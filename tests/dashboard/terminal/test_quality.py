"""`euryhale quality`: a logger's file in, flags per test out."""

from __future__ import annotations

import argparse
import csv
from pathlib import Path

import gsw
import numpy as np
import pytest

from dashboard.terminal import quality
from dashboard.terminal.flag_table import flag_columns

COLUMNS = ("--column", "time=when", "--column", "conductivity=cond", "--column", "temperature=temp")


def run(*options: str) -> int:
    parser = argparse.ArgumentParser()
    quality.add_parser(parser.add_subparsers(dest="command"))
    return quality.run(parser.parse_args(["quality", *options]))


def logger_file(folder: Path, *, rows: int = 400, separator: str = ",", comma: bool = False, **changed) -> Path:
    """A quiet tank of salinity 20, a reading every five minutes; *changed* maps row to cells."""
    rng = np.random.default_rng(4)
    temperature = 24.0 + np.sin(np.arange(rows) / 45.0) + rng.normal(0, 0.01, rows)
    conductivity = gsw.C_from_SP(20.0 + rng.normal(0, 0.01, rows), temperature, 0.0)
    start = np.datetime64("2026-03-28T00:00:00")
    lines = [separator.join(("when", "cond", "temp"))]
    for row in range(rows):
        when = str(start + np.timedelta64(300 * row, "s"))
        cells = changed.get(f"row{row}") or (when + "Z", f"{conductivity[row]:.3f}", f"{temperature[row]:.2f}")
        if comma:
            cells = [cell.replace(".", ",") for cell in cells]
        lines.append(separator.join(cells))
    path = folder / "logger.csv"
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")
    return path


def written(path: Path, delimiter: str = ",") -> list[dict[str, str]]:
    with path.open(encoding="utf-8", newline="") as source:
        return list(csv.DictReader(source, delimiter=delimiter))


def when(row: int) -> str:
    return str(np.datetime64("2026-03-28T00:00:00") + np.timedelta64(300 * row, "s")) + "Z"


def test_a_good_file_passes(tmp_path, capsys):
    source, target = logger_file(tmp_path), tmp_path / "flags.csv"
    assert run("--input", str(source), *COLUMNS, "--output", str(target)) == 0
    rows = written(target)
    assert len(rows) == 400
    assert {row["quality"] for row in rows} == {"1"}
    assert {row["flags"] for row in rows} == {""}
    assert float(rows[0]["salinity"]) == pytest.approx(20.0, abs=0.05)
    assert rows[7]["time_utc"] == "2026-03-28T00:35:00.000Z"
    said = capsys.readouterr()
    assert said.out == ""
    assert "400 readings: 400 passed, 0 suspect, 0 failed, 0 missing, 0 not evaluated" in said.err
    assert "compensation: " in said.err


def test_each_fault_stands_in_its_own_column(tmp_path):
    source = logger_file(
        tmp_path,
        row350=(when(350), "60.0", "24.0"),
        row360=(when(360), "0.004", "24.0"),
        row370=(when(370), "", "24.0"),
        row380=(when(380), "32.0", "81.0"),
        row390=(when(390), "-99", "24.0"),
    )
    target = tmp_path / "flags.csv"
    assert run("--input", str(source), *COLUMNS, "--expected-salinity", "20", "--output", str(target)) == 0
    rows = written(target)
    assert rows[350]["spike_conductivity"] == "4"
    assert "spike" in rows[350]["flags"].split()
    assert rows[360]["in_air"] == "4"
    assert rows[370]["quality"] == "9"
    assert rows[370]["conductivity_mS_cm"] == ""
    assert rows[370]["flags"] == "missing"
    assert rows[380]["gross_range_temperature"] == "4"
    assert rows[380]["quality"] == "4"
    assert rows[390]["quality"] == "9"
    assert rows[390]["flags"] == "filler"
    assert {rows[index]["quality"] for index in (340, 349, 355)} == {"1"}


def test_flags_as_they_were_given(tmp_path):
    source, target = logger_file(tmp_path, row350=(when(350), "60.0", "24.0")), tmp_path / "flags.csv"
    assert run("--input", str(source), *COLUMNS, "--as-arrived", "--output", str(target)) == 0
    rows = written(target)
    assert rows[350]["spike_conductivity"] == "2"
    assert rows[350]["quality"] == "3"  # its rate of change was seen at once


def test_flag_columns_are_complete_and_of_one_digit(tmp_path):
    source, target = logger_file(tmp_path), tmp_path / "flags.csv"
    assert run("--input", str(source), *COLUMNS, "--output", str(target)) == 0
    (first, *_) = written(target)
    names = [name for name, _, _ in flag_columns()]
    assert len(names) == 27
    assert set(names) < set(first)
    assert {first[name] for name in names} <= {"1", "2", "3", "4", "9"}


def test_a_compensating_logger_in_local_time_with_decimal_comma(tmp_path):
    rng = np.random.default_rng(4)
    rows = 100
    temperature = 18.0 + rng.normal(0, 0.01, rows)
    specific = gsw.C_from_SP(20.0, temperature, 0.0) / (1 + 0.0191 * (temperature - 25.0)) * 1000
    lines = ["Date;Time;SC;T (°C)"]
    for row in range(rows):
        hour, minute = divmod(15 * row, 60)
        day, warmth = 28 + hour // 24, f"{temperature[row]:.2f}".replace(".", ",")
        lines.append(f"{day:02d}.03.2026;{hour % 24:02d}:{minute:02d};{specific[row]:.0f};{warmth}")
    source, target = tmp_path / "logger.csv", tmp_path / "flags.csv"
    source.write_text("\n".join(lines) + "\n", encoding="utf-8")
    assert (
        run(
            "--input", str(source), "--output", str(target), "--zone", "Europe/Lisbon",
            "--column", "time=Date", "--column", "time=Time", "--column", "conductivity=SC", "--column", "temperature=T",
            "--unit", "uS/cm", "--compensated",
        )
        == 0
    )  # fmt: skip
    found = written(target, delimiter=";")
    # the clock was put forward at 01:00 UTC on 29 March: those local times do not exist
    assert 90 <= len(found) <= rows
    assert found[0]["time_utc"] == "2026-03-28T00:00:00.000Z"
    assert float(found[0]["salinity"].replace(",", ".")) == pytest.approx(20.0, abs=0.02)


def test_rows_out_of_order_are_judged_in_order_and_written_as_they_came(tmp_path):
    source, target = logger_file(tmp_path), tmp_path / "flags.csv"
    head, *lines = source.read_text(encoding="utf-8").splitlines()
    source.write_text("\n".join([head, *lines[200:], *lines[:200]]) + "\n", encoding="utf-8")
    assert run("--input", str(source), *COLUMNS, "--output", str(target)) == 0
    rows = written(target)
    assert rows[0]["time_utc"] == when(200).replace("Z", ".000Z")
    assert {row["quality"] for row in rows} == {"1"}
    assert {row["gap"] for row in rows[1:200]} == {"1"}


def test_what_the_site_expects(tmp_path):
    source, target = logger_file(tmp_path), tmp_path / "flags.csv"
    assert run("--input", str(source), *COLUMNS, "--expect-temperature", "10", "24", "--output", str(target)) == 0
    flags = {row["gross_range_temperature"] for row in written(target)}
    assert flags == {"1", "3"}


def test_other_waters(tmp_path):
    source, target = logger_file(tmp_path), tmp_path / "flags.csv"
    assert run("--input", str(source), *COLUMNS, "--water", "sodium-chloride", "--output", str(target)) == 0
    assert 15.0 < float(written(target)[0]["salinity"]) < 21.0  # g/kg


def test_standard_output(tmp_path, capsys):
    assert run("--input", str(logger_file(tmp_path, rows=3)), *COLUMNS) == 0
    assert capsys.readouterr().out.startswith("time_utc,conductivity_mS_cm,")


@pytest.mark.parametrize(
    ("options", "words"),
    [
        (("--column", "time=when", "--column", "conductivity=cond"), "needs --column temperature=NAME"),
        (("--column", "conductivity=cond", "--column", "temperature=temp"), "needs --column time=NAME"),
        ((*COLUMNS, "--column", "time=a", "--column", "time=b"), "once or (for a date"),
        ((*COLUMNS, "--column", "depth=d"), "found 'depth=d'"),
        ((*COLUMNS, "--column", "temperature=t"), "temperature is given twice"),
        ((*COLUMNS[:-1], "temperature=tmp"), "nearest: temp"),
        ((*COLUMNS, "--zone", "Nowhere/Land"), "--zone: found 'Nowhere/Land'"),
        ((*COLUMNS, "--coefficient", "2"), "need --compensated"),
        ((*COLUMNS, "--compensated", "--coefficient", "99"), "compensation coefficient"),
        ((*COLUMNS, "--water", "mud"), "--water: found 'mud'"),
        ((*COLUMNS, "--interval", "0"), "interval_s"),
        ((*COLUMNS, "--expect-salinity", "40", "10"), "suspect_span"),
    ],
)
def test_options_that_do_not_go_together_are_refused_with_2(tmp_path, capsys, options, words):
    source, target = logger_file(tmp_path, rows=5), tmp_path / "flags.csv"
    assert run("--input", str(source), "--output", str(target), *options) == 2
    said = capsys.readouterr()
    assert words in said.err
    assert said.out == ""
    assert not target.exists()


def test_a_file_that_cannot_be_read_ends_with_1(tmp_path, capsys):
    assert run("--input", str(tmp_path / "none.csv"), *COLUMNS) == 1
    assert "none.csv" in capsys.readouterr().err
    source = logger_file(tmp_path, rows=5)
    assert run("--input", str(source), "--output", str(source), *COLUMNS) == 2
    bad = tmp_path / "local.csv"
    bad.write_text("when,cond,temp\n2026-01-01 00:00:00,30,20\n", encoding="utf-8")
    assert run("--input", str(bad), *COLUMNS) == 1
    assert "time zone" in capsys.readouterr().err


def test_a_header_in_another_unit_is_refused(tmp_path, capsys):
    source = tmp_path / "logger.csv"
    source.write_text("when,cond (uS/cm),temp\n2026-01-01T00:00:00Z,30000,20\n", encoding="utf-8")
    columns = ("--column", "time=when", "--column", "conductivity=cond", "--column", "temperature=temp")
    assert run("--input", str(source), *columns) == 1
    assert "uS/cm" in capsys.readouterr().err
    assert run("--input", str(source), *columns, "--unit", "uS/cm") == 0


@pytest.mark.shared_data
def test_a_real_half_year(shared_data, tmp_path):
    """The two faults of the oyster bar record are in the file that is written (see test_oyster_bar.py)."""
    target = tmp_path / "flags.csv"
    columns = ("--column", "time=time_utc", "--column", "conductivity=spcond_mS_cm", "--column", "temperature=temp_C")
    options = ("--compensated", "--surroundings", "tidal-intake", "--output", str(target))
    assert run("--input", str(shared_data / "oyster_bar_2012.csv"), *columns, *options) == 0
    rows = written(target)
    with (shared_data / "oyster_bar_2012.csv").open(encoding="utf-8", newline="") as lines:
        rejected = [row["flag_temp"].startswith("<-3>") for row in csv.DictReader(lines)]
    assert len(rows) == len(rejected)
    bad = [row["quality"] in "34" for row in rows]
    found = sum(b for b, r in zip(bad, rejected, strict=True) if r) / sum(rejected)
    assert found >= 0.95
    assert sum(row["quality"] == "9" for row in rows) == 1300
