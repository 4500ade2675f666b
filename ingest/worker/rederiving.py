"""Deriving again, between live blocks, what is already stored: after a calibration, a cleaning, or late readings.

A job (sensor, from, to, reason) lies in the store and is done in bounded slices. Each slice adds its corrected rows and moves
the job on in one transaction, so a job that is cut off at any moment goes on where it was, and no row is made twice. What was
seen stays as it is. No alarm is raised or cleared by it: corrected rows never pass the alarms.
"""

from __future__ import annotations

import sqlite3
from dataclasses import fields, replace
from typing import TYPE_CHECKING

import numpy as np
import structlog

from analysis.errors import EuryhaleError
from analysis.flags import Flag, Quality
from analysis.flags import rolled_up as quality_of_flags
from analysis.sensor.quality.words import TESTS, QualityTest, worst
from analysis.sensor.quality.words import rolled_up as worst_of
from ingest.chain.block import RawBlock
from ingest.chain.calibrated import in_force
from ingest.chain.roster import roster
from ingest.chain.services import MOST_PERCENT, prorated
from ingest.chain.trust import BITS_A_TEST
from ingest.chain.water import Measured, measured, water_of
from ingest.site.loading import load_text
from ingest.store import best_rollups, corrected
from ingest.store.corrected import JobRow
from ingest.store.ledger import Event, append
from ingest.store.readings import ReadingRows
from ingest.water_kinds import kinds_of

if TYPE_CHECKING:
    from analysis.arrays import BoolArray, FlagArray, FloatArray, IntArray, QualityArray
    from ingest.chain.roster import Roster
    from ingest.chain.water import Water
    from ingest.store.corrected import Job
    from ingest.store.store import Store
    from ingest.worker.plant import Plant

log = structlog.get_logger(__name__)

MOST_ROWS = 20_000
MOST_OF_SENSOR = 3_000
"""So many rows of all sensors a slice looks at, and so many of its own: some tens of milliseconds between two blocks."""
SAME = 1e-9
"""Values that differ by less, relatively, are the same: nothing is superseded by its own repetition."""

FROM_VALUES = np.uint32(
    Flag.EXTRAPOLATED
    | Flag.BELOW_RANGE
    | Flag.NEGATIVE
    | Flag.NOT_FINITE
    | Flag.OUT_OF_RANGE
    | Flag.WATER_KIND_DOUBTED
    | Flag.CORRECTED
)
"""Flags that follow from the values alone, and are found anew."""


class Rederiver:
    """Works off the jobs of a store, a slice at a time.

    Parameters
    ----------
    store : Store
    """

    def __init__(self, store: Store) -> None:
        self._store = store
        self._rosters: dict[int, Roster] = {}
        self.has_work = True
        """Whether jobs may be waiting; False saves looking for them."""

    def step(self, plant: Plant, *, now_us: int) -> bool:
        """Do one slice of the oldest job; return whether there may be more to do."""
        job = corrected.next_job(self._store.connection)
        self.has_work = job is not None
        if job is None:
            self._rosters.clear()
            return False
        try:
            seen, end_us = self._slice(job)
            rows = self._superseding(plant, job, seen)
            is_done = end_us >= job.to_us
            with self._store.transaction() as connection:
                best_rollups.add(connection, rows, sensor=job.sensor)
                corrected.insert(connection, rows, reason=job.reason, now_us=now_us)
                corrected.advance(
                    connection, job, next_us=end_us, rows=len(rows), finished_at=now_us if is_done else None
                )
                if is_done:
                    append(connection, _finished(job, job.row_count + len(rows), plant, now_us))
        except sqlite3.OperationalError as error:
            log.warning("re-derivation waits", reason=str(error))
            return False
        except Exception as error:
            # A record that cannot be worked out must not end the worker, again and again at each start.
            log.exception("re-derivation given up", sensor=job.slug, reason=job.reason)
            self._give_up(job, str(error), now_us)
            return True
        if is_done:
            log.info("derived again", sensor=job.slug, reason=job.reason, rows=job.row_count + len(rows))
        return True

    def _give_up(self, job: Job, problem: str, now_us: int) -> None:
        """End a job that cannot be done, and say so in the ledger."""
        body = {"from_us": job.next_us, "to_us": job.to_us, "reason": job.reason, "problem": problem}
        event = Event(
            kind="sensor.rederivation_failed",
            subject=f"sensor/{job.slug}",
            measured_at=job.to_us,
            recorded_at=now_us,
            cause_id=job.event_id,
            body=body,
        )
        with self._store.transaction() as connection:
            corrected.advance(connection, job, next_us=job.next_us, rows=0, finished_at=now_us)
            append(connection, event)

    def _slice(self, job: Job) -> tuple[ReadingRows, int]:
        """Return the readings of the next slice, and how far it reaches."""
        connection = self._store.connection
        end_us = corrected.slice_end(connection, job, most=MOST_ROWS)
        seen = corrected.readings(connection, sensor=job.sensor, from_us=job.next_us, to_us=end_us, most=MOST_OF_SENSOR)
        return seen, end_us if len(seen) < MOST_OF_SENSOR else int(seen.measured_at[-1]) + 1

    def _superseding(self, plant: Plant, job: Job, seen: ReadingRows) -> ReadingRows:
        """Return the corrected rows of a slice: those that differ from what was seen, or from what was corrected before."""
        if not len(seen):
            return seen
        best = self._best(plant, job.slug, seen)
        first_us, last_us = int(seen.measured_at[0]), int(seen.measured_at[-1])
        before = corrected.corrected_times(
            self._store.connection, sensor=job.sensor, from_us=first_us, to_us=last_us + 1
        )
        is_superseded = np.isin(seen.measured_at, np.array(sorted(before), dtype=np.int64))
        differs = _differs(best.conductivity_mS_cm, seen.conductivity_mS_cm)
        differs |= _differs(best.temperature_degC, seen.temperature_degC)
        return _taken(best, np.flatnonzero(differs | is_superseded))

    def _best(self, plant: Plant, sensor: str, seen: ReadingRows) -> ReadingRows:
        """Return *seen* by all that is known now, each reading in the water and by the declaration of its day."""
        numbers = np.unique(seen.derivation)
        revision_of = corrected.revisions(self._store.connection, numbers.tolist())
        revision = np.array([revision_of.get(int(number), 0) for number in seen.derivation], dtype=np.int64)
        parts = []
        for number in np.unique(revision).tolist():
            rows = np.flatnonzero(revision == number)
            parts.append((rows, _derived(self._roster(plant, sensor, number), plant, sensor, _taken(seen, rows))))
        order = np.argsort(np.concatenate([rows for rows, _ in parts]))
        joined = {
            field.name: np.concatenate([getattr(part, field.name) for _, part in parts])[order]
            for field in fields(ReadingRows)
        }
        return ReadingRows(**joined)

    def _roster(self, plant: Plant, sensor: str, revision: int) -> Roster:
        """Return the sensors as declared in a revision of the site file, or as now where that cannot be read any more."""
        if revision == plant.numbers.revision:
            return plant.roster
        if revision not in self._rosters:
            text = corrected.revision_text(self._store.connection, revision)
            try:
                site = load_text(text or "", f"revision {revision}")
                kinds = kinds_of(site, tables=self._store.folder / "ion_tables")
                self._rosters[revision] = roster(site, kinds)
            except EuryhaleError as error:
                log.warning("an old site file cannot be read", revision=revision, reason=str(error))
                self._rosters[revision] = plant.roster
        known = self._rosters[revision]
        return known if sensor in known.sensors else plant.roster


def late_jobs(plant: Plant, block: RawBlock, flags: FlagArray) -> list[JobRow]:
    """Return what late readings of a block ask for: those of a stretch of record that has been corrected already."""
    if not plant.periods:
        return []
    late = np.flatnonzero((flags & np.uint32(Flag.LATE)) != 0)
    jobs = []
    for sensor in np.unique(block.sensor[late]).tolist():
        times = block.measured_at_us[late][block.sensor[late] == sensor]
        held = [one for one in plant.periods.get(plant.roster.sensors[sensor], ()) if one.found.is_corrected]
        covered = [time for time in times.tolist() if any((one.from_us or 0) <= time < one.to_us for one in held)]
        if covered:
            jobs.append(JobRow(int(plant.numbers.sensor[sensor]), min(covered), max(covered) + 1, "late readings"))
    return jobs


def _derived(own: Roster, plant: Plant, sensor: str, seen: ReadingRows) -> ReadingRows:
    """Return readings of one sensor derived anew: its declaration from *own*, all its calibrations, fouling and drift taken out."""
    count = len(seen)
    index = np.full(count, own.sensors.index(sensor), dtype=np.int64)
    block = RawBlock(
        sensor=index,
        measured_at_us=seen.measured_at,
        received_at_us=seen.received_at,
        conductivity=seen.conductivity,
        temperature=seen.temperature,
        pressure=seen.pressure,
        flags=seen.flags & ~FROM_VALUES,
    )
    said = measured(own, block)
    conductivity, temperature = said.conductivity_mS_cm, said.temperature_degC
    is_corrected = np.zeros(count, dtype=np.bool_)
    calibrations = in_force((sensor,), plant.services)
    if calibrations is not None:
        conductivity, temperature, is_corrected = calibrations.apply(
            np.zeros(count, dtype=np.int64),
            measured_at_us=seen.measured_at,
            conductivity_mS_cm=conductivity,
            temperature_degC=temperature,
        )
    best, warmth, absolute = prorated(
        plant.periods.get(sensor, ()),
        conductivity_mS_cm=conductivity,
        temperature_degC=temperature,
        measured_at_us=seen.measured_at,
    )
    is_corrected = is_corrected | (best != conductivity) | (warmth != temperature)
    found = water_of(own, block, Measured(best, warmth, said.pressure_dbar), is_corrected=is_corrected)
    return _rows(plant, seen, found, quality=_quality(seen, found, absolute))


def _quality(seen: ReadingRows, found: Water, absolute_percent: FloatArray) -> QualityArray:
    """Return the quality by the tests as they were, the flags as they are now, and the size of the correction."""
    shifts = BITS_A_TEST * np.arange(TESTS, dtype=np.int64)
    by_test = (seen.tests >> shifts[:, None] & 0xF).astype(np.uint8)
    by_test[by_test == 0] = Quality.NOT_EVALUATED
    by_test[QualityTest.GAP] = Quality.NOT_EVALUATED
    quality = worst(worst_of(by_test), quality_of_flags(found.flags))
    quality[(absolute_percent > MOST_PERCENT) & (quality != Quality.MISSING)] = Quality.FAIL
    return quality


def _rows(plant: Plant, seen: ReadingRows, found: Water, *, quality: QualityArray) -> ReadingRows:
    properties = found.properties
    return replace(
        seen,
        derivation=np.full(len(seen), plant.numbers.derivation, dtype=np.int64),
        conductivity_mS_cm=found.conductivity_mS_cm,
        temperature_degC=found.temperature_degC,
        practical_salinity=properties.practical_salinity,
        absolute_salinity_g_kg=properties.absolute_salinity_g_kg,
        density_kg_m3=properties.density_kg_m3,
        osmolality_mOsm_kg=properties.osmolality_mOsm_kg,
        osmolality_in_situ_mOsm_kg=properties.osmolality_in_situ_mOsm_kg,
        flags=found.flags,
        quality=quality,
    )


def _differs(one: FloatArray, other: FloatArray) -> BoolArray:
    with np.errstate(invalid="ignore"):
        is_same = np.abs(one - other) <= SAME * np.maximum(np.abs(other), SAME)
    return np.asarray(~(is_same | (np.isnan(one) & np.isnan(other))))


def _taken(rows: ReadingRows, index: IntArray) -> ReadingRows:
    return ReadingRows(**{field.name: getattr(rows, field.name)[index] for field in fields(ReadingRows)})


def _finished(job: Job, rows: int, plant: Plant, now_us: int) -> Event:
    body = {
        "from_us": job.from_us,
        "to_us": job.to_us,
        "reason": job.reason,
        "rows": rows,
        "derivation": plant.numbers.derivation,
    }
    return Event(
        kind="sensor.rederived",
        subject=f"sensor/{job.slug}",
        measured_at=job.to_us,
        recorded_at=now_us,
        cause_id=job.event_id,
        body=body,
    )
