from __future__ import annotations

import io

import pytest

from dashboard.terminal import secret
from dashboard.terminal.command import main
from ingest.secrets import read_secret


class Piped(io.StringIO):
    def isatty(self) -> bool:
        return False


class Terminal(io.StringIO):
    def isatty(self) -> bool:
        return True


def run(monkeypatch, site_file, typed: io.StringIO, name: str = "broker") -> int:
    monkeypatch.setattr("sys.stdin", typed)
    return main(["secret", "set", name, "--site", str(site_file)])


def test_from_a_pipe_it_takes_one_line_and_never_shows_it(monkeypatch, tmp_path, capsys):
    assert run(monkeypatch, tmp_path / "site.yaml", Piped("hush hush\nsecond line\n")) == 0
    assert read_secret("broker", site_file=tmp_path / "site.yaml") == "hush hush"
    said = capsys.readouterr()
    assert "hush" not in said.out + said.err
    assert str(tmp_path / "secrets" / "broker") in said.out


def test_at_a_terminal_it_asks_without_showing(monkeypatch, tmp_path):
    asked = []
    monkeypatch.setattr(secret.getpass, "getpass", lambda prompt: asked.append(prompt) or "typed")
    assert run(monkeypatch, tmp_path / "site.yaml", Terminal("")) == 0
    assert asked == ["broker: "]
    assert read_secret("broker", site_file=tmp_path / "site.yaml") == "typed"


def test_nothing_entered_is_nothing_kept(monkeypatch, tmp_path, capsys):
    assert run(monkeypatch, tmp_path / "site.yaml", Piped("\n")) == 1
    assert "nothing is kept" in capsys.readouterr().err
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize("name", ["../x", "Broker"])
def test_a_name_that_is_none_is_refused(monkeypatch, tmp_path, capsys, name):
    assert run(monkeypatch, tmp_path / "site.yaml", Piped("x\n"), name) == 1
    assert "lower-case letters" in capsys.readouterr().err
