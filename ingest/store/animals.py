"""What screens and reports ask of the animals: how each cohort is and why, what it may survive, and what the score foresaw."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np

from analysis.animal.blood import capacity_trend_per_d
from analysis.animal.explanation import one_sentence
from analysis.animal.fallbacks import resolved
from analysis.animal.foresight import DeathCount, Foresight, foresight
from analysis.animal.stage import Certainty
from analysis.animal.stress import Band, Driver
from analysis.animal.survival import estimate, peak_exposure, survival_basis
from ingest.chain.animal_roster import figures_of, governing
from ingest.store import cohorts, ledger, samples
from ingest.store.restoring import animal_bodies, stocked

if TYPE_CHECKING:
    import sqlite3
    from collections.abc import Mapping, Sequence

    from analysis.animal.stage import Stage
    from analysis.animal.survival import SurvivalEstimate
    from ingest.store.cohorts import CohortRow
    from ingest.store.samples import AnimalSample

LEAST_STRESS = 1.0
"""Below this no reason is given: the water suits them."""
AHEAD_H = 24.0
"""For so long the water is taken to stay as it is where survival is looked ahead. [h]"""


NOTHING_KNOWN: Mapping[str, Mapping[str, Any]] = {"state": {}, "latest": {}}


class Estimates(NamedTuple):
    """Survival of one cohort; None: not known."""

    so_far: SurvivalEstimate | None
    ahead: SurvivalEstimate | None


@dataclass(frozen=True, slots=True)
class AnimalSight:
    """One cohort on the site, as a person should see it. NaN where not known; osmolalities in mOsm/kg.

    Attributes
    ----------
    cohort : CohortRow
        Tank, stage, number, dates, what was noted; `event_id` is what a command on it is to expect.
    stage : Stage or None
        The confirmed stage with the site's own figures; None if no table knows it.
    governing : Stage or None
        What holds: the confirmed stage, on each side made stricter by the proposed one.
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
    governing: Stage | None
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
    present = [row for row in cohorts.read_all(connection) if row.ended_at is None]
    stocks = [stock for row in present for [stock] in stocked([row]).values()]
    governed = [governing(stock, stages) for stock in stocks]
    minds = [bodies.get(row.id, NOTHING_KNOWN) for row in present]
    survival = _survival(governed, [mind["state"] for mind in minds])
    return [
        _sight(row, stock.proposed, stages.get(row.animal), stage, mind, taken.get(row.id, ()), estimates)
        for row, stock, stage, mind, estimates in zip(present, stocks, governed, minds, survival, strict=True)
    ]


def _sight(
    row: CohortRow,
    proposed: str | None,
    confirmed: Stage | None,
    governed: Stage | None,
    mind: Mapping[str, Any],
    taken: Sequence[AnimalSample],
    survival: Estimates,
) -> AnimalSight:
    """Return one cohort; *mind* is what the chain remembers of it, *governed* the stage whose figures hold for it."""
    state, latest = mind["state"], mind["latest"]
    band, driver = Band(latest.get("band") or 0), Driver(latest.get("driver") or 0)
    water, acclimated = _number(state.get("osmolality")), _number(state.get("acclimated"))
    stress, gap = _number(latest.get("stress")), _number(latest.get("gap_mOsm_kg"))
    bloods = [sample for sample in taken if sample.kind == samples.BLOOD]
    tests = [sample for sample in taken if sample.kind == samples.POSTLARVAE]
    return AnimalSight(
        cohort=row,
        stage=confirmed,
        governing=governed,
        proposed=proposed,
        measured_at=state.get("updated_at_us"),
        stress=stress,
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
            driver=Driver.NONE if stress < LEAST_STRESS else driver,
            water_mOsm_kg=water,
            acclimated_mOsm_kg=acclimated,
            optimal_low_mOsm_kg=math.nan if governed is None else resolved(governed).value("optimal_low"),
            gap_mOsm_kg=gap,
        ),
        survival=survival.so_far,
        survival_ahead=survival.ahead,
        has_own_figures=confirmed is not None
        and any(figure.certainty is Certainty.SITE for figure in confirmed.figures.values()),
        blood=bloods[-1] if bloods else None,
        capacity_trend_per_d=_trend(bloods),
        postlarvae_test=tests[-1] if tests else None,
    )


def _survival(stages: Sequence[Stage | None], states: Sequence[Mapping[str, Any]]) -> list[Estimates]:
    """Return what cohorts survive so far, and if the water stays; None where the literature does not say. All at once."""
    columns = [
        np.array([_number(state.get(name)) for state in states])
        for name in ("osmolality", "acclimated", "exposure", "temperature")
    ]
    water, home, exposure, _ = columns
    is_known = np.isfinite(water) & np.isfinite(home) & np.isfinite(exposure)
    told = {
        index: (stage, basis)
        for index, stage in enumerate(stages)
        if stage is not None
        and is_known[index]
        and (basis := survival_basis(stage, lowest=water[index], highest=water[index], home=home[index])) is not None
    }
    estimates = [Estimates(None, None)] * len(stages)
    if not told:
        return estimates
    index = np.array(list(told), dtype=np.int64)
    figures = figures_of([stage for stage, _ in told.values()])
    water, home, exposure, temperature = (column[index] for column in columns)
    ahead = peak_exposure(
        figures,
        acclimated_mOsm_kg=home,
        hours=np.full((1, index.size), AHEAD_H),
        osmolality_mOsm_kg=water[None, :],
        temperature_degC=temperature[None, :],
    )
    for place, dose, more, (_, (certainty, sources)) in zip(index, exposure, ahead, told.values(), strict=True):
        so_far, later = (
            estimate(float(total), steepness=figures.steepness, certainty=certainty, sources=sources)
            for total in (dose, dose + more)
        )
        estimates[place] = Estimates(so_far, later)
    return estimates


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
