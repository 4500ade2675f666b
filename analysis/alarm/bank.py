"""The alarms of all tanks together, with a quiet path: what changes nothing costs a few array operations.

A bank is plain frozen data: every function returns a new one, so the one before is still there when a
commit fails. Its result does not depend on how a stream of readings is cut into blocks.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from math import isnan
from typing import Any, NamedTuple

import numpy as np

from analysis.alarm.conditions import ObservedBlock
from analysis.alarm.events import Event, Observation, Tick, Verdict
from analysis.alarm.kinds import ConditionKind
from analysis.alarm.machine import due_at_us, step
from analysis.alarm.rules import AlarmRules
from analysis.alarm.state import NEVER_US, AlarmState, state_from_dict, state_to_dict
from analysis.alarm.transition import Transition
from analysis.arrays import BoolArray, IntArray
from analysis.errors import InvalidInputError


class Outcome(NamedTuple):
    """A transition and whose it is."""

    kind: ConditionKind
    tank: int
    """Index of the tank; 0 for the monitor itself."""
    transition: Transition


@dataclass(frozen=True, slots=True)
class AlarmBank:
    """The alarms of K kinds over M tanks.

    `states` holds only alarms that are not fresh, keyed (kind's index, tank). The arrays of shape (K, M) follow
    from the states and serve the quiet path.
    """

    kinds: tuple[ConditionKind, ...]
    rules: tuple[tuple[AlarmRules, ...], ...]
    """Rules of each kind for each tank."""
    states: Mapping[tuple[int, int], AlarmState]
    is_active: BoolArray
    has_pending: BoolArray
    due_at_us: IntArray

    def state(self, kind: ConditionKind, tank: int) -> AlarmState:
        """Return the state of one alarm."""
        return self.states.get((self.kinds.index(kind), tank), _FRESH)


_FRESH = AlarmState()


def alarm_bank(
    rules: Mapping[ConditionKind, Sequence[AlarmRules]],
    states: Mapping[tuple[ConditionKind, int], AlarmState] | None = None,
) -> AlarmBank:
    """Return a bank. Restoring states fires nothing.

    Parameters
    ----------
    rules : mapping of ConditionKind to sequence of AlarmRules
        For each kind its rules for each tank, all of one length.
    states : mapping, optional
        States keyed (kind, tank); an alarm without one is fresh.

    Raises
    ------
    InvalidInputError
        If the lengths differ, or a state belongs to no alarm of the bank.
    """
    kinds = tuple(rules)
    lengths = {len(items) for items in rules.values()}
    if len(lengths) != 1:
        raise InvalidInputError("alarm rules", found=sorted(lengths), allowed="as many for every kind")
    shape = (len(kinds), lengths.pop())
    bank = AlarmBank(
        kinds=kinds,
        rules=tuple(tuple(rules[kind]) for kind in kinds),
        states={},
        is_active=np.zeros(shape, dtype=np.bool_),
        has_pending=np.zeros(shape, dtype=np.bool_),
        due_at_us=np.full(shape, NEVER_US, dtype=np.int64),
    )
    changes: dict[tuple[int, int], AlarmState] = {}
    for (kind, tank), state in (states or {}).items():
        if kind not in rules or not 0 <= tank < shape[1]:
            raise InvalidInputError("alarm state", found=(kind, tank), allowed="an alarm of the bank")
        changes[kinds.index(kind), tank] = state
    return _with_states(bank, changes)


def observe(bank: AlarmBank, block: ObservedBlock) -> tuple[AlarmBank, tuple[Outcome, ...]]:
    """Let a block of observations happen; return the bank after it and all transitions.

    Parameters
    ----------
    bank : AlarmBank
        The alarms before.
    block : ObservedBlock
        Observations in the order in which the readings came.

    Returns
    -------
    tuple of (AlarmBank, tuple of Outcome)
        The same bank when nothing changed. Outcomes in the order of the readings, then of the kinds of the block.
    """
    kind_index = np.array([bank.kinds.index(kind) for kind in block.kinds])
    touched = _touched(bank, block, kind_index)
    if not touched.any():
        return bank, ()
    is_pair = np.zeros((len(block.kinds), bank.is_active.shape[1]), dtype=np.bool_)
    where_kind, where_row = np.nonzero(touched)
    is_pair[where_kind, block.tank[where_row]] = True
    candidate = is_pair[:, block.tank].T
    changes: dict[tuple[int, int], AlarmState] = {}
    outcomes: list[Outcome] = []
    for row, column in np.argwhere(candidate).tolist():
        key = (int(kind_index[column]), int(block.tank[row]))
        before = changes.get(key) or bank.states.get(key, _FRESH)
        event = _observation(block, column, row)
        after, entries = step(before, bank.rules[key[0]][key[1]], event, int(block.now_us[row]))
        if after is not before:
            changes[key] = after
        outcomes.extend(Outcome(block.kinds[column], key[1], entry) for entry in entries)
    return _with_states(bank, changes), tuple(outcomes)


def _touched(bank: AlarmBank, block: ObservedBlock, kind_index: IntArray) -> BoolArray:
    """Return, shape (kinds, readings), where an observation could change the alarm it meets in the bank."""
    pair = (kind_index[:, None], block.tank[None, :])
    # The counterpart of `machine.is_identity`: FALSE can change an active alarm, TRUE and NEAR one that is not.
    is_beyond = (block.verdict == Verdict.TRUE) | (block.verdict == Verdict.NEAR)
    touched: BoolArray = np.where(bank.is_active[pair], block.verdict == Verdict.FALSE, is_beyond)
    touched |= bank.has_pending[pair]
    touched |= bank.due_at_us[pair] <= block.now_us
    if block.is_worse is not None:
        touched |= block.is_worse & bank.is_active[pair]
    return touched


def _observation(block: ObservedBlock, column: int, row: int) -> Observation:
    value, limit = float(block.value[column, row]), float(block.limit[column, row])
    return Observation(
        verdict=Verdict(int(block.verdict[column, row])),
        measured_at_us=int(block.measured_at_us[row]),
        value=None if isnan(value) else value,
        limit=None if isnan(limit) else limit,
        reading_at_us=int(block.reading_at_us[column, row]),
        is_worse=block.is_worse is not None and bool(block.is_worse[column, row]),
    )


def tick(bank: AlarmBank, now_us: int) -> tuple[AlarmBank, tuple[Outcome, ...]]:
    """Let everything happen that time alone brings: ends of shelving, re-alarms."""
    if bank.due_at_us.min(initial=NEVER_US) > now_us:
        return bank, ()
    return _happen(bank, np.argwhere(bank.due_at_us <= now_us).tolist(), Tick(), now_us)


def act(
    bank: AlarmBank, kind: ConditionKind, tank: int, event: Event, now_us: int
) -> tuple[AlarmBank, tuple[Outcome, ...]]:
    """Let a person or a rule act on one alarm; a refusal is an outcome with its reason."""
    return _happen(bank, [(bank.kinds.index(kind), tank)], event, now_us)


def _happen(
    bank: AlarmBank, keys: Iterable[Sequence[int]], event: Event, now_us: int
) -> tuple[AlarmBank, tuple[Outcome, ...]]:
    changes: dict[tuple[int, int], AlarmState] = {}
    outcomes: list[Outcome] = []
    for kind, tank in keys:
        before = bank.states.get((kind, tank), _FRESH)
        after, entries = step(before, bank.rules[kind][tank], event, now_us)
        if after is not before:
            changes[kind, tank] = after
        outcomes.extend(Outcome(bank.kinds[kind], tank, entry) for entry in entries)
    return _with_states(bank, changes), tuple(outcomes)


def _with_states(bank: AlarmBank, changes: Mapping[tuple[int, int], AlarmState]) -> AlarmBank:
    if not changes:
        return bank
    is_active, has_pending, due = bank.is_active.copy(), bank.has_pending.copy(), bank.due_at_us.copy()
    for key, state in changes.items():
        is_active[key] = state.is_active
        has_pending[key] = state.has_pending
        due[key] = due_at_us(state, bank.rules[key[0]][key[1]])
    states = {**bank.states, **changes}
    return replace(bank, states=states, is_active=is_active, has_pending=has_pending, due_at_us=due)


def bank_to_dict(bank: AlarmBank, tank_ids: Sequence[str]) -> dict[str, dict[str, Any]]:
    """Return the states as plain JSON data, keyed by kind and then by the tank's id."""
    body: dict[str, dict[str, Any]] = {}
    for (kind, tank), state in sorted(bank.states.items()):
        body.setdefault(bank.kinds[kind].value, {})[tank_ids[tank]] = state_to_dict(state)
    return body


def states_from_dict(
    body: Mapping[str, Mapping[str, Any]], tank_ids: Sequence[str]
) -> dict[tuple[ConditionKind, int], AlarmState]:
    """Return the states that `bank_to_dict` wrote, for `alarm_bank`; tanks that are gone are left out."""
    index = {tank_id: position for position, tank_id in enumerate(tank_ids)}
    return {
        (ConditionKind(kind), index[tank_id]): state_from_dict(state)
        for kind, by_tank in body.items()
        for tank_id, state in by_tank.items()
        if tank_id in index
    }
