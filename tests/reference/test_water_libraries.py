"""Water against independent libraries: iapws (IAPWS-95), seawater (EOS-80) and phreeqc (ion interaction)."""

from __future__ import annotations

import warnings

import numpy as np
import pytest
from iapws import SeaWater

with warnings.catch_warnings():
    warnings.simplefilter("ignore")  # the library says on import that it is retired: here it is a second opinion
    import seawater as eos80

from analysis.water import freezing, osmotic_pressure, sodium_chloride
from analysis.water import seawater as sw
from analysis.water.units import T90_FROM_T68


@pytest.mark.parametrize("temperature", [0.0, 15.0, 35.0])
@pytest.mark.parametrize("salinity", [0.5, 5.0, 20.0, 35.16504, 60.0, 80.0])
def test_iapws_95_has_the_same_osmolality_and_density(salinity: float, temperature: float) -> None:
    """IAPWS R13-08 with IAPWS-95 for the water (library iapws); its molality is in mol/g."""
    water = SeaWater(T=temperature + 273.15, P=0.101325, S=salinity / 1000.0)
    ours = float(sw.osmolality_in_situ_from_absolute_salinity(salinity, temperature_degC=temperature))
    assert ours == pytest.approx(1e6 * water.osm * water.m, rel=1e-9)
    density = float(sw.density_from_absolute_salinity(salinity, temperature_degC=temperature))
    assert density == pytest.approx(water.rho, abs=2e-3)


def test_eos_80_has_the_same_practical_salinity() -> None:
    """PSS-78 as programmed for EOS-80 (library seawater, which lacks the low-salinity extension)."""
    rng = np.random.default_rng(7)
    ratio, t90, pressure = rng.uniform(0.1, 1.3, 500), rng.uniform(-2.0, 35.0, 500), rng.uniform(0.0, 100.0, 500)
    theirs = eos80.salt(ratio, t90, pressure)
    ours = sw.practical_salinity_from_conductivity(ratio * 42.914, temperature_degC=t90, pressure_dbar=pressure)
    inside = theirs >= 2.0
    assert inside.sum() > 400
    np.testing.assert_allclose(ours[inside], theirs[inside], atol=1e-6)


def test_eos_80_has_nearly_the_same_density_and_freezing_point() -> None:
    """EOS-80 and TEOS-10 differ by less than 0.02 kg/m3 and 0.01 K in the range of a hatchery."""
    salinity, temperature = (
        grid.ravel() for grid in np.meshgrid(np.linspace(1.0, 42.0, 12), np.linspace(0.0, 35.0, 8))
    )
    ours = sw.density_from_absolute_salinity(
        sw.reference_salinity_from_practical_salinity(salinity), temperature_degC=temperature
    )
    np.testing.assert_allclose(ours, eos80.dens0(salinity, temperature), atol=0.02)
    saturated = freezing.seawater_freezing_point(
        sw.reference_salinity_from_practical_salinity(salinity), air_saturation=1.0
    )
    np.testing.assert_allclose(saturated, eos80.fp(salinity, 0.0) * T90_FROM_T68**0, atol=0.01)


@pytest.mark.parametrize("temperature", [0.0, 10.0, 25.0, 35.0])
def test_sharqawy_and_nayar_have_nearly_the_same_osmotic_coefficient(temperature: float) -> None:
    """Sharqawy et al. 2010 / Nayar et al. 2016, 10 to 120 g/kg, stated accuracy 2.57 % (coefficients looked up)."""
    s, t = np.array([10.0, 20.0, 35.165, 60.0, 80.0]), temperature
    a = (0.89453233003, 4.1560737424e-4, -4.6262121398e-6, 2.2211195897e-11, -1.1445456438e-4)
    b = (-1.4783462366e-6, -1.3526263499e-11, 7.0132355546e-6, 5.6960486681e-8, -2.8624032584e-10)
    theirs = a[0] + a[1] * t + a[2] * t**2 + a[3] * t**4 + a[4] * s
    theirs = theirs + b[0] * t * s + b[1] * s * t**3 + b[2] * s**2 + b[3] * s**2 * t + b[4] * s**2 * t**2
    ours = sw.osmotic_coefficient_from_absolute_salinity(s, temperature_degC=t)
    np.testing.assert_allclose(ours, theirs, rtol=0.012)


def test_dilute_sea_water_follows_debye_and_hueckel() -> None:
    """phi = 1 - A z2 sqrt(I) in the limit, A = 0.3915 at 25 degC (Pitzer, Peiper and Busey 1984)."""
    salinity = np.array([1e-4, 1e-3])
    molality = sw.molality_from_absolute_salinity(salinity)
    valence = 1.2452898  # sum of x z^2 of the Reference Composition (TEOS-10)
    limit = 1.0 - 0.3915 * valence * np.sqrt(0.5 * molality * valence)
    ours = sw.osmotic_coefficient_from_absolute_salinity(salinity, temperature_degC=25.0)
    np.testing.assert_allclose(ours, limit, atol=3e-5)


def test_van_t_hoff_pressure_of_sea_water_against_iapws() -> None:
    """pi = O R T rho_w to first order, with the numbers of iapws: within 0.2 %."""
    water = SeaWater(T=298.15, P=0.101325, S=0.03516504)
    first_order_kPa = 1000.0 * water.osm * water.m * 8.314472 * 298.15 * 997.047 / 1000.0
    exact = float(osmotic_pressure.osmotic_pressure_from_absolute_salinity(35.16504, temperature_degC=25.0))
    assert exact == pytest.approx(first_order_kPa, rel=2e-3)


class Phreeqc:
    """The engine with one database, as plainly as can be: a second opinion on our own use of it."""

    def __init__(self, database: str) -> None:
        phreeqc = pytest.importorskip(
            "phreeqc", reason="the package phreeqc is missing; get it with: pip install 'euryhale[ions]'"
        )
        self.engine = phreeqc.Phreeqc()
        assert self.engine.LoadBuiltInDatabase(database) == 0
        self.engine.RunString(
            'SELECTED_OUTPUT 1\n-reset false\nUSER_PUNCH 1\n-headings aw sc rho\n-start\n10 PUNCH ACT("H2O"), SC, RHO\n-end\nEND\n'
        )

    def sodium_chloride(self, molality: float, temperature: float) -> dict[str, float]:
        text = f"SOLUTION 1\n-temp {temperature}\n-units mol/kgw\nNa {molality}\nCl {molality}\nEND\n"
        assert self.engine.RunString(text) == 0
        return {key: values[-1] for key, values in self.engine.GetSelectedOutput().items()}


@pytest.mark.parametrize("temperature", [0.0, 15.0, 25.0, 40.0])
def test_phreeqc_has_the_same_sodium_chloride(temperature: float) -> None:
    """PHREEQC 3.8: pitzer.dat (Appelo 2015) for the activity of water, phreeqc.dat for the density."""
    pitzer, plain = Phreeqc("pitzer.dat"), Phreeqc("phreeqc.dat")
    for molality in (0.01, 0.1, 0.5, 1.0, 1.5):
        theirs = -1e3 * np.log(pitzer.sodium_chloride(molality, temperature)["aw"]) / 0.018015268
        ours = float(sodium_chloride.osmolality_in_situ_from_molality(molality, temperature_degC=temperature))
        assert ours == pytest.approx(theirs, rel=5e-4)
        density = float(sodium_chloride.density_from_molality(molality, temperature_degC=temperature))
        assert density == pytest.approx(1e3 * plain.sodium_chloride(molality, temperature)["rho"], abs=0.25)
