"""What this distribution promises to the machine it is installed on."""

from __future__ import annotations

import subprocess
import sys
from importlib import import_module
from importlib.metadata import distribution, packages_distributions
from pathlib import Path

import pytest

PACKAGES = ("analysis", "dashboard", "ingest")


@pytest.mark.parametrize("name", PACKAGES)
def test_the_package_names_belong_to_this_distribution(name):
    """The three names are plain words: another distribution that brings one of them would be taken in its place."""
    owners = packages_distributions().get(name, ["euryhale"])
    assert set(owners) == {"euryhale"}
    root = Path(str(distribution("euryhale").locate_file("."))).resolve()
    home = Path(str(import_module(name).__file__)).resolve().parents[1]
    assert home in {root, Path(__file__).resolve().parents[1]}
    assert len({Path(str(import_module(package).__file__)).resolve().parents[1] for package in PACKAGES}) == 1


def test_the_command_is_installed_with_it():
    entries = distribution("euryhale").entry_points.select(group="console_scripts")
    assert {entry.name: entry.value for entry in entries} == {"euryhale": "dashboard.terminal.command:main"}
    assert callable(next(iter(entries)).load())


def test_it_is_kept_from_public_registries():
    assert "Private :: Do Not Upload" in distribution("euryhale").metadata.get_all("Classifier")


def test_the_installed_command_lists_every_command():
    script = Path(sys.executable).with_name("euryhale")
    command = [str(script)] if script.exists() else [sys.executable, "-P", "-m", "dashboard.terminal.command"]
    done = subprocess.run([*command, "--help"], capture_output=True, text=True, check=True)
    rooms = import_module("dashboard.terminal.command").ROOMS
    assert set(rooms) <= {line.split()[0] for line in done.stdout.splitlines() if line.startswith("    ")}


def test_no_module_beside_a_streamlit_script_takes_a_name_of_the_standard_library():
    """Streamlit puts a script's folder first on the path: a `statistics.py` there would be taken for the library's."""
    browser = Path(str(import_module("dashboard.browser").__file__)).parent
    assert [path.name for path in browser.rglob("*.py") if path.stem in sys.stdlib_module_names] == []
