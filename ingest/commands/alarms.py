"""Commands on alarms: acknowledge, silence, shelve, take out of service, and back."""

from __future__ import annotations

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


def _occurrence(command: Command) -> int | None:
    return int(command.expected) if command.expected and command.expected.isdigit() else None


def _event(kind: str, command: Command) -> Event | None:
    """Return the state machine's event for a command, or None if its details are unusable."""
    who, why = command.actor, str(command.body.get("why", ""))
    if kind == "acknowledge":
        return Acknowledge(who=who, why=why, occurrence=_occurrence(command))
    if kind == "shelve":
        until_us = command.body.get("until_us")
        return Shelve(who=who, why=why, until_us=until_us) if isinstance(until_us, int) else None
    if kind == "remove_from_service":
        return RemoveFromService(who=who, why=why, expected_return_us=int(command.body.get("expected_return_us", 0)))
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
