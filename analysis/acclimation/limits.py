"""What a journey from water to water may ask of the animals: every limit with its source, open to override."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Final, Literal

import numpy as np

from analysis.acclimation.effort import Band, RateLaw, constant_rate
from analysis.acclimation.published import Direction, Per, PublishedGate, PublishedRate, gates, rates
from analysis.errors import InvalidInputError

if TYPE_CHECKING:
    from analysis.animal.stage import Figure, Stage

Quantity = Literal["salinity", "temperature_degC", "ph"]
Governs = Literal["hour", "day"]

STEP_WINDOW_MIN: Final = 10.0
HOUR_WINDOW_MIN: Final = 60.0
DAY_WINDOW_MIN: Final = 1440.0

STEP_SHARE: Final = 0.2
"""Share of the way to the abrupt median that one step may take."""
STEP_SHARE_SOURCE: Final = "DOAJ_PL12; SAMOCHA1998 (steps of 0.2, 0.4, 0.6 of the abrupt drop: 90, 80, 58 % alive)"
ASSUMED_STEP: Final = 1.0
COMMON_TEMPERATURE_K_PER_H: Final = 1.0
COMMON_TEMPERATURE_STEP_K: Final = 1.0
COMMON_PH_PER_H: Final = 0.5
COMMON_PH_STEP: Final = 0.25
STRESS_CAP: Final = 60.0
SMOLT_TEMPERATURE_SHIFT_K: Final = 4.0
COMMON: Final = "common practice"
_LOWEST_DEGC: Final = -5.0
_UNLIMITED: Final = 1e9
_BOTH_WAYS: Final[tuple[Direction, ...]] = ("down", "up")


@dataclass(frozen=True, slots=True)
class Limit:
    """One limit as a person reads it.

    Parameters
    ----------
    name : str
        For example ``salinity per hour``; the key under which it is overridden.
    value : str
        In words, with its unit.
    source : str
        Keys of the table of sources, or "common practice".
    certainty : str
        looked up, derived, memory, common practice, assumed, or "overridden".
    overridden_by, reason : str
        Who set another value, and why; empty where the default stands.
    """

    name: str
    value: str
    source: str
    certainty: str
    overridden_by: str = ""
    reason: str = ""


@dataclass(frozen=True, slots=True)
class RollingLimit:
    """A limit on the change of the tank's mean between any two moments within a window.

    Parameters
    ----------
    limit : Limit
        As a person reads it.
    quantity : str
        ``salinity``, ``temperature_degC`` or ``ph``.
    window_min : float
        60 for a rate per hour, 10 for a step, 1440 for a rate per day. [min]
    down, up : RateLaw
        The law for a fall and for a rise.
    cap : float
        Effort allowed between any two moments of the window, counted by the law.
    """

    limit: Limit
    quantity: Quantity
    window_min: float
    down: RateLaw
    up: RateLaw
    cap: float = 1.0


@dataclass(frozen=True, slots=True)
class Gate:
    """A condition that a named person confirms before the transfer begins."""

    kind: str
    text: str
    source: str
    certainty: str
    confirmed_by: str = ""
    least_mg_L: float = float("nan")

    @property
    def is_open(self) -> bool:
        """True once a person has confirmed it."""
        return bool(self.confirmed_by)


@dataclass(frozen=True, slots=True)
class Override:
    """Another value for a limit, set by a named person for a reason.

    Parameters
    ----------
    name : str
        Of the limit.
    value : float or None
        Rate per hour or day, step, temperature or pH rate, or the stress cap; None lifts the limit.
    by, reason : str
        Who, and why; both are needed.
    """

    name: str
    value: float | None
    by: str
    reason: str

    def __post_init__(self) -> None:
        if not self.by.strip() or not self.reason.strip():
            raise InvalidInputError(
                f"override of {self.name!r}", found=f"by {self.by!r}: {self.reason!r}", allowed="a name and a reason"
            )
        if self.value is not None and not self.value > 0.0:
            raise InvalidInputError(f"override of {self.name!r}", found=self.value, allowed="more than 0")


@dataclass(frozen=True, slots=True)
class Limits:
    """Every limit of one journey.

    Parameters
    ----------
    rolling : tuple of RollingLimit
        Rates and steps that the plan keeps.
    stress_cap : float
        Highest predicted stress of the journey from change, exposure and temperature; infinite when lifted.
    stress_limit : Limit
        The cap as a person reads it.
    gates : tuple of Gate
        Conditions to confirm.
    governs : {"hour", "day"}
        Which rate of salinity was chosen.
    left_out : tuple of RollingLimit
        Rates that are published too but do not govern; the plan names what they would cost.
    """

    rolling: tuple[RollingLimit, ...]
    stress_cap: float
    stress_limit: Limit
    gates: tuple[Gate, ...]
    governs: Governs
    left_out: tuple[RollingLimit, ...] = ()

    @property
    def named(self) -> tuple[Limit, ...]:
        """Every limit as a person reads it."""
        return (*(rolling.limit for rolling in self.rolling), self.stress_limit)

    def of(self, quantity: Quantity) -> tuple[RollingLimit, ...]:
        """Return the rolling limits on one quantity."""
        return tuple(rolling for rolling in self.rolling if rolling.quantity == quantity)


def direction_of(*, from_salinity: float, to_salinity: float) -> Direction:
    """Return "down" or "up"; no change counts as down, which has the more careful rules."""
    return "up" if to_salinity > from_salinity else "down"


def default_limits(
    stage: Stage,
    *,
    from_salinity: float,
    to_salinity: float,
    used_to_salinity: float | None = None,
    governs: Governs | None = None,
    overrides: Sequence[Override] = (),
    confirmed: Mapping[str, str] | None = None,
) -> Limits:
    """Return the limits of a journey for one stage.

    Parameters
    ----------
    stage : Stage
        From `analysis.animal.tables`.
    from_salinity, to_salinity : float
        The water they are in and the water they go to.
    used_to_salinity : float, optional
        The water they are used to, where that is another one.
    governs : {"hour", "day"}, optional
        Which rate of salinity governs. Default: the day where only a rate per day is published for the animal,
        else the hour. A rate per hour always holds; the rate per day is left out where the hour governs.
    overrides : sequence of Override
        Other values, each with name and reason. An unknown name is an error.
    confirmed : Mapping of str to str
        Kind of a gate to the person who confirmed it.
    """
    direction = direction_of(from_salinity=from_salinity, to_salinity=to_salinity)
    hourly = rates(stage.id, direction=direction, per="h")
    daily = rates(stage.id, direction=direction, per="d")
    if governs is None:
        governs = "day" if daily and all(rate.is_general for rate in hourly) else "hour"
    hour = _hour_limit(stage, direction)
    day = _day_limit(stage, direction)
    home = from_salinity if used_to_salinity is None else used_to_salinity
    rolling = [hour, step_limit(stage, direction=direction, home_salinity=home, hour=hour)]
    left_out: list[RollingLimit] = []
    if day is not None:
        (rolling if governs == "day" else left_out).append(day)
    rolling += [_temperature_hour(stage), _temperature_step(), *_ph_limits()]
    found = gates(stage.id, direction=direction, target_salinity=to_salinity)
    limits = Limits(
        rolling=tuple(rolling),
        stress_cap=STRESS_CAP,
        stress_limit=Limit(
            "stress of the journey", f"at most {STRESS_CAP:g} of 100", "design choice: published schedules pass", COMMON
        ),
        gates=tuple(_gate(gate, confirmed or {}) for gate in found),
        governs=governs,
        left_out=tuple(left_out),
    )
    return with_overrides(limits, overrides)


def _gate(gate: PublishedGate, confirmed: Mapping[str, str]) -> Gate:
    return Gate(gate.kind, gate.text, gate.source, gate.certainty, confirmed.get(gate.kind, ""), gate.least_mg_L)


def law_from_rates(found: Sequence[PublishedRate]) -> RateLaw:
    """Return the law of published *found* rates, lowest band first."""
    bands = [Band(above=rate.above, kind=rate.kind, allowed=rate.allowed) for rate in found]
    if bands[0].above > 0.0:
        bands[0] = replace(bands[0], above=0.0)
    return RateLaw(tuple(bands))


def _in_words(found: Sequence[PublishedRate]) -> str:
    per = {"h": "an hour", "d": "a day"}[found[0].per]
    parts = []
    for rate in sorted(found, key=lambda rate: -rate.above):
        amount = f"{100 * rate.allowed:g} % of the present salinity" if rate.kind == "fraction" else f"{rate.allowed:g}"
        where = f" down to {rate.above:g}" if rate.above > 0.0 else ""
        parts.append(f"{amount} {per}{where}")
    return ", then ".join(parts)


def _merged(found: Sequence[PublishedRate], attribute: Callable[[PublishedRate], str]) -> str:
    return "; ".join(dict.fromkeys(attribute(rate) for rate in reversed(found)))


def _hour_limit(stage: Stage, direction: Direction) -> RollingLimit:
    return _rolling(stage, direction, per="h", name="salinity per hour", window_min=HOUR_WINDOW_MIN)


def _day_limit(stage: Stage, direction: Direction) -> RollingLimit | None:
    if not rates(stage.id, direction=direction, per="d"):
        return None
    return _rolling(stage, direction, per="d", name="salinity per day", window_min=DAY_WINDOW_MIN)


def _rolling(stage: Stage, direction: Direction, *, per: Per, name: str, window_min: float) -> RollingLimit:
    """Return the limit for both directions; its words and source are those of the way that is asked for."""
    found = rates(stage.id, direction=direction, per=per)
    laws = {way: _law(rates(stage.id, direction=way, per=per)) for way in _BOTH_WAYS}
    words = Limit(name, _in_words(found), _merged(found, lambda r: r.source), _merged(found, lambda r: r.certainty))
    return RollingLimit(words, "salinity", window_min, laws["down"], laws["up"])


def _law(found: Sequence[PublishedRate]) -> RateLaw:
    return law_from_rates(found) if found else constant_rate(_UNLIMITED)


def step_limit(stage: Stage, *, direction: Direction, home_salinity: float, hour: RollingLimit) -> RollingLimit:
    """Return the limit of one step: a fifth of the way from the water they are used to to the abrupt median.

    Where no abrupt median is known the tolerable limit stands for it (which is stricter), and where neither is
    known a step of 1, marked assumed. Never less than the rate per hour makes in ten minutes.
    """
    far, figure, word = _abrupt_median(stage, direction)
    law = hour.up if direction == "up" else hour.down
    floor = law.allowed_at(home_salinity) * STEP_WINDOW_MIN / HOUR_WINDOW_MIN
    if figure is None:
        allowed, source, certainty = ASSUMED_STEP, "no abrupt median or tolerable limit is known", "assumed"
    else:
        allowed = STEP_SHARE * abs(home_salinity - far)
        source = f"{STEP_SHARE_SOURCE}; {word} {far:g}: {', '.join(figure.sources)}"
        certainty = f"derived; {figure.certainty.value}"
    allowed = max(allowed, floor, 0.05)
    law = constant_rate(allowed)
    limit = Limit("salinity per step", f"{allowed:.2g} in any 10 minutes", source, certainty)
    return RollingLimit(limit, "salinity", STEP_WINDOW_MIN, law, law)


def _abrupt_median(stage: Stage, direction: Direction) -> tuple[float, Figure | None, str]:
    side = "low" if direction == "down" else "high"
    for key, word in (
        (f"direct_{side}_ppt", "abrupt median"),
        (f"lethal_{side}_ppt", "lethal level"),
        (f"tolerable_{side}_ppt", "tolerable limit"),
    ):
        figure = stage.figures.get(key)
        if figure is not None and np.isfinite(figure.value):
            return figure.value, figure, word
    return float("nan"), None, ""


def _temperature_hour(stage: Stage) -> RollingLimit:
    figure = stage.figures.get("tried_rate_K_per_h")
    if figure is None:
        allowed, source, certainty = COMMON_TEMPERATURE_K_PER_H, COMMON, COMMON
    else:
        allowed, source, certainty = figure.value, ", ".join(figure.sources), figure.certainty.value
    law = constant_rate(allowed, lowest=_LOWEST_DEGC)
    limit = Limit("temperature per hour", f"{allowed:g} K an hour", source, certainty)
    return RollingLimit(limit, "temperature_degC", HOUR_WINDOW_MIN, law, law)


def _temperature_step() -> RollingLimit:
    law = constant_rate(COMMON_TEMPERATURE_STEP_K, lowest=_LOWEST_DEGC)
    words = f"{COMMON_TEMPERATURE_STEP_K:g} K in any 10 minutes"
    limit = Limit("temperature per step", words, "JORY_ACC (1 K in 15 to 30 min)", "memory")
    return RollingLimit(limit, "temperature_degC", STEP_WINDOW_MIN, law, law)


def _ph_limits() -> tuple[RollingLimit, RollingLimit]:
    hour, step = constant_rate(COMMON_PH_PER_H), constant_rate(COMMON_PH_STEP)
    return (
        RollingLimit(
            Limit("pH per hour", f"{COMMON_PH_PER_H:g} an hour", "JORY_ACC", "memory"),
            "ph",
            HOUR_WINDOW_MIN,
            hour,
            hour,
        ),
        RollingLimit(
            Limit("pH per step", f"{COMMON_PH_STEP:g} in any 10 minutes", COMMON, COMMON),
            "ph",
            STEP_WINDOW_MIN,
            step,
            step,
        ),
    )


def with_overrides(limits: Limits, overrides: Sequence[Override]) -> Limits:
    """Return *limits* with other values for some of them.

    Raises
    ------
    InvalidInputError
        If an override names no limit of this journey.
    """
    for override in overrides:
        limits = _with_override(limits, override)
    return limits


def _with_override(limits: Limits, override: Override) -> Limits:
    if override.name == limits.stress_limit.name:
        cap = float("inf") if override.value is None else override.value
        words = "lifted" if override.value is None else f"at most {override.value:g} of 100"
        return replace(limits, stress_cap=cap, stress_limit=_overridden(limits.stress_limit, words, override))
    known = [rolling.limit.name for rolling in limits.rolling]
    if override.name not in known:
        raise InvalidInputError(
            "limit to override", found=override.name, allowed=", ".join([*known, limits.stress_limit.name])
        )
    changed = [
        _rolling_overridden(rolling, override) if rolling.limit.name == override.name else rolling
        for rolling in limits.rolling
    ]
    return replace(limits, rolling=tuple(changed))


def _rolling_overridden(rolling: RollingLimit, override: Override) -> RollingLimit:
    if override.value is None:
        return replace(rolling, cap=float("inf"), limit=_overridden(rolling.limit, "lifted", override))
    law = constant_rate(override.value, lowest=_LOWEST_DEGC if rolling.quantity == "temperature_degC" else 0.0)
    per = {STEP_WINDOW_MIN: "in any 10 minutes", HOUR_WINDOW_MIN: "an hour", DAY_WINDOW_MIN: "a day"}[
        rolling.window_min
    ]
    unit = " K" if rolling.quantity == "temperature_degC" else ""
    limit = _overridden(rolling.limit, f"{override.value:g}{unit} {per}", override)
    return replace(rolling, down=law, up=law, cap=1.0, limit=limit)


def _overridden(limit: Limit, words: str, override: Override) -> Limit:
    return replace(
        limit,
        value=f"{words} (default: {limit.value})",
        certainty="overridden",
        overridden_by=override.by,
        reason=override.reason,
    )


def hours_at_the_limit(rolling: RollingLimit, *, from_level: float, to_level: float) -> float:
    """Return the hours that a journey takes at exactly this limit: the least there can be, whatever the method."""
    law = rolling.up if to_level > from_level else rolling.down
    effort = abs(float(law.effort(to_level)) - float(law.effort(from_level)))
    return float("nan") if not np.isfinite(rolling.cap) else effort * rolling.window_min / 60.0 / rolling.cap


__all__ = [
    "Direction",
    "Gate",
    "Limit",
    "Limits",
    "Override",
    "Per",
    "RollingLimit",
    "default_limits",
    "direction_of",
    "hours_at_the_limit",
    "step_limit",
    "with_overrides",
]
