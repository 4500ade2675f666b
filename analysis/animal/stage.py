"""A life stage of a species and the published figures that stand behind it."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from enum import IntFlag, StrEnum

NAN = math.nan


class Certainty(StrEnum):
    """How sure a figure is. Every figure that reaches a screen shows this word."""

    LOOKED_UP = "looked up"
    """Read in the named source (nearly always its abstract)."""
    DERIVED = "derived"
    """Arithmetic on a figure that was looked up."""
    PROXY = "proxy"
    """Looked up, but for another species or stage."""
    MEMORY = "memory"
    """Recalled, not checked against the source."""
    ASSUMED = "assumed"
    """No figure: a fallback with its reasoning, see `analysis.animal.fallback_rules`."""
    SITE = "site"
    """Set by the site, with author and reason."""


class Supports(IntFlag):
    """Which parts of the stress can be told for a stage."""

    NONE = 0
    RANGE = 1
    CHANGE = 2
    EXPOSURE = 4
    THERMAL = 8
    INTERNAL = 16


@dataclass(frozen=True, slots=True)
class Figure:
    """One published number with its unit, its sources and how sure it is.

    Parameters
    ----------
    value : float
        The number, in *unit*.
    unit : str
        ``ppt``, ``mOsm/kg``, ``degC``, ``h``, ``ppt/h``, ``ppt/d``, ``K/h`` or ``1``.
    sources : tuple of str
        Keys of the table of sources; for a site's own figure the author.
    certainty : Certainty
        How sure it is.
    note : str
        What the number means, where the key alone does not say it.
    replaces : str
        What stood here before and has been superseded.
    """

    value: float
    unit: str
    sources: tuple[str, ...]
    certainty: Certainty
    note: str = ""
    replaces: str = ""

    @property
    def mark(self) -> str:
        """The words that stand beside the number on a screen: how sure, and by whom."""
        return f"{self.certainty.value}: {', '.join(self.sources)}" if self.sources else self.certainty.value


@dataclass(frozen=True, slots=True)
class Remark:
    """A published observation that is not one number (for example a list of times to death)."""

    text: str
    sources: tuple[str, ...]
    certainty: Certainty


@dataclass(frozen=True, slots=True)
class Gate:
    """A published condition that has to be met before a change of water; a person checks it.

    Parameters
    ----------
    kind : str
        ``age``, ``size``, ``smolt window``, ``moult``, ``temperature`` or ``chloride``.
    text : str
        The condition in words.
    """

    kind: str
    text: str
    sources: tuple[str, ...]
    certainty: Certainty


@dataclass(frozen=True, slots=True)
class AgeGate:
    """The days of life that a stage covers.

    Parameters
    ----------
    since : str
        ``hatch`` or ``metamorphosis``.
    from_d, to_d : float
        First and last day; ``to_d`` is infinite where the stage has no printed end. [d]
    """

    since: str
    from_d: float
    to_d: float


@dataclass(frozen=True, slots=True, eq=False, weakref_slot=True)
class Stage:
    """One life stage of one species, as published. Equal only to itself, so that what follows from it can be kept.

    Parameters
    ----------
    id : str
        ``genus-species/stage``.
    group : str
        The kind of animal, for the fallbacks: see `analysis.animal.fallback_rules`.
    figures : Mapping of str to Figure
        Published figures by key; a key that is absent is not known.
    younger : tuple of str
        The ids of the stages of the same species that come before this one, nearest first.
    """

    id: str
    species: str
    common_name: str
    name: str
    group: str
    regulation: str
    confidence: str
    figures: Mapping[str, Figure]
    aliases: tuple[str, ...] = ()
    age: AgeGate | None = None
    remarks: tuple[Remark, ...] = ()
    gates: tuple[Gate, ...] = ()
    notes: str = ""
    younger: tuple[Stage, ...] = field(default=(), repr=False)

    def value(self, key: str) -> float:
        """Return the figure under *key* in its own unit, NaN where it is not known."""
        figure = self.figures.get(key)
        return figure.value if figure is not None else NAN

    @property
    def supports(self) -> Supports:
        """Which parts of the stress can be told for this stage; see `analysis.animal.fallbacks.resolved`."""
        from analysis.animal.fallbacks import resolved

        return resolved(self).supports
