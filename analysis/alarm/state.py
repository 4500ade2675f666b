"""The state of one alarm: independent flags, and the name that follows from them.

The flags are kept apart because they are independent things (OPC 10000-9, 5.8.2): whether the condition
holds, whether a person has acknowledged it, whether it is latched, shelved, suppressed by design, out of
service, silenced. The one-word state of ANSI/ISA-18.2 and IEC 62682 is derived from them by `name_of`.

References
----------
.. [1] ANSI/ISA-18.2-2016, Management of Alarm Systems for the Process Industries, alarm state model
       (seen in public restatements; the text is sold).
.. [2] IEC 62682:2022, Management of alarm systems for the process industries.
.. [3] OPC 10000-9, OPC Unified Architecture, Part 9: Alarms and Conditions, v1.05, 5.8 and B.1.5.
"""

from __future__ import annotations

from dataclasses import dataclass, fields
from enum import StrEnum
from typing import Any

from analysis.errors import InvalidInputError

NEVER_US = 2**63 - 1
"""A time that does not come."""


class StateName(StrEnum):
    """The alarm states of IEC 62682, each with the letter of ANSI/ISA-18.2."""

    NORMAL = "normal"  # A
    UNACKNOWLEDGED = "unacknowledged"  # B
    ACKNOWLEDGED = "acknowledged"  # C
    RETURNED_UNACKNOWLEDGED = "returned_unacknowledged"  # D
    LATCHED_UNACKNOWLEDGED = "latched_unacknowledged"  # E
    LATCHED_ACKNOWLEDGED = "latched_acknowledged"  # F
    SHELVED = "shelved"  # G
    SUPPRESSED_BY_DESIGN = "suppressed_by_design"  # H
    OUT_OF_SERVICE = "out_of_service"  # I


HIDDEN_STATES = frozenset({StateName.SHELVED, StateName.SUPPRESSED_BY_DESIGN, StateName.OUT_OF_SERVICE})
"""States in which the alarm is evaluated and logged but calls nobody."""

WAITING_STATES = frozenset(
    {
        StateName.UNACKNOWLEDGED,
        StateName.RETURNED_UNACKNOWLEDGED,
        StateName.LATCHED_UNACKNOWLEDGED,
    }
)
"""States that wait for a person's acknowledgement."""


class Shelving(StrEnum):
    """How an alarm is shelved: not, until a time, or once (until its condition next clears)."""

    NONE = "none"
    TIMED = "timed"
    ONCE = "once"


@dataclass(frozen=True, slots=True)
class AlarmState:
    """All that is remembered about one alarm (one condition of one tank or of the monitor).

    Times are int64 microseconds UTC; 0 where there is none. A fresh `AlarmState()` is normal.
    """

    is_active: bool = False
    """The condition holds, on-delay and off-delay applied."""
    is_acknowledged: bool = True
    is_latched: bool = False
    is_silenced: bool = False
    shelving: Shelving = Shelving.NONE
    shelved_until_us: int = 0
    shelved_by: str = ""
    suppressed_by: tuple[str, ...] = ()
    """The rules (never persons) that suppress it by design; sorted, each once."""
    is_out_of_service: bool = False
    expected_return_us: int = 0

    occurrence: int = 0
    """Number of the present or last occurrence, from 1. A return and a new rise before anybody acknowledged
    belong to the same occurrence, so that an acknowledgement on its way still meets it."""
    rise_count: int = 0
    """How often the condition rose within this occurrence."""
    re_alarm_count: int = 0
    raised_at_us: int = 0
    """Measured time at which the occurrence was first raised."""
    returned_at_us: int = 0
    announced_at_us: int = 0
    """When it was last announced to people (raised, re-alarmed or restored while abnormal)."""
    acknowledged_at_us: int = 0
    acknowledged_by: str = ""
    re_alarm_from_us: int = 0
    """From when the time to the next re-alarm runs: the acknowledgement, or the last sign of turning back."""
    raised_value: float | None = None
    raised_limit: float | None = None

    pending_since_us: int = 0
    """First measured time of a run of readings that speak against the present flag `is_active`."""
    pending_readings: int = 0
    """Readings in that run, tolerated ones included."""
    pending_hits: int = 0
    """Readings in that run that speak against `is_active` outright."""
    pending_last_us: int = 0
    """Own measured time of the last reading counted in the run."""
    pending_marks: tuple[tuple[int, int], ...] = ()
    """Own measured time and verdict of the run's readings within the on-delay, where the rules tolerate some
    inside the limit; `pending_readings` and `pending_hits` are then counted from these."""
    judged_at_us: int = 0
    """Measured time of the last observation that changed anything; older observations are late."""

    @property
    def name(self) -> StateName:
        """The state of IEC 62682 that follows from the flags."""
        return name_of(self)

    @property
    def has_pending(self) -> bool:
        """Whether an on-delay or off-delay is running."""
        return self.pending_readings > 0

    @property
    def is_hidden(self) -> bool:
        """Whether it is shelved, suppressed by design or out of service."""
        return self.shelving is not Shelving.NONE or bool(self.suppressed_by) or self.is_out_of_service


def name_of(state: AlarmState) -> StateName:
    """Return the one-word state that follows from the flags.

    With several hiding flags the strongest names the state: out of service, suppressed by design, shelved.
    """
    if state.is_out_of_service:
        return StateName.OUT_OF_SERVICE
    if state.suppressed_by:
        return StateName.SUPPRESSED_BY_DESIGN
    if state.shelving is not Shelving.NONE:
        return StateName.SHELVED
    return _name_when_shown(state)


def _name_when_shown(state: AlarmState) -> StateName:
    if state.is_active:
        return StateName.ACKNOWLEDGED if state.is_acknowledged else StateName.UNACKNOWLEDGED
    if state.is_latched:
        acknowledged = state.is_acknowledged
        return StateName.LATCHED_ACKNOWLEDGED if acknowledged else StateName.LATCHED_UNACKNOWLEDGED
    return StateName.NORMAL if state.is_acknowledged else StateName.RETURNED_UNACKNOWLEDGED


_STATE_FIELDS = tuple(field.name for field in fields(AlarmState))
_FRESH = AlarmState()


def state_to_dict(state: AlarmState) -> dict[str, Any]:
    """Return the state as plain JSON data; what equals a fresh state is left out."""
    body: dict[str, Any] = {}
    for name in _STATE_FIELDS:
        value = getattr(state, name)
        if value == getattr(_FRESH, name):
            continue
        if isinstance(value, Shelving):
            value = value.value
        elif isinstance(value, tuple):
            value = [list(item) if isinstance(item, tuple) else item for item in value]
        body[name] = value
    return body


def state_from_dict(body: dict[str, Any]) -> AlarmState:
    """Return the state that `state_to_dict` wrote. Restoring fires nothing.

    Raises
    ------
    InvalidInputError
        If a key is not one of the state's.
    """
    unknown = sorted(set(body) - set(_STATE_FIELDS))
    if unknown:
        raise InvalidInputError("alarm state", found=unknown, allowed=f"keys among {', '.join(_STATE_FIELDS)}")
    values = dict(body)
    if "shelving" in values:
        values["shelving"] = Shelving(values["shelving"])
    if "suppressed_by" in values:
        values["suppressed_by"] = tuple(values["suppressed_by"])
    if "pending_marks" in values:
        values["pending_marks"] = tuple((time_us, verdict) for time_us, verdict in values["pending_marks"])
    return AlarmState(**values)
