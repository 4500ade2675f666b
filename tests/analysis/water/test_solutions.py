from __future__ import annotations

import csv
import math
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from analysis.errors import InvalidInputError
from analysis.water.freezing import osmolality_from_freezing_point_depression
from analysis.water.solutes import PRODUCTS, SOLUTES
from analysis.water.solutions import (
    Solution,
    scaled_to_osmolality,
    solution_per_litre,
    topped_up_to_osmolality,
)

CRC = Path(__file__).parents[2] / "reference" / "crc_solutions.csv"
CRC_ROWS = list(
    csv.DictReader(line for line in CRC.read_text(encoding="utf-8").splitlines() if not line.startswith("#"))
)


@pytest.mark.parametrize("row", CRC_ROWS, ids=lambda row: f"{row['solute']}-{row['mass_percent']}")
def test_handbook_solution(row: dict[str, str]) -> None:
    """CRC Handbook, 102nd ed., Concentrative Properties (looked up); the fit behind the coefficients."""
    share = float(row["mass_percent"]) / 100.0
    solution = Solution({row["solute"]: 1000.0 * share / (1.0 - share)})
    depression = float(row["depression_K"])
    printed = float(osmolality_from_freezing_point_depression(depression))
    # the printed depressions of dilute methanol are 4 % below those of an ideal solution: doubtful
    relative = 0.05 if row["solute"] == "methanol" else 0.02
    assert solution.osmolality_mOsm_kg == pytest.approx(printed, rel=relative, abs=0.015 / 1.86 * 1000.0)
    assert solution.density_kg_m3() == pytest.approx(1000.0 * float(row["density_g_cm3"]), abs=1.6)


# Iso-osmotic with 0.9 % saline (286 mOsm/kg): grams per 100 mL, tables of pharmacopoeias (from memory)
@pytest.mark.parametrize(
    ("product", "percent"),
    [
        ("sodium-chloride", 0.90),
        ("potassium-chloride", 1.19),
        ("glucose", 5.05),
        ("glucose-monohydrate", 5.51),
        ("mannitol", 5.07),
        ("sucrose", 9.25),
        ("glycerol", 2.6),
        ("sodium-hydrogen-carbonate", 1.39),
        ("magnesium-sulfate-heptahydrate", 6.3),
        ("calcium-chloride-dihydrate", 1.7),
        ("urea", 1.63),
    ],
)
def test_iso_osmotic_solutions(product: str, percent: float) -> None:
    solution = solution_per_litre({product: 10.0 * percent})
    assert solution.osmolality_mOsm_kg == pytest.approx(286.0, rel=0.05)


def test_physiological_saline_four_ways() -> None:
    saline = solution_per_litre({"sodium-chloride": 9.0})
    # 286 mOsm/kg measured: Anesth. Analg. 1999, DOI 10.1213/00000539-199912000-00072 (looked up)
    assert saline.osmolality_mOsm_kg == pytest.approx(286.0, abs=3.0)
    # 9 g/L over 58.44 g/mol
    assert saline.molarities()["sodium-chloride"] == pytest.approx(0.1540, abs=1e-4)
    assert saline.molalities["sodium-chloride"] == pytest.approx(0.1547, abs=2e-4)
    assert saline.osmolarity_mOsm_L() < saline.osmolality_mOsm_kg
    assert saline.grams_per_L()["sodium-chloride"] == pytest.approx(9.0, rel=1e-12)


def test_water_of_crystallisation_is_water() -> None:
    damp, dry = Solution({"glucose-monohydrate": 198.17}), Solution({"glucose": 180.155})
    assert damp.water_kg == pytest.approx(1.018015, abs=1e-5)
    assert damp.molalities["glucose"] < dry.molalities["glucose"]
    moles = 2.0 / PRODUCTS["calcium-chloride-dihydrate"].molar_mass_g_mol
    assert Solution({"calcium-chloride-dihydrate": 2.0}).molalities["calcium-chloride"] == pytest.approx(
        moles, rel=1e-3
    )


def test_two_halves_of_one_salt_are_that_salt() -> None:
    whole = Solution({"magnesium-chloride": 9.5211})
    halves = Solution(
        {
            "magnesium-chloride": 4.76055,
            "magnesium-chloride-hexahydrate": 0.5 * PRODUCTS["magnesium-chloride-hexahydrate"].molar_mass_g_mol / 10.0,
        }
    )
    assert halves.osmolality_mOsm_kg * halves.water_kg == pytest.approx(whole.osmolality_mOsm_kg, rel=2e-3)


def test_an_artificial_sea_salt_mixture_is_near_sea_water() -> None:
    """Salts of sea water at SP 35 less the minor ones: TEOS-10 gives 1033.7 mOsm/kg (regression value of our own)."""
    # moles per kilogram of water: Reference Composition (Millero et al. 2008), sulfate as sodium sulfate
    moles = {
        "sodium-chloride": 0.4860 - 0.0584 + 0.0018,
        "sodium-sulfate": 0.0293,
        "potassium-chloride": 0.0106,
        "magnesium-chloride": 0.0547,
        "calcium-chloride": 0.0107,
        "sodium-hydrogen-carbonate": 0.0024,
    }
    solution = Solution({key: amount * PRODUCTS[key].molar_mass_g_mol for key, amount in moles.items()})
    assert solution.osmolality_mOsm_kg == pytest.approx(1033.7, rel=0.02)


RECIPES = st.dictionaries(
    st.sampled_from(
        ["sodium-chloride", "potassium-chloride", "calcium-chloride-dihydrate", "glucose", "sucrose", "glycerol"]
    ),
    st.floats(0.1, 10.0),
    min_size=1,
)


@given(amounts=RECIPES, wanted=st.floats(20.0, 600.0))
def test_a_scaled_recipe_has_the_wanted_osmolality_and_the_old_proportions(
    amounts: dict[str, float], wanted: float
) -> None:
    start = Solution(amounts)
    room = min(SOLUTES[key].highest_molality / molality for key, molality in start.molalities.items())
    if wanted > 0.8 * room * start.osmolality_mOsm_kg:
        return  # beyond the molality for which a coefficient holds
    scaled = scaled_to_osmolality(start, osmolality_mOsm_kg=wanted)
    assert scaled.osmolality_mOsm_kg == pytest.approx(wanted, rel=1e-9)
    factors = {round(scaled.grams_per_kg_water[key] / grams, 9) for key, grams in amounts.items()}
    assert max(factors) == pytest.approx(min(factors), rel=1e-6)


@given(amounts=RECIPES, more=st.floats(0.0, 300.0), product=st.sampled_from(["sodium-chloride", "glucose", "mannitol"]))
def test_topping_up_reaches_the_wanted_osmolality(amounts: dict[str, float], more: float, product: str) -> None:
    start = Solution(amounts)
    wanted = start.osmolality_mOsm_kg + more
    full = topped_up_to_osmolality(start, product=product, osmolality_mOsm_kg=wanted)
    assert full.osmolality_mOsm_kg == pytest.approx(wanted, rel=1e-9)


@given(grams=st.floats(0.0, 30.0), product=st.sampled_from(sorted(PRODUCTS)))
def test_more_of_anything_is_never_less_osmolality(grams: float, product: str) -> None:
    highest = 0.45 * SOLUTES[PRODUCTS[product].solute].highest_molality * PRODUCTS[product].molar_mass_g_mol
    less, more = Solution({product: min(grams, highest)}), Solution({product: min(grams, highest) * 1.1 + 0.01})
    assert more.osmolality_mOsm_kg > less.osmolality_mOsm_kg


def test_litres_and_kilograms_agree() -> None:
    recipe = {"sodium-chloride": 6.5, "potassium-chloride": 1.2, "glucose-monohydrate": 4.0}
    by_litre = solution_per_litre(recipe, temperature_degC=15.0)
    again = Solution(by_litre.grams_per_kg_water)
    assert again.grams_per_L(temperature_degC=15.0) == pytest.approx(recipe, rel=1e-12)


def test_how_sure() -> None:
    assert Solution({"sodium-chloride": 9.0}).uncertainty_percent == 1.0
    assert Solution({"sodium-chloride": 9.0, "glucose": 1.0}).uncertainty_percent == 2.0
    assert Solution({"dimethyl-sulfoxide": 9.0}).uncertainty_percent == 5.0
    assert Solution({}).osmolality_mOsm_kg == 0.0


@pytest.mark.parametrize(
    "act",
    [
        lambda: Solution({"sodium-cloride": 1.0}),
        lambda: Solution({"sodium-chloride": -1.0}),
        lambda: Solution({"sodium-chloride": math.nan}),
        lambda: Solution({"sodium-chloride": 100.0}),
        lambda: solution_per_litre({"sucrose": 1300.0}),
        lambda: scaled_to_osmolality(Solution({}), osmolality_mOsm_kg=300.0),
        lambda: scaled_to_osmolality(Solution({"glucose": 1.0}), osmolality_mOsm_kg=math.nan),
        lambda: topped_up_to_osmolality(Solution({"glucose": 100.0}), product="glucose", osmolality_mOsm_kg=100.0),
        lambda: topped_up_to_osmolality(Solution({}), product="salt", osmolality_mOsm_kg=100.0),
    ],
)
def test_what_cannot_be_made_is_refused(act: object) -> None:
    assert callable(act)
    with pytest.raises(InvalidInputError):
        act()


def test_a_misspelt_product_is_answered_with_the_nearest() -> None:
    with pytest.raises(InvalidInputError, match="nearest: sodium-chloride"):
        Solution({"sodium-cloride": 1.0})
