from __future__ import annotations

import math

import pytest

from analysis.errors import InvalidInputError
from analysis.water.ionic_ratios import (
    AMENDMENTS,
    THRESHOLDS,
    doses,
    ratios,
    restorations,
    seawater_equivalent_mg_L,
    verdicts,
)
from analysis.water.ions import IonAnalysis
from tests.analysis.water.test_ions import WELL

# Average sea water, 34.5 ppt: Boyd, "Water composition and shrimp pond management" (globalseafood.org, looked up)
BOYD_SEAWATER = {"Cl": 19000.0, "Na": 10500.0, "SO4": 2700.0, "Mg": 1350.0, "Ca": 400.0, "K": 380.0, "HCO3": 142.0}
# A pond at 8 ppt that killed postlarvae: Boyd, "Revisiting ionic imbalance" (aquaculturealliance.org, looked up);
# chloride is not printed and is put in here to close the charge balance.
BOYD_POND = {"Na": 2500.0, "K": 0.9, "Mg": 425.0, "Ca": 100.0, "Cl": 5270.0}


def test_sea_water_is_its_own_equivalent() -> None:
    sea = IonAnalysis("sea", BOYD_SEAWATER)
    found = ratios(sea)
    assert found.sodium_per_potassium == pytest.approx(27.6, abs=0.05)
    assert found.magnesium_per_calcium == pytest.approx(3.4, abs=0.05)
    for ion in ("Na", "K", "Mg", "Cl", "SO4"):
        assert found.share_of_seawater_percent[ion] == pytest.approx(100.0, abs=8.0), ion
    assert not [verdict.threshold.code for verdict in verdicts(sea) if verdict.is_crossed]


def test_the_pond_that_killed_postlarvae_lacks_potassium() -> None:
    pond = IonAnalysis("pond", BOYD_POND)
    # Boyd: sea water diluted to 8 ppt would hold about 90 mg/L of potassium
    assert seawater_equivalent_mg_L(pond, "K") == pytest.approx(90.0, rel=0.06)
    crossed = {verdict.threshold.code for verdict in verdicts(pond) if verdict.is_crossed}
    assert {"potassium_very_low", "sodium_to_potassium_high"} <= crossed
    assert "magnesium_low" not in crossed


def test_what_was_not_measured_is_not_judged() -> None:
    bare = IonAnalysis("bare", {"Na": 1000.0, "Cl": 1542.0})
    assert math.isnan(ratios(bare).sodium_per_potassium)
    assert [verdict.is_crossed for verdict in verdicts(bare)] == [False] * len(verdicts(bare))


def test_low_alkalinity_is_seen() -> None:
    soft = IonAnalysis("soft", {"Na": 1000.0, "Cl": 1520.0, "HCO3": 40.0})
    crossed = {verdict.threshold.code for verdict in verdicts(soft) if verdict.is_crossed}
    assert crossed == {"alkalinity_low"}


def test_every_threshold_names_its_source() -> None:
    assert all("looked up" in threshold.source or "common practice" in threshold.source for threshold in THRESHOLDS)


def test_doses_by_hand() -> None:
    # 50 mg/L in 1000 L is 50 g of potassium: 100 g of a salt with 50 % (Boyd's figure for muriate of potash)
    found = {
        dose.salt: dose
        for dose in doses(IonAnalysis("pond", {**BOYD_POND, "K": 0.0}), ion="K", wanted_mg_L=50.0, volume_L=1000.0)
    }
    assert found["potassium-chloride"].grams == pytest.approx(100.0)
    assert found["potassium-magnesium-sulfate"].grams == pytest.approx(50.0 / 0.178)
    assert found["potassium-magnesium-sulfate"].added_mg_L["Mg"] == pytest.approx(50.0 * 0.105 / 0.178)


def test_damp_salt_needs_more() -> None:
    well = IonAnalysis("well", WELL)
    dry = doses(well, ion="Mg", wanted_mg_L=120.0, volume_L=500.0)
    damp = doses(well, ion="Mg", wanted_mg_L=120.0, volume_L=500.0, dry_fractions={dose.salt: 0.8 for dose in dry})
    assert [dose.grams for dose in damp] == pytest.approx([dose.grams / 0.8 for dose in dry])
    assert [dose.added_mg_L["Mg"] for dose in damp] == pytest.approx([60.0] * len(damp))


def test_enough_needs_no_dose_and_nonsense_is_refused() -> None:
    well = IonAnalysis("well", WELL)
    assert doses(well, ion="Ca", wanted_mg_L=100.0, volume_L=1000.0) == []
    for wrong in (
        {"ion": "Br"},
        {"volume_L": -1.0},
        {"wanted_mg_L": math.nan},
        {"dry_fractions": {"potassium-chloride": 0.0}},
    ):
        with pytest.raises(InvalidInputError):
            doses(well, **{"ion": "K", "wanted_mg_L": 50.0, "volume_L": 1.0, **wrong})  # type: ignore[arg-type]


def test_no_salt_holds_more_ions_than_itself_and_its_charges_balance() -> None:
    from analysis.water.ions import IONS

    for key, salt in AMENDMENTS.items():
        assert sum(salt.content.values()) <= 1.0, key
        charge = sum(share / IONS[ion].molar_mass_g_mol * IONS[ion].charge for ion, share in salt.content.items())
        size = sum(share / IONS[ion].molar_mass_g_mol * abs(IONS[ion].charge) for ion, share in salt.content.items())
        # published contents of products as sold are rounded: K2SO4.2MgSO4 has 10.5 % Mg where the formula gives 11.1
        assert abs(charge) <= 0.03 * size, key


def test_restoring_what_sea_water_would_hold() -> None:
    pond = IonAnalysis("pond", BOYD_POND)
    found = restorations(pond, volume_L=1000.0)
    assert "K" in found
    assert "Mg" not in found  # 425 mg/L is more than sea water of that salinity holds
    for dose in found["K"]:
        assert 0.9 + dose.added_mg_L["K"] == pytest.approx(seawater_equivalent_mg_L(pond, "K"))
    half = restorations(pond, volume_L=1000.0, share_percent=50.0)["K"]
    assert half[0].grams < 0.51 * found["K"][0].grams
    assert restorations(IonAnalysis("sea", BOYD_SEAWATER), volume_L=1.0, share_percent=90.0) == {}
    with pytest.raises(InvalidInputError, match="share"):
        restorations(pond, volume_L=1.0, share_percent=0.0)
