"""What a command on animals may reach: the cohorts as the ledger tells them, what the chain remembers of them, their water."""

from __future__ import annotations

from typing import TYPE_CHECKING, NamedTuple, Protocol

if TYPE_CHECKING:
    from collections.abc import Mapping

    from analysis.animal.osmoregulation import CohortState
    from analysis.animal.stage import Stage
    from ingest.store.cohorts import CohortRow
    from ingest.store.ledger import Event


class FeltNear(NamedTuple):
    """A row of the record of what a cohort felt; NaN where not known. [us UTC], [mOsm/kg], [1]"""

    measured_at_us: int
    acclimated_mOsm_kg: float
    internal_mOsm_kg: float
    gap_mOsm_kg: float
    exposure_strain: float


class StockBook(Protocol):
    """The animals as a command sees them."""

    def cohort(self, cohort_id: str) -> CohortRow | None:
        """Return a cohort, also one that has ended; None if there never was one of this id."""
        ...

    def stage(self, animal: str) -> Stage | None:
        """Return a stage by its id, with the site's own figures; None if no table knows it."""
        ...

    def state(self, cohort_id: str, *, at_us: int) -> CohortState:
        """Return what the chain knows of a cohort at a moment, of one element: from its record where the moment is past."""
        ...

    def live_state(self, cohort_id: str) -> CohortState:
        """Return what the chain knows of a cohort as its last reading left it, of one element."""
        ...

    def after_coming(self, state: CohortState, stage: Stage, *, tank: str, at_us: int) -> CohortState:
        """Return the state of animals that came into a tank at a moment, after all that was measured there since."""
        ...

    def osmolality_mOsm_kg(self, tank: str, salinity: float) -> float:
        """Return the osmolality of a salinity in a tank's kind of water. [mOsm/kg]"""
        ...

    def felt_near(self, cohort_id: str, at_us: int) -> FeltNear | None:
        """Return what a cohort felt at or shortly before a moment, None where nothing is recorded."""
        ...

    def enter(self, event: Event, states: Mapping[str, CohortState]) -> None:
        """Take an event up into the animals of the chain: who is where, and the new states of those that it touches."""
        ...
