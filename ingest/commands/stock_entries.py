"""What a person enters of stock: the body of each command, with what is allowed in it."""

from __future__ import annotations

import msgspec


class Entry(msgspec.Struct, frozen=True, kw_only=True, forbid_unknown_fields=True):
    """What every entry may hold. Without `at_us` it happened now."""

    at_us: int | None = None
    note: str = ""


class ReceiveEntry(Entry, frozen=True, kw_only=True, forbid_unknown_fields=True):
    """Animals that came. What nobody knows is left out.

    `used_to_salinity` is that of the water they lived in (practical salinity in seawater, g/kg in other waters) and
    `used_for_h` for how long; `from_water` names it; the rest tells of the transport. Dates in us UTC.
    """

    tank: str
    animal: str
    number: int
    name: str | None = None
    from_water: str = ""
    used_to_salinity: float | None = None
    used_for_h: float | None = None
    temperature_degC: float | None = None
    hours_packed: float | None = None
    density_per_L: float | None = None
    ph: float | None = None
    hatched_at: int | None = None
    metamorphosed_at: int | None = None


class MoveEntry(Entry, frozen=True, kw_only=True, forbid_unknown_fields=True):
    """All animals went to another tank."""

    to_tank: str


class SplitEntry(Entry, frozen=True, kw_only=True, forbid_unknown_fields=True):
    """Some animals became a cohort of their own; `to_tank` may be the tank in which they are."""

    new_id: str
    to_tank: str
    number: int
    name: str | None = None


class JoinEntry(Entry, frozen=True, kw_only=True, forbid_unknown_fields=True):
    """Another cohort was put to this one, into this one's tank, and ends."""

    other: str


class CountEntry(Entry, frozen=True, kw_only=True, forbid_unknown_fields=True):
    """The number alive was counted."""

    number: int


class DeadEntry(Entry, frozen=True, kw_only=True, forbid_unknown_fields=True):
    """Dead animals were taken out; `from_us` is since when they died, where somebody knows better than "since the count before"."""

    number: int
    from_us: int | None = None


class HarvestEntry(Entry, frozen=True, kw_only=True, forbid_unknown_fields=True):
    """Living animals left the site; without a number all."""

    number: int | None = None


class StageEntry(Entry, frozen=True, kw_only=True, forbid_unknown_fields=True):
    """The stage that a person saw. Confirming the present one declines what age proposes. Dates in us UTC."""

    animal: str
    hatched_at: int | None = None
    metamorphosed_at: int | None = None
