"""Every published value of water, against this project: one CSV a source, its source in its first line."""

from __future__ import annotations

import warnings
from collections.abc import Callable

import gsw
import numpy as np
import pytest
from iapws import SeaWater

with warnings.catch_warnings():
    warnings.simplefilter("ignore")  # the library says on import that it is retired: here it is a second opinion
    import seawater as eos80

from analysis.water import (
    compensation,
    freezing,
    osmotic_pressure,
    oxygen,
    potassium_chloride,
    sodium_chloride,
)
from analysis.water import seawater as sw
from analysis.water.sodium_chloride_water import SodiumChlorideWater
from analysis.water.units import T90_FROM_T68
from tests.reference.published import PublishedRow, header, is_met, rows

STANDARD_SEAWATER_MS_CM = 42.914  # C(35, t68 = 15, 0): Culkin and Smith 1980

TABLES = (
    "unesco_44_1983",
    "gsw_help_pages",
    "gsw_help_pages_from_memory",
    "gsw_c_source",
    "pss_78_definition",
    "millero_2008",
    "teos_10_check_values",
    "gsw_help_osmotic_coefficient",
    "gsw_help_freezing",
    "iapws_r13_08",
    "usp_785",
    "crc_pratt_kcl",
    "oiml_r56_kcl",
    "astm_d1125_kcl",
    "instrument_manual_kcl",
    "chambers_1956",
    "ncert_nacl",
    "iso_7888",
    "robinson_stokes_osmotic_coefficients",
    "pitzer_peiper_busey_1984",
    "pharmacopoeia_nacl",
    "crc_freezing_nacl",
    "crc_rogers_pitzer_1982",
    "garcia_gordon_1992",
    "anesthesia_analgesia_1999",
)
REGRESSIONS = ("regression_seawater", "egg_neutral_salinity")


def practical_salinity_from_ratio(*, ratio: float, t68: float, p: float) -> object:
    return sw.practical_salinity_from_conductivity(
        ratio * STANDARD_SEAWATER_MS_CM, temperature_degC=t68 * T90_FROM_T68, pressure_dbar=p
    )


def practical_salinity(*, c: float, t: float, p: float) -> object:
    return sw.practical_salinity_from_conductivity(c, temperature_degC=t, pressure_dbar=p)


def conductivity(*, sp: float, p: float, t: float | None = None, t68: float = 0.0) -> object:
    temperature = t68 * T90_FROM_T68 if t is None else t
    return sw.conductivity_from_practical_salinity(sp, temperature_degC=temperature, pressure_dbar=p)


def conductivity_kcl(*, m: float | None = None, g_kg: float = 0.0, t: float | None = None, t68: float = 0.0) -> object:
    molality = potassium_chloride.molality_from_mass_fraction(g_kg) if m is None else m
    temperature = t68 * T90_FROM_T68 if t is None else t
    return potassium_chloride.conductivity_from_molality(molality, temperature_degC=temperature)


def osmotic_pressure_dbar(*, sa: float, t: float, p: float) -> float:
    kPa = osmotic_pressure.osmotic_pressure_from_absolute_salinity(sa, temperature_degC=t, water_pressure_dbar=p)
    return float(kPa) / 10.0


def oxygen_solubility_pt(*, sp: float, sa: float, t: float, p: float) -> object:
    potential = float(gsw.pt_from_t(sa, t, p, 0.0))
    return oxygen.oxygen_solubility_umol_kg(sp, temperature_degC=potential)


def oxygen_mL_L(*, sp: float, t: float) -> float:
    # 1 mol of oxygen is 22.3916 L (Garcia and Gordon 1992)
    umol_kg = float(oxygen.oxygen_solubility_umol_kg(sp, temperature_degC=t))
    density = float(
        sw.density_from_absolute_salinity(sw.reference_salinity_from_practical_salinity(sp), temperature_degC=t)
    )
    return umol_kg * density * 22.3916e-6


def freezing_depression_nacl(*, mass_percent: float) -> object:
    molality = sodium_chloride.molality_from_absolute_salinity(10.0 * mass_percent)
    return freezing.freezing_point_depression_from_osmolality(sodium_chloride.osmolality_from_molality(molality))


def saline(*, g_L: float) -> float:
    water = SodiumChlorideWater()
    salinity = 0.0
    for _ in range(20):
        salinity = 1000.0 * g_L / float(water.density_kg_m3(salinity=salinity, temperature_degC=20.0))
    return float(water.osmolality_from_salinity(salinity))


def iapws_library(quantity: str) -> Callable[..., float]:
    # The table prints 0.035165 kg/kg for the reference salinity, 0.03516504.
    def value(*, s: float, kelvin: float, mpa: float) -> float:
        return float(getattr(SeaWater(T=kelvin, P=mpa, S=0.03516504 if s == 0.035165 else s), quantity))

    return value


def cryoscopic_constant() -> float:
    return 1e3 * 1e-5 / float(freezing.osmolality_from_freezing_point_depression(1e-5))


RELATIONS: dict[str, Callable[..., object]] = {
    "practical_salinity_from_ratio": practical_salinity_from_ratio,
    "practical_salinity": practical_salinity,
    "conductivity": conductivity,
    "conductivity_kcl": conductivity_kcl,
    "reference_salinity": lambda *, sp: sw.reference_salinity_from_practical_salinity(sp),
    "molality_sea_salt": lambda *, sa: sw.molality_from_absolute_salinity(sa),
    "density": lambda *, sa, t, p: sw.density_from_absolute_salinity(sa, temperature_degC=t, pressure_dbar=p),
    "chemical_potential_water": lambda *, sa, t, p: gsw.chem_potential_water_t_exact(sa, t, p),
    "osmotic_pressure": osmotic_pressure_dbar,
    "osmotic_coefficient": lambda *, sa, t, p: sw.osmotic_coefficient_from_absolute_salinity(
        sa, temperature_degC=t, pressure_dbar=p
    ),
    "freezing_point": lambda *, sa, p, air: freezing.seawater_freezing_point(sa, pressure_dbar=p, air_saturation=air),
    "freezing_point_eos80": lambda *, s, p: eos80.fp(s, p) / T90_FROM_T68,
    "density_iapws": iapws_library("rho"),
    "chem_potential_water_iapws": iapws_library("muw"),
    "cp_iapws": iapws_library("cp"),
    "cryoscopic_constant": cryoscopic_constant,
    "conductivity_nacl": lambda *, m, t: sodium_chloride.conductivity_from_molality(m, temperature_degC=t),
    "f25": lambda *, t: 1.0 / compensation.natural_water_factor(t),
    "osmotic_coefficient_nacl": lambda *, m, t: sodium_chloride.osmotic_coefficient_from_molality(
        m, temperature_degC=t
    ),
    "pitzer_beta0": lambda *, t: sodium_chloride.pitzer_parameters(t).beta0,
    "pitzer_beta1": lambda *, t: sodium_chloride.pitzer_parameters(t).beta1,
    "pitzer_c_phi": lambda *, t: sodium_chloride.pitzer_parameters(t).c_phi,
    "debye_huckel": lambda *, t: sodium_chloride.pitzer_parameters(t).debye_huckel,
    "osmolality_nacl": lambda *, g_kg_water: sodium_chloride.osmolality_from_molality(
        g_kg_water / sodium_chloride.MOLAR_MASS_G_MOL
    ),
    "freezing_depression_nacl": freezing_depression_nacl,
    "specific_volume_nacl": lambda *, m, t: 1e3 / sodium_chloride.density_from_molality(m, temperature_degC=t),
    "oxygen_solubility_pt": oxygen_solubility_pt,
    "oxygen_solubility": lambda *, sp, t: oxygen.oxygen_solubility_umol_kg(sp, temperature_degC=t),
    "oxygen_solubility_mL_L": oxygen_mL_L,
    "osmolality_nacl_grams_per_litre": saline,
    "ice_point": lambda: freezing.ICE_POINT_DEGC,
    "osmolality_in_situ": lambda *, sp, t: sw.osmolality_in_situ_from_absolute_salinity(
        sw.reference_salinity_from_practical_salinity(sp), temperature_degC=t
    ),
    "osmolality": lambda *, sp: sw.osmolality_from_absolute_salinity(sw.reference_salinity_from_practical_salinity(sp)),
    "salinity_from_density": lambda *, rho, t: sw.practical_salinity_from_reference_salinity(
        sw.absolute_salinity_from_density(rho, temperature_degC=t)
    ),
}

PUBLISHED = [row for table in TABLES for row in rows(table)]
COMPUTED = [row for table in REGRESSIONS for row in rows(table)]


@pytest.mark.parametrize("row", PUBLISHED, ids=lambda row: f"{row.table}-{row.id}")
def test_published_value(row: PublishedRow) -> None:
    found = float(np.asarray(RELATIONS[row.quantity](**row.inputs)))
    assert is_met(found, row), (
        f"{header(row.table)['source']}: found {found!r}, printed {row.expected!r} ± {row.tolerance}"
    )


@pytest.mark.parametrize("row", COMPUTED, ids=lambda row: f"{row.table}-{row.id}")
def test_computed_value_has_not_moved(row: PublishedRow) -> None:
    """A regression test: the expected values are our own."""
    found = float(np.asarray(RELATIONS[row.quantity](**row.inputs)))
    assert is_met(found, row), f"found {found!r}, earlier {row.expected!r} ± {row.tolerance}"


@pytest.mark.parametrize("table", [*TABLES, *REGRESSIONS])
def test_every_table_names_its_source_and_tolerance(table: str) -> None:
    assert {"source", "tolerance"} <= set(header(table))
    assert rows(table)
