"""The kinds of condition that can raise an alarm, by stable codes."""

from __future__ import annotations

from enum import StrEnum


class ConditionKind(StrEnum):
    """What is wrong. The codes are stored and translated: never rename, only add at the end."""

    SALINITY_LOW = "salinity_low"
    SALINITY_HIGH = "salinity_high"
    TEMPERATURE_LOW = "temperature_low"
    TEMPERATURE_HIGH = "temperature_high"
    CHANGING_TOO_FAST = "changing_too_fast"
    HEADING_OUT_OF_RANGE = "heading_out_of_range"
    STRESS = "stress"
    SENSORS_DISAGREE = "sensors_disagree"
    ION_DEFICIENCY = "ion_deficiency"
    OFF_PLAN = "off_plan"
    PROBE_DRY_OR_TANK_EMPTY = "probe_dry_or_tank_empty"
    UNWATCHED = "unwatched"
    SENSOR_CLOCK_WRONG = "sensor_clock_wrong"
    SPECIES_BACKSTOP = "species_backstop"
    WORK_NOT_BACK_IN_BAND = "work_not_back_in_band"
    CHANNEL_LOW = "channel_low"
    CHANNEL_HIGH = "channel_high"
    BROKER_UNREACHABLE = "broker_unreachable"
    STORE_SLOW = "store_slow"
    STORE_FULL = "store_full"
    FORWARDING_BEHIND = "forwarding_behind"
    DELIVERY_FAILING = "delivery_failing"
    CLOCK_WRONG = "clock_wrong"


class NoticeKind(StrEnum):
    """What is worth a line on the board and calls nobody: no timely response is needed."""

    LEAVING_OPTIMAL_BAND = "leaving_optimal_band"


class TaskKind(StrEnum):
    """Work that is due; never an alarm."""

    CALIBRATION_DUE = "calibration_due"
    NO_EYES_ON_TANK = "no_eyes_on_tank"


MONITOR_KINDS = frozenset(
    {
        ConditionKind.BROKER_UNREACHABLE,
        ConditionKind.STORE_SLOW,
        ConditionKind.STORE_FULL,
        ConditionKind.FORWARDING_BEHIND,
        ConditionKind.DELIVERY_FAILING,
        ConditionKind.CLOCK_WRONG,
    }
)
"""Conditions of the monitor itself; their subject is the site, not a tank."""

PROCESS_KINDS = frozenset(
    {
        ConditionKind.SALINITY_LOW,
        ConditionKind.SALINITY_HIGH,
        ConditionKind.TEMPERATURE_LOW,
        ConditionKind.TEMPERATURE_HIGH,
        ConditionKind.CHANGING_TOO_FAST,
        ConditionKind.HEADING_OUT_OF_RANGE,
        ConditionKind.STRESS,
        ConditionKind.ION_DEFICIENCY,
        ConditionKind.OFF_PLAN,
        ConditionKind.SPECIES_BACKSTOP,
        ConditionKind.CHANNEL_LOW,
        ConditionKind.CHANNEL_HIGH,
    }
)
"""Conditions of the water: one cause can bring them to several tanks (see `analysis.alarm.grouping`)."""

KIND_RANK = {kind: rank for rank, kind in enumerate(ConditionKind)}
"""Position of each kind in the enum: the order in which one reading's transitions are recorded."""
