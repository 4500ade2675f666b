"""What screens and reports ask of the animals: how each cohort is and why, what it may survive, and what the score foresaw."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from analysis.animal.blood import capacity_trend_per_d
from analysis.animal.constants import constants
from analysis.animal.explanation import one_sentence
from analysis.animal.fallbacks import resolved
from analysis.animal.foresight import DeathCount, Foresight, foresight
from analysis.animal.stress import Band, Driver
from analysis.animal.survival import estimate, survival_basis, survival_of_schedule
from ingest.chain.animal_roster import governing
from ingest.store import cohorts, ledger, samples
from ingest.store.restoring import animal_bodies, stocked

if TYPE_CHECKING:
    import sqlite3
    from collections.abc import Mapping, Sequence
    from typing import Any

    from analysis.animal.stage import Stage
    from analysis.animal.survival import SurvivalEstimate
    from ingest.chain.animal_roster import Stocked
    from ingest.store.cohorts import CohortRow
    from ingest.store.samples import AnimalSample

LEAST_STRESS = 1.0
"""Below this no reason is given: the water suits them."""
AHEAD_H = 24.0
"""For so long the water is taken to stay as it is where survival is looked ahead. [h]"""


@dataclass(frozen=True, slots=True)
class AnimalSight:
    """One cohort on the site, as a person should see it. NaN where not known; osmolalities in mOsm/kg.

    Attributes
    ----------
    cohort : CohortRow
        Tank, stage, number, dates, what was noted; `event_id` is what a command on it is to expect.
    stage : Stage or None
        The confirmed stage with the site's own figures; None if no table knows it.
    proposed : str or None
        The stage to which its age points and that nobody has confirmed; until then the stricter figures govern.
    measured_at : int or None
        When the chain last moved it on. [us UTC]
    stress : float
        0 to 100.
    strains : mapping of str to float
        range, change, exposure, thermal: 0 to 1.
    band, driver : Band, Driver
    water, acclimated, uncertainty, internal, gap : float
        The water, what they are used to and how sure that is, their body fluid, and body fluid minus water.
    sentence : str
        What the stress is and why, and which way water moves.
    survival : SurvivalEstimate or None
        Of what they have been through so far, by the exposure that is still in them; None: not known.
    survival_ahead : SurvivalEstimate or None
        The same if the water stays as it is for `AHEAD_H`.
    has_own_figures : bool
        Whether the site has set a figure of this stage itself (`Figure.certainty` is SITE).
    blood : AnimalSample or None
        The newest value of body fluid, usable or not.
    capacity_trend_per_d : float
        Slope of the share of osmoregulatory capacity over the usable values. [1/d]
    postlarvae_test : AnimalSample or None
        The newest stress test of postlarvae.
    """

    cohort: CohortRow
    stage: Stage | None
    proposed: str | None
    measured_at: int | None
    stress: float
    strains: Mapping[str, float]
    band: Band
    driver: Driver
    water: float
    acclimated: float
    uncertainty: float
    internal: float
    gap: float
    sentence: str
    survival: SurvivalEstimate | None
    survival_ahead: SurvivalEstimate | None
    has_own_figures: bool
    blood: AnimalSample | None
    capacity_trend_per_d: float
    postlarvae_test: AnimalSample | None


def sights(connection: sqlite3.Connection, stages: Mapping[str, Stage]) -> list[AnimalSight]:
    """Return all cohorts that are on the site, in the order in which they came.

    Parameters
    ----------
    connection : sqlite3.Connection
    stages : mapping of str to Stage
        The species tables with the site's own figures (`ingest.chain.animal_roster.known_stages`).
    """
    bodies = animal_bodies(connection)
    taken: dict[str, list[AnimalSample]] = {}
    for sample in samples.read(connection):
        taken.setdefault(sample.cohort, []).append(sample)
    found = []
    for row in cohorts.read_all(connection):
        if row.ended_at is None:
            [[stock]] = stocked([row]).values()
            found.append(_sight(row, stock, stages, bodies.get(row.id), taken.get(row.id, ())))
    return found


def _sight(
    row: CohortRow,
    stock: Stocked,
    stages: Mapping[str, Stage],
    body: Mapping[str, Any] | None,
    taken: Sequence[AnimalSample],
) -> AnimalSight:
    state = {} if body is None else body["state"]
    latest = {} if body is None else body["latest"]
    governed = governing(stock, stages)
    confirmed = stages.get(row.animal)
    band, driver = Band(latest.get("band") or 0), Driver(latest.get("driver") or 0)
    water, acclimated = _number(state.get("osmolality")), _number(state.get("acclimated"))
    exposure, gap = _number(state.get("exposure")), _number(latest.get("gap_mOsm_kg"))
    so_far, ahead = _survival(governed, water, acclimated, exposure, _number(state.get("temperature")))
    bloods = [sample for sample in taken if sample.kind == samples.BLOOD]
    tests = [sample for sample in taken if sample.kind == samples.POSTLARVAE]
    return AnimalSight(
        cohort=row,
        stage=confirmed,
        proposed=stock.proposed,
        measured_at=state.get("updated_at_us"),
        stress=_number(latest.get("stress")),
        strains={name: _number(latest.get(f"{name}_strain")) for name in ("range", "change", "exposure", "thermal")},
        band=band,
        driver=driver,
        water=water,
        acclimated=acclimated,
        uncertainty=_number(state.get("uncertainty")),
        internal=_number(latest.get("internal_mOsm_kg")),
        gap=gap,
        sentence=one_sentence(
            band=band,
            driver=Driver.NONE if _number(latest.get("stress")) < LEAST_STRESS else driver,
            water_mOsm_kg=water,
            acclimated_mOsm_kg=acclimated,
            optimal_low_mOsm_kg=math.nan if governed is None else resolved(governed).value("optimal_low"),
            gap_mOsm_kg=gap,
        ),
        survival=so_far,
        survival_ahead=ahead,
        has_own_figures=confirmed is not None and any(f.certainty == "site" for f in confirmed.figures.values()),
        blood=bloods[-1] if bloods else None,
        capacity_trend_per_d=_trend(bloods),
        postlarvae_test=tests[-1] if tests else None,
    )


def _survival(
    stage: Stage | None, water: float, acclimated: float, exposure: float, temperature: float
) -> tuple[SurvivalEstimate | None, SurvivalEstimate | None]:
    """Return what they survive so far, and if the water stays; None where the literature does not say."""
    if stage is None or math.isnan(water) or math.isnan(acclimated) or math.isnan(exposure):
        return None, None
    basis = survival_basis(stage, lowest=water, highest=water, home=acclimated)
    if basis is None:
        return None, None
    ahead = survival_of_schedule(
        stage,
        acclimated_mOsm_kg=acclimated,
        hours=np.array([AHEAD_H]),
        osmolality_mOsm_kg=np.array([water]),
        temperature_degC=np.array([temperature]),
    )
    if ahead is None:
        return None, None
    steepness = constants().steepness
    so_far = estimate(exposure, steepness=steepness, certainty=basis[0], sources=basis[1])
    return so_far, estimate(
        exposure + ahead.exposure, steepness=steepness, certainty=ahead.certainty, sources=ahead.sources
    )


def _trend(bloods: Sequence[AnimalSample]) -> float:
    usable = [sample for sample in bloods if sample.body["is_usable"]]
    times = np.array([sample.taken_at for sample in usable], dtype=np.float64)
    shares = np.array([_number(sample.body["capacity_share"]) for sample in usable], dtype=np.float64)
    return capacity_trend_per_d(times, shares)


def foreseen(connection: sqlite3.Connection, cohort: str) -> Foresight:
    """Return how the losses of a cohort and its stress before them went together: did the score foresee them?"""
    counts = [
        DeathCount(
            from_us=int(event.body["from_us"]),
            to_us=event.recorded_at if event.measured_at is None else event.measured_at,
            dead=int(event.body["dead"]),
            before=int(event.body["number_before"]),
        )
        for _, event in ledger.read(connection, kind_prefix=cohorts.DIED)
        if event.body["cohort"] == cohort
    ]
    rows = connection.execute(
        "SELECT measured_at, stress FROM stress WHERE cohort = ? ORDER BY measured_at", (cohort,)
    ).fetchall()
    return foresight(
        counts,
        times_us=np.array([row[0] for row in rows], dtype=np.int64),
        stress=np.array([row[1] for row in rows], dtype=np.float64),
    )


def _number(value: float | None) -> float:
    return math.nan if value is None else float(value)
