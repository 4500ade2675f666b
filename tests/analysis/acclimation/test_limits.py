"""Limits: efforts, published rates, gates, overrides."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from analysis.acclimation.effort import Band, RateLaw, constant_rate, fraction_then_constant
from analysis.acclimation.limits import Override, default_limits, hours_at_the_limit
from analysis.acclimation.published import all_gates, all_rates, gates, rates
from analysis.animal import tables
from analysis.errors import InvalidInputError
from tests.analysis.acclimation.tasks import limits, override, task

LAW = fraction_then_constant(0.25, down_to=2.0, then=0.25)
salinities = st.floats(min_value=0.0, max_value=60.0)


def named(animal: str, start: float, target: float, **more: object) -> dict[str, object]:
    found = default_limits(tables.find(animal), from_salinity=start, to_salinity=target, **more)
    return {limit.name: limit for limit in found.named}


def test_an_hour_of_a_quarter_of_the_present_salinity_leaves_three_quarters() -> None:
    for salinity in (36.0, 20.0, 4.0):
        used = float(LAW.effort(salinity)) - float(LAW.effort(0.75 * salinity))
        assert used == pytest.approx(1.0, rel=1e-12)
    assert float(LAW.effort(2.0)) == pytest.approx(8.0)  # 2 units at 0.25 an hour


def test_the_times_of_the_published_fractions_are_those_of_the_facts() -> None:
    """23 to 4 at a constant fraction p an hour: 8.3, 6.1 and 2.8 h (derived from MCGRAW2002: 19, 25, 47 %)."""
    for fraction, hours in ((0.19, 8.3), (0.25, 6.1), (0.47, 2.8)):
        law = fraction_then_constant(fraction, down_to=0.0, then=1.0)
        assert float(law.effort(23.0)) - float(law.effort(4.0)) == pytest.approx(hours, abs=0.05)


@given(low=salinities, high=salinities)
def test_effort_rises_with_the_level_and_scalar_equals_array(low: float, high: float) -> None:
    low, high = sorted((low, high))
    for law in (LAW, constant_rate(1.3), fraction_then_constant(0.4, down_to=0.0, then=1.0)):
        assert float(law.effort(low)) <= float(law.effort(high))
        assert np.array_equal(law.effort(np.array([low, high])), [float(law.effort(low)), float(law.effort(high))])


@given(level=st.floats(min_value=0.05, max_value=60.0))
def test_effort_is_the_integral_of_the_allowed_rate(level: float) -> None:
    small = 1e-6 * level
    slope = (float(LAW.effort(level + small)) - float(LAW.effort(level))) / small
    rate = 0.25 if level < 2.0 else -math.log(0.75) * level
    assert abs(level - 2.0) < 1e-3 or slope == pytest.approx(1.0 / rate, rel=1e-3)


@pytest.mark.parametrize(
    "build",
    [
        lambda: Band(0.0, "fraction", 1.0),
        lambda: Band(0.0, "absolute", 0.0),
        lambda: Band(1.0, "fraction", 0.2, reference=2.0),
        lambda: RateLaw(()),
        lambda: RateLaw((Band(2.0, "absolute", 1.0),)),
        lambda: RateLaw((Band(0.0, "absolute", 1.0), Band(0.0, "absolute", 2.0))),
    ],
)
def test_bands_that_make_no_law_are_refused(build: object) -> None:
    with pytest.raises(InvalidInputError):
        build()  # type: ignore[operator]


def test_every_row_of_the_tables_is_usable_and_has_a_source() -> None:
    stages = tables.load()
    known = {*tables.sources(), "HATCH_MEM"}
    for rate in all_rates():
        assert rate.source in known, rate
        assert rate.certainty in {"looked up", "derived", "memory", "common practice"}
        if not rate.is_general:
            assert any(animal.startswith(rate.species + "/") for animal in stages), rate
    for gate in all_gates():
        assert gate.source in known, gate
        assert gate.text
    for animal in stages:
        for direction in ("down", "up"):
            assert rates(animal, direction=direction, per="h"), animal


def test_down_is_a_fraction_to_two_then_a_quarter_an_hour() -> None:
    found = named("penaeus-vannamei/pl10", 30.0, 1.0)["salinity per hour"]
    assert found.value == "25 % of the present salinity an hour down to 2, then 0.25 an hour"  # type: ignore[attr-defined]
    assert found.source == "MCGRAW2002; SRAC2601"  # type: ignore[attr-defined]
    assert "common practice" in found.certainty  # type: ignore[attr-defined]


def test_up_is_a_fixed_rate_from_the_general_rule() -> None:
    found = named("penaeus-vannamei/pl10", 4.0, 20.0)["salinity per hour"]
    assert (found.value, found.source) == ("1 an hour", "ECOURSE_SAL")  # type: ignore[attr-defined]


def test_the_step_is_a_fifth_of_the_way_to_the_abrupt_median() -> None:
    found = limits(task("penaeus-vannamei/pl7", 27.9, 15.0))
    (step,) = [rolling for rolling in found.rolling if rolling.limit.name == "salinity per step"]
    assert step.down.bands[0].allowed == pytest.approx(0.2 * (27.9 - 3.0))
    assert "SAMOCHA1998" in step.limit.source
    assert step.window_min == 10.0
    unknown = limits(task("penaeus-vannamei/pl10", 4.0, 20.0))
    (step,) = [rolling for rolling in unknown.rolling if rolling.limit.name == "salinity per step"]
    assert step.limit.certainty == "assumed"


def test_the_day_governs_where_only_a_rate_per_day_is_published() -> None:
    tilapia = limits(task("oreochromis-niloticus/juvenile", 0.0, 35.0))
    assert tilapia.governs == "day"
    assert {"salinity per day", "salinity per hour"} <= {limit.name for limit in tilapia.named}
    shrimp = limits(task("penaeus-vannamei/pl10", 23.0, 4.0))
    assert shrimp.governs == "hour"
    assert [rolling.limit.name for rolling in shrimp.left_out] == ["salinity per day"]
    by_day = limits(task("penaeus-vannamei/pl10", 23.0, 4.0), governs="day")
    assert not by_day.left_out


def test_hours_at_the_limit_are_those_of_the_published_rates() -> None:
    shrimp = limits(task("penaeus-vannamei/pl10", 23.0, 4.0))
    assert hours_at_the_limit(shrimp.rolling[0], from_level=23.0, to_level=4.0) == pytest.approx(6.08, abs=0.01)
    bass = limits(task("dicentrarchus-labrax/fry-juvenile", 37.0, 0.0))
    (day,) = [rolling for rolling in bass.rolling if rolling.limit.name == "salinity per day"]
    assert hours_at_the_limit(day, from_level=37.0, to_level=0.0) / 24.0 == pytest.approx(37.0 / 2.2, rel=1e-9)


def test_gates_ask_for_age_chloride_window() -> None:
    assert any("PL12" in gate.text for gate in gates("penaeus-vannamei/pl10", direction="down", target_salinity=4.0))
    assert not any(
        "PL12" in gate.text for gate in gates("penaeus-vannamei/pl12", direction="down", target_salinity=4.0)
    )
    (chloride,) = gates("sciaenops-ocellatus/juvenile", direction="down", target_salinity=0.2)
    assert (chloride.kind, chloride.least_mg_L) == ("chloride", 130.0)
    assert any(gate.kind == "window" for gate in gates("salmo-salar/smolt", direction="up", target_salinity=34.0))
    confirmed = limits(task("penaeus-vannamei/pl10", 23.0, 4.0), confirmed={"age": "Marta"})
    assert [gate.confirmed_by for gate in confirmed.gates if gate.kind == "age"] == ["Marta"]


def test_an_override_names_its_author_and_reason_and_keeps_the_default_in_sight() -> None:
    found = limits(task("penaeus-vannamei/pl10", 23.0, 4.0), overrides=[override("salinity per hour", 2.0)])
    (limit,) = [limit for limit in found.named if limit.name == "salinity per hour"]
    assert limit.value.startswith("2 an hour (default: 25 %")
    assert (limit.overridden_by, limit.reason, limit.certainty) == ("Marta", "trial of a slower batch", "overridden")
    lifted = limits(task("penaeus-vannamei/pl10", 23.0, 4.0), overrides=[override("stress of the journey", None)])
    assert math.isinf(lifted.stress_cap)


@pytest.mark.parametrize(
    "build",
    [
        lambda: Override("salinity per hour", 2.0, by="", reason="x"),
        lambda: Override("salinity per hour", 2.0, by="Marta", reason=" "),
        lambda: Override("salinity per hour", -1.0, by="Marta", reason="x"),
        lambda: limits(task("penaeus-vannamei/pl10", 23.0, 4.0), overrides=[override("salinity per week", 2.0)]),
        lambda: rates("penaeus-vannamei", direction="down", per="h"),
    ],
)
def test_what_cannot_be_a_limit_is_refused(build: object) -> None:
    with pytest.raises(InvalidInputError):
        build()  # type: ignore[operator]
