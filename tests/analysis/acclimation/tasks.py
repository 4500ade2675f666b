"""Tasks for the tests: an invented hatchery's tanks and waters."""

from __future__ import annotations

import math
import sys
from collections.abc import Sequence
from datetime import datetime
from typing import Any
from zoneinfo import ZoneInfo

from analysis.acclimation.limits import Governs, Limits, Override, default_limits
from analysis.acclimation.plan import Plan, planned
from analysis.acclimation.source import SourceWater
from analysis.acclimation.task import AcclimationTask, Vessel, Water
from analysis.animal import tables

LISBON = ZoneInfo("Europe/Lisbon")
EIGHT = datetime(2026, 12, 1, 8, 0, tzinfo=LISBON)
TAP = SourceWater("tap", 0.0, 28.0)
SEA = SourceWater("sea", 36.5, 28.0)


def task(
    animal: str,
    start: float,
    target: float,
    sources: Sequence[SourceWater] = (TAP,),
    *,
    degC: float = 28.0,
    target_degC: float = math.nan,
    volume_L: float = 1000.0,
    **more: Any,
) -> AcclimationTask:
    """Return a task with everything but the animal and the salinities at a plain default."""
    settings: dict[str, Any] = {"vessel": Vessel(volume_L), "begins_at": EIGHT} | more
    return AcclimationTask(
        animal=animal,
        start=Water(start, degC, settings.pop("ph", math.nan)),
        target=Water(target, target_degC),
        sources=tuple(sources),
        **settings,
    )


def limits(
    of: AcclimationTask, *, governs: Governs | None = None, overrides: Sequence[Override] = (), **more: Any
) -> Limits:
    """Return the default limits of a task."""
    return default_limits(
        tables.find(of.animal),
        from_salinity=of.start.salinity,
        to_salinity=of.target.salinity,
        used_to_salinity=of.home_salinity,
        governs=governs,
        overrides=overrides,
        **more,
    )


def plan(of: AcclimationTask, *, governs: Governs | None = None, overrides: Sequence[Override] = ()) -> Plan:
    """Return the plan of a task with its default limits."""
    return planned(of, tables.find(of.animal), limits(of, governs=governs, overrides=overrides))


def override(name: str, value: float | None) -> Override:
    """Return an override by an invented person."""
    return Override(name, value, by="Marta", reason="trial of a slower batch")


def say(text: str) -> None:
    """Write a measured figure; seen with ``pytest -s`` or beside a failure."""
    sys.stdout.write(text + "\n")
