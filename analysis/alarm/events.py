"""What can happen to an alarm: observations, and what people and rules do.

Every event of a person or a rule says who and why. `event_to_dict` and `event_from_dict` make plain JSON data
of them for the ledger.
"""

from __future__ import annotations

from dataclasses import dataclass, fields
from enum import IntEnum
from typing import Any, TypeAlias

from analysis.errors import InvalidInputError

MONITOR = "monitor"
"""Who acts when nobody does: the tool itself."""


class Verdict(IntEnum):
    """What one reading says about a condition. The integers are used in arrays."""

    FALSE = 0
    """Back by more than the deadband."""
    BETWEEN = 1
    """Not beyond the limit, but not back by the deadband: the condition stays as it is."""
    TRUE = 2
    """Beyond the limit."""
    UNKNOWN = 3
    """No usable reading: the state is held; missing is never normal."""
    NEAR = 4
    """As `BETWEEN`, but so near the limit that noise alone may hold it inside."""


@dataclass(frozen=True, slots=True)
class Observation:
    """One judged reading (or one look at the monitor itself).

    Parameters
    ----------
    verdict : Verdict
        What it says about the condition.
    measured_at_us : int
        The tank's measured time at this judgement; never falls from one observation to the next. [us UTC]
    value, limit : float or None
        What was judged, against what.
    reading_at_us : int or None
        Own measured time of the reading that was judged; equal to that of the observation before when the same
        reading is judged again because another sensor reported. Default: `measured_at_us`.
    is_worse : bool
        The condition has passed its next step: an acknowledged alarm re-alarms.
    """

    verdict: Verdict
    measured_at_us: int
    value: float | None = None
    limit: float | None = None
    reading_at_us: int | None = None
    is_worse: bool = False


@dataclass(frozen=True, slots=True)
class Acknowledge:
    """A person says "I have seen it, I am going". `occurrence` names the one meant, None the present one."""

    who: str
    why: str = ""
    occurrence: int | None = None


@dataclass(frozen=True, slots=True)
class Unacknowledge:
    """A person takes an acknowledgement back."""

    who: str
    why: str = ""


@dataclass(frozen=True, slots=True)
class AcknowledgementOverdue:
    """Nobody has acknowledged in time: the next person is called. The state stays."""

    who: str = MONITOR
    why: str = ""


@dataclass(frozen=True, slots=True)
class Recovering:
    """The value is turning back: the re-alarm of an acknowledged alarm waits once more."""

    who: str = MONITOR
    why: str = ""


@dataclass(frozen=True, slots=True)
class Silence:
    """Sound off; this is no acknowledgement and calls go on."""

    who: str
    why: str = ""


@dataclass(frozen=True, slots=True)
class Reset:
    """A person releases the latch."""

    who: str
    why: str = ""


@dataclass(frozen=True, slots=True)
class Shelve:
    """A person puts the alarm aside until a time."""

    who: str
    why: str
    until_us: int


@dataclass(frozen=True, slots=True)
class ShelveOnce:
    """A person puts the alarm aside until its condition next clears (or the longest shelving is over)."""

    who: str
    why: str


@dataclass(frozen=True, slots=True)
class Unshelve:
    """A person takes the alarm back from the shelf."""

    who: str
    why: str = ""


@dataclass(frozen=True, slots=True)
class Suppress:
    """A rule of the design (never a person) suppresses the alarm; `rule` names it."""

    rule: str
    who: str = MONITOR
    why: str = ""


@dataclass(frozen=True, slots=True)
class Unsuppress:
    """The rule no longer suppresses the alarm."""

    rule: str
    who: str = MONITOR
    why: str = ""


@dataclass(frozen=True, slots=True)
class RemoveFromService:
    """A person takes the alarm out of service for maintenance."""

    who: str
    why: str
    expected_return_us: int = 0


@dataclass(frozen=True, slots=True)
class ReturnToService:
    """A person puts the alarm back into service."""

    who: str
    why: str = ""


@dataclass(frozen=True, slots=True)
class ReviewDue:
    """The list of hidden alarms is looked through (hand-over, or an expected return has passed)."""

    who: str = MONITOR
    why: str = ""


@dataclass(frozen=True, slots=True)
class Tick:
    """Time has passed: shelving may have run out, a re-alarm may be due."""


Event: TypeAlias = (
    Observation
    | Acknowledge
    | Unacknowledge
    | AcknowledgementOverdue
    | Recovering
    | Silence
    | Reset
    | Shelve
    | ShelveOnce
    | Unshelve
    | Suppress
    | Unsuppress
    | RemoveFromService
    | ReturnToService
    | ReviewDue
    | Tick
)

_KINDS: dict[str, type[Any]] = {
    "observation": Observation,
    "acknowledge": Acknowledge,
    "unacknowledge": Unacknowledge,
    "acknowledgement_overdue": AcknowledgementOverdue,
    "recovering": Recovering,
    "silence": Silence,
    "reset": Reset,
    "shelve": Shelve,
    "shelve_once": ShelveOnce,
    "unshelve": Unshelve,
    "suppress": Suppress,
    "unsuppress": Unsuppress,
    "remove_from_service": RemoveFromService,
    "return_to_service": ReturnToService,
    "review_due": ReviewDue,
    "tick": Tick,
}
_WORDS = {cls: word for word, cls in _KINDS.items()}


def event_to_dict(event: Event) -> dict[str, Any]:
    """Return the event as plain JSON data with its kind."""
    body: dict[str, Any] = {"kind": _WORDS[type(event)]}
    for field in fields(event):
        value = getattr(event, field.name)
        body[field.name] = int(value) if isinstance(value, Verdict) else value
    return body


def event_from_dict(body: dict[str, Any]) -> Event:
    """Return the event that `event_to_dict` wrote.

    Raises
    ------
    InvalidInputError
        If the kind is not known.
    """
    kind = body.get("kind")
    if kind not in _KINDS:
        raise InvalidInputError("kind of alarm event", found=kind, allowed=", ".join(_KINDS))
    values = {key: value for key, value in body.items() if key != "kind"}
    if "verdict" in values:
        values["verdict"] = Verdict(values["verdict"])
    event: Event = _KINDS[kind](**values)
    return event
