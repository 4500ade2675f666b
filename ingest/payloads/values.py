"""A single value of a payload: a usable number, or NaN with its flag and the reason."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, NamedTuple

from analysis.flags import FILLER_VALUES, Flag
from ingest.payloads.reason import Reason, shown

if TYPE_CHECKING:
    from ingest.site.sensors import Sensor

NAN = math.nan

_ALWAYS_FILLERS = frozenset(FILLER_VALUES)
_NEGATIVE_FILLERS = frozenset(value for value in FILLER_VALUES if value < 0)
_DEEP_FILLERS = frozenset(value for value in FILLER_VALUES if value <= -999)
_NOT_A_NUMBER_WORDS = frozenset({"nan", "inf", "+inf", "-inf", "infinity", "-infinity", "+infinity"})
# Plain integers: or-ing members of the enum costs ten times as much.
_MISSING, _NOT_FINITE, _FILLER = int(Flag.MISSING), int(Flag.NOT_FINITE), int(Flag.FILLER)


class Value(NamedTuple):
    """A value as judged: NaN with flag and reason where it cannot be used.

    Attributes
    ----------
    number : float
        The value as sent.
    flag : int
        Flag word, 0 for a usable value.
    reason : Reason or None
        None for a usable value.
    found : str
        What was there, where it is unusable.
    allowed : str
        What would have been right.
    """

    number: float
    flag: int = 0
    reason: Reason | None = None
    found: str = ""
    allowed: str = "a finite number"


def fillers_of(sensor: Sensor) -> dict[str, frozenset[float]]:
    """Return for each quantity and channel of *sensor* the numbers that stand for "no value".

    In uS/cm 9999 is brackish water, and a redox potential of -99 mV or a level of -100 cm are real: what is
    a filler hangs on the unit. Common practice.
    """
    in_uS_cm = sensor.conductivity_unit == "uS/cm"
    fillers = {
        "conductivity": _NEGATIVE_FILLERS if in_uS_cm else _ALWAYS_FILLERS,
        "temperature": _ALWAYS_FILLERS,
        "pressure": _ALWAYS_FILLERS,
    }
    return fillers | dict.fromkeys(sensor.channels, _DEEP_FILLERS)


def judged(value: object, *, fillers: frozenset[float]) -> Value:
    """Return *value* as a usable number, or NaN with flag and reason; nothing is raised."""
    if value is None:
        return Value(NAN, _MISSING, Reason.MISSING, "nothing")
    if isinstance(value, str) and value.strip().lower() in _NOT_A_NUMBER_WORDS:
        return Value(NAN, _NOT_FINITE, Reason.NOT_FINITE, shown(value))
    if isinstance(value, bool) or not isinstance(value, int | float):
        return Value(NAN, _MISSING, Reason.WRONG_TYPE, shown(value), "a finite number, not in quotes")
    try:
        number = float(value)
    except OverflowError:
        number = math.inf
    if not math.isfinite(number):
        return Value(NAN, _NOT_FINITE, Reason.NOT_FINITE, shown(value))
    if number in fillers:
        return Value(NAN, _FILLER, Reason.FILLER, shown(value), "a measured value")
    return Value(number)
