from __future__ import annotations

import argparse
import csv
import json
import re
from pathlib import Path

import pytest

from dashboard.terminal import convert
from ingest.tables.table import ROWS_A_CHUNK


def run(*options: str) -> int:
    parser = argparse.ArgumentParser()
    convert.add_parser(parser.add_subparsers(dest="command"))
    return convert.run(parser.parse_args(["convert", *options]))


def answer(capsys: pytest.CaptureFixture[str], *options: str) -> dict[str, object]:
    assert run(*options, "--json") == 0
    found = json.loads(capsys.readouterr().out)
    assert isinstance(found, dict)
    return found


def table(path: Path) -> list[dict[str, str]]:
    with path.open(encoding="utf-8", newline="") as source:
        return list(csv.DictReader(source))


KEYS = [
    "practical_salinity",
    "absolute_salinity_g_kg",
    "density_kg_m3",
    "osmolality_mOsm_kg",
    "osmolality_in_situ_mOsm_kg",
    "osmotic_pressure_kPa",
    "freezing_point_degC",
    "oxygen_solubility_mg_L",
    "flags",
    "uncertainty",
]


def test_standard_sea_water_as_json(capsys: pytest.CaptureFixture[str]) -> None:
    # C(35, t68 = 15, 0) = 42.914 mS/cm: Culkin and Smith 1980; S_R = 35.16504: Millero et al. 2008
    found = answer(capsys, "--conductivity", "42.914", "--temperature", "14.996401")
    assert list(found) == KEYS
    assert found["practical_salinity"] == pytest.approx(35.0, abs=1e-6)
    assert found["absolute_salinity_g_kg"] == pytest.approx(35.16504, abs=1e-6)
    assert found["osmolality_mOsm_kg"] == pytest.approx(1033.741, abs=0.01)  # regression: our own TEOS-10 value
    assert found["freezing_point_degC"] == pytest.approx(-1.9191, abs=1e-4)  # regression
    assert found["oxygen_solubility_mg_L"] == pytest.approx(8.135, abs=1e-3)  # regression
    assert found["flags"] == []
    assert found["uncertainty"] == {
        "practical_salinity": pytest.approx(0.2154, abs=2e-4),
        "osmolality_mOsm_kg": pytest.approx(6.63, abs=0.01),
    }


@pytest.mark.parametrize(("unit", "value"), [("mS/cm", "42.914"), ("uS/cm", "42914"), ("S/m", "4.2914")])
def test_every_unit_is_the_same_water(capsys: pytest.CaptureFixture[str], unit: str, value: str) -> None:
    found = answer(capsys, "--conductivity", value, "--unit", unit, "--temperature", "14.996401")
    assert found["practical_salinity"] == pytest.approx(35.0, abs=1e-6)


@pytest.mark.parametrize(
    ("settings", "reported"),
    [
        (("--compensated",), 42.9175373 / 0.809),
        (("--compensated", "--coefficient", "2", "--reference-temperature", "20"), 42.9175373 / 0.9),
        (("--compensation", "linear"), 42.9175373 / 0.809),
        # f25 at 15 degC is 1.256: ISO 7888:1985 (looked up in a reprint), three decimals
        (("--compensation", "natural-water"), 42.9175373 * 1.256),
    ],
)
def test_compensation_is_undone(capsys: pytest.CaptureFixture[str], settings: tuple[str, ...], reported: float) -> None:
    found = answer(capsys, "--conductivity", str(reported), "--temperature", "15", *settings)
    assert found["practical_salinity"] == pytest.approx(35.0, rel=5e-4)


def test_natural_water_curve_beyond_its_table_is_marked(capsys: pytest.CaptureFixture[str]) -> None:
    found = answer(capsys, "--conductivity", "5", "--temperature", "-1", "--compensation", "natural-water")
    assert found["flags"] == ["extrapolated"]


def test_plain_salt_has_no_practical_salinity(capsys: pytest.CaptureFixture[str]) -> None:
    # 0.1 mol/L NaCl (0.10047 mol/kg) at 25 degC: 10.669 mS/cm, Chambers 1956; 0.9325 * 2 * 0.10047 = 187.4
    found = answer(capsys, "--conductivity", "10.669", "--temperature", "25", "--water", "sodium-chloride")
    assert found["practical_salinity"] is None
    assert found["osmolality_in_situ_mOsm_kg"] == pytest.approx(187.4, rel=0.006)
    assert set(found["uncertainty"]) == {"absolute_salinity_g_kg", "osmolality_mOsm_kg"}  # type: ignore[call-overload]


def test_position_matters_in_the_baltic(capsys: pytest.CaptureFixture[str]) -> None:
    here = ("--conductivity", "10", "--temperature", "15")
    plain = answer(capsys, *here)
    baltic = answer(capsys, *here, "--latitude", "58", "--longitude", "20")
    assert baltic["absolute_salinity_g_kg"] > plain["absolute_salinity_g_kg"]  # type: ignore[operator]


@pytest.mark.parametrize(
    ("conductivity", "temperature", "flag"),
    [("-1", "15", "negative"), ("nan", "15", "not_finite"), ("30", "60", "out_of_range")],
)
def test_a_null_answer_is_null_in_every_key(
    capsys: pytest.CaptureFixture[str], conductivity: str, temperature: str, flag: str
) -> None:
    found = answer(capsys, f"--conductivity={conductivity}", "--temperature", temperature)
    assert found["flags"] == [flag]
    assert [found[key] for key in KEYS[:8]] == [None] * 8
    assert found["uncertainty"] == {"practical_salinity": None, "osmolality_mOsm_kg": None}


def test_a_person_reads_units_and_the_caution(capsys: pytest.CaptureFixture[str]) -> None:
    assert run("--conductivity", "42.914", "--temperature", "15") == 0
    text = capsys.readouterr().out
    assert "mOsm/kg" in text
    assert "±" in text
    assert "no laboratory measurement" in text
    assert run("--conductivity", "-1", "--temperature", "15") == 0
    assert "not known" in capsys.readouterr().out


def test_a_table_row_by_row(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    source, target = tmp_path / "in.csv", tmp_path / "out.csv"
    source.write_text(
        "when,ec,t\na,42.914,14.996401\nb,,15\nc,-99,15\nd,oops,15\ne,0.001,15\nf,42.914\n", encoding="utf-8"
    )
    assert (
        run("--input", str(source), "--column", "conductivity=ec", "--column", "temperature=t", "--output", str(target))
        == 0
    )
    rows = table(target)
    assert [row["when"] for row in rows] == list("abcdef")
    assert [row["flags"] for row in rows] == ["", "missing", "filler", "missing", "below_range", "missing"]
    assert float(rows[0]["practical_salinity"]) == pytest.approx(35.0, abs=1e-6)
    assert float(rows[0]["uncertainty_practical_salinity"]) == pytest.approx(0.2154, abs=2e-4)
    assert [row["osmolality_mOsm_kg"] for row in rows[1:4]] == ["", "", ""]
    assert float(rows[4]["osmolality_mOsm_kg"]) == 0.0
    assert list(tmp_path.glob("*.part")) == []
    assert "line 5, column ec: found 'oops'" in capsys.readouterr().err


def test_a_table_gives_what_single_values_give(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    source, target = tmp_path / "in.csv", tmp_path / "out.csv"
    readings = [(f"{5 + 0.01 * n:.2f}", f"{10 + 0.002 * n:.3f}", f"{n % 7}") for n in range(ROWS_A_CHUNK + 5)]
    source.write_text("ec,t,p\n" + "\n".join(",".join(row) for row in readings) + "\n", encoding="utf-8")
    pairs = ("conductivity=ec", "temperature=t", "pressure=p")
    columns = [option for pair in pairs for option in ("--column", pair)]
    assert run("--input", str(source), *columns, "--output", str(target)) == 0
    rows = table(target)
    assert len(rows) == len(readings)
    for index in (0, 1000, len(readings) - 1):
        ec, t, p = readings[index]
        alone = answer(capsys, "--conductivity", ec, "--temperature", t, "--pressure", p)
        for key in KEYS[:8]:
            assert float(rows[index][key]) == pytest.approx(alone[key], rel=1e-8)


@pytest.mark.parametrize("is_terminal", [True, False])
def test_a_progress_bar_on_a_terminal_only(
    tmp_path: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch, is_terminal: bool
) -> None:
    source = tmp_path / "in.csv"
    source.write_text("ec,t\n" + "30,15\n" * 10, encoding="utf-8")
    monkeypatch.setattr("sys.stderr.isatty", lambda: is_terminal, raising=False)
    columns = ("--column", "conductivity=ec", "--column", "temperature=t")
    assert run("--input", str(source), *columns, "--output", str(tmp_path / "out.csv")) == 0
    assert ("B/s" in capsys.readouterr().err) == is_terminal


def test_semicolons_and_decimal_commas(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    source = tmp_path / "in.csv"
    source.write_text("ec;t\n42,914;14,996401\n", encoding="utf-8-sig")
    assert run("--input", str(source), "--column", "conductivity=ec", "--column", "temperature=t") == 0
    header, row = capsys.readouterr().out.splitlines()
    assert float(dict(zip(header.split(";"), row.split(";"), strict=True))["density_kg_m3"].replace(",", ".")) > 1025.0


@pytest.mark.parametrize(
    ("options", "said"),
    [
        ((), "--conductivity and --temperature"),
        (("--conductivity", "1"), "--temperature"),
        (("--conductivity", "1", "--temperature", "1", "--coefficient", "2"), "--compensated"),
        (("--conductivity", "1", "--temperature", "1", "--compensated", "--coefficient", "-2"), "0 to 10 %/K"),
        (
            ("--conductivity", "1", "--temperature", "1", "--compensation", "natural-water", "--coefficient", "2"),
            "linear",
        ),
        (("--conductivity", "1", "--temperature", "1", "--latitude", "2"), "go together"),
        (("--conductivity", "1", "--temperature", "1", "--latitude", "95", "--longitude", "2"), "-90 to 90"),
        (("--conductivity", "1", "--temperature", "1", "--water", "soup"), "sodium-chloride"),
        (("--conductivity", "1", "--temperature", "1", "--output", "x.csv"), "--input"),
        (("--conductivity", "1", "--temperature", "1", "--conductivity-accuracy", "-1"), "0 to 100 %"),
        (("--input", "x.csv"), "--column conductivity=NAME"),
        (("--input", "x.csv", "--column", "salt=ec"), "QUANTITY=NAME"),
        (("--input", "x.csv", "--column", "conductivity=a", "--column", "conductivity=b"), "twice"),
        (("--input", "x.csv", "--json"), "one value"),
        (
            ("--input", "x.csv", "--output", "x.csv", "--column", "conductivity=a", "--column", "temperature=b"),
            "another file",
        ),
    ],
)
def test_wrong_use_is_status_2_on_standard_error(
    capsys: pytest.CaptureFixture[str], options: tuple[str, ...], said: str
) -> None:
    assert run(*options) == 2
    captured = capsys.readouterr()
    assert said in captured.err
    assert captured.out == ""


def test_a_column_that_is_not_there_names_the_nearest(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    source = tmp_path / "in.csv"
    source.write_text("cond_mS,temp\n1,2\n", encoding="utf-8")
    columns = ("--column", "conductivity=condu_mS", "--column", "temperature=temp")
    assert run("--input", str(source), *columns, "--output", str(tmp_path / "out.csv")) == 2
    assert "nearest: cond_mS" in capsys.readouterr().err
    assert not (tmp_path / "out.csv").exists()


@pytest.mark.parametrize("content", [None, b"PK\x03\x04 a spreadsheet", b""])
def test_a_file_that_cannot_be_read_is_status_1(
    tmp_path: Path, capsys: pytest.CaptureFixture[str], content: bytes | None
) -> None:
    source = tmp_path / "in.csv"
    if content is not None:
        source.write_bytes(content)
    columns = ("--column", "conductivity=ec", "--column", "temperature=t")
    assert run("--input", str(source), *columns, "--output", str(tmp_path / "out.csv")) == 1
    assert "in.csv" in capsys.readouterr().err
    assert list(tmp_path.glob("out.csv*")) == []


def test_an_unknown_unit_is_refused_by_the_parser(capsys: pytest.CaptureFixture[str]) -> None:
    with pytest.raises(SystemExit) as caught:
        run("--conductivity", "1", "--temperature", "1", "--unit", "mho")
    assert caught.value.code == 2
    assert "uS/cm" in capsys.readouterr().err


WELL = """\
id: well
name: Borehole
ions: {Na: 1150, K: 15, Mg: 60, Ca: 120, Cl: 1900, SO4: 180, HCO3: 240}
pH: 7.8
"""


def test_the_water_of_a_laboratory_analysis(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    pytest.importorskip("phreeqc", reason="the package phreeqc is missing; get it with: pip install 'euryhale[ions]'")
    (tmp_path / "well.yaml").write_text(WELL, encoding="utf-8")
    found = answer(capsys, "--conductivity", "6", "--temperature", "25", "--water", str(tmp_path / "well.yaml"))
    assert found["practical_salinity"] is None
    # The ions alone: 3.665 g/L, 111 mmol/L of particles; conductivity of such waters about 6 mS/cm at 25 degC.
    assert found["absolute_salinity_g_kg"] == pytest.approx(3.6, rel=0.1)
    assert found["osmolality_mOsm_kg"] == pytest.approx(0.92 * 111.0, rel=0.1)
    assert found["uncertainty"]["osmolality_mOsm_kg"] > 0.01 * found["osmolality_mOsm_kg"]  # type: ignore[index,operator]


@pytest.mark.parametrize(
    ("text", "said"),
    [
        (None, "No such file"),
        ("- 1\n", "the keys of an analysis"),
        (WELL.replace("ions:", "salts:"), "did you mean ions|allowed: the keys"),
        (WELL.replace("K: 15", "Kx: 15"), "Na, K, Ca"),
        (WELL.replace("K: 15", "K: -15"), "from 0 up"),
        (WELL.replace("Cl: 1900", "Cl: 100"), "charge balance"),
        (WELL.replace("id: well", "id: [well"), "well.yaml, line"),
    ],
)
def test_an_analysis_that_cannot_be_used_says_why(
    tmp_path: Path, capsys: pytest.CaptureFixture[str], text: str | None, said: str
) -> None:
    if text is not None:
        (tmp_path / "well.yaml").write_text(text, encoding="utf-8")
    assert run("--conductivity", "6", "--temperature", "25", "--water", str(tmp_path / "well.yaml")) == 1
    assert re.search(said, capsys.readouterr().err)
