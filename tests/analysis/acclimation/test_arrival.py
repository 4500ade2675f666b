"""The arrival and dispatch sheet."""

from __future__ import annotations

from datetime import datetime, timedelta

import pytest

from analysis.acclimation.ammonia import PackedWater
from analysis.acclimation.arrival import ASKED_BEFOREHAND, DispatchSheet, sheet_cautions, sheet_lines
from analysis.acclimation.task import Water
from analysis.errors import InvalidInputError
from tests.analysis.acclimation.tasks import EIGHT


def sheet(**changes: object) -> DispatchSheet:
    settings: dict[str, object] = {
        "animal": "penaeus-vannamei/pl10",
        "number": 80_000,
        "acclimated_to": Water(12.0, 26.0, 7.9),
        "since": EIGHT - timedelta(days=3),
        "packed_at": EIGHT,
        "packed": PackedWater(6.0, total_ammonia_mg_L=4.0, ph=6.9, oxygen_mg_L=14.0, animals_per_L=450.0),
        "bags": 16,
        "litres_per_bag": 12.0,
        "sender": "Marta",
    } | changes
    return DispatchSheet(**settings)  # type: ignore[arg-type]


def test_it_says_what_they_are_used_to_since_when_and_how_they_travel() -> None:
    told = dict(sheet_lines(sheet()))
    assert told["Acclimated to"] == "salinity 12, 26 degC, pH 7.9"
    assert "3.0 d before packing" in told["Since"]
    assert "6 h ago" in told["Packed"]
    assert told["Density"] == "450 a litre"
    assert told["pH in the bag"] == "6.9"
    assert told["Receiving water"] == "not told yet"
    assert told["Oxygen in the bag"] == "14 mg/L"


def test_what_was_not_asked_stays_open() -> None:
    assert sheet().open_questions == ASKED_BEFOREHAND
    answered = sheet(answers=("4, inland water, K 60 Mg 180", "29 degC, pH 8.1", "", "none, measured by Rui"))
    assert answered.open_questions == (ASKED_BEFOREHAND[2], ASKED_BEFOREHAND[4])


def test_the_receiving_ph_shortens_the_time_that_the_bag_serves() -> None:
    def serves(receiving: Water | None) -> str:
        return dict(sheet_lines(sheet(receiving=receiving)))["The bag still serves"]

    assert "closed bag" in serves(None)
    assert serves(Water(4.0, 29.0, 8.4)).startswith("0.0 h: un-ionised ammonia")


def test_what_was_not_measured_says_so() -> None:
    told = dict(sheet_lines(sheet(packed=PackedWater(2.0))))
    assert told["Total ammonia in the bag"] == "not measured"
    assert sheet_cautions()


@pytest.mark.parametrize(
    "changes",
    [
        {"since": datetime(2026, 12, 1)},  # noqa: DTZ001
        {"number": -1},
        {"bags": 0},
        {"answers": ("x",) * 9},
    ],
)
def test_impossible_sheets_are_refused(changes: dict[str, object]) -> None:
    with pytest.raises(InvalidInputError):
        sheet(**changes)
