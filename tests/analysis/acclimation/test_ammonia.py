"""Un-ionised ammonia against published tables, and the hours that a bag still serves."""

from __future__ import annotations

import math

import pytest

from analysis.acclimation.ammonia import (
    PackedCaps,
    PackedWater,
    ammonium_pka,
    packed_time_left,
    unionised_ammonia_fraction,
)
from analysis.errors import InvalidInputError
from tests.reference.published import PublishedRow, is_met, rows


@pytest.mark.parametrize("row", [*rows("bower_bidwell_1978"), *rows("trussell_1972")], ids=lambda row: row.id)
def test_share_agrees_with_the_printed_tables(row: PublishedRow) -> None:
    found = 100.0 * float(
        unionised_ammonia_fraction(ph=row.inputs["ph"], salinity=row.inputs["sp"], temperature_degC=row.inputs["t"])
    )
    assert is_met(found, row), f"{row.id}: found {found:.4g}, printed {row.expected}"


@pytest.mark.parametrize("row", rows("bell_2008"), ids=lambda row: row.id)
def test_pka_is_that_of_the_published_equation(row: PublishedRow) -> None:
    assert is_met(float(ammonium_pka(salinity=row.inputs["sp"], temperature_degC=row.inputs["t"])), row)


def test_raising_ph_from_6_8_to_8_1_multiplies_it_eighteen_fold() -> None:
    low, high = unionised_ammonia_fraction(ph=[6.8, 8.1], salinity=[4.0, 4.0], temperature_degC=[28.0, 28.0])
    assert high / low == pytest.approx(18.0, abs=1.0)


def test_fresh_and_sea_water_relations_meet_within_two_percent() -> None:
    fresh, brackish = unionised_ammonia_fraction(ph=8.0, salinity=[0.49, 0.51], temperature_degC=25.0)
    assert fresh == pytest.approx(brackish, rel=0.02)


def test_aeration_that_lifts_the_ph_ends_the_bag() -> None:
    packed = PackedWater(hours_packed=8.0, total_ammonia_mg_L=6.0, ph=6.8, oxygen_mg_L=12.0, animals_per_L=400.0)
    calm = packed_time_left(packed, salinity=30.0, temperature_degC=24.0)
    lifted = packed_time_left(packed, salinity=30.0, temperature_degC=28.0, receiving_ph=8.1)
    assert calm.hours == pytest.approx(16.0)  # 24 h in a closed bag; ammonia would allow more
    assert lifted.hours == 0.0
    assert "un-ionised ammonia" in lifted.reason
    assert "common practice" in lifted.source


def test_what_was_not_measured_is_named_and_not_judged() -> None:
    left = packed_time_left(PackedWater(hours_packed=30.0, is_aerated=True), salinity=30.0, temperature_degC=24.0)
    assert math.isinf(left.hours)
    assert left.unknown == ("total ammonia or pH", "oxygen", "density")


@pytest.mark.parametrize(
    ("packed", "reason"),
    [
        (PackedWater(1.0, oxygen_mg_L=2.0), "oxygen"),
        (PackedWater(1.0, animals_per_L=900.0), "animals a litre"),
        (PackedWater(40.0), "closed bag"),
    ],
)
def test_each_cap_can_end_the_bag(packed: PackedWater, reason: str) -> None:
    left = packed_time_left(packed, salinity=30.0, temperature_degC=24.0)
    assert left.hours == 0.0
    assert reason in left.reason


def test_a_site_may_set_other_caps() -> None:
    packed = PackedWater(10.0, total_ammonia_mg_L=5.0, ph=7.5)
    strict, lax = (
        packed_time_left(
            packed, salinity=30.0, temperature_degC=24.0, caps=PackedCaps(unionised_ammonia_mg_L=cap, hours_packed=1e3)
        ).hours
        for cap in (0.05, 0.3)
    )
    assert strict == 0.0
    assert lax > 5.0


def test_negative_hours_are_refused() -> None:
    with pytest.raises(InvalidInputError, match="hours packed"):
        PackedWater(-1.0)
