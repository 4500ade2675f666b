"""Waters from a laboratory analysis. The engine is an optional extra: with it missing only its message is tested."""

from __future__ import annotations

import builtins
from typing import Any

import numpy as np
import pytest

from analysis.errors import InvalidInputError, MissingPackageError
from analysis.flags import Flag
from analysis.water.ionic_table import Engine, IonicTable, tabulate
from analysis.water.ionic_water import IonicWater
from analysis.water.ions import IonAnalysis
from analysis.water.properties import Seawater, WaterKind
from analysis.water.sodium_chloride_water import SodiumChlorideWater
from tests.analysis.water.test_ions import WELL

pytest.importorskip("phreeqc", reason="the package phreeqc is missing; get it with: pip install 'euryhale[ions]'")

# Reference Composition (Millero et al. 2008, table 4, mole fractions; from memory, sum and charge checked) at
# SP 35, 25 degC: borate charge counted as bicarbonate.
FRACTIONS = {
    "Na": 0.4188071,
    "Mg": 0.0471678,
    "Ca": 0.0091823,
    "K": 0.0091159,
    "Sr": 0.0000810,
    "Cl": 0.4874839,
    "SO4": 0.0252152,
    "HCO3": 0.0016240,
    "Br": 0.0007520,
    "CO3": 0.0002134,
    "F": 0.0000610,
}
MMOL_L_SP_35 = 35.16504 / 31.4038218 * 1000.0 * 1.023343  # times the density of SP 35 at 25 degC [kg/L]


@pytest.fixture(scope="module")
def sea() -> IonicWater:
    amounts = {ion: fraction * MMOL_L_SP_35 for ion, fraction in FRACTIONS.items()}
    return IonicWater.from_analysis(IonAnalysis("sea", amounts, unit="mmol/L", pH=8.1))


@pytest.fixture(scope="module")
def well() -> IonicWater:
    return IonicWater.from_analysis(IonAnalysis("well", WELL, pH=7.8))


@pytest.mark.parametrize("temperature", [0.0, 5.0, 15.0, 25.0, 35.0])
def test_sea_water_by_its_ions_is_sea_water_by_teos_10(sea: IonicWater, temperature: float) -> None:
    # two independent models: ion interaction in PHREEQC against TEOS-10 and PSS-78
    salinity = np.array([0.5, 2.0, 5.0, 15.0, 25.0, 35.0, 42.0])
    conductivity = Seawater().conductivity_mS_cm(salinity=salinity, temperature_degC=temperature)
    found = sea.properties(conductivity, temperature_degC=temperature)
    expected = Seawater().properties(conductivity, temperature_degC=temperature)
    np.testing.assert_allclose(found.absolute_salinity_g_kg, expected.absolute_salinity_g_kg, rtol=0.0075)
    np.testing.assert_allclose(found.osmolality_mOsm_kg, expected.osmolality_mOsm_kg, rtol=0.009)
    np.testing.assert_allclose(found.density_kg_m3, expected.density_kg_m3, atol=0.25)
    stated = 0.01 * sea.model_uncertainty_percent(temperature)
    assert np.all(np.abs(found.osmolality_mOsm_kg / expected.osmolality_mOsm_kg - 1.0) < stated)


def test_salt_water_by_its_ions_is_sodium_chloride_by_pitzer() -> None:
    salt = IonicWater.from_analysis(IonAnalysis("salt", {"Na": 200.0, "Cl": 200.0}, unit="mmol/L"))
    conductivity = np.array([0.05, 1.0, 5.0, 15.0, 20.0])
    found = salt.properties(conductivity, temperature_degC=25.0)
    expected = SodiumChlorideWater().properties(conductivity, temperature_degC=25.0)
    np.testing.assert_allclose(found.osmolality_mOsm_kg, expected.osmolality_mOsm_kg, rtol=0.005)
    np.testing.assert_allclose(found.density_kg_m3, expected.density_kg_m3, atol=0.1)


def test_the_table_and_the_engine_agree_between_the_knots(well: IonicWater) -> None:
    half = {ion: amount * 0.37 for ion, amount in WELL.items()}
    weak = IonicWater(tabulate(IonAnalysis("weak", half, pH=7.8)))
    salinity = float(weak.table.grams_per_kg_water / (1.0 + 1e-3 * weak.table.grams_per_kg_water))
    for temperature in (2.5, 12.5, 33.0):
        ours = float(well.conductivity_mS_cm(salinity=salinity, temperature_degC=temperature))
        theirs = float(weak.conductivity_mS_cm(salinity=salinity, temperature_degC=temperature))
        assert ours == pytest.approx(theirs, rel=2e-3)
    assert float(well.osmolality_from_salinity(salinity)) == pytest.approx(
        float(weak.osmolality_from_salinity(salinity)), rel=2e-3
    )


def test_salinity_goes_to_conductivity_and_back(well: IonicWater) -> None:
    water: WaterKind = well
    salinity = np.concatenate([np.geomspace(0.003, 0.3, 40), np.linspace(0.31, 5.0, 100)])
    for temperature in (-1.5, 3.0, 17.0, 33.0, 44.0):
        conductivity = water.conductivity_mS_cm(salinity=salinity, temperature_degC=temperature)
        assert np.all(np.diff(conductivity) > 0.0)
        back = water.salinity_from_conductivity(conductivity, temperature_degC=temperature)
        np.testing.assert_allclose(back, salinity, rtol=1e-4)
    osmolality = water.osmolality_from_salinity(salinity)
    np.testing.assert_allclose(water.salinity_from_osmolality(osmolality), salinity, rtol=1e-9)
    np.testing.assert_allclose(
        water.salinity_from_absolute_salinity(water.absolute_salinity_from_salinity(salinity)), salinity
    )
    assert np.all(np.diff(water.density_kg_m3(salinity=salinity, temperature_degC=20.0)) > 0.0)


def test_flags_and_nulls(well: IonicWater) -> None:
    concentrated = float(well.conductivity_mS_cm(salinity=5.3, temperature_degC=25.0))
    conductivity = [3.0, 0.001, np.nan, -1.0, 90.0, concentrated]
    found = well.properties(conductivity, temperature_degC=25.0)
    beyond = int(Flag.OUT_OF_RANGE | Flag.WATER_KIND_DOUBTED)
    assert found.flags.tolist() == [
        0,
        int(Flag.BELOW_RANGE),
        int(Flag.NOT_FINITE),
        int(Flag.NEGATIVE),
        beyond,
        int(Flag.EXTRAPOLATED),
    ]
    assert np.isfinite(found.osmolality_mOsm_kg).tolist() == [True, True, False, False, False, True]
    assert np.isfinite(found.density_kg_m3).tolist() == [True, True, False, False, False, True]
    assert found.osmolality_mOsm_kg[1] == 0.0
    assert np.isnan(found.practical_salinity).all()


def test_one_reading_alone_gives_what_it_gives_in_a_block(well: IonicWater) -> None:
    block = well.properties([[1.0], [2.0]], temperature_degC=[10.0, 30.0])
    assert block.osmolality_mOsm_kg.shape == (2, 2)
    alone = well.properties(2.0, temperature_degC=30.0)
    assert float(alone.osmolality_mOsm_kg) == pytest.approx(block.osmolality_mOsm_kg[1, 1], rel=1e-14)


def test_the_table_can_be_kept_and_read_back(well: IonicWater) -> None:
    back = IonicWater(IonicTable.from_arrays("well", well.table.to_arrays()))
    found, expected = (water.properties([0.5, 4.0], temperature_degC=[5.0, 30.0]) for water in (back, well))
    assert np.array_equal(found.osmolality_mOsm_kg, expected.osmolality_mOsm_kg)
    assert back.name == "well"


@pytest.mark.parametrize("damage", ["missing", "shape", "nan"])
def test_a_damaged_table_is_refused(well: IonicWater, damage: str) -> None:
    arrays = well.table.to_arrays()
    if damage == "missing":
        del arrays["roots"]
    elif damage == "shape":
        arrays["conductivity_mS_cm"] = arrays["conductivity_mS_cm"][:-1]
    else:
        arrays["osmolality_mOsm_kg"] = arrays["osmolality_mOsm_kg"] * np.nan
    with pytest.raises(InvalidInputError, match="ion table"):
        IonicTable.from_arrays("well", arrays)


def test_one_laboratory_value_calibrates_everything(well: IonicWater) -> None:
    computed = float(well.properties(5.0, temperature_degC=20.0).osmolality_mOsm_kg)
    fitted = well.calibrated(conductivity_mS_cm=5.0, temperature_degC=20.0, osmolality_mOsm_kg=1.03 * computed)
    assert float(fitted.properties(5.0, temperature_degC=20.0).osmolality_mOsm_kg) == pytest.approx(1.03 * computed)
    elsewhere = [float(water.properties(2.0, temperature_degC=9.0).osmolality_mOsm_kg) for water in (fitted, well)]
    assert elsewhere[0] / elsewhere[1] == pytest.approx(1.03)
    salinity = np.linspace(0.1, 5.0, 9)
    np.testing.assert_allclose(
        fitted.salinity_from_osmolality(fitted.osmolality_from_salinity(salinity)), salinity, rtol=1e-9
    )
    with pytest.raises(InvalidInputError, match="another water"):
        well.calibrated(conductivity_mS_cm=5.0, temperature_degC=20.0, osmolality_mOsm_kg=1.2 * computed)
    with pytest.raises(InvalidInputError, match="another water"):
        well.calibrated(conductivity_mS_cm=90.0, temperature_degC=20.0, osmolality_mOsm_kg=100.0)


def test_an_analysis_with_its_own_osmolality_is_calibrated(well: IonicWater) -> None:
    whole = float(
        well.osmolality_from_salinity(well.table.grams_per_kg_water / (1 + 1e-3 * well.table.grams_per_kg_water))
    )
    analysis = IonAnalysis("well", WELL, pH=7.8, osmolality_mOsm_kg=0.98 * whole)
    assert IonicWater.from_analysis(analysis).osmolality_factor == pytest.approx(0.98, rel=1e-4)


def test_cold_water_is_less_certain_and_charge_errors_count() -> None:
    balanced = IonicWater.from_analysis(IonAnalysis("a", {"Na": 50.0, "Cl": 50.0}, unit="mmol/L"))
    cold, warm = balanced.model_uncertainty_percent([0.0, 25.0])
    assert 2.0 < cold < 3.5
    assert 1.0 < warm < 1.5
    doubtful = IonicWater.from_analysis(IonAnalysis("a", {"Na": 50.0, "Cl": 45.0}, unit="mmol/L"))
    assert float(doubtful.model_uncertainty_percent(25.0)) > 2.0


def test_nitrate_is_stood_in_for_by_chloride_and_refused_where_it_rules() -> None:
    some = IonicWater.from_analysis(IonAnalysis("a", {"Na": 50.0, "Cl": 47.0, "NO3": 3.0}, unit="mmol/L"))
    none = IonicWater.from_analysis(IonAnalysis("a", {"Na": 50.0, "Cl": 50.0}, unit="mmol/L"))
    assert float(some.model_uncertainty_percent(25.0)) > float(none.model_uncertainty_percent(25.0))
    with pytest.raises(InvalidInputError, match="nitrate and fluoride"):
        IonicWater.from_analysis(IonAnalysis("a", {"Na": 50.0, "Cl": 30.0, "NO3": 20.0}, unit="mmol/L"))


def test_without_the_engine_the_message_says_how_to_get_it(monkeypatch: pytest.MonkeyPatch) -> None:
    plain = builtins.__import__

    def without_phreeqc(name: str, *args: Any, **settings: Any) -> Any:
        if name == "phreeqc":
            raise ImportError(name)
        return plain(name, *args, **settings)

    monkeypatch.setattr(builtins, "__import__", without_phreeqc)
    with pytest.raises(MissingPackageError, match=r"euryhale\[ions\]"):
        tabulate(IonAnalysis("well", WELL))


@pytest.mark.parametrize(
    ("ions", "conductivity", "osmolality"),
    [
        # our own figures at 25 degC (regression): what the relation of sea water gets wrong by -27, -6 and +11 %
        ({"Na": 80.0, "Cl": 20.0, "HCO3": 60.0}, 6.750, 148.7),
        ({"Na": 85.554, "Cl": 85.554}, 9.167, 160.0),
        ({"Na": 40.0, "Ca": 20.0, "Cl": 80.0}, 8.614, 126.9),
    ],
)
def test_waters_that_conductivity_alone_cannot_tell_apart(
    ions: dict[str, float], conductivity: float, osmolality: float
) -> None:
    dissolved = IonAnalysis("a", ions, unit="mmol/L").dissolved_g_L
    # this density leaves exactly one kilogram of water in the litre
    analysis = IonAnalysis("a", ions, unit="mmol/L", density_kg_m3=1000.0 + dissolved, pH=8.3)
    water = IonicWater.from_analysis(analysis)
    salinity = water.table.grams_per_kg_water / (1.0 + 1e-3 * water.table.grams_per_kg_water)
    assert float(water.conductivity_mS_cm(salinity=salinity, temperature_degC=25.0)) == pytest.approx(
        conductivity, rel=2e-3
    )
    found = water.properties(conductivity, temperature_degC=25.0)
    assert float(found.osmolality_in_situ_mOsm_kg) == pytest.approx(osmolality, rel=4e-3)


def test_a_warning_of_the_engine_is_an_error() -> None:
    engine = Engine("phreeqc.dat", where="well")
    with pytest.raises(InvalidInputError, match="well"):
        engine.solve({"Na": 0.1, "Xx": 0.1}, 1.0, 25.0, 7.0)
    with pytest.raises(InvalidInputError, match="well"):
        engine.solve({"Na": 0.1, "Cl": 0.1}, 1.0, 5000.0, 7.0)
    assert engine.solve({"Na": 0.1, "Cl": 0.1}, 1.0, 25.0, 7.0)[0] == pytest.approx(10.64, rel=0.01)
