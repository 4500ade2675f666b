from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from analysis.errors import InvalidInputError
from analysis.water.ions import IONS, IonAnalysis, grams_per_kg_water

WELL = {"Na": 1150.0, "K": 15.0, "Mg": 60.0, "Ca": 120.0, "Cl": 1900.0, "SO4": 180.0, "HCO3": 240.0}


def test_units_are_two_ways_of_saying_the_same() -> None:
    in_mass = IonAnalysis("well", WELL)
    in_moles = IonAnalysis("well", in_mass.mmol_L, unit="mmol/L")
    assert in_moles.mg_L == pytest.approx(WELL)
    assert in_moles.charge_error_percent == pytest.approx(in_mass.charge_error_percent)


def test_charge_balance_by_hand() -> None:
    # 10 Na + 2 * 1 Ca = 12 against 11 Cl: 100 * (12 - 11) / 23
    analysis = IonAnalysis("a", {"Na": 10.0, "Ca": 1.0, "Cl": 11.0}, unit="mmol/L")
    assert analysis.equivalents_mmol_L == (12.0, 11.0)
    assert analysis.charge_error_percent == pytest.approx(100.0 / 23.0)
    assert analysis.is_balanced


@given(sodium=st.floats(1.0, 500.0), calcium=st.floats(0.0, 50.0), error=st.floats(-0.09, 0.09))
def test_sharing_out_the_error_leaves_none(sodium: float, calcium: float, error: float) -> None:
    cations = sodium + 2.0 * calcium
    chloride = cations * (1.0 - error) / (1.0 + error)
    analysis = IonAnalysis("a", {"Na": sodium, "Ca": calcium, "Cl": chloride}, unit="mmol/L")
    assert analysis.charge_error_percent == pytest.approx(100.0 * error, abs=1e-9)
    charges = [IONS[ion].charge * amount for ion, amount in analysis.balanced_mmol_L.items()]
    assert sum(charges) == pytest.approx(0.0, abs=1e-9 * cations)


def test_molality_needs_the_water_not_the_litre() -> None:
    # 1 mol/L NaCl at 25 degC: density 1036.2 kg/m3 gives 1.0221 mol/kg (Robinson and Stokes: 1.0220)
    analysis = IonAnalysis("a", {"Na": 1000.0, "Cl": 1000.0}, unit="mmol/L")
    molalities = analysis.molalities(density_kg_m3=1036.2)
    assert molalities["Na"] == pytest.approx(1.0227, abs=1e-3)
    assert grams_per_kg_water(molalities) == pytest.approx(58.4428 * molalities["Na"], rel=1e-4)


@pytest.mark.parametrize(
    ("amounts", "settings", "said"),
    [
        ({"Na": 10.0, "Cl": 20.0}, {}, "charge balance"),
        ({"Na": 10.0}, {}, "one cation and one anion"),
        ({"Na": 10.0, "Cl": math.nan}, {}, "amount of Cl"),
        ({"Na": -10.0, "Cl": 10.0}, {}, "amount of Na"),
        ({"Na": 10.0, "Cl": 10.0, "So4": 1.0}, {}, "nearest: SO4"),
        ({"Na": 10.0, "Cl": 10.0}, {"unit": "ppm"}, "mg/L, mmol/L"),
        ({"Na": 10.0, "Cl": 10.0}, {"pH": 14.0}, "pH"),
        ({"Na": 10.0, "Cl": 10.0}, {"temperature_degC": math.nan}, "temperature"),
        ({"Na": 10.0, "Cl": 10.0}, {"osmolality_mOsm_kg": -1.0}, "osmolality"),
        ({"Na": 3000.0, "Cl": 3000.0}, {}, "120 g/L"),
    ],
)
def test_an_analysis_that_cannot_be_is_refused(
    amounts: dict[str, float], settings: dict[str, float], said: str
) -> None:
    with pytest.raises(InvalidInputError, match=said):
        IonAnalysis("a", amounts, **{"unit": "mmol/L", **settings})  # type: ignore[arg-type]


def test_alkalinity_counts_charge() -> None:
    analysis = IonAnalysis("a", {"Na": 4.0, "HCO3": 2.0, "CO3": 1.0}, unit="mmol/L")
    assert analysis.alkalinity_mmol_L == 4.0
