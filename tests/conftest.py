"""Fixtures that every test may ask for, and the last lines of a run: what was skipped, and how to get what was missing."""

from __future__ import annotations

import os
from pathlib import Path

import pytest
from hypothesis import HealthCheck, settings

pytest_plugins = ["tests.harness.broker", "tests.harness.influx"]

# The same examples on every machine: a failure is the code's, never the dice's.
settings.register_profile(
    "euryhale",
    max_examples=60,
    derandomize=True,
    deadline=None,
    suppress_health_check=[HealthCheck.too_slow],
    print_blob=True,
)
settings.load_profile("euryhale")

NO_SKIPS = "EURYHALE_NO_SKIPS"
"""Set in CI: there every test has to run."""
SHARED_DATA = "EURYHALE_SHARED_DATA"
"""Where the measured records lie, if not in `../shared/data` beside the project."""


def shared_data_folder() -> Path:
    """Return where the measured records are looked for."""
    beside = Path(__file__).resolve().parents[2] / "shared" / "data"
    return Path(os.environ.get(SHARED_DATA, beside))


@pytest.fixture(scope="session")
def shared_data() -> Path:
    """The folder of measured records; the test is skipped where it is absent."""
    folder = shared_data_folder()
    if not folder.is_dir():
        pytest.skip("the measured records are not beside the project; get them with: a copy of shared/data beside it")
    return folder


_skipped: dict[str, int] = {}


@pytest.hookimpl(hookwrapper=True)
def pytest_runtest_makereport(item: pytest.Item, call: pytest.CallInfo[None]):  # type: ignore[no-untyped-def]
    """Count the reasons of skipped tests."""
    outcome = yield
    report = outcome.get_result()
    if report.skipped and isinstance(report.longrepr, tuple):
        reason = str(report.longrepr[2]).removeprefix("Skipped: ")
        _skipped[reason] = _skipped.get(reason, 0) + 1


def pytest_terminal_summary(terminalreporter) -> None:  # type: ignore[no-untyped-def]
    """Name each missing thing and how to get it, as the last lines of the run."""
    for reason, count in sorted(_skipped.items()):
        terminalreporter.write_line(f"skipped {count}: {reason}")


def pytest_sessionfinish(session: pytest.Session, exitstatus: int) -> None:
    """Where every test has to run, a skipped one is a failure."""
    if os.environ.get(NO_SKIPS) and _skipped and exitstatus == 0:
        session.exitstatus = pytest.ExitCode.TESTS_FAILED
