"""The worker as a command sees it: what a command changes is taken over only once it is committed."""

from __future__ import annotations

from typing import TYPE_CHECKING

from analysis.alarm.kinds import ConditionKind
from ingest.chain.chain import Happened, act
from ingest.worker.committing import occurrence

if TYPE_CHECKING:
    from analysis.alarm.events import Event
    from analysis.alarm.transition import Transition
    from ingest.chain.chain import ChainState
    from ingest.store.block import Occurrence
    from ingest.worker.plant import Plant


class Bench:
    """A copy of the chain's state on which one command works (`ingest.commands.context.Context`)."""

    def __init__(self, plant: Plant, state: ChainState, *, now_us: int) -> None:
        self._plant = plant
        self.state = state
        self._now_us = now_us

    @property
    def now_us(self) -> int:
        """The time of this ruling. [us UTC]"""
        return self._now_us

    def act(self, subject: str, condition: str, event: Event) -> tuple[Transition, ...] | None:
        """Put a person's act to an alarm; None if there is no such alarm."""
        tank = self._plant.site.tank_index.get(subject.removeprefix("tank/"))
        kinds = {kind.value: kind for kind in self._plant.tanks.rules}
        if tank is None or condition not in kinds:
            return None
        output = act(self.state, tank=tank, kind=kinds[condition], event=event, now_us=self._now_us)
        self.state = output.state
        return tuple(item.transition for item in output.happened)

    def occurrences(self, subject: str, condition: str, transitions: tuple[Transition, ...]) -> tuple[Occurrence, ...]:
        """Return what *transitions* leave in the ledger."""
        tank = self._plant.site.tank_index[subject.removeprefix("tank/")]
        kind = ConditionKind(condition)
        return tuple(
            occurrence(self._plant, Happened(tank, kind, item), now_us=self._now_us, actor=item.who)
            for item in transitions
        )
