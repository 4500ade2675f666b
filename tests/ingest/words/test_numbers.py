"""Numbers as people read them."""

from __future__ import annotations

import math

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from ingest.words import numbers


@pytest.mark.parametrize(
    ("value", "kind", "uncertainty", "text"),
    [
        (27.4123, "salinity", math.nan, "27.4"),
        (27.4123, "salinity", 0.2, "27.4 ± 0.2"),
        (27.4123, "salinity", 0.03, "27.41 ± 0.03"),
        (27.4123, "salinity", 3.0, "27 ± 3"),
        (28.55, "temperature", math.nan, "28.6 °C"),
        (801.7, "osmolality", math.nan, "802 mOsm/kg"),
        (801.7, "osmolality", 12.0, "802 ± 12 mOsm/kg"),
        (-0.04, "temperature", math.nan, "0.0 °C"),
        (-1.84, "temperature", math.nan, "−1.8 °C"),
        (None, "salinity", math.nan, "–"),
        (math.nan, "temperature", math.nan, "–"),
        (41.3, "conductivity", math.nan, "41.30 mS/cm"),
    ],
)
def test_a_quantity_carries_its_unit_and_no_digit_too_many(value, kind, uncertainty, text):
    assert numbers.quantity(value, kind, uncertainty=uncertainty) == text


def test_a_tiny_uncertainty_never_adds_more_than_one_digit():
    assert numbers.decimals_of(1e-6, usual=1) == 2
    assert numbers.decimals_of(0.0, usual=1) == 1


@pytest.mark.parametrize(
    ("uncertainty", "decimals"), [(0.2, 1), (0.14, 2), (0.03, 2), (1.4, 1), (3, 0), (40, 0), (140, 0)]
)
def test_one_digit_of_the_uncertainty_is_kept_and_two_when_it_begins_with_one(uncertainty, decimals):
    assert numbers.decimals_of(uncertainty, usual=1) == decimals


def test_set_values_have_no_trailing_zeros():
    assert numbers.set_point(31.0, 2.0) == "31 ± 2"
    assert numbers.set_point(28.5, 2.0, "temperature") == "28.5 ± 2 °C"
    assert numbers.set_point(20.0, None) == "20"
    assert numbers.plain(100.0) == "100"


@settings(derandomize=True)
@given(st.floats(min_value=-1e6, max_value=1e6), st.integers(min_value=0, max_value=4))
def test_what_is_printed_reads_back_within_half_a_digit(value, decimals):
    text = numbers.number(value, decimals).replace("−", "-")
    assert abs(float(text) - value) <= 0.5 * 10**-decimals * (1 + 1e-9)
