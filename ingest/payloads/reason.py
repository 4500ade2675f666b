"""Why a payload, or a value of it, could not be used."""

from __future__ import annotations

from enum import StrEnum

from analysis.errors import EuryhaleError

LONGEST_FOUND = 120


class Reason(StrEnum):
    """The codes are stored with what was refused: never rename, only add."""

    UNKNOWN_TOPIC = "unknown_topic"
    """No sensor of the site file sends to this topic."""
    TOO_LARGE = "too_large"
    """More bytes than the site lets in; nothing of it was read."""
    UNREADABLE = "unreadable"
    """Not the declared format at all."""
    WRONG_SHAPE = "wrong_shape"
    """Well formed, but not an object of fields (JSON), a pack of records (SenML), or a number."""
    VERSION_UNKNOWN = "version_unknown"
    """A SenML pack of a version that this reader does not know, or of several."""
    MUST_UNDERSTAND = "must_understand"
    """A SenML label that ends in "_": whoever does not know it must not use the pack."""
    NO_KNOWN_NAME = "no_known_name"
    """A SenML pack without any name that the site file declares."""
    MISSING = "missing"
    """A declared field is absent or null."""
    WRONG_TYPE = "wrong_type"
    """A text, a truth value or a group where a number should be."""
    NOT_FINITE = "not_finite"
    """Not a number, or infinite."""
    FILLER = "filler"
    """A number that loggers write for "no value"."""
    WRONG_UNIT = "wrong_unit"
    """A SenML unit that is not registered, or of another quantity."""
    TIME_MISSING = "time_missing"
    """The declared time field is absent or null."""
    TIME_UNREADABLE = "time_unreadable"
    """The time is not of the declared format, or has no zone."""
    TIME_BEYOND_HORIZON = "time_beyond_horizon"
    """The measured time is older or newer than the site's intake horizon allows."""
    RETAINED_WITHOUT_TIME = "retained_without_time"
    """A retained message without a time of its own: nobody can say when that was measured."""
    NO_USABLE_VALUE = "no_usable_value"
    """Every declared value is unusable, for more than one reason."""


class PayloadError(EuryhaleError):
    """A payload that gives no reading. It is kept with its reason and never tried again.

    Parameters
    ----------
    code : Reason
        Why.
    where : str
        Topic, field or record.
    found : str
        What was there, shortened.
    allowed : str
        What would have been right.
    sensor : int, optional
        Index of the sensor in the site's list; -1 where it is not known.
    """

    def __init__(self, code: Reason, where: str, found: str, allowed: str, sensor: int = -1) -> None:
        self.code = code
        self.where = where
        self.found = found
        self.allowed = allowed
        self.sensor = sensor
        super().__init__(f"{code}: {where}: found {found}; allowed: {allowed}")


def shown(value: object) -> str:
    """Return *value* in a length that fits a line."""
    if isinstance(value, bytes):
        value = value[: LONGEST_FOUND * 2]
    elif isinstance(value, str):
        value = value[: LONGEST_FOUND + 1]
    elif isinstance(value, list | dict):
        return f"a {'list' if isinstance(value, list) else 'group'} of {len(value)}"
    elif isinstance(value, int) and abs(value) > 10**30:
        return "a whole number of more than 30 digits"
    text = repr(value)
    return text if len(text) <= LONGEST_FOUND else text[:LONGEST_FOUND] + "..."
