"""The animals as a command sees them (`ingest.commands.stock_book`): what it changes is taken over only once it is committed."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np

from analysis.animal.osmoregulation import CohortState, StageArrays
from analysis.arrays import MICROSECONDS_PER_SECOND
from ingest.chain.animals import carried_animals
from ingest.chain.moving import brought_to, exposure_from_strain, farthest_record, put_into
from ingest.commands.stock_book import FeltNear
from ingest.store import cohorts, restoring, water_record
from ingest.store.restoring import stocked
from ingest.worker.committing import animal_states

if TYPE_CHECKING:
    import sqlite3
    from collections.abc import Mapping

    from analysis.animal.stage import Stage
    from ingest.chain.chain import ChainState
    from ingest.store.block import AnimalRow
    from ingest.store.cohorts import CohortRow
    from ingest.store.ledger import Event
    from ingest.worker.plant import Plant

NOT_YET_WRITTEN = 0
"""The id of an event that is about to be written."""
NEAR_US = 10 * 60 * MICROSECONDS_PER_SECOND
"""A row of the record speaks for so long after it."""
LONGEST_RECORD_US = 7 * 24 * 3600 * MICROSECONDS_PER_SECOND
"""What is entered later than this is taken up from here: what animals are used to forgets more than a week."""


class StockBook:
    """The animals of a plant, on which one command works.

    Parameters
    ----------
    plant : Plant
    state : ChainState
    connection : sqlite3.Connection
        For what is on record.
    now_us : int
        [us UTC]
    """

    def __init__(self, plant: Plant, state: ChainState, *, connection: sqlite3.Connection, now_us: int) -> None:
        self.plant = plant
        self.state_of_chain = state
        self._connection = connection
        self._now_us = now_us
        self._rows: dict[str, CohortRow] | None = None
        self._touched: set[str] = set()

    @property
    def rows(self) -> dict[str, CohortRow]:
        """All cohorts by their id, in the order in which they came."""
        if self._rows is None:
            self._rows = {row.id: row for row in cohorts.read_all(self._connection)}
        return self._rows

    def cohort(self, cohort_id: str) -> CohortRow | None:
        """Return a cohort, also one that has ended; None if there never was one of this id."""
        return self.rows.get(cohort_id)

    def stage(self, animal: str) -> Stage | None:
        """Return a stage by its id, with the site's own figures; None if no table knows it."""
        return self.plant.stages.get(animal)

    def state(self, cohort_id: str, *, at_us: int) -> CohortState:
        """Return what the chain knows of a cohort at a moment, of one element: from its record where the moment is past."""
        live = self.live_state(cohort_id)
        row = self.plant.animals.row_of.get(cohort_id)
        if row is None:
            return live
        if live.updated_at_us[0] <= at_us:
            return brought_to(self.plant.animals.figures.take(np.array([row])), live, at_us)
        felt = self.felt_near(cohort_id, at_us)
        if felt is None:
            return live
        exposure = exposure_from_strain(felt.exposure_strain, steepness=self.plant.animals.figures.steepness)
        return replace(
            live,
            acclimated=np.array([felt.acclimated_mOsm_kg]),
            internal=np.array([felt.internal_mOsm_kg]),
            # Beyond the published median the strain says no more how far.
            exposure=live.exposure if np.isnan(exposure) else np.array([exposure]),
        )

    def live_state(self, cohort_id: str) -> CohortState:
        """Return what the chain knows of a cohort as its last reading left it, of one element."""
        row = self.plant.animals.row_of.get(cohort_id)
        if row is not None:
            return self.state_of_chain.animals.cohorts.take(np.array([row]))
        # In a tank that the site file has no more, or of a stage that no table knows: as it was when last seen.
        body = restoring.animal_bodies(self._connection).get(cohort_id)
        return CohortState.unknown(1) if body is None else CohortState.from_dicts([body["state"]])

    def after_coming(self, state: CohortState, stage: Stage, *, tank: str, at_us: int) -> CohortState:
        """Return the state of animals that came into a tank at a moment, after all that was measured there since."""
        from_us = max(at_us, self._now_us - LONGEST_RECORD_US)
        sensors = [
            int(self.plant.numbers.sensor[self.plant.site.sensor_index[sensor.id]])
            for sensor in self.plant.site.sensors_of_tank(tank)
        ]
        home = float(state.acclimated[0])
        before = farthest_record(
            *water_record.read(self._connection, sensors=sensors, from_us=from_us - NEAR_US, to_us=from_us),
            from_mOsm_kg=home,
        )
        since = farthest_record(
            *water_record.read(self._connection, sensors=sensors, from_us=from_us, to_us=self._now_us + 1),
            from_mOsm_kg=home,
        )
        water = (np.nan, np.nan)
        if before.measured_at_us.size:
            water = float(before.osmolality_mOsm_kg[-1]), float(before.temperature_degC[-1])
        return put_into(StageArrays.from_stages([stage]), state, at_us=from_us, water=water, record=since)

    def osmolality_mOsm_kg(self, tank: str, salinity: float) -> float:
        """Return the osmolality of a salinity in a tank's kind of water. [mOsm/kg]"""
        kind = self.plant.kinds[self.plant.site.tank(tank).water]
        return float(kind.osmolality_from_salinity(salinity))

    def felt_near(self, cohort_id: str, at_us: int) -> FeltNear | None:
        """Return what a cohort felt at or shortly before a moment, None where nothing is recorded."""
        row = self.rows.get(cohort_id)
        if row is None:
            return None
        found = water_record.felt(self._connection, cohort=cohort_id, from_us=at_us - NEAR_US, to_us=at_us)
        if found is None:
            return None
        felt_at_us, *values = found
        return FeltNear(felt_at_us, *(np.nan if value is None else value for value in values))

    def enter(self, event: Event, states: Mapping[str, CohortState]) -> None:
        """Take an event up into the animals of the chain: who is where, and the new states of those that it touches."""
        changed = cohorts.projected(self.rows, event, event_id=NOT_YET_WRITTEN)
        before = stocked(self.rows.values())
        self.rows.update({row.id: row for row in changed})
        # The order in which the store tells them.
        ordered = sorted(self.rows.values(), key=lambda row: (row.since, row.id))
        after = stocked(ordered)
        self._touched |= set(states)
        if after == before and not states:
            return
        plant = self.plant if after == before else self.plant.after_stock(after)
        animals = carried_animals(self.plant.animals, self.state_of_chain.animals, plant.animals, states)
        self.plant, self.state_of_chain = plant, replace(self.state_of_chain, animals=animals)

    def animal_rows(self) -> list[AnimalRow]:
        """Return what the chain remembers now of the cohorts that were touched, as rows of the store."""
        row_of = self.plant.animals.row_of
        rows = sorted(row_of[cohort] for cohort in self._touched if cohort in row_of)
        return animal_states(self.plant, self.state_of_chain, rows)
