"""`euryhale board`: it serves in a process of its own and loads nothing of the browser itself."""

from __future__ import annotations

import argparse
import subprocess
import sys
from pathlib import Path

import pytest

from dashboard.browser import serve
from dashboard.terminal import board
from tests.dashboard.browser.scene import site_text


def parsed(*arguments: str) -> argparse.Namespace:
    parser = argparse.ArgumentParser()
    board.add_parser(parser.add_subparsers(dest="command"))
    return parser.parse_args(["board", *arguments])


def test_the_command_line_carries_what_was_asked_for():
    line = board.command(parsed("--site", "a.yaml", "--host", "0.0.0.0", "--port", "8600"))
    assert line[1:] == [
        "-P",
        "-m",
        "dashboard.browser.serve",
        "--site",
        "a.yaml",
        "--host",
        "0.0.0.0",
        "--port",
        "8600",
    ]
    assert "--host" not in board.command(parsed("--site", "a.yaml"))


def test_the_terminal_loads_nothing_of_the_browser():
    program = (
        "import sys, dashboard.terminal.board; "
        "print([m for m in ('streamlit', 'pandas', 'pyarrow', 'dashboard.browser') if m in sys.modules])"
    )
    done = subprocess.run([sys.executable, "-P", "-c", program], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"


def test_by_default_only_this_machine_is_served_and_nothing_is_sent_home(tmp_path: Path):
    site_file = tmp_path / "site.yaml"
    site_file.write_text(site_text(), encoding="utf-8")
    from ingest.site.loading import load

    assert load(site_file).board.host == "127.0.0.1"
    options = serve.options(host="127.0.0.1", port=8501)
    assert options["browser.gatherUsageStats"] is False
    assert options["server.enableAgentApi"] is False
    assert options["server.address"] == "127.0.0.1"


def test_a_broken_site_file_is_told_with_its_line(tmp_path: Path, capsys: pytest.CaptureFixture[str]):
    site_file = tmp_path / "site.yaml"
    site_file.write_text("site: {id: x, name: X, time_zone: Europe/Nowhere}\n", encoding="utf-8")
    assert serve.main(["--site", str(site_file)]) == 1
    error = capsys.readouterr().err
    assert "site.yaml" in error
    assert "time_zone" in error


def test_a_missing_site_file_is_told(tmp_path: Path, capsys: pytest.CaptureFixture[str]):
    assert serve.main(["--site", str(tmp_path / "none.yaml")]) == 1
    assert "none.yaml" in capsys.readouterr().err
