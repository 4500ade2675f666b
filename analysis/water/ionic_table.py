"""The properties of one ionic water over dilution and temperature, tabulated once through PHREEQC.

Conductivity and density come from the engine's phreeqc database, the activity of water from its pitzer
database (the phreeqc database is 2 to 5 % wrong there). Needs the package `phreeqc` (IPhreeqc 3.8 or newer);
the finished table needs nothing and can be kept and read back as arrays.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, Final

import gsw
import numpy as np

from analysis.errors import InvalidInputError, MissingPackageError
from analysis.water.freezing import ICE_POINT_DEGC, freezing_point_from_osmolality
from analysis.water.ions import IONS, IonAnalysis, grams_per_kg_water
from analysis.water.seawater import WATER_MOLAR_MASS_KG_MOL
from analysis.water.sodium_chloride import cold_correction

if TYPE_CHECKING:
    from collections.abc import Mapping

    from analysis.arrays import FloatArray

TEMPERATURES_DEGC: Final = np.array([-2.5, 0.0, 5.0, 10.0, 15.0, 20.0, 25.0, 30.0, 35.0, 40.0, 45.0])
TABLE_VERSION: Final = 1
"""Part of the key under which a table is kept: it changes when tables made before are no longer right."""

HIGHEST_CONCENTRATION: Final = 1.5
"""The table runs from pure water to one and a half times the analysed water (evaporation)."""

_ROOTS: Final = np.linspace(0.06, float(np.sqrt(HIGHEST_CONCENTRATION)), 24)
_HIGHEST_GRAMS_PER_KG_WATER = 140.0
_ASSUMED_PH = 8.0
_NOT_IN_PITZER = ("F", "NO3")
_ELEMENTS = {"SO4": "S(6)", "NO3": "N(5)"}


@dataclass(frozen=True, slots=True)
class IonicTable:
    """Properties over sqrt(f), f = concentration over that of the analysis, and temperature.

    Each property is divided by f, so that it is smooth down to pure water.

    Parameters
    ----------
    name : str
        The analysis' id.
    roots : ndarray of float64
        sqrt(f), the first is 0.
    temperatures_degC : ndarray of float64
    conductivity_mS_cm : ndarray of float64
        Conductivity / f, shape (roots, temperatures).
    density_excess_kg_m3 : ndarray of float64
        (Density - density of pure water) / f, same shape.
    osmolality_in_situ_mOsm_kg : ndarray of float64
        Osmolality / f, same shape.
    osmolality_mOsm_kg : ndarray of float64
        Freezing-point basis / f, shape (roots,).
    grams_per_kg_water : float
        Salt per kilogram of water at f = 1. [g/kg water]
    model_uncertainty_percent : float
        Of osmolality from conductivity, at 25 degC and above. [%]
    """

    name: str
    roots: FloatArray
    temperatures_degC: FloatArray
    conductivity_mS_cm: FloatArray
    density_excess_kg_m3: FloatArray
    osmolality_in_situ_mOsm_kg: FloatArray
    osmolality_mOsm_kg: FloatArray
    grams_per_kg_water: float
    model_uncertainty_percent: float

    def to_arrays(self) -> dict[str, FloatArray]:
        """Return the table as named arrays, for keeping: the inverse of `from_arrays`."""
        return {
            key: np.asarray(getattr(self, key), dtype=np.float64) for key in self.__dataclass_fields__ if key != "name"
        }

    @classmethod
    def from_arrays(cls, name: str, arrays: Mapping[str, FloatArray]) -> IonicTable:
        """Return the table kept by `to_arrays`.

        Raises
        ------
        InvalidInputError
            If an array is missing, has the wrong shape or a value that is not finite.
        """
        keys = [key for key in cls.__dataclass_fields__ if key != "name"]
        missing = sorted(set(keys) - set(arrays))
        if missing:
            raise InvalidInputError(
                "arrays of the ion table", found=sorted(arrays), allowed=", ".join(keys), where=name
            )
        kept = {key: np.asarray(arrays[key], dtype=np.float64) for key in keys}
        shape = (kept["roots"].size, kept["temperatures_degC"].size)
        for key, values in kept.items():
            wanted = _shape_of(key, shape)
            if values.shape != wanted or not np.isfinite(values).all():
                raise InvalidInputError(
                    f"array {key} of the ion table", found=values.shape, allowed=f"{wanted}, finite", where=name
                )
        return cls(
            name=name,
            roots=kept["roots"],
            temperatures_degC=kept["temperatures_degC"],
            conductivity_mS_cm=kept["conductivity_mS_cm"],
            density_excess_kg_m3=kept["density_excess_kg_m3"],
            osmolality_in_situ_mOsm_kg=kept["osmolality_in_situ_mOsm_kg"],
            osmolality_mOsm_kg=kept["osmolality_mOsm_kg"],
            grams_per_kg_water=float(kept["grams_per_kg_water"]),
            model_uncertainty_percent=float(kept["model_uncertainty_percent"]),
        )


def _shape_of(key: str, shape: tuple[int, int]) -> tuple[int, ...]:
    if key in ("grams_per_kg_water", "model_uncertainty_percent"):
        return ()
    if key in ("roots", "osmolality_mOsm_kg"):
        return shape[:1]
    return shape[1:] if key == "temperatures_degC" else shape


def tabulate(analysis: IonAnalysis) -> IonicTable:
    """Return the table of an analysed water; takes a few tenths of a second.

    Raises
    ------
    MissingPackageError
        If the package `phreeqc` is not installed.
    InvalidInputError
        If the engine refuses or warns, or an answer is not finite.
    """
    conductor, activity = Engine("phreeqc.dat", where=analysis.name), Engine("pitzer.dat", where=analysis.name)
    molalities = _molalities(analysis, conductor)
    pitzer_molalities, replaced = _without_unknown(molalities, where=analysis.name)
    grams = grams_per_kg_water(molalities)
    roots = _ROOTS[_ROOTS**2 * grams <= _HIGHEST_GRAMS_PER_KG_WATER]
    factors, ph = roots**2, _ASSUMED_PH if analysis.pH is None else analysis.pH
    shape = (factors.size, TEMPERATURES_DEGC.size)
    conductivity, density, in_situ = np.empty(shape), np.empty(shape), np.empty(shape)
    for row, factor in enumerate(factors):
        for column, temperature in enumerate(TEMPERATURES_DEGC):
            conductivity[row, column], density[row, column], _ = conductor.solve(molalities, factor, temperature, ph)
            in_situ[row, column] = activity.solve(pitzer_molalities, factor, temperature, ph)[2]
    freezing = np.array([_freezing_point_osmolality(activity, pitzer_molalities, factor, ph) for factor in factors])
    pure = np.asarray(gsw.rho_t_exact(0.0, TEMPERATURES_DEGC, 0.0))
    column_factors = factors[:, None]
    all_roots = np.concatenate([[0.0], roots])
    return IonicTable(
        name=analysis.name,
        roots=all_roots,
        temperatures_degC=TEMPERATURES_DEGC.copy(),
        conductivity_mS_cm=_with_limit(roots, conductivity * cold_correction(TEMPERATURES_DEGC) / column_factors),
        density_excess_kg_m3=_with_limit(roots, (density - pure) / column_factors),
        osmolality_in_situ_mOsm_kg=_with_limit(roots, in_situ / column_factors),
        osmolality_mOsm_kg=_with_limit(roots, (freezing / factors)[:, None])[:, 0],
        grams_per_kg_water=grams,
        model_uncertainty_percent=_uncertainty_percent(analysis, molalities, replaced),
    )


def _with_limit(roots: FloatArray, values: FloatArray) -> FloatArray:
    """Return *values* with a first row: the value at infinite dilution, by a parabola through the three weakest."""
    parabola = np.polyfit(roots[:3], values[:3], 2)
    return np.vstack([parabola[-1], values])


def _molalities(analysis: IonAnalysis, engine: Engine) -> dict[str, float]:
    if analysis.density_kg_m3 is not None:
        return analysis.molalities(density_kg_m3=analysis.density_kg_m3)
    ph = _ASSUMED_PH if analysis.pH is None else analysis.pH
    density = 1000.0 + 0.75 * analysis.dissolved_g_L
    for _ in range(4):  # the density follows from the molalities and they, weakly, from the density
        molalities = analysis.molalities(density_kg_m3=density)
        density = engine.solve(molalities, 1.0, analysis.temperature_degC, ph)[1]
    return analysis.molalities(density_kg_m3=density)


def _without_unknown(molalities: Mapping[str, float], *, where: str) -> tuple[dict[str, float], float]:
    """Return molalities with chloride in place of what the pitzer database lacks, and the share of anions replaced."""
    anions = sum(-IONS[ion].charge * amount for ion, amount in molalities.items() if IONS[ion].charge < 0)
    unknown = sum(molalities.get(ion, 0.0) for ion in _NOT_IN_PITZER)
    share = unknown / anions
    if share > 0.2:
        raise InvalidInputError(
            "nitrate and fluoride", found=f"{100 * share:.0f} % of the anions", allowed="up to 20 %", where=where
        )
    known = {ion: amount for ion, amount in molalities.items() if ion not in _NOT_IN_PITZER}
    known["Cl"] = known.get("Cl", 0.0) + unknown
    return known, share


def _uncertainty_percent(analysis: IonAnalysis, molalities: Mapping[str, float], replaced: float) -> float:
    """Return the part of conductivity (1 % in chloride waters, 2 % else), activity (0.5 %), charge and replacement."""
    anions = sum(-IONS[ion].charge * amount for ion, amount in molalities.items() if IONS[ion].charge < 0)
    conductivity = 1.0 if molalities.get("Cl", 0.0) >= 0.7 * anions else 2.0
    charge = 0.5 * abs(analysis.charge_error_percent)
    return float(np.sqrt(conductivity**2 + 0.5**2 + charge**2 + (5.0 * replaced) ** 2))


def _freezing_point_osmolality(activity: Engine, molalities: Mapping[str, float], factor: float, ph: float) -> float:
    osmolality = activity.solve(molalities, factor, ICE_POINT_DEGC, ph)[2]
    for _ in range(3):  # osmolality hardly depends on temperature: each step gains three digits
        freezing = float(freezing_point_from_osmolality(osmolality))
        osmolality = activity.solve(molalities, factor, freezing, ph)[2]
    return osmolality


class Engine:
    """One PHREEQC with one of its built-in databases; any warning is an error.

    Parameters
    ----------
    database : str
        ``phreeqc.dat`` or ``pitzer.dat``.
    where : str
        Name of the water, for messages.

    Raises
    ------
    MissingPackageError
        If the package `phreeqc` is not installed.
    """

    def __init__(self, database: str, *, where: str) -> None:
        self._where = where
        try:
            import phreeqc
        except ImportError as error:
            raise MissingPackageError(
                "phreeqc", extra="ions", need="A water described by a laboratory analysis"
            ) from error
        self._phreeqc: Any = phreeqc.Phreeqc()
        if self._phreeqc.LoadBuiltInDatabase(database) != 0:
            raise InvalidInputError("database of the engine", found=database, allowed="built into phreeqc 1.1 or newer")
        self._run(
            "SELECTED_OUTPUT 1\n-reset false\nUSER_PUNCH 1\n-headings activity conductivity density\n-start\n"
            '10 PUNCH ACT("H2O"), SC, RHO\n-end\nEND\n'
        )

    def solve(
        self, molalities: Mapping[str, float], factor: float, temperature_degC: float, ph: float
    ) -> tuple[float, float, float]:
        """Return conductivity [mS/cm], density [kg/m3] and osmolality [mOsm/kg water] of a solution.

        Parameters
        ----------
        molalities : mapping of str to float
            By ion. [mol/kg water]
        factor : float
            By which they are multiplied. [1]
        temperature_degC : float
            [degC]
        ph : float

        Raises
        ------
        InvalidInputError
            If the engine refuses or warns, or answers what cannot be.
        """
        lines = [f"-temp {temperature_degC:.10g}", "-units mol/kgw", f"pH {ph:.6g}"]
        alkalinity = molalities.get("HCO3", 0.0) + 2.0 * molalities.get("CO3", 0.0)
        plain = {ion: amount for ion, amount in molalities.items() if ion not in ("HCO3", "CO3")}
        lines += [f"{_ELEMENTS.get(ion, ion)} {amount * factor:.12g}" for ion, amount in plain.items()]
        lines += [f"Alkalinity {alkalinity * factor:.12g}"] if alkalinity > 0.0 else []
        self._run("SOLUTION 1\n" + "\n".join(lines) + "\nEND\n")
        answer = self._phreeqc.GetSelectedOutput()
        activity, conductivity, density = (float(answer[key][-1]) for key in ("activity", "conductivity", "density"))
        if not (0.0 < activity <= 1.0 and np.isfinite(conductivity) and 900.0 < 1000.0 * density < 1400.0):
            found = f"activity {activity}, conductivity {conductivity}, density {density}"
            raise InvalidInputError("answer of the engine", found=found, allowed="finite", where=self._where)
        return conductivity / 1000.0, density * 1000.0, -1000.0 * float(np.log(activity)) / WATER_MOLAR_MASS_KG_MOL

    def _run(self, text: str) -> None:
        errors = self._phreeqc.RunString(text)
        said = (self._phreeqc.GetErrorString() if errors else "") + self._phreeqc.GetWarningString()
        if errors or said.strip():
            raise InvalidInputError(
                "analysis as the engine reads it",
                found=said.strip(),
                allowed="no error and no warning",
                where=self._where,
            )
