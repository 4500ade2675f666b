"""The waters of a site: where they come from, and laboratory analyses of inland waters."""

from __future__ import annotations

import datetime
from typing import Annotated, Literal

from pydantic import Field

from analysis.water.ions import IonAnalysis
from ingest.site.section import Section, Slug, Words, one_of, quantity, slug, words

SEAWATER = "seawater"
SODIUM_CHLORIDE = "sodium-chloride"
PLAIN_WATER_KINDS = (SEAWATER, SODIUM_CHLORIDE)

IonName = Literal["Na", "K", "Ca", "Mg", "Sr", "Cl", "SO4", "HCO3", "CO3", "Br", "F", "NO3", "B"]
Amount = Annotated[float, Field(ge=0, le=1_000_000)]


class SourceWater(Section):
    """Water that comes to the site: intake, well, brine, tap."""

    id: Slug = slug("id of the source water")
    name: Words = words("name of the source water")
    kind: str = Field(SEAWATER, description="seawater, sodium-chloride, or the id of an entry of analyses")
    salinity: float | None = quantity(0, 300, "practical salinity in seawater, g/kg in other waters", None)
    temperature_degC: float | None = quantity(-2, 45, "degC", None)


class Analysis(Section):
    """A laboratory analysis of an inland saline water: a kind of water of its own."""

    id: Slug = slug("id of the analysis")
    name: Words = words("name of the water")
    ions: dict[IonName, Amount] = Field(
        min_length=2,
        description="ion: amount, from 0 up; ions: Na, K, Ca, Mg, Sr, Cl, SO4, HCO3, CO3, Br, F, NO3, B",
    )
    unit: Literal["mg/L", "mmol/L"] = one_of("mg/L", "mmol/L", default="mg/L")
    temperature_degC: float = quantity(0, 45, "degC", 25)
    density_kg_m3: float | None = quantity(980, 1300, "kg/m3", None)
    pH: float | None = quantity(4, 11, "", None)  # noqa: N815 - the name of the quantity
    conductivity_mS_cm: float | None = quantity(0.01, 300, "mS/cm, as measured at temperature_degC", None)
    osmolality_mOsm_kg: float | None = quantity(0.1, 5000, "mOsm/kg, by freezing point", None)
    laboratory: Words | None = words("who analysed", None)
    sampled_on: datetime.date | None = Field(None, description="a date as 2026-01-31")

    def ion_analysis(self) -> IonAnalysis:
        """Return the analysis as the science takes it.

        Raises
        ------
        InvalidInputError
            If the charges of the ions do not balance within 10 %, or cations or anions are missing.
        """
        return IonAnalysis(
            name=self.id,
            amounts={str(ion): amount for ion, amount in self.ions.items()},
            unit=self.unit,
            temperature_degC=self.temperature_degC,
            density_kg_m3=self.density_kg_m3,
            pH=self.pH,
            conductivity_mS_cm=self.conductivity_mS_cm,
            osmolality_mOsm_kg=self.osmolality_mOsm_kg,
        )
