"""Why each alarm exists: consequence, response in steps, time to respond, priority, and its first settings.

A valid alarm needs a consequence, an action, and more time to respond than it takes to notice, decide and act
(rationalisation, ANSI/ISA-18.2-2016 and IEC 62682:2022, seen in public restatements). Delays and deadbands begin at
the published starting values (EEMUA 191 as restated publicly: 1 % of span and 60 s for temperature and composition).
The other times are common practice and meant to be changed by the site.

Codes are stable and translated elsewhere; the sentences are plain English.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import NamedTuple

from analysis.alarm.kinds import ConditionKind as Kind
from analysis.alarm.rules import AlarmRules, Priority

MOST_PAUSE_S = 900.0
"""An acknowledgement means "I am going" and pauses calls for at most a quarter of an hour."""
JITTER_INTERVALS = 0.25
GAP_INTERVALS = 3.0
"""Readings further apart than this many of the sensor's own intervals do not belong to one run."""


class Wording(NamedTuple):
    """A stable code and what it says."""

    code: str
    sentence: str


@dataclass(frozen=True, slots=True)
class Rationale:
    """The rationalisation record of one kind of alarm, as first set."""

    kind: Kind
    consequence: Wording
    steps: tuple[Wording, ...]
    """The response; the first step is the first action."""
    time_to_respond_s: float
    priority: Priority
    on_delay_s: float = 60.0
    off_delay_s: float = 60.0
    min_readings: int = 2
    min_hit_percent: int = 100
    is_latching: bool = False
    is_ack_required: bool = True
    is_top: bool = False
    max_shelve_s: float = 8 * 3600.0

    @property
    def first_action(self) -> Wording:
        """What to do first."""
        return self.steps[0]


_OSMOTIC = Wording("osmotic_loss", "The animals take up or lose water faster than they can regulate; losses follow.")
_THERMAL = Wording("thermal_loss", "Outside their temperature range the animals stop feeding, then die.")
_BLIND = Wording("nobody_sees", "Nobody would see this water go wrong.")
_FALSE_CALM = Wording("numbers_not_true", "The numbers for this tank may not be true.")
_NO_CALLS = Wording("calls_may_fail", "An alarm may reach nobody.")
_HOLE = Wording("record_has_hole", "Readings or records may be lost.")

_HAND_READING = Wording("hand_reading_now", "Take a hand reading now and enter it.")
_CHECK_INFLOW = Wording("check_inflow", "Go to the tank and look at every inflow and valve.")
_STOP_FRESH = Wording("stop_fresh_water", "Stop fresh water into the tank.")
_STOP_SALT = Wording("stop_salt_water", "Stop brine or salt into the tank; look for lost water and top up slowly.")
_CORRECT_SLOWLY = Wording("correct_slowly", "Bring the value back in steps, no faster than the animals' rate limit.")
_WATCH_ANIMALS = Wording("watch_animals", "Look at the animals: swimming, feeding, losses.")
_CALL_BIOLOGIST = Wording("call_biologist", "Call the biologist.")
_CHECK_HEATING = Wording(
    "check_heating", "Look at heater, chiller and their power; electrical work is for an electrician."
)
_LOOK_AT_PROBE = Wording("look_at_probe", "Look whether the probe is in water and the tank is full.")
_REFILL = Wording("refill_tank", "If the tank has lost water: close the drain, see to air, refill with like water.")
_PROBE_BACK = Wording("probe_back", "If the probe is out: clean it and put it back.")
_CHECK_PROBE = Wording("check_probe", "Clean and check the probe; compare with a hand reading.")
_CHECK_LINE = Wording("check_line", "Check the probe's power, cable and radio link.")
_SET_CLOCK = Wording("set_sensor_clock", "Set the clock of the sensor or its gateway.")
_STEADY = Wording("steady_the_water", "Stop what changes the water until the rate is back within its limit.")
_FOLLOW_PLAN = Wording("follow_plan", "Compare with the plan's step and correct the flow.")
_CHECK_BROKER = Wording("check_broker", "Check the broker's machine, its power and the network.")
_FREE_SPACE = Wording("free_space", "Make room on the disk of the monitor.")
_CHECK_DISK = Wording("check_disk", "See what else uses the disk of the monitor.")
_CHECK_UPLINK = Wording("check_uplink", "Check the uplink and the central store.")
_ROUNDS = Wording("rounds_by_hand", "Go on rounds by hand until it works again.")
_CALL_BY_HAND = Wording("call_by_hand", "Call the duty persons by hand; check the sending account and the uplink.")
_SET_MONITOR_CLOCK = Wording("set_monitor_clock", "Check the time service of the monitor's machine.")
_DOSE_IONS = Wording("check_ions", "Have the ions measured; add the missing salt in steps as the biologist says.")
_END_WORK = Wording("finish_work", "Finish the work or bring the water back into its band.")

_MIN = 60.0


RATIONALE: dict[Kind, Rationale] = {
    record.kind: record
    for record in (
        Rationale(
            Kind.SALINITY_LOW,
            _OSMOTIC,
            (_CHECK_INFLOW, _STOP_FRESH, _CORRECT_SLOWLY, _WATCH_ANIMALS),
            10 * _MIN,
            Priority.URGENT,
            min_hit_percent=50,
        ),
        Rationale(
            Kind.SALINITY_HIGH,
            _OSMOTIC,
            (_CHECK_INFLOW, _STOP_SALT, _CORRECT_SLOWLY, _WATCH_ANIMALS),
            10 * _MIN,
            Priority.URGENT,
            min_hit_percent=50,
        ),
        Rationale(
            Kind.TEMPERATURE_LOW,
            _THERMAL,
            (_CHECK_HEATING, _CHECK_INFLOW, _WATCH_ANIMALS),
            15 * _MIN,
            Priority.URGENT,
            min_hit_percent=50,
        ),
        Rationale(
            Kind.TEMPERATURE_HIGH,
            _THERMAL,
            (_CHECK_HEATING, _CHECK_INFLOW, _WATCH_ANIMALS),
            10 * _MIN,
            Priority.URGENT,
            min_hit_percent=50,
        ),
        Rationale(
            Kind.CHANGING_TOO_FAST,
            _OSMOTIC,
            (_CHECK_INFLOW, _STEADY, _WATCH_ANIMALS),
            10 * _MIN,
            Priority.SOON,
        ),
        Rationale(
            Kind.HEADING_OUT_OF_RANGE,
            _OSMOTIC,
            (_CHECK_INFLOW, _STEADY, _CORRECT_SLOWLY),
            15 * _MIN,
            Priority.SOON,
        ),
        Rationale(
            Kind.STRESS,
            _OSMOTIC,
            (_WATCH_ANIMALS, _STEADY, _CALL_BIOLOGIST),
            15 * _MIN,
            Priority.URGENT,
        ),
        Rationale(
            Kind.SENSORS_DISAGREE,
            _FALSE_CALM,
            (_HAND_READING, _CHECK_PROBE),
            60 * _MIN,
            Priority.SOON,
            on_delay_s=300.0,
            off_delay_s=300.0,
        ),
        Rationale(
            Kind.ION_DEFICIENCY,
            Wording("ions_missing", "Salinity looks right but an ion the animals need is short."),
            (_DOSE_IONS, _WATCH_ANIMALS, _CALL_BIOLOGIST),
            240 * _MIN,
            Priority.SOON,
            on_delay_s=0.0,
            off_delay_s=0.0,
            min_readings=1,
        ),
        Rationale(
            Kind.OFF_PLAN,
            _OSMOTIC,
            (_FOLLOW_PLAN, _STEADY, _WATCH_ANIMALS),
            15 * _MIN,
            Priority.SOON,
        ),
        Rationale(
            Kind.PROBE_DRY_OR_TANK_EMPTY,
            Wording("tank_may_be_empty", "The tank may be empty: the animals die within minutes."),
            (_LOOK_AT_PROBE, _REFILL, _PROBE_BACK, _HAND_READING),
            3 * _MIN,
            Priority.URGENT,
            on_delay_s=20.0,
            off_delay_s=60.0,
            is_latching=True,
            is_top=True,
            max_shelve_s=900.0,
        ),
        Rationale(
            Kind.UNWATCHED,
            _BLIND,
            (_HAND_READING, _CHECK_LINE, _PROBE_BACK),
            15 * _MIN,
            Priority.URGENT,
            on_delay_s=0.0,
            off_delay_s=0.0,
            min_readings=1,
        ),
        Rationale(
            Kind.SENSOR_CLOCK_WRONG,
            _FALSE_CALM,
            (_SET_CLOCK,),
            240 * _MIN,
            Priority.NOTE,
            on_delay_s=0.0,
            off_delay_s=600.0,
        ),
        Rationale(
            Kind.SPECIES_BACKSTOP,
            _OSMOTIC,
            (_CHECK_INFLOW, _STEADY, _WATCH_ANIMALS, _CALL_BIOLOGIST),
            5 * _MIN,
            Priority.URGENT,
            min_hit_percent=50,
            is_top=True,
            max_shelve_s=900.0,
        ),
        Rationale(
            Kind.WORK_NOT_BACK_IN_BAND,
            _OSMOTIC,
            (_END_WORK, _CORRECT_SLOWLY, _WATCH_ANIMALS),
            15 * _MIN,
            Priority.URGENT,
            on_delay_s=0.0,
            min_readings=1,
        ),
        Rationale(
            Kind.CHANNEL_LOW,
            Wording("channel_out", "A supply the tank lives on is out of its limits."),
            (_CHECK_INFLOW, _WATCH_ANIMALS),
            5 * _MIN,
            Priority.URGENT,
            on_delay_s=15.0,
            off_delay_s=15.0,
        ),
        Rationale(
            Kind.CHANNEL_HIGH,
            Wording("channel_out", "A supply the tank lives on is out of its limits."),
            (_CHECK_INFLOW, _WATCH_ANIMALS),
            5 * _MIN,
            Priority.URGENT,
            on_delay_s=15.0,
            off_delay_s=15.0,
        ),
        Rationale(
            Kind.BROKER_UNREACHABLE,
            _BLIND,
            (_CHECK_BROKER, _ROUNDS),
            15 * _MIN,
            Priority.URGENT,
            on_delay_s=60.0,
            off_delay_s=30.0,
            min_readings=1,
        ),
        Rationale(
            Kind.STORE_SLOW,
            _HOLE,
            (_CHECK_DISK,),
            60 * _MIN,
            Priority.SOON,
            on_delay_s=300.0,
            off_delay_s=300.0,
        ),
        Rationale(
            Kind.STORE_FULL,
            _HOLE,
            (_FREE_SPACE, _ROUNDS),
            30 * _MIN,
            Priority.URGENT,
            on_delay_s=0.0,
            off_delay_s=0.0,
            min_readings=1,
        ),
        Rationale(
            Kind.FORWARDING_BEHIND,
            Wording("central_board_behind", "The central board shows old numbers; this site's own alarms work."),
            (_CHECK_UPLINK,),
            240 * _MIN,
            Priority.NOTE,
            on_delay_s=900.0,
            off_delay_s=300.0,
        ),
        Rationale(
            Kind.DELIVERY_FAILING,
            _NO_CALLS,
            (_CALL_BY_HAND, _CHECK_UPLINK),
            15 * _MIN,
            Priority.URGENT,
            on_delay_s=120.0,
            off_delay_s=60.0,
        ),
        Rationale(
            Kind.CLOCK_WRONG,
            _FALSE_CALM,
            (_SET_MONITOR_CLOCK,),
            60 * _MIN,
            Priority.SOON,
            on_delay_s=60.0,
            off_delay_s=300.0,
        ),
    )
}
"""One record for every kind of alarm."""


def first_rules(kind: Kind, *, interval_s: float, priority: Priority | None = None) -> AlarmRules:
    """Return the rules a kind begins with.

    Parameters
    ----------
    kind : ConditionKind
        The condition.
    interval_s : float
        The sensor's own interval; delays ask for two readings at it, and `GAP_INTERVALS` of it are a gap. [s]
    priority : Priority, optional
        Another priority (a tank left unwatched alarms at the tank's own).
    """
    record = RATIONALE[kind]
    own = record.priority if priority is None else priority
    # A note waits as long as it may; whatever can wake somebody is back after a quarter of an hour at the latest.
    most_s = record.time_to_respond_s if own is Priority.NOTE else MOST_PAUSE_S
    return AlarmRules(
        on_delay_s=record.on_delay_s,
        off_delay_s=record.off_delay_s,
        min_readings=record.min_readings,
        max_gap_s=GAP_INTERVALS * interval_s,
        jitter_s=JITTER_INTERVALS * interval_s,
        min_hit_percent=record.min_hit_percent,
        is_latching=record.is_latching,
        is_ack_required=record.is_ack_required,
        re_alarm_s=min(record.time_to_respond_s, most_s),
        max_shelve_s=record.max_shelve_s,
        is_reshelvable=not record.is_top,
        priority=own,
        is_top=record.is_top,
    )


def with_delays(rules: AlarmRules, *, on_delay_s: float, off_delay_s: float) -> AlarmRules:
    """Return rules with the site's own delays."""
    return replace(rules, on_delay_s=on_delay_s, off_delay_s=off_delay_s)
