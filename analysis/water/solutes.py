"""What dissolves at the bench: molar masses, how solutes dissociate, and how far from ideal they are.

The coefficients on the freezing-point basis are our own least-squares fits of the freezing-point depressions and
densities at 20 degC in the CRC Handbook (102nd edition, Concentrative Properties of Aqueous Solutions, after
Wolf 1966; looked up, github amosonabike/CRC-Solution-Properties-). The fits meet the printed depressions within
0.015 K; what is not from that table says so.
"""

from __future__ import annotations

from types import MappingProxyType
from typing import TYPE_CHECKING, Final, NamedTuple

from analysis.water.seawater import WATER_MOLAR_MASS_KG_MOL

if TYPE_CHECKING:
    from collections.abc import Mapping

WATER_MOLAR_MASS_G_MOL: Final = 1000.0 * WATER_MOLAR_MASS_KG_MOL

_CRC = "fit of CRC Handbook, 102nd ed. (looked up)"


class Dissociation(NamedTuple):
    """Ions of one formula unit and Pitzer's coefficients at the freezing point.

    Parameters
    ----------
    cations, anions, cation_charge, anion_charge : int
    beta0, beta1 : float
        [kg/mol]
    beta2 : float
        For salts of two doubly charged ions. [kg/mol]
    """

    cations: int
    anions: int
    cation_charge: int
    anion_charge: int
    beta0: float
    beta1: float
    beta2: float = 0.0


class Solute(NamedTuple):
    """A dissolved substance, without any water of crystallisation.

    Parameters
    ----------
    name : str
        In words.
    molar_mass_g_mol : float
        [g/mol]
    volume_cm3_mol : float
        Apparent molar volume. [cm3/mol]
    highest_molality : float
        End of the fit. [mol/kg water]
    dissociation : Dissociation, optional
        None for what stays whole.
    virial : float
        Second osmotic virial coefficient of what stays whole. [kg/mol]
    source : str
        Of the coefficients, and how sure they are.
    is_assumed : bool
        True where a coefficient is from memory or borrowed from a like substance.
    """

    name: str
    molar_mass_g_mol: float
    volume_cm3_mol: float
    highest_molality: float
    dissociation: Dissociation | None = None
    virial: float = 0.0
    source: str = _CRC
    is_assumed: bool = False


def _salt(
    name: str, mass: float, volume: float, highest: float, ions: tuple[int, int, int, int], *betas: float
) -> Solute:
    return Solute(name, mass, volume, highest, Dissociation(*ions, *betas))


_ONE_ONE = (1, 1, 1, 1)
_TWO_ONE = (2, 1, 1, 2)
_ONE_TWO = (1, 2, 2, 1)

SOLUTES: Final[Mapping[str, Solute]] = MappingProxyType(
    {
        "sodium-chloride": _salt("sodium chloride", 58.443, 17.73, 1.1, _ONE_ONE, 0.04696, 0.26283),
        "potassium-chloride": _salt("potassium chloride", 74.551, 28.16, 1.2, _ONE_ONE, 0.02482, 0.18227),
        "ammonium-chloride": _salt("ammonium chloride", 53.492, 36.94, 1.0, _ONE_ONE, 0.04906, 0.08286),
        "magnesium-chloride": _salt("magnesium chloride", 95.211, 19.61, 0.56, _ONE_TWO, 0.36693, 1.55778),
        "calcium-chloride": _salt("calcium chloride", 110.984, 21.24, 0.58, _ONE_TWO, 0.29421, 1.27713),
        "magnesium-sulfate": _salt("magnesium sulfate", 120.368, 2.42, 0.73, (1, 1, 2, 2), 0.26882, 2.70997, -37.23),
        "sodium-sulfate": _salt("sodium sulfate", 142.043, 18.31, 0.45, _TWO_ONE, -0.14124, 1.26106),
        "sodium-hydrogen-carbonate": _salt("sodium hydrogen carbonate", 84.007, 25.78, 0.77, _ONE_ONE, -0.05, -0.00319),
        "potassium-hydrogen-carbonate": _salt(
            "potassium hydrogen carbonate", 100.115, 36.16, 0.87, _ONE_ONE, -0.04592, -0.08262
        ),
        "sodium-dihydrogen-phosphate": _salt(
            "sodium dihydrogen phosphate", 119.977, 33.13, 0.73, _ONE_ONE, -0.16558, 0.51231
        ),
        "disodium-hydrogen-phosphate": _salt(
            "disodium hydrogen phosphate", 141.959, 1.85, 0.11, _TWO_ONE, -0.61927, 2.41057
        ),
        "potassium-dihydrogen-phosphate": _salt(
            "potassium dihydrogen phosphate", 136.085, 41.09, 0.47, _ONE_ONE, -0.06381, -0.15296
        ),
        "dipotassium-hydrogen-phosphate": _salt(
            "dipotassium hydrogen phosphate", 174.176, 29.54, 0.37, _TWO_ONE, 0.15507, -0.14583
        ),
        "trisodium-citrate": _salt("trisodium citrate", 258.069, 83.88, 0.25, (3, 1, 1, 3), 0.32772, 2.3137),
        "glucose": Solute("glucose", 180.155, 112.14, 1.0, virial=0.03246),
        "fructose": Solute("fructose", 180.155, 110.34, 1.0, virial=0.02035),
        "sucrose": Solute("sucrose", 342.296, 211.31, 0.95, virial=0.11078),
        "mannitol": Solute("mannitol", 182.171, 119.25, 0.75, virial=0.02077),
        "glycerol": Solute("glycerol", 92.094, 71.23, 2.8, virial=0.03093),
        "ethylene-glycol": Solute("ethylene glycol", 62.068, 54.42, 2.7, virial=0.00968),
        "methanol": Solute(
            "methanol",
            32.042,
            37.62,
            3.5,
            virial=0.00594,
            source="fit of CRC Handbook (looked up), whose values below 6 % are 4 % below an ideal solution",
            is_assumed=True,
        ),
        "tris": Solute(
            "tris(hydroxymethyl)aminomethane",
            121.135,
            91.0,
            0.3,
            source="taken as ideal: CRC Handbook has 0.08 K at 0.041 mol/kg (looked up); its hydrochloride counts twice",
            is_assumed=True,
        ),
        "trehalose": Solute(
            "trehalose", 342.296, 211.3, 0.95, virial=0.11078, source="as sucrose (assumed)", is_assumed=True
        ),
        "dimethyl-sulfoxide": Solute(
            "dimethyl sulfoxide",
            78.133,
            69.0,
            3.0,
            virial=0.108,
            source="Elliott and others 2007, Cryobiology (from memory)",
            is_assumed=True,
        ),
        "propylene-glycol": Solute(
            "propylene glycol",
            76.095,
            71.0,
            3.0,
            virial=0.039,
            source="Elliott and others 2007, Cryobiology (from memory)",
            is_assumed=True,
        ),
        "urea": Solute(
            "urea", 60.055, 44.4, 2.0, virial=-0.04, source="Scatchard and others 1938 (from memory)", is_assumed=True
        ),
    }
)
"""Substances by key."""


class Product(NamedTuple):
    """What is weighed: a solute with the water that crystallises with it.

    Parameters
    ----------
    solute : str
        Key of `SOLUTES`.
    waters : int
        Molecules of water for each formula unit.
    """

    solute: str
    waters: int = 0

    @property
    def molar_mass_g_mol(self) -> float:
        """Mass of one mole as weighed. [g/mol]"""
        return SOLUTES[self.solute].molar_mass_g_mol + self.waters * WATER_MOLAR_MASS_G_MOL


PRODUCTS: Final[Mapping[str, Product]] = MappingProxyType(
    {
        **{key: Product(key) for key in SOLUTES},
        "magnesium-chloride-hexahydrate": Product("magnesium-chloride", 6),
        "calcium-chloride-dihydrate": Product("calcium-chloride", 2),
        "calcium-chloride-hexahydrate": Product("calcium-chloride", 6),
        "magnesium-sulfate-heptahydrate": Product("magnesium-sulfate", 7),
        "sodium-sulfate-decahydrate": Product("sodium-sulfate", 10),
        "sodium-dihydrogen-phosphate-monohydrate": Product("sodium-dihydrogen-phosphate", 1),
        "sodium-dihydrogen-phosphate-dihydrate": Product("sodium-dihydrogen-phosphate", 2),
        "disodium-hydrogen-phosphate-dihydrate": Product("disodium-hydrogen-phosphate", 2),
        "disodium-hydrogen-phosphate-dodecahydrate": Product("disodium-hydrogen-phosphate", 12),
        "trisodium-citrate-dihydrate": Product("trisodium-citrate", 2),
        "glucose-monohydrate": Product("glucose", 1),
        "trehalose-dihydrate": Product("trehalose", 2),
    }
)
"""What is weighed, by key: every solute without water, and the common hydrates."""
