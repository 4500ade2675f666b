"""The stages to which the animals' ages point, proposed in the ledger for a person to confirm."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from analysis.animal.ageing import proposed_stage
from ingest.store import cohorts, water_record
from ingest.store.ledger import Event

if TYPE_CHECKING:
    import sqlite3

    from analysis.animal.ageing import StageProposal
    from ingest.store.cohorts import CohortRow
    from ingest.worker.stock_book import StockBook


def proposals(book: StockBook, connection: sqlite3.Connection, *, now_us: int) -> list[Event]:
    """Return the proposals that have become due: stages later than the confirmed one, neither proposed nor declined yet."""
    found = []
    for row in book.rows.values():
        if row.ended_at is not None:
            continue
        proposal = _proposal(book, row, connection, now_us)
        if proposal is not None:
            found.append(_event(row, proposal, now_us))
    return found


def _proposal(book: StockBook, row: CohortRow, connection: sqlite3.Connection, now_us: int) -> StageProposal | None:
    current = book.stage(row.animal)
    dates = row.body.get("hatched_at"), row.body.get("metamorphosed_at")
    if current is None or dates == (None, None):
        return None
    proposal = proposed_stage(
        current,
        book.plant.stages,
        now_us=now_us,
        hatched_at_us=dates[0],
        metamorphosed_at_us=dates[1],
        mean_temperature_degC=_mean_temperature_degC(row, connection),
    )
    known = row.body.get("proposed")
    already = {row.animal, row.body.get("declined"), None if known is None else known["stage"]}
    if proposal is None or proposal.stage in already:
        return None
    # A person who saw a later stage than the calendar knows better.
    return None if proposal.stage in {stage.id for stage in current.younger} else proposal


def _mean_temperature_degC(row: CohortRow, connection: sqlite3.Connection) -> float:
    """Return the mean temperature in the tank since the cohort came into it; NaN where nothing is rolled up yet."""
    mean = water_record.mean_temperature_degC(
        connection, tank=row.tank, since_us=row.body.get("in_tank_since", row.since)
    )
    return math.nan if mean is None else mean


def _event(row: CohortRow, proposal: StageProposal, now_us: int) -> Event:
    body = {
        "cohort": row.id,
        "tank": row.tank,
        "animal": row.animal,
        "number": row.number,
        "proposed": {
            "stage": proposal.stage,
            "age_d": proposal.age_d,
            "developed_d": proposal.developed_d,
            "since": proposal.since,
        },
    }
    return Event(
        kind=cohorts.STAGE_PROPOSED, subject=f"cohort/{row.id}", measured_at=now_us, recorded_at=now_us, body=body
    )
