"""Who and where the site is, and which measured times it takes."""

from __future__ import annotations

from typing import Literal

from pydantic import Field

from ingest.site.section import Section, Slug, Words, one_of, quantity, slug, words

Role = Literal["viewer", "operator", "biologist", "manager"]


class Position(Section):
    """Where the site lies; used for Absolute Salinity and for the tide."""

    latitude: float = quantity(-90, 90, "degrees north")
    longitude: float = quantity(-180, 360, "degrees east")


class Actor(Section):
    """The person in whose name the board and the terminal act as long as nobody has signed in."""

    name: Words = words("name of a person or a duty")
    role: Role = one_of("viewer", "operator", "biologist", "manager")


class Horizon(Section):
    """How old or how far ahead a measured time may be. What lies beyond is refused and kept with its reason."""

    past_h: float = quantity(0.1, 1_000_000, "h", 8760)
    future_min: float = quantity(0, 1440, "min", 10)


class Identity(Section):
    """The section `site:`."""

    id: Slug = slug("id of the site")
    name: Words = words("name of the site")
    time_zone: str = Field(description="a time zone of the IANA list, such as Europe/Lisbon")
    position: Position | None = Field(None, description="latitude and longitude")
    elevation_m: float = quantity(-450, 6000, "m", 0)
    default_actor: Actor = Field(Actor(name="Duty", role="operator"), description="name and role")
    horizon: Horizon = Field(Horizon(), description="past_h and future_min")
    salinity_label: Literal["salinity", "ppt"] = one_of("salinity", "ppt", default="salinity")
