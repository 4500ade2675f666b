"""Published rates and conditions of transfer: the packaged tables ``rates.csv`` and ``gates.csv``."""

from __future__ import annotations

import csv
from dataclasses import dataclass
from fnmatch import fnmatchcase
from functools import lru_cache
from importlib.resources import files
from typing import Final, Literal

from analysis.errors import InvalidInputError

Direction = Literal["down", "up"]
Per = Literal["h", "d"]

GENERAL_RULE: Final = "*"


@dataclass(frozen=True, slots=True)
class PublishedRate:
    """One row of ``rates.csv``: the change allowed from a salinity up, per hour or per day."""

    species: str
    stages: str
    direction: str
    above: float
    kind: Literal["fraction", "absolute"]
    allowed: float
    per: Per
    source: str
    certainty: str
    note: str

    @property
    def is_general(self) -> bool:
        """True for the rule that stands where nothing is published for the animal."""
        return self.species == GENERAL_RULE


@dataclass(frozen=True, slots=True)
class PublishedGate:
    """One row of ``gates.csv``: what must be true before a transfer may begin."""

    species: str
    stages: str
    direction: str
    target_below: float
    target_above: float
    kind: str
    text: str
    source: str
    certainty: str
    least_mg_L: float

    def applies(self, target_salinity: float) -> bool:
        """Return True where the gate stands in the way of this target."""
        return target_salinity < self.target_below and target_salinity > self.target_above


def _rows(name: str) -> list[dict[str, str]]:
    text = files("analysis.acclimation").joinpath(name).read_text(encoding="utf-8")
    return list(csv.DictReader(line for line in text.splitlines() if not line.startswith("#")))


@lru_cache(maxsize=1)
def all_rates() -> tuple[PublishedRate, ...]:
    """Return every row of ``rates.csv``."""
    return tuple(
        PublishedRate(
            species=row["species"],
            stages=row["stages"],
            direction=row["direction"],
            above=float(row["above"]),
            kind="fraction" if row["kind"] == "fraction" else "absolute",
            allowed=float(row["allowed"]),
            per="d" if row["per"] == "d" else "h",
            source=row["source"],
            certainty=row["certainty"],
            note=row["note"],
        )
        for row in _rows("rates.csv")
    )


@lru_cache(maxsize=1)
def all_gates() -> tuple[PublishedGate, ...]:
    """Return every row of ``gates.csv``."""
    return tuple(
        PublishedGate(
            species=row["species"],
            stages=row["stages"],
            direction=row["direction"],
            target_below=float(row["target_below"] or "inf"),
            target_above=float(row["target_above"] or "-inf"),
            kind=row["kind"],
            text=row["text"],
            source=row["source"],
            certainty=row["certainty"],
            least_mg_L=float(row["least_mg_L"] or "nan"),
        )
        for row in _rows("gates.csv")
    )


def rates(animal: str, *, direction: Direction, per: Per) -> tuple[PublishedRate, ...]:
    """Return the published rates of *animal* (``genus-species/stage``), lowest band first.

    The general hatchery rule comes back for rates per hour where nothing is published for the animal; for rates
    per day there is none, and the answer is empty.
    """
    species, stage = _parts(animal)
    found = [
        rate
        for rate in all_rates()
        if rate.per == per
        and rate.direction in {direction, "both"}
        and not rate.is_general
        and _matches(rate.species, rate.stages, species, stage)
    ]
    if not found:
        found = [rate for rate in all_rates() if rate.is_general and rate.per == per]
    return tuple(sorted(found, key=lambda rate: rate.above))


def gates(animal: str, *, direction: Direction, target_salinity: float) -> tuple[PublishedGate, ...]:
    """Return the conditions that stand before this transfer of *animal*."""
    species, stage = _parts(animal)
    return tuple(
        gate
        for gate in all_gates()
        if gate.direction in {direction, "both"}
        and gate.applies(target_salinity)
        and _matches(gate.species, gate.stages, species, stage)
    )


def _parts(animal: str) -> tuple[str, str]:
    species, slash, stage = animal.partition("/")
    if not slash or not species or not stage:
        raise InvalidInputError("animal", found=animal, allowed="SPECIES/STAGE, for example penaeus-vannamei/pl10")
    return species, stage


def _matches(species_pattern: str, stage_patterns: str, species: str, stage: str) -> bool:
    return fnmatchcase(species, species_pattern) and any(
        fnmatchcase(stage, pattern) for pattern in stage_patterns.split("|")
    )
