"""Delimited tables in whatever shape loggers write them."""

from __future__ import annotations

import csv
from datetime import UTC, datetime
from pathlib import Path
from typing import Any
from zoneinfo import ZoneInfo

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from analysis.flags import Flag
from ingest.clock import to_microseconds
from ingest.tables import Chunk, Hints, Table, TableError, read, whole

COLUMNS = {"conductivity": "ec", "temperature": "temp"}
NOON_US = to_microseconds(datetime(2026, 3, 2, 12, 0, tzinfo=UTC))
LISBON = ZoneInfo("Europe/Lisbon")


class Folder:
    """Writes a table and reads it."""

    def __init__(self, path: Path) -> None:
        self.path = path / "logger.csv"

    def table(self, text: str | bytes, **options: Any) -> Table:
        self.path.write_bytes(text if isinstance(text, bytes) else text.encode())
        return Table(self.path, **({"columns": COLUMNS, "time": "time"} | options))

    def chunk(self, text: str | bytes, **options: Any) -> Chunk:
        return whole(self.table(text, **options))

    def error(self, text: str | bytes, **options: Any) -> TableError:
        with pytest.raises(TableError) as caught:
            self.chunk(text, **options)
        return caught.value


@pytest.fixture
def folder(tmp_path: Path) -> Folder:
    return Folder(tmp_path)


def seconds(chunk: Chunk) -> list[float]:
    assert chunk.time_us is not None
    return [(time_us - NOON_US) / 1e6 for time_us in chunk.time_us.tolist()]


PLAIN = """\
time,temp,ec,flag
2026-03-02T12:00:00Z,25.1,48.2,<0>
2026-03-02T12:00:10Z,25.2,48.3,<1>
"""


def test_a_plain_table(folder: Folder) -> None:
    chunk = folder.chunk(PLAIN, texts={"said": "flag"})
    assert seconds(chunk) == [0, 10]
    assert chunk.values["conductivity"].tolist() == [48.2, 48.3]
    assert chunk.values["temperature"].tolist() == [25.1, 25.2]
    assert chunk.flags["conductivity"].tolist() == [0, 0]
    assert chunk.texts == {"said": ["<0>", "<1>"]}
    assert chunk.lines.tolist() == [2, 3]
    assert chunk.remarks == []
    assert len(chunk) == 2


def test_a_table_without_time_and_with_all_its_cells(folder: Folder) -> None:
    (chunk,) = folder.table(PLAIN, time=None).chunks(has_rows=True)
    assert chunk.time_us is None
    assert chunk.rows[1] == ["2026-03-02T12:00:10Z", "25.2", "48.3", "<1>"]


@pytest.mark.parametrize(
    "text",
    [
        PLAIN.replace(",", ";"),
        PLAIN.replace(",", "\t"),
        PLAIN.replace(",", "|"),
        PLAIN.replace(",", "   "),
        PLAIN.replace("\n", "\r\n"),
        "\ufeff" + PLAIN,
        PLAIN.encode("utf-16"),
        "Logger 17, Larkfen\nserial: 4711, firmware 2\n\n" + PLAIN,
        PLAIN.replace("flag\n", "flag\n,degC,mS/cm,\n"),
        PLAIN.replace("time,temp,ec", "Time,Temp (°C),EC [mS/cm]"),
        PLAIN.replace("time,temp,ec", '" time ","temp","ec"'),
        PLAIN.replace("25.1,48.2", "+25.10,4.82e1"),
        PLAIN.replace("\n2026", "\n\n,,,\n2026"),
        PLAIN.replace("Z", "+00:00"),
        PLAIN.replace("T12", " 12"),
        PLAIN.replace("25.1,48.2", '"25,1","48,2"').replace("25.2,48.3", '"25,2","48,3"'),
        PLAIN.replace(",", ";").replace(".", ","),
    ],
)
def test_the_same_readings_in_another_shape(folder: Folder, text: str | bytes) -> None:
    chunk = folder.chunk(text)
    assert seconds(chunk) == [0, 10]
    assert chunk.values["conductivity"].tolist() == [48.2, 48.3]
    assert chunk.values["temperature"].tolist() == [25.1, 25.2]
    assert chunk.remarks == []


def test_a_file_of_windows_is_read_as_such(folder: Folder) -> None:
    table = folder.table(PLAIN.replace("temp", "temp (°C)").encode("cp1252"))
    assert table.layout.encoding == "cp1252"
    assert table.units == {"conductivity": "", "temperature": "degC"}


def test_a_table_without_header_is_read_by_numbers(folder: Folder) -> None:
    columns = {"conductivity": "#3", "temperature": "#2"}
    chunk = folder.chunk("Logger 17\n" + PLAIN.split("\n", 1)[1], columns=columns, time="#1")
    assert seconds(chunk) == [0, 10]
    assert chunk.lines.tolist() == [2, 3]
    assert folder.error(PLAIN, columns={"conductivity": "#9"}, time=None).found == "4 columns"


@pytest.mark.parametrize(
    ("cell", "flag", "is_remarked"),
    [
        ("", Flag.MISSING, False),
        ("NA", Flag.MISSING, False),
        ("nan", Flag.MISSING, False),
        ("---", Flag.MISSING, False),
        ("-99", Flag.FILLER, False),
        ("-99.99", Flag.FILLER, False),
        ("-999.0", Flag.FILLER, False),
        ("inf", Flag.NOT_FINITE, False),
        ("#DIV/0!", Flag.NOT_FINITE, False),
        ("1e999", Flag.NOT_FINITE, False),
        ("error 7", Flag.MISSING, True),
        ("1_000", Flag.MISSING, True),
        ("48;2", Flag.MISSING, True),
        ("0x1f", Flag.MISSING, True),
    ],
)
def test_a_cell_without_a_number_is_nan_with_its_flag(folder: Folder, cell: str, flag: Flag, is_remarked: bool) -> None:
    chunk = folder.chunk(PLAIN.replace("48.3", cell))
    assert np.isnan(chunk.values["conductivity"][1])
    assert chunk.flags["conductivity"].tolist() == [0, int(flag)]
    assert chunk.values["temperature"].tolist() == [25.1, 25.2]
    assert [(remark.line, remark.column) for remark in chunk.remarks] == ([(3, "ec")] if is_remarked else [])


def test_fillers_may_be_named(folder: Folder) -> None:
    chunk = folder.chunk(PLAIN.replace("48.3", "-99"), fillers={"conductivity": (48.2,)})
    assert chunk.flags["conductivity"].tolist() == [int(Flag.FILLER), 0]
    assert chunk.values["conductivity"][1] == -99


def test_a_point_in_a_table_of_commas_is_remarked_and_no_guess(folder: Folder) -> None:
    text = PLAIN.replace(",", ";").replace("48.3", "48,3").replace("25.1", "25,1").replace("25.2", "25,2")
    chunk = folder.chunk(text.replace("48.2", "1.248,2"))
    assert np.isnan(chunk.values["conductivity"][0])
    assert chunk.remarks[0].found == "'1.248,2'"


def test_a_short_row_and_a_closing_word_leave_the_rest(folder: Folder) -> None:
    chunk = folder.chunk(PLAIN + "2026-03-02T12:00:20Z,25.3\nend of data\n")
    assert seconds(chunk) == [0, 10, 20]
    assert chunk.flags["conductivity"].tolist() == [0, 0, int(Flag.MISSING)]
    assert [(remark.line, remark.column, remark.found) for remark in chunk.remarks] == [(5, "time", "'end of data'")]


def test_leading_rows_without_values_are_readings(folder: Folder) -> None:
    chunk = folder.chunk(PLAIN.replace("25.1,48.2", ","))
    assert seconds(chunk) == [0, 10]
    assert chunk.flags["temperature"].tolist() == [int(Flag.MISSING), 0]


def test_units_in_the_header_must_be_the_declared_ones(folder: Folder) -> None:
    text = PLAIN.replace("ec", "ec (µS/cm)").replace("temp", "temp_degC")
    columns = {"conductivity": "ec", "temperature": "temp_degC"}
    assert folder.table(text, columns=columns).units == {"conductivity": "uS/cm", "temperature": "degC"}
    assert folder.table(text, columns=columns, units={"conductivity": "uS/cm"}).units["conductivity"] == "uS/cm"
    error = folder.error(text, columns=columns, units={"conductivity": "mS/cm"})
    assert (error.line, error.column, error.found) == (1, "ec (µS/cm)", "the unit 'uS/cm'")


@pytest.mark.parametrize(
    ("header", "found", "allowed"),
    [
        ("time,temp,cond,flag", "no such column", "one of: time, temp, cond, flag"),
        ("time,temp,ecc,flag", "no such column", "nearest: ecc"),
        ("time,temp,EC,Ec", "the name 2 times", "#3, #4"),
    ],
)
def test_a_column_that_is_not_there_once_is_told(folder: Folder, header: str, found: str, allowed: str) -> None:
    error = folder.error(PLAIN.replace("time,temp,ec,flag", header))
    assert (error.line, error.column, error.found) == (1, "ec", found)
    assert allowed in error.allowed


@pytest.mark.parametrize(
    ("content", "found"),
    [
        (b"", "an empty file"),
        (b"PK\x03\x04 a workbook", "a spreadsheet or an archive"),
        (b"\x00\x01\x02\x03", "bytes that are no text"),
        (b"a,b\n1,2\n", "'a, b'"),
        (b'time,temp,ec\n2026-03-02T12:00:00Z,1,"' + b"x" * 200_000, "field larger than field limit (131072)"),
    ],
)
def test_what_is_no_such_table_is_refused(folder: Folder, content: bytes, found: str) -> None:
    assert folder.error(content).found == found


def test_what_the_system_refuses_is_told(folder: Folder, tmp_path: Path) -> None:
    with pytest.raises(TableError, match="a file that can be read"):
        Table(tmp_path / "absent.csv", columns=COLUMNS)
    assert folder.error(PLAIN, hints=Hints(encoding="klingon")).allowed == "a known encoding"
    error = folder.error(PLAIN.replace("<1>", "é").encode("latin-1"), hints=Hints(encoding="utf-8"))
    assert error.allowed.startswith("text in utf-8")


def test_hints_overrule_what_is_found(folder: Folder) -> None:
    text = "ec,temp\nunits,too\n" + PLAIN.replace("flag", "ec,temp")
    chunk = folder.chunk(PLAIN.replace(",", ";"), hints=Hints(separator=";", header_line=1, has_decimal_comma=False))
    assert chunk.values["conductivity"].tolist() == [48.2, 48.3]
    assert "2 times" in folder.error(text, hints=Hints(header_line=3)).found


def test_lines_are_those_of_the_file_and_progress_ends_at_all_of_it(folder: Folder) -> None:
    rows = "".join(f"2026-03-02T12:{i // 60:02d}:{i % 60:02d}Z,{i},{i},x\n" for i in range(1000))
    seen: list[tuple[int, int]] = []
    table = folder.table("preamble\n" + PLAIN.split("\n", 1)[0] + "\n" + rows)
    chunks = list(table.chunks(progress=lambda done, total: seen.append((done, total)), rows=300))
    assert [len(chunk) for chunk in chunks] == [300, 300, 300, 100]
    assert chunks[1].lines[0] == 303
    assert chunks[3].values["temperature"][-1] == 999
    assert seen == sorted(seen)
    assert seen[-1] == (folder.path.stat().st_size,) * 2


def test_reading_in_one_call(folder: Folder) -> None:
    folder.path.write_text(PLAIN)
    (chunk,) = read(folder.path, columns=COLUMNS, time="time")
    assert seconds(chunk) == [0, 10]


def test_a_header_alone_is_a_table_without_rows(folder: Folder) -> None:
    chunk = folder.chunk("time,temp,ec\n", time_format="iso")
    assert (len(chunk), chunk.values["conductivity"].size) == (0, 0)


@pytest.mark.parametrize(
    ("texts", "options", "found"),
    [
        (("02.03.2026 12:00", "02.03.2026 12:00:10"), {"zone": ZoneInfo("UTC"), "time_format": "%d.%m.%Y %H:%M:%S"}, [10]),
        (("02.03.2026 12:00:00", "02.03.2026 12:00:10"), {"zone": ZoneInfo("UTC")}, [0, 10]),
        (("2.3.2026 12:00:00", "2.3.2026 12:00:10"), {"zone": ZoneInfo("UTC")}, [0, 10]),
        (("02-Mar-2026 12:00:00", "2-MAR-2026 12:00:10"), {"zone": ZoneInfo("UTC")}, [0, 10]),
        (("3/2/2026 12:00:00 PM", "3/2/2026 12:00:10 pm"),
         {"zone": ZoneInfo("UTC"), "time_format": "%m/%d/%Y %I:%M:%S %p"}, [0, 10]),
        (("02/03/26 12:00", "02/03/26 12:01"), {"zone": ZoneInfo("UTC"), "time_format": "%d/%m/%y %H:%M"}, [0, 60]),
        (("2026/03/02 12:00:00.5", "2026/03/02 12:00:10.25"), {"zone": ZoneInfo("UTC")}, [0.5, 10.25]),
        (("1772452800", "1772452810"), {}, [0, 10]),
        (("1772452800000", "1772452810500"), {}, [0, 10.5]),
        (("1772452800.5", "1772452810"), {}, [0.5, 10]),
        (("2026-03-02T13:00:00+01:00", "2026-03-02T12:00:10Z"), {}, [0, 10]),
        (("2026-03-02 13:00:00", "2026-03-02 13:00:10"), {"zone": ZoneInfo("Europe/Paris")}, [0, 10]),
        (("13/02/2026 12:00", "02/03/2026 12:00"), {"zone": ZoneInfo("UTC")}, [-17 * 86_400, 0]),
    ],
)  # fmt: skip
def test_times_as_loggers_write_them(
    folder: Folder, texts: tuple[str, str], options: dict[str, Any], found: list[float]
) -> None:
    first, second = texts
    text = PLAIN.replace("2026-03-02T12:00:00Z", first).replace("2026-03-02T12:00:10Z", second)
    assert seconds(folder.chunk(text, **options)) == found


def test_date_and_time_in_two_columns(folder: Folder) -> None:
    text = "day;clock;ec;temp\n02.03.2026;12:00;48,2;25,1\n02.03.2026;12:01;48,3;25,2\n"
    table = folder.table(text, time=("day", "clock"), zone=ZoneInfo("UTC"))
    assert table.time_format == "%d.%m.%Y %H:%M"
    assert seconds(whole(table)) == [0, 60]


@pytest.mark.parametrize(
    ("first", "second", "options", "allowed"),
    [
        ("02/03/2026 12:00", "03/03/2026 12:00", {"zone": LISBON}, "day and month that can be told apart"),
        ("02.03.26 12:00", "03.03.26 12:00", {"zone": LISBON}, "years of four digits"),
        ("noon", "evening", {"zone": LISBON}, "times in a known format"),
        ("46083.5", "46083.6", {"zone": LISBON}, "times in a known format"),
        ("2026-03-02 12:00", "2026-03-02 12:01", {}, "give the time zone"),
        ("2026-03-02 12:00", "2026-03-02 12:01", {"zone": LISBON, "time_format": "%d.%m.%Y"}, "in the format %d.%m.%Y"),
        ("2026-03-02 12:00", "2026-03-02 12:01", {"zone": LISBON, "time_format": "%q"}, "fields of a time"),
        ("2026-03-02 12:00", "2026-03-02 12:01", {"zone": LISBON, "time_format": "%H:%M"}, "day, month and year"),
    ],
)
def test_times_that_cannot_be_understood_are_refused_with_what_to_change(
    folder: Folder, first: str, second: str, options: dict[str, Any], allowed: str
) -> None:
    text = PLAIN.replace("2026-03-02T12:00:00Z", first).replace("2026-03-02T12:00:10Z", second)
    error = folder.error(text, **options)
    assert allowed in error.allowed
    assert error.column == "time"


@pytest.mark.parametrize(
    "odd",
    [
        "2026-03-02T12:00:2Z0",
        "2026-0302T12:00:20-Z",
        "2026-03-02T12U00:20Z",
        "NaT                 ",
        "2026-03-02T12:00-01",
    ],
)
def test_times_of_one_length_but_another_shape_are_looked_at_one_by_one(folder: Folder, odd: str) -> None:
    chunk = folder.chunk(PLAIN + f"{odd},25,48,<0>\n")
    assert seconds(chunk)[:2] == [0, 10]
    assert len(chunk) + len(chunk.remarks) == 3


def test_a_local_time_among_utc_times_leaves_its_row_out(folder: Folder) -> None:
    chunk = folder.chunk(PLAIN + "2026-03-02T12:00:20,25,48,<0>\n2026-13-02T12:00:30Z,25,48,<0>\n")
    assert seconds(chunk) == [0, 10]
    assert [remark.line for remark in chunk.remarks] == [4, 5]


rows = st.lists(st.tuples(st.floats(-1e6, 1e6) | st.just(float("nan")), st.floats(-1e6, 1e6)), min_size=1, max_size=30)


@settings(max_examples=60, deadline=None, derandomize=True)
@given(rows=rows, separator=st.sampled_from([",", ";", "\t"]), has_comma=st.booleans(), preamble=st.integers(0, 3))
def test_what_is_written_is_read(
    tmp_path_factory: pytest.TempPathFactory,
    rows: list[tuple[float, float]],
    separator: str,
    has_comma: bool,
    preamble: int,
) -> None:
    path = tmp_path_factory.mktemp("tables") / "t.csv"
    with path.open("w", newline="") as file:
        file.write("about this file\n" * preamble)
        writer = csv.writer(file, delimiter=separator)
        writer.writerow(["temp", "ec"])
        for row in rows:
            cells = ["" if value != value else f"{value:.17g}" for value in row]
            writer.writerow([cell.replace(".", ",") if has_comma else cell for cell in cells])
    hints = Hints(has_decimal_comma=has_comma)
    chunk = whole(Table(path, columns=COLUMNS, hints=hints, fillers=dict.fromkeys(COLUMNS, ())))
    assert chunk.remarks == []
    np.testing.assert_array_equal(chunk.values["temperature"], [row[0] for row in rows])
    np.testing.assert_array_equal(chunk.values["conductivity"], [row[1] for row in rows])


@settings(max_examples=150, deadline=None, derandomize=True)
@given(content=st.binary(max_size=200) | st.text(alphabet="time,;ec\t \"'\n0123-.:TZ", max_size=120).map(str.encode))
def test_no_file_brings_out_anything_but_the_declared_error(
    tmp_path_factory: pytest.TempPathFactory, content: bytes
) -> None:
    path = tmp_path_factory.mktemp("hostile") / "t.csv"
    for start in (b"", b"time,ec,temp\n"):
        path.write_bytes(start + content)
        try:
            chunk = whole(Table(path, columns=COLUMNS, time="time", zone=LISBON))
        except TableError as error:
            reason = str(error)
        else:
            reason = f"{len(chunk)} rows"
        assert reason
