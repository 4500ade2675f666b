"""Commands on alarms: acknowledge, silence, shelve, take out of service, and back."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING, Any

from analysis.alarm.events import (
    Acknowledge,
    RemoveFromService,
    Reset,
    ReturnToService,
    Shelve,
    ShelveOnce,
    Silence,
    Unacknowledge,
    Unshelve,
)
from analysis.alarm.transition import Refusal
from ingest.commands.ruling import Ruling

if TYPE_CHECKING:
    from analysis.alarm.events import Event
    from ingest.commands.context import Context
    from ingest.store.inbox import Command


LATEST_US = 2**52
"""No time of a command is later: the year 2112. What a person may enter is bounded by each alarm's rules anyway."""


def _moment(value: object) -> int | None:
    """Return a time of a command's details, None where it is none."""
    if not isinstance(value, int) or isinstance(value, bool) or not 0 <= value <= LATEST_US:
        return None
    return value


def _event(kind: str, command: Command) -> Event | None:
    """Return the state machine's event for a command, or None if its details are unusable."""
    who, why = command.actor, str(command.body.get("why", ""))
    if kind == "acknowledge":
        if not command.expected:
            return Acknowledge(who=who, why=why)
        is_number = re.fullmatch("[0-9]{1,15}", command.expected) is not None
        return Acknowledge(who=who, why=why, occurrence=int(command.expected)) if is_number else None
    if kind == "shelve":
        until_us = _moment(command.body.get("until_us"))
        return None if until_us is None else Shelve(who=who, why=why, until_us=until_us)
    if kind == "remove_from_service":
        return_us = _moment(command.body.get("expected_return_us", 0))
        return None if return_us is None else RemoveFromService(who=who, why=why, expected_return_us=return_us)
    plain: dict[str, Any] = {
        "unacknowledge": Unacknowledge,
        "silence": Silence,
        "shelve_once": ShelveOnce,
        "unshelve": Unshelve,
        "reset": Reset,
        "return_to_service": ReturnToService,
    }
    event: Event = plain[kind](who=who, why=why)
    return event


NEEDED_ROLE = {
    "alarm.acknowledge": "operator",
    "alarm.unacknowledge": "operator",
    "alarm.silence": "operator",
    "alarm.shelve": "operator",
    "alarm.shelve_once": "operator",
    "alarm.unshelve": "operator",
    "alarm.reset": "operator",
    "alarm.remove_from_service": "biologist",
    "alarm.return_to_service": "biologist",
}


def rule(command: Command, context: Context) -> Ruling:
    """Carry out a command on one alarm; `subject` names the tank, `body.condition` the condition."""
    condition = command.body.get("condition")
    event = _event(command.kind.removeprefix("alarm."), command)
    if not isinstance(condition, str) or event is None:
        return Ruling.refused("unusable_details")
    transitions = context.act(command.subject, condition, event)
    if transitions is None:
        return Ruling.refused("no_such_alarm")
    for transition in transitions:
        if transition.refusal is not Refusal.NONE:
            return Ruling.refused(transition.refusal.value)
    return Ruling("applied", occurrences=context.occurrences(command.subject, condition, transitions))
