"""How one alarm behaves: delays, latching, acknowledgement, re-alarm, shelving, priority."""

from __future__ import annotations

from dataclasses import dataclass, fields
from enum import StrEnum
from typing import Any

from analysis.arrays import MICROSECONDS_PER_SECOND
from analysis.errors import InvalidInputError


class Priority(StrEnum):
    """How quickly a person has to act; from the consequence and the time to respond."""

    URGENT = "urgent"
    SOON = "soon"
    NOTE = "note"

    @property
    def rank(self) -> int:
        """0 for the most pressing."""
        return tuple(Priority).index(self)


@dataclass(frozen=True, slots=True)
class AlarmRules:
    """The rules of one alarm. Durations in seconds; delays run on measured time.

    Raises
    ------
    InvalidInputError
        If a duration is negative, fewer than one reading is asked for, or the share is outside 1 to 100.
    """

    on_delay_s: float = 60.0
    off_delay_s: float = 60.0
    min_readings: int = 2
    """Never raised or cleared on fewer readings than this."""
    max_gap_s: float = 30.0
    """Two readings further apart than this do not belong to one run: time without data is not "still
    exceeded"."""
    jitter_s: float = 0.0
    """How unevenly readings come: a delay that is a whole number of intervals is over this much early, so that a
    reading a moment early does not cost another interval."""
    min_hit_percent: int = 100
    """100: the limit must be exceeded in every reading for the whole on-delay (OPC 10000-9 B.1.5). Less: for the
    whole on-delay no reading was back by the deadband, the run began near or beyond the limit, and this share of
    the readings of the on-delay lies beyond. Noise at the limit then neither starts the delay anew with every
    reading that falls inside, nor raises without a delay."""
    is_latching: bool = False
    is_ack_required: bool = True
    re_alarm_s: float = 900.0
    """An acknowledged alarm that still holds after this is unacknowledged again; 0: never."""
    max_shelve_s: float = 8 * 3600.0
    """Longest shelving, timed or once; 0: this alarm cannot be shelved."""
    is_reshelvable: bool = True
    """Whether a shelved alarm may be shelved anew before it has been seen again."""
    priority: Priority = Priority.SOON
    is_top: bool = False
    """Top priority: quiet hours never cover it and waking goes on after a return to normal."""

    def __post_init__(self) -> None:
        for name in ("on_delay_s", "off_delay_s", "max_gap_s", "jitter_s", "re_alarm_s", "max_shelve_s"):
            value = getattr(self, name)
            if not value >= 0:
                raise InvalidInputError(name, found=value, allowed="0 or more seconds")
        if self.min_readings < 1:
            raise InvalidInputError("min_readings", found=self.min_readings, allowed="1 or more")
        if not 1 <= self.min_hit_percent <= 100:
            raise InvalidInputError("min_hit_percent", found=self.min_hit_percent, allowed="1 to 100")


def microseconds(seconds: float) -> int:
    """Return a duration in whole microseconds."""
    return round(seconds * MICROSECONDS_PER_SECOND)


def rules_to_dict(rules: AlarmRules) -> dict[str, Any]:
    """Return the rules as plain JSON data."""
    body = {field.name: getattr(rules, field.name) for field in fields(rules)}
    body["priority"] = rules.priority.value
    return body


def rules_from_dict(body: dict[str, Any]) -> AlarmRules:
    """Return the rules that `rules_to_dict` wrote."""
    return AlarmRules(**{**body, "priority": Priority(body["priority"])})
