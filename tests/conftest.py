"""Fixtures that every test may ask for."""

from __future__ import annotations

pytest_plugins = ["tests.harness.broker"]
