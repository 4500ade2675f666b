"""Halls and tanks: volume, water, what the water should be, and the first animals."""

from __future__ import annotations

import datetime
from typing import Annotated

from pydantic import Field

from ingest.site.section import ANIMAL_WORDS, Animal, Section, Slug, Words, positive, quantity, slug, whole, words
from ingest.site.waters import SEAWATER

MAIN_HALL = "main"
SALINITY_WORDS = "practical salinity in seawater, g/kg in other waters"

Salinity = Annotated[float, Field(ge=0, le=300)]


class Hall(Section):
    """A room or a row of ponds."""

    id: Slug = slug("id of the hall")
    name: Words = words("name of the hall")


class SetPoint(Section):
    """What the water of a tank should be: a salinity with a band around it, or a tidal band."""

    salinity: float | None = quantity(0, 300, SALINITY_WORDS, None)
    band: float | None = Field(
        None, gt=0, le=15, description="a number above 0, up to 15: how far from the set point is still right"
    )
    tidal_band: tuple[Salinity, Salinity] | None = Field(
        None,
        description="[low, high]: two numbers with decimal points, low below high: salinity that the tide may bring",
    )
    temperature_degC: float | None = quantity(-2, 45, "degC", None)
    temperature_band_K: float | None = positive(20, "K", None)


class FirstStock(Section):
    """The animals in the tank when the tool is started: applied once, by the ledger."""

    id: Slug = slug("id of the batch")
    animal: Animal = Field(description=ANIMAL_WORDS)
    number: int = whole(1, 10_000_000_000)
    used_to_salinity: float = quantity(0, 300, SALINITY_WORDS)
    since: datetime.date = Field(description="a date as 2026-01-31")
    name: Words | None = words("name of the batch", None)


class Tank(Section):
    """One body of water."""

    id: Slug = slug("id of the tank")
    name: Words = words("name of the tank")
    hall: Slug = slug("id of a hall", MAIN_HALL)
    volume_L: float = positive(1_000_000_000, "L")
    water: str = Field(SEAWATER, description="seawater, sodium-chloride, or the id of an entry of analyses")
    set_point: SetPoint | None = Field(None, description="salinity with band, or tidal_band; temperature_degC")
    first_stock: FirstStock | None = Field(None, description="id, animal, number, used_to_salinity, since")
