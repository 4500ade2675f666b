"""The desk: every command passes here, is checked for role and time, and is carried out by its room."""

from __future__ import annotations

from typing import TYPE_CHECKING

from ingest.commands import alarms, bench_sample, calibration, plans, samples, stock
from ingest.commands.roles import is_at_least, weaker
from ingest.commands.ruling import Ruling

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping

    from ingest.commands.context import Context
    from ingest.store.inbox import Command

RELOAD = "site.reload"

NEEDED_ROLE: dict[str, str] = {
    **alarms.NEEDED_ROLE,
    **calibration.NEEDED_ROLE,
    **bench_sample.NEEDED_ROLE,
    **stock.NEEDED_ROLE,
    **samples.NEEDED_ROLE,
    **plans.NEEDED_ROLE,
    RELOAD: "manager",
}
"""Which role each kind of command needs; what is not here is not known."""


def _reload(_command: Command, _context: Context) -> Ruling:
    return Ruling("applied", has_to_reload=True)


_ROOMS: dict[str, Callable[[Command, Context], Ruling]] = {
    **dict.fromkeys(alarms.NEEDED_ROLE, alarms.rule),
    **dict.fromkeys(calibration.NEEDED_ROLE, calibration.rule),
    bench_sample.BY_HAND: bench_sample.rule,
    **dict.fromkeys(stock.NEEDED_ROLE, stock.rule),
    **dict.fromkeys(samples.NEEDED_ROLE, samples.rule),
    **dict.fromkeys(plans.NEEDED_ROLE, plans.rule),
    RELOAD: _reload,
}


def rule(command: Command, context: Context, *, roles: Mapping[str, str]) -> Ruling:
    """Decide on a command.

    Parameters
    ----------
    command : Command
        As it lay in the inbox; nothing in it is believed.
    context : Context
        What it may reach.
    roles : mapping of str to str
        The role of every person known here, by name. The role in the command can only make it weaker.
    """
    needed = plans.needed_role(command) or NEEDED_ROLE.get(command.kind)
    if needed is None:
        return Ruling.refused("unknown_kind")
    if command.expires_at <= context.now_us:
        return Ruling("expired", "too_late")
    known_role = roles.get(command.actor)
    if known_role is None:
        return Ruling.refused("unknown_person")
    if not is_at_least(weaker(known_role, command.role), needed):
        return Ruling.refused("role_too_weak")
    return _ROOMS[command.kind](command, context)
