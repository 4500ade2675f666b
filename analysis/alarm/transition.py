"""What is recorded whenever an alarm changes, is acted on, or refuses an act."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from enum import StrEnum
from typing import Any

from analysis.alarm.state import AlarmState, StateName, state_from_dict, state_to_dict


class Happening(StrEnum):
    """What happened to an alarm. The words are stored: never rename, only add."""

    RAISED = "raised"
    RETURNED = "returned"
    RETURNED_AUTO_ACKNOWLEDGED = "returned_auto_acknowledged"
    ACKNOWLEDGED = "acknowledged"
    UNACKNOWLEDGED = "unacknowledged"
    RE_ALARMED = "re_alarmed"
    WORSENED = "worsened"
    ESCALATED = "escalated"
    RECOVERING = "recovering"
    SILENCED = "silenced"
    RESET = "reset"
    SHELVED = "shelved"
    SHELVED_ONCE = "shelved_once"
    UNSHELVED = "unshelved"
    SHELVING_ENDED = "shelving_ended"
    SUPPRESSED = "suppressed"
    UNSUPPRESSED = "unsuppressed"
    REMOVED_FROM_SERVICE = "removed_from_service"
    RETURNED_TO_SERVICE = "returned_to_service"
    REVIEW_DUE = "review_due"


class Refusal(StrEnum):
    """Why an act was refused; empty when it was not."""

    NONE = ""
    NOTHING_TO_ACKNOWLEDGE = "nothing_to_acknowledge"
    ALREADY_ACKNOWLEDGED = "already_acknowledged"
    OTHER_OCCURRENCE = "other_occurrence"
    NOT_ANNOUNCED = "not_announced"
    NOT_ACKNOWLEDGED = "not_acknowledged"
    NOTHING_TO_SILENCE = "nothing_to_silence"
    NOTHING_TO_RESET = "nothing_to_reset"
    STILL_ACTIVE = "still_active"
    CANNOT_BE_SHELVED = "cannot_be_shelved"
    LONGER_THAN_ALLOWED = "longer_than_allowed"
    ENDS_IN_THE_PAST = "ends_in_the_past"
    ALREADY_SHELVED = "already_shelved"
    HIDDEN_OTHERWISE = "hidden_otherwise"
    NOT_SHELVED = "not_shelved"
    NOT_SUPPRESSED_BY_THIS = "not_suppressed_by_this"
    ALREADY_OUT_OF_SERVICE = "already_out_of_service"
    NOT_OUT_OF_SERVICE = "not_out_of_service"
    NOTHING_HIDDEN = "nothing_hidden"
    WITHOUT_REASON = "without_reason"


@dataclass(frozen=True, slots=True)
class Transition:
    """One entry of an alarm's history.

    `at_us` is the time at which it took effect: for what was due at a time (end of shelving, re-alarm) the due
    time, so that the history does not depend on how often anybody looked.
    """

    happening: Happening
    from_state: StateName
    to_state: StateName
    at_us: int
    who: str
    why: str
    after: AlarmState
    """The whole state afterwards: the last entry alone rebuilds the alarm."""
    measured_at_us: int = 0
    value: float | None = None
    limit: float | None = None
    is_announced: bool = False
    """People have to be told now (sound, call-out)."""
    refusal: Refusal = Refusal.NONE

    @property
    def occurrence(self) -> int:
        """Number of the occurrence it belongs to."""
        return self.after.occurrence


def transition_to_dict(transition: Transition) -> dict[str, Any]:
    """Return the entry as plain JSON data."""
    return {
        "happening": transition.happening.value,
        "from": transition.from_state.value,
        "to": transition.to_state.value,
        "at_us": transition.at_us,
        "who": transition.who,
        "why": transition.why,
        "measured_at_us": transition.measured_at_us,
        "value": transition.value,
        "limit": transition.limit,
        "is_announced": transition.is_announced,
        "refusal": transition.refusal.value,
        "after": state_to_dict(transition.after),
    }


def transition_from_dict(body: dict[str, Any]) -> Transition:
    """Return the entry that `transition_to_dict` wrote."""
    return Transition(
        happening=Happening(body["happening"]),
        from_state=StateName(body["from"]),
        to_state=StateName(body["to"]),
        at_us=body["at_us"],
        who=body["who"],
        why=body["why"],
        after=state_from_dict(body["after"]),
        measured_at_us=body["measured_at_us"],
        value=body["value"],
        limit=body["limit"],
        is_announced=body["is_announced"],
        refusal=Refusal(body["refusal"]),
    )


def state_after(history: Iterable[Transition]) -> AlarmState:
    """Return the state that a stored history ends in; a fresh one for an empty history."""
    state = AlarmState()
    for transition in history:
        state = transition.after
    return state
