"""A site's own figures for a species: who says so, and why."""

from __future__ import annotations

import datetime

from pydantic import Field

from ingest.site.section import ANIMAL_WORDS, Animal, Section, Words, words


class SpeciesOverride(Section):
    """Figures that replace or add to the published ones of one animal at this site."""

    animal: Animal = Field(description=ANIMAL_WORDS)
    figures: dict[str, float] = Field(min_length=1, description="name of a figure of the species table: number")
    author: Words = words("who decided it")
    reason: Words = words("why")
    source: Words | None = words("where the figures come from", None)
    decided_on: datetime.date | None = Field(None, description="a date as 2026-01-31")
    based_on: Animal | None = Field(None, description=f"for a new animal, the one it starts from: {ANIMAL_WORDS}")
