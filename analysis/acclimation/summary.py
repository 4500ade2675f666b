"""A plan as the terminal, the page and other programs read it: one object with fixed keys."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Any

from analysis.acclimation.record import to_record
from analysis.acclimation.source import SEAWATER

if TYPE_CHECKING:
    from analysis.acclimation.limits import Limit
    from analysis.acclimation.plan import Plan, PlannedStep
    from analysis.animal.survival import SurvivalEstimate


def plan_summary(plan: Plan) -> dict[str, Any]:
    """Return the plan with the keys of ``euryhale acclimate --json``; what does not apply is null."""
    return {
        "animal": plan.task.animal,
        "method": plan.task.method.value,
        "feasible": plan.is_feasible,
        "reason": plan.reason,
        "begins_at": plan.task.begins_at.isoformat(),
        "total_hours": _or_null(plan.total_hours),
        "steps": [step_summary(step, is_seawater=plan.task.water_kind == SEAWATER) for step in plan.steps],
        "water_used_L": sum(plan.water_used_L.values()),
        "water_used_by_source_L": dict(plan.water_used_L),
        "salt_used_kg": dict(plan.salt_used_kg),
        "drained_L": plan.drained_L,
        "limits": [limit_summary(limit) for limit in plan.limits],
        "gates": [to_record(gate) for gate in plan.gates],
        "needs_yes": list(plan.needs_yes),
        "destination": to_record(plan.standing),
        "highest_journey_stress": _or_null(plan.worst_journey_stress),
        "survival": survival_summary(plan.survival),
        "time_left": to_record(plan.time_left),
        "costs": list(plan.costs),
        "alternatives": [to_record(other) for other in plan.alternatives],
        "allowances": to_record(plan.task.allowances),
        "cautions": list(plan.cautions),
    }


def step_summary(step: PlannedStep, *, is_seawater: bool = True) -> dict[str, Any]:
    """Return one step with the keys of ``euryhale acclimate --json``."""
    return {
        "number": step.number,
        "start": step.start.isoformat(),
        "duration_min": step.duration_min,
        "drain_L": step.drain_L,
        "add": dict(step.add),
        "salt": dict(step.salt),
        "dissolve_L": step.dissolve_L,
        "flow_L_min": _or_null(step.flow_L_min),
        "practical_salinity": step.salinity if is_seawater else None,
        "salinity_g_kg": None if is_seawater else step.salinity,
        "salinity_range": [step.salinity_low, step.salinity_high],
        "temperature_degC": step.temperature_degC,
        "osmolality_mOsm_kg": _or_null(step.osmolality_mOsm_kg),
        "ph": _or_null(step.ph),
        "volume_L": step.volume_L,
        "stress": _or_null(step.stress),
        "journey_stress": _or_null(step.journey_stress),
        "driver": step.driver,
    }


def limit_summary(limit: Limit) -> dict[str, Any]:
    """Return a limit: name, value, source, and how sure it is or who set it."""
    return {
        "name": limit.name,
        "value": limit.value,
        "source": limit.source,
        "certainty": limit.certainty,
        "overridden_by": limit.overridden_by or None,
        "reason": limit.reason or None,
    }


def survival_summary(survival: SurvivalEstimate | None) -> dict[str, Any] | None:
    """Return the estimate, or null where it is not known."""
    if survival is None:
        return None
    return {
        "alive": survival.alive,
        "low": survival.low,
        "high": survival.high,
        "certainty": survival.certainty.value,
        "sources": list(survival.sources),
    }


def _or_null(value: float) -> float | None:
    return value if math.isfinite(value) else None
