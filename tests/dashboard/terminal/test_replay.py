from __future__ import annotations

import json
import math
from datetime import UTC, datetime
from pathlib import Path

import pytest

from dashboard.terminal.command import main, parser
from dashboard.terminal.replay import Pace
from ingest.broker import Broker
from ingest.clock import SystemClock
from ingest.simulator.record import Survey
from tests.harness.listener import Listener
from tests.harness.process import wait_until

HOUR_US = 3_600_000_000
SITE = """
site: {{id: creek, name: Creek, time_zone: America/New_York}}
broker: {{host: 127.0.0.1, port: {port}, protocol: "{protocol}"}}
tanks: [{{id: c1, name: C1, volume_L: 1000}}]
sensors:
  - id: c1-ct
    tank: c1
    topic: creek/c1
    fields: {{conductivity: sc, temperature: temp, time: t}}
    reports: compensated
    compensation: {{method: linear, coefficient_percent_per_K: 1.91}}
  - {{id: c1-plain, tank: c1, topic: creek/plain, payload: number, fields: {{conductivity: cond, temperature: temp}}}}
"""
RECORD = """time_utc,temp_C,spcond_mS_cm
2004-01-01T05:00:00Z,17.6,29.77
2004-01-01T05:30:00Z,,
2004-01-01T06:00:00Z,17.5,
2004-01-01T06:30:00Z,17.4,29.51
"""


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    (tmp_path / "record.csv").write_text(RECORD, encoding="utf-8")
    return tmp_path


def site_file(folder: Path, *, port: int = 1, protocol: str = "3.1.1") -> str:
    path = folder / "site.yaml"
    path.write_text(SITE.format(port=port, protocol=protocol), encoding="utf-8")
    return str(path)


def replay(folder: Path, broker: Broker, *options: str, sensor: str = "c1-ct") -> int:
    site = site_file(folder, port=broker.port, protocol=broker.protocol)
    return main(["replay", str(folder / "record.csv"), "--sensor", sensor, "--site", site, *options])


@pytest.mark.parametrize("protocol", ["3.1.1", "5"])
def test_it_publishes_what_the_sensor_would_and_says_so(folder, capsys, protocol):
    with Broker(protocol=protocol) as broker, Listener(broker, "creek/#", protocol=protocol) as heard:
        before_us = SystemClock().now_us()
        assert replay(folder, broker) == 0
        after_us = SystemClock().now_us()
        wait_until(lambda: len(heard.payloads) == 3, what="three rows")
    said = capsys.readouterr()
    assert said.out.startswith("3 rows sent and acknowledged; 1 blank rows skipped; 0 refused by the broker")
    assert "conductivity from column spcond_mS_cm [mS/cm]" in said.err
    assert set(heard.topics) == {"creek/c1"}
    first, middle, last = (json.loads(payload) for payload in heard.payloads)
    assert (first["sc"], first["temp"]) == (29.77, 17.6)
    assert middle["sc"] is None
    last_us = datetime.fromisoformat(last["t"]).timestamp() * 1e6
    assert before_us - 1000 <= last_us <= after_us
    assert datetime.fromisoformat(last["t"]).timestamp() - datetime.fromisoformat(first["t"]).timestamp() == 5400.0


def test_the_demos_record_goes_to_the_demos_sensor(folder, capsys):
    demo_data = Path(__file__).parents[3] / "demo_data"
    with Broker() as broker, Listener(broker, "larkfen/#") as heard:
        site = (demo_data / "site.yaml").read_text(encoding="utf-8").replace("port: 1883", f"port: {broker.port}")
        (folder / "site.yaml").write_text(site, encoding="utf-8")
        options = ["--sensor", "y2-ct", "--site", str(folder / "site.yaml")]
        assert main(["replay", str(demo_data / "record_y2.csv"), *options]) == 0
        wait_until(lambda: len(heard.payloads) == 274, what="every row with a value")
    assert capsys.readouterr().out.startswith("274 rows sent and acknowledged; 14 blank rows skipped")


def test_kept_times_are_those_of_the_record(folder):
    with Broker() as broker, Listener(broker, "creek/#") as heard:
        assert replay(folder, broker, "--keep-times", "--column", "conductivity=spcond_mS_cm") == 0
        wait_until(lambda: len(heard.payloads) == 3, what="three rows")
    assert heard.payloads[0] == b'{"sc":29.770,"temp":17.60,"t":"2004-01-01T05:00:00.000Z"}'


def test_rows_beyond_the_horizon_are_foretold(folder, capsys):
    with Broker() as broker:
        assert replay(folder, broker, "--keep-times") == 0
    assert "site.horizon.past_h (8760 h) will be refused" in capsys.readouterr().err


def test_a_sensor_without_a_time_of_its_own_is_replayed_at_the_pace_of_life_only(folder, capsys):
    site = site_file(folder)
    assert main(["replay", str(folder / "record.csv"), "--sensor", "c1-plain", "--site", site]) == 1
    assert "--speed: found 'max'; allowed: 1" in capsys.readouterr().err


def test_an_unknown_sensor_gets_the_nearest(folder, capsys):
    site = site_file(folder)
    assert main(["replay", str(folder / "record.csv"), "--sensor", "c1-cd", "--site", site]) == 1
    assert "nearest: c1-ct" in capsys.readouterr().err


@pytest.mark.parametrize(
    "options", [["--speed", "0.5"], ["--speed", "fast"], ["--column", "time"], ["--zone", "Mars/X"]]
)
def test_options_that_cannot_be_are_usage_errors(folder, options):
    with pytest.raises(SystemExit) as stopped:
        parser(["replay"]).parse_args(["replay", "f.csv", "--sensor", "x", *options])
    assert stopped.value.code == 2


def test_a_file_that_is_not_there_is_said(folder, capsys):
    (folder / "record.csv").unlink()
    site = site_file(folder)
    assert main(["replay", str(folder / "record.csv"), "--sensor", "c1-ct", "--site", site]) == 1
    assert "record.csv" in capsys.readouterr().err


def test_at_the_pace_of_life_each_row_states_the_moment_it_is_sent():
    pace = Pace.starting(1000 * HOUR_US, Survey(3, 0, 2 * HOUR_US), speed=1.0, keeps_times=False)
    for recorded_us in (0, HOUR_US, 2 * HOUR_US):
        assert pace.due_us(recorded_us) == recorded_us + pace.shift_us == recorded_us + 1000 * HOUR_US


def test_faster_than_life_no_row_states_a_time_to_come_and_the_last_is_now():
    pace = Pace.starting(1000 * HOUR_US, Survey(3, 0, 60 * HOUR_US), speed=60.0, keeps_times=False)
    assert all(hour * HOUR_US + pace.shift_us <= pace.due_us(hour * HOUR_US) for hour in range(61))
    assert pace.due_us(60 * HOUR_US) == 60 * HOUR_US + pace.shift_us == 1001 * HOUR_US
    at_once = Pace.starting(1000 * HOUR_US, Survey(3, 0, 60 * HOUR_US), speed=math.inf, keeps_times=False)
    assert at_once.due_us(60 * HOUR_US) == 60 * HOUR_US + at_once.shift_us == 1000 * HOUR_US


@pytest.mark.slow
@pytest.mark.shared_data
def test_a_real_year_of_a_tidal_creek(tmp_path, capsys, shared_data):
    """17,568 rows, of which 1,266 hold neither temperature nor conductance (counted here by hand in the file)."""
    file = shared_data / "estuary_creek_2004.csv"
    lines = file.read_text(encoding="utf-8").splitlines()[1:]
    blank = sum(1 for line in lines if line.split(",")[1:3] == ["", ""])
    with Broker(folder=tmp_path / "broker") as broker, Listener(broker, "creek/#") as heard:
        site = site_file(tmp_path, port=broker.port)
        assert main(["replay", str(file), "--sensor", "c1-ct", "--site", site, "--keep-times"]) == 0
        wait_until(lambda: len(heard.payloads) == len(lines) - blank, what="every row with a value")
    assert capsys.readouterr().out.startswith(
        f"{len(lines) - blank} rows sent and acknowledged; {blank} blank rows skipped"
    )
    first = json.loads(heard.payloads[0])
    assert datetime.fromisoformat(first["t"]) == datetime(2004, 1, 1, 5, tzinfo=UTC)
    assert (first["sc"], first["temp"]) == (29.77, 17.6)
