"""A site's own figures for a species: who says so, and why."""

from __future__ import annotations

import datetime

from pydantic import Field

from ingest.site.section import ANIMAL_WORDS, Animal, Section, Words, words


class SpeciesOverride(Section):
    """Figures that replace or add to the published ones of one animal at this site; null means "not known"."""

    animal: Animal = Field(description=ANIMAL_WORDS)
    figures: dict[str, float | None] = Field(
        min_length=1, description="name of a figure of the species tables, such as tolerable_low_ppt: number, or null"
    )
    author: Words = words("who decided it")
    reason: Words = words("why")
    source: Words | None = words("where the figures come from", None)
    decided_on: datetime.date | None = Field(None, description="a date as 2026-01-31")

    def entries(self) -> list[dict[str, str | float | None]]:
        """Return one entry a figure, as `analysis.animal.overrides.with_overrides` takes them."""
        return [
            {"animal": self.animal, "figure": figure, "value": value, "author": self.author, "reason": self.reason}
            for figure, value in self.figures.items()
        ]
