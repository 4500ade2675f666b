from __future__ import annotations

import subprocess
import sys
from importlib import import_module

import pytest

from analysis.errors import EuryhaleError
from dashboard.terminal import command
from dashboard.terminal.command import ROOMS, main, parser


def room(name: str):
    return import_module(f"dashboard.terminal.{name}")


@pytest.mark.parametrize("name", ROOMS)
def test_every_command_has_its_help_its_parser_and_its_work(name):
    module = room(name)
    assert isinstance(module.HELP, str)
    assert module.HELP
    assert module.HELP[0].islower()
    assert not module.HELP.endswith(".")
    assert callable(module.add_parser)
    assert callable(module.run)
    assert module.__doc__
    assert name in module.__doc__


def test_no_command_is_named_twice():
    assert len(set(ROOMS)) == len(ROOMS)


def test_help_lists_every_command_with_what_it_is_for(capsys):
    with pytest.raises(SystemExit) as ended:
        main(["--help"])
    assert ended.value.code == 0
    said = " ".join(capsys.readouterr().out.split())
    for name in ROOMS:
        assert f" {name} " in said
        assert room(name).HELP in said
    assert "no laboratory measurement" in said
    assert "no diagnosis" in said


@pytest.mark.parametrize("name", ROOMS)
def test_every_command_explains_itself(name, capsys):
    with pytest.raises(SystemExit) as ended:
        main([name, "--help"])
    assert ended.value.code == 0
    assert f"euryhale {name}" in capsys.readouterr().out


@pytest.mark.parametrize("arguments", [[], ["nothing"], ["convert", "--no-such-option"], ["watch", "--clock", "sand"]])
def test_a_wrong_line_is_a_usage_error(arguments, capsys):
    with pytest.raises(SystemExit) as ended:
        main(arguments)
    assert ended.value.code == 2
    assert "usage: euryhale" in capsys.readouterr().err


class Room:
    """A command that ends as it is told to."""

    HELP = "end as told"

    def __init__(self, ending):
        self.ending = ending

    def add_parser(self, subparsers):
        subparsers.add_parser("watch")

    def run(self, _args):
        if isinstance(self.ending, BaseException):
            raise self.ending
        return self.ending


@pytest.mark.parametrize(
    ("ending", "status", "said"),
    [
        (0, 0, ""),
        (1, 1, ""),
        (EuryhaleError("the reason"), 1, "euryhale watch: the reason\n"),
        (KeyboardInterrupt(), 130, ""),
    ],
)
def test_each_ending_has_its_status_and_says_why(monkeypatch, capsys, ending, status, said):
    monkeypatch.setattr(command, "_room", lambda _name: Room(ending))
    assert main(["watch"]) == status
    assert capsys.readouterr().err == said


def test_a_defect_is_not_hidden(monkeypatch):
    monkeypatch.setattr(command, "_room", lambda _name: Room(ZeroDivisionError()))
    with pytest.raises(ZeroDivisionError):
        main(["watch"])


def test_only_the_room_that_is_asked_for_is_opened():
    line = (
        "import sys; from dashboard.terminal.command import main\n"
        "try:\n    main(['secret', '--help'])\nexcept SystemExit:\n    pass\n"
        "print([name for name in sys.modules if name.startswith('dashboard.terminal.')], file=sys.stderr)"
    )
    done = subprocess.run([sys.executable, "-P", "-c", line], capture_output=True, text=True, check=True)
    assert done.stderr.strip() == "['dashboard.terminal.command', 'dashboard.terminal.secret']"


def test_a_reader_that_goes_away_is_no_traceback():
    line = f"{sys.executable} -P -m dashboard.terminal.command species | head -c 1"
    done = subprocess.run(["sh", "-c", line], capture_output=True, text=True, check=True)
    assert "Traceback" not in done.stderr


def test_the_parser_can_be_asked_for_one_room():
    assert parser(["secret"]).parse_args(["secret", "set", "broker"]).name == "broker"
