"""A cohort and what happens to it: received, moved, split, joined, counted, died, harvested.

Pure: an event and a cohort give the cohorts that follow; ids and times are the caller's. The state (what the
animals are used to, their exposure) goes with the animals.
"""

from __future__ import annotations

import dataclasses
import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, TypeAlias

import numpy as np

from analysis.animal.fallbacks import resolved
from analysis.animal.osmoregulation import SPREAD_MOSM_KG, CohortState
from analysis.errors import InvalidInputError

if TYPE_CHECKING:
    from analysis.animal.stage import Stage
    from analysis.arrays import FloatArray


@dataclass(frozen=True, slots=True)
class Cohort:
    """Animals of one species and stage that live in one tank and came the same way.

    Parameters
    ----------
    id, tank : str
        The site's ids; an empty tank: no longer on the site.
    animal : str
        Id of the stage that a person has confirmed.
    number : int
        Last known number alive.
    state : CohortState
        Of one element.
    hatched_at_us, metamorphosed_at_us : int or None
        From which the age is counted.
    """

    id: str
    tank: str
    animal: str
    number: int
    state: CohortState
    hatched_at_us: int | None = None
    metamorphosed_at_us: int | None = None


@dataclass(frozen=True, slots=True)
class Received:
    """Animals came to the site.

    Parameters
    ----------
    used_to_mOsm_kg : float
        Osmolality of the water they lived in, NaN where nobody knows. [mOsm/kg]
    used_for_h : float
        How long they had lived in it; infinite: always, NaN: not known. [h]
    temperature_degC : float
        Of the water they lived in. [degC]
    hours_packed, density_per_L, ph : float
        Of the transport, NaN where not noted; kept for the record. [h], [1/L], [1]
    """

    at_us: int
    cohort_id: str
    tank: str
    animal: str
    number: int
    used_to_mOsm_kg: float
    used_for_h: float = math.nan
    temperature_degC: float = math.nan
    hours_packed: float = math.nan
    density_per_L: float = math.nan
    ph: float = math.nan
    hatched_at_us: int | None = None
    metamorphosed_at_us: int | None = None


@dataclass(frozen=True, slots=True)
class Moved:
    """All animals went to another tank."""

    at_us: int
    to_tank: str


@dataclass(frozen=True, slots=True)
class Split:
    """Some animals went to another tank as a cohort of their own."""

    at_us: int
    new_id: str
    to_tank: str
    number: int


@dataclass(frozen=True, slots=True)
class Joined:
    """Another cohort of the same stage was put to this one and ends."""

    at_us: int
    other: Cohort


@dataclass(frozen=True, slots=True)
class Counted:
    """The number alive was counted."""

    at_us: int
    number: int


@dataclass(frozen=True, slots=True)
class Died:
    """Dead animals were taken out."""

    at_us: int
    number: int


@dataclass(frozen=True, slots=True)
class Harvested:
    """Living animals left the site; None: all."""

    at_us: int
    number: int | None = None


CohortEvent: TypeAlias = Moved | Split | Joined | Counted | Died | Harvested


def received(event: Received, stage: Stage) -> Cohort:
    """Return the cohort that came; the less time it had in its water, the less sure what it is used to.

    Raises
    ------
    InvalidInputError
        If the number is not more than 0.
    """
    _check_number(event.number, at_most=None, what="number received")
    is_known = math.isfinite(event.used_to_mOsm_kg)
    if not is_known:
        state = CohortState.unknown(1, at_us=event.at_us)
    else:
        uncertainty = uncertainty_after(stage, hours=event.used_for_h)
        warmth = np.array([event.temperature_degC])
        state = CohortState.used_to(
            np.array([event.used_to_mOsm_kg]),
            temperature_degC=warmth,
            uncertainty_mOsm_kg=uncertainty,
            at_us=event.at_us,
        )
    return Cohort(
        event.cohort_id, event.tank, event.animal, event.number, state, event.hatched_at_us, event.metamorphosed_at_us
    )  # fmt: skip


def uncertainty_after(stage: Stage, *, hours: float) -> float:
    """Return the uncertainty of what animals are used to after *hours* in one water, NaN hours: a day. [mOsm/kg]"""
    ready = resolved(stage)
    slow = max(ready.value("tau_up"), ready.value("tau_down"))
    return SPREAD_MOSM_KG * math.exp(-(24.0 if math.isnan(hours) else max(0.0, hours)) / slow)


def after(cohort: Cohort, event: CohortEvent) -> tuple[Cohort, ...]:
    """Return the cohorts that follow from *event*, this one first; one that has ended holds no animal and no tank.

    Raises
    ------
    InvalidInputError
        If more animals leave than there are, or two stages are joined.
    """
    match event:
        case Moved():
            return (dataclasses.replace(cohort, tank=event.to_tank),)
        case Split():
            _check_number(event.number, at_most=cohort.number - 1, what="number split off")
            rest = dataclasses.replace(cohort, number=cohort.number - event.number)
            return rest, dataclasses.replace(cohort, id=event.new_id, tank=event.to_tank, number=event.number)
        case Joined():
            return _joined(cohort, event.other)
        case Counted():
            _check_number(event.number + 1, at_most=None, what="number counted")
            return (dataclasses.replace(cohort, number=event.number),)
        case Died():
            _check_number(event.number, at_most=cohort.number, what="number dead")
            return (_ended_if_empty(dataclasses.replace(cohort, number=cohort.number - event.number)),)
        case Harvested():
            taken = cohort.number if event.number is None else event.number
            _check_number(taken, at_most=cohort.number, what="number harvested")
            return (_ended_if_empty(dataclasses.replace(cohort, number=cohort.number - taken)),)


def _check_number(number: int, *, at_most: int | None, what: str) -> None:
    if number < 1 or (at_most is not None and number > at_most):
        limit = "at least 1" if at_most is None else f"from 1 to {at_most}"
        raise InvalidInputError(what, found=number, allowed=limit)


def _ended_if_empty(cohort: Cohort) -> Cohort:
    return dataclasses.replace(cohort, tank="") if cohort.number == 0 else cohort


def _joined(cohort: Cohort, other: Cohort) -> tuple[Cohort, ...]:
    if cohort.animal != other.animal:
        raise InvalidInputError("animal of the cohort put to it", found=other.animal, allowed=cohort.animal)
    total = cohort.number + other.number
    if total == 0:
        raise InvalidInputError("number of both cohorts", found=0, allowed="at least 1")
    state = joined_state(cohort.state, other.state, share=other.number / total)
    return dataclasses.replace(cohort, number=total, state=state), dataclasses.replace(other, number=0, tank="")


def joined_state(ours: CohortState, theirs: CohortState, *, share: float) -> CohortState:
    """Return the state of two groups put together: means by number, the higher exposure, and their spread as doubt."""

    def mean(name: str) -> FloatArray:
        mine, other = getattr(ours, name), getattr(theirs, name)
        mixed = (1.0 - share) * mine + share * other
        return np.asarray(np.where(np.isnan(mixed), np.where(np.isnan(mine), other, mine), mixed))

    apart = np.nan_to_num(ours.acclimated - theirs.acclimated)
    inside = (1.0 - share) * ours.uncertainty**2 + share * theirs.uncertainty**2
    return dataclasses.replace(
        ours,
        acclimated=mean("acclimated"),
        internal=mean("internal"),
        acclimated_degC=mean("acclimated_degC"),
        exposure=np.fmax(ours.exposure, theirs.exposure),
        uncertainty=np.sqrt(inside + share * (1.0 - share) * apart**2),
    )
