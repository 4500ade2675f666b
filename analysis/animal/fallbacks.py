"""What is taken where a stage has no figure: one table of rules, each with its reasoning, each marked assumed.

Only two of the 134 stages have all six salinity limits. A rule below fills a gap from the stage's own figures
or from a younger stage of the same species; where no rule applies the limit stays NaN and the screen says
"not known". Tolerances published in ppt become osmolality through the seawater relation.
"""

from __future__ import annotations

import dataclasses
import math
from collections.abc import Mapping
from dataclasses import dataclass
from functools import lru_cache
from types import MappingProxyType

import numpy as np

from analysis.animal.constants import CONFORMER_GROUPS, GROUP_DEFAULTS, TIMER_GROUPS
from analysis.animal.stage import NAN, Certainty, Figure, Stage, Supports
from analysis.water.properties import Seawater

INF = math.inf

RULES: Mapping[str, str] = MappingProxyType(
    {
        "level from direct test": "no figure after slow acclimation: the level of the direct test (on the safe side)",
        "level beyond direct test": "only a direct test of days: slow change moves the level out by 12 % of its jump (KAU1988, MARINO1994)",
        "level from tolerable low": "no lethal level: two thirds of the tolerable salinity, the median ratio of the stages that have both",
        "level from tolerable high": "no lethal level: 1.25 times the tolerable salinity, below the median ratio (1.4) where both exist",
        "no lower limit": "tolerates 1 ppt or less and has no lethal level: fresh water sets no lower limit",
        "tolerable midway": "no tolerable limit: midway between the optimal edge and the lethal level",
        "tolerable at a quarter": "no tolerable limit, and a lethal test of hours: a quarter of the way from the optimum to the level",
        "tolerable from level low": "no tolerable limit, no optimum: 1.5 times the lethal salinity (two thirds read backwards)",
        "tolerable from level high": "no tolerable limit and no optimum: the lethal salinity divided by 1.25",
        "optimal inside tolerable": "no optimum: as far inside the tolerable limit as the lethal level is outside, at most the middle",
        "younger stage": "no figure: that of the nearest younger stage; tolerance grows with age (SAMOCHA1998, MCGRAW2002)",
        "open sea": "no figure at all on the salty side: not judged up to 40 ppt, the saltiest open sea; not known beyond",
        "not judged low": "no figure at all on the fresh side: not judged",
        "kept apart": "two limits share one number: the outer one is moved out by up to 0.5 ppt, so that the strain stays continuous",
        "start of the test": "the salinity before the test is not printed: the middle of the optimum stands for it",
        "length of the test": "the length of the test is not printed: 48 h stands for it",
        "settling by kind": "no settling time: that of the kind of animal",
        "settling time": "a third of the time the body fluid took to settle (95 % of an exponential)",
        "slope by kind": "isosmotic point known, slope not: the middle of the range of the kind of animal",
        "internal at isosmotic": "no isosmotic point: the body fluid given with the slope stands for it",
        "lethal temperature": "no lethal temperature: as far outside the tolerable limit as that lies outside the optimum, from 2 to 5 K",
        "tolerable temperature": "no tolerable temperature: midway between optimum and lethal temperature",
        "younger temperature": "no optimal temperature: that of the nearest younger stage of the same species",
        "harmless bound": "a published transfer without loss bounds the lethal jump from below",
    }
)  # fmt: skip
"""The table of fallbacks: name of the rule -> its reasoning. The name stands in the note of every assumed figure."""

DEFAULT_TEST_H = 48.0
SHORT_TEST_H = 120.0
HOURS_TEST_H = 24.0
SLOW_GAIN = 0.12
"""Part of the direct lethal jump by which slow change moves the lethal level out: the lower quartile of the published pairs."""
MIN_GAP_PPT = 0.5
EXTRAPOLATION_FROM_PPT = 100.0


def osmolality_from_ppt(salinity_ppt: float) -> float:
    """Return the osmolality of seawater of a published salinity, freezing-point basis.

    Above 100 ppt, beyond the seawater relation, the line through 95 and 100 ppt is continued: good enough to
    say "far above", no more. NaN in, NaN out; infinite stays infinite.
    """
    if not math.isfinite(salinity_ppt):
        return salinity_ppt
    water = Seawater()
    if salinity_ppt <= EXTRAPOLATION_FROM_PPT:
        return float(water.osmolality_from_salinity(max(0.0, salinity_ppt)))
    low, high = (float(value) for value in water.osmolality_from_salinity(np.array([95.0, EXTRAPOLATION_FROM_PPT])))
    return high + (high - low) / 5.0 * (salinity_ppt - EXTRAPOLATION_FROM_PPT)


@dataclass(frozen=True, slots=True)
class Resolved:
    """A stage ready for the model: every number it needs, in mOsm/kg, h and degC, and where each came from.

    ``figures`` holds each number with its source and certainty, ``assumed`` where a rule filled a gap.
    NaN means "not known"; an infinite limit means "no limit on this side".
    """

    stage: Stage
    figures: Mapping[str, Figure]
    supports: Supports
    is_timer: bool

    def value(self, key: str) -> float:
        """Return the number under *key*, NaN where it is not known."""
        figure = self.figures.get(key)
        return figure.value if figure is not None else NAN


@dataclass(slots=True)
class _Side:
    """One side of the salinity axis, low or high, in ppt. ``out`` is +1 where outward means saltier."""

    stage: Stage
    side: str
    found: dict[str, Figure] = dataclasses.field(default_factory=dict)

    @property
    def out(self) -> float:
        return 1.0 if self.side == "high" else -1.0

    def own(self, limit: str) -> Figure | None:
        return self.stage.figures.get(f"{limit}_{self.side}_ppt")

    def value(self, limit: str) -> float:
        figure = self.found.get(limit)
        return figure.value if figure is not None else NAN

    def keep(self, limit: str, figure: Figure | None) -> bool:
        if figure is None:
            return False
        self.found[limit] = figure
        return True

    def assume(self, limit: str, value: float, rule: str, *, because: tuple[Figure | None, ...] = ()) -> bool:
        names = tuple(dict.fromkeys(name for figure in because if figure for name in figure.sources))
        self.found[limit] = Figure(value, "ppt", names, Certainty.ASSUMED, f"{rule}: {RULES[rule]}")
        return True


def _level(side: _Side) -> None:
    """Find the median lethal level for animals that came slowly."""
    tolerable, direct, lethal = side.own("tolerable"), side.own("direct"), side.own("lethal")
    if side.keep("level", side.own("gradual")) or _beyond_direct_test(side, tolerable, direct, lethal):
        return
    if side.keep("level", lethal):
        return
    if tolerable is not None:
        _level_from_tolerable(side, tolerable)
    elif direct is not None:
        side.assume("level", direct.value, "level from direct test", because=(direct,))
    elif side.side == "low" and side.stage.value("optimal_low_ppt") <= 1.0:
        side.assume("level", -INF, "no lower limit", because=(side.own("optimal"),))


def _beyond_direct_test(side: _Side, tolerable: Figure | None, direct: Figure | None, lethal: Figure | None) -> bool:
    """Widen the level of a direct test of days; not where a tolerable limit shows that slow change does far more."""
    start = side.stage.figures.get(f"direct_{side.side}_from_ppt")
    is_only_figure = direct is not None and (lethal is None or lethal.value == direct.value)
    if (
        direct is None
        or start is None
        or not is_only_figure
        or side.stage.value(f"direct_{side.side}_h") > SHORT_TEST_H
    ):
        return False
    wider = max(0.0, direct.value + side.out * SLOW_GAIN * abs(direct.value - start.value))
    if tolerable is not None and (tolerable.value - direct.value) * side.out >= 0.0:
        return False
    return side.assume("level", wider, "level beyond direct test", because=(direct,))


def _level_from_tolerable(side: _Side, tolerable: Figure) -> None:
    if side.side == "low" and tolerable.value <= 1.0:
        side.assume("level", -INF, "no lower limit", because=(tolerable,))
    elif side.side == "low":
        side.assume("level", tolerable.value * 2.0 / 3.0, "level from tolerable low", because=(tolerable,))
    else:
        side.assume("level", tolerable.value * 1.25, "level from tolerable high", because=(tolerable,))


def _tolerable(side: _Side) -> None:
    if side.keep("tolerable", side.own("tolerable")):
        return
    level, optimal = side.found.get("level"), side.own("optimal")
    if level is None:
        return
    hours = [side.stage.value(f"{test}_{side.side}_h") for test in ("direct", "lethal")]
    is_of_hours = side.own("gradual") is None and any(length < HOURS_TEST_H for length in hours)
    if math.isinf(level.value):
        side.assume("tolerable", 0.0, "no lower limit", because=(level,))
    elif optimal is not None and is_of_hours:
        quarter = optimal.value + 0.25 * (level.value - optimal.value)
        side.assume("tolerable", quarter, "tolerable at a quarter", because=(level, optimal))
    elif optimal is not None:
        side.assume("tolerable", (level.value + optimal.value) / 2.0, "tolerable midway", because=(level, optimal))
    elif side.side == "low":
        side.assume("tolerable", level.value * 1.5, "tolerable from level low", because=(level,))
    else:
        side.assume("tolerable", level.value / 1.25, "tolerable from level high", because=(level,))


def _borrow_from_younger(side: _Side) -> None:
    """Where nothing is known on this side: the limits of the nearest younger stage that has some."""
    if "level" in side.found:
        return
    for young in side.stage.younger:
        other = _Side(young, side.side)
        _level(other)
        _tolerable(other)
        level, tolerable = other.found.get("level"), other.found.get("tolerable")
        edge = side.stage.value(f"optimal_{side.side}_ppt")
        if level is None or tolerable is None or (level.value - edge) * side.out <= 0.0:
            continue
        for name, figure in (("level", level), ("tolerable", tolerable)):
            side.assume(name, figure.value, "younger stage", because=(figure,))
        if (side.value("tolerable") - edge) * side.out <= 0.0:
            side.assume("tolerable", (level.value + edge) / 2.0, "tolerable midway", because=(level,))
        return


def _optimal(side: _Side, other: _Side) -> None:
    if side.keep("optimal", side.own("optimal")):
        return
    tolerable, level = side.value("tolerable"), side.value("level")
    if math.isnan(tolerable):
        return
    beyond = 0.0 if math.isinf(level) else abs(level - tolerable)
    edge = tolerable - side.out * beyond
    across = other.own("optimal")
    limit = across.value if across is not None else (tolerable + other.value("tolerable")) / 2.0
    if math.isnan(limit):
        limit = tolerable - side.out * beyond
    edge = min(edge, tolerable) if side.side == "high" else max(edge, tolerable)
    edge = max(edge, limit) if side.side == "high" else min(edge, limit)
    side.assume("optimal", max(0.0, edge), "optimal inside tolerable", because=(side.found["tolerable"],))


def _keep_apart(side: _Side) -> None:
    """Move an outer limit out where it touches the inner one: strains must be continuous."""
    optimal, tolerable, level = side.value("optimal"), side.value("tolerable"), side.value("level")
    if math.isnan(tolerable) or math.isnan(optimal):
        return
    if (tolerable - optimal) * side.out < MIN_GAP_PPT and not (side.side == "low" and optimal <= 0.0):
        room = MIN_GAP_PPT if math.isinf(level) else min(MIN_GAP_PPT, max(0.1, (level - optimal) * side.out / 2.0))
        side.assume("tolerable", optimal + side.out * room, "kept apart", because=(side.found["tolerable"],))
        tolerable = side.value("tolerable")
    if (level - tolerable) * side.out < 0.1:
        side.assume("level", tolerable + side.out * MIN_GAP_PPT, "kept apart", because=(side.found["level"],))


def _open_side(side: _Side, other: _Side) -> None:
    """Where one side has no figure at all, say so: not judged, or not judged up to the saltiest open sea."""
    if "optimal" in side.found or "optimal" not in other.found:
        return
    if side.side == "low":
        side.assume("optimal", 0.0, "not judged low")
        side.assume("tolerable", 0.0, "not judged low")
    else:
        side.assume("optimal", max(40.0, other.value("optimal")), "open sea")


def _resolved_sides(stage: Stage) -> dict[str, _Side]:
    sides = {name: _Side(stage, name) for name in ("low", "high")}
    for side in sides.values():
        _level(side)
        _tolerable(side)
        _borrow_from_younger(side)
    _optimal(sides["low"], sides["high"])
    _optimal(sides["high"], sides["low"])
    _open_side(sides["low"], sides["high"])
    _open_side(sides["high"], sides["low"])
    for side in sides.values():
        _keep_apart(side)
    return sides


def _in_osmolality(figure: Figure) -> Figure:
    note = figure.note or f"from {figure.value:g} {figure.unit}"
    return dataclasses.replace(figure, value=osmolality_from_ppt(figure.value), unit="mOsm/kg", note=note)


def _assumed(value: float, unit: str, rule: str, sources: tuple[str, ...] = ()) -> Figure:
    return Figure(value, unit, sources, Certainty.ASSUMED, f"{rule}: {RULES[rule]}")


def _hours(stage: Stage, *keys: str) -> Figure:
    for key in keys:
        figure = stage.figures.get(key)
        if figure is not None:
            return figure
    return _assumed(DEFAULT_TEST_H, "h", "length of the test")


def _start_ppt(sides: Mapping[str, _Side]) -> float:
    """Return the middle of the optimum, where animals are taken to have come from."""
    low, high = sides["low"].value("optimal"), sides["high"].value("optimal")
    known = [value for value in (low, high) if math.isfinite(value)]
    return sum(known) / len(known) if known else NAN


def _jump(stage: Stage, side: _Side, sides: Mapping[str, _Side]) -> dict[str, Figure]:
    """Find the direct lethal jump of one side, its test length, and the harmless fraction of it."""
    test = "direct" if side.own("direct") is not None else "lethal"
    level = side.own(test) or side.found.get("level")
    if level is None or math.isnan(level.value):
        return {}
    start = stage.figures.get(f"{test}_{side.side}_from_ppt")
    start_ppt = start.value if start is not None else _start_ppt(sides)
    harmless = stage.figures.get(f"harmless_{side.side}_ppt")
    found: dict[str, Figure] = {}
    jump = abs(osmolality_from_ppt(start_ppt) - osmolality_from_ppt(level.value))
    certainty = level.certainty if start is not None and level.certainty is not Certainty.ASSUMED else Certainty.ASSUMED
    note = f"from {start_ppt:.4g} to {level.value:.4g} ppt" + (
        "" if start is not None else f"; start of the test: {RULES['start of the test']}"
    )
    if harmless is not None:
        came = stage.value(f"harmless_{side.side}_from_ppt")
        bound = abs(osmolality_from_ppt(came) - osmolality_from_ppt(harmless.value))
        found[f"harmless_jump_{side.side}"] = Figure(
            bound, "mOsm/kg", harmless.sources, harmless.certainty, "a transfer without loss"
        )
        if not jump > bound / 0.95:
            jump, certainty, note = bound / 0.95, Certainty.ASSUMED, f"harmless bound: {RULES['harmless bound']}"
    if math.isfinite(jump) and jump > 0.0:
        found[f"jump_{side.side}"] = Figure(jump, "mOsm/kg", level.sources, certainty, note)
        found[f"jump_{side.side}_to"] = dataclasses.replace(
            found[f"jump_{side.side}"], value=osmolality_from_ppt(level.value)
        )
        alive = stage.figures.get(f"{test}_{side.side}_alive")
        if alive is not None:
            found[f"jump_{side.side}_alive"] = alive
        found[f"jump_{side.side}_h"] = _hours(stage, f"direct_{side.side}_h", f"lethal_{side.side}_h")
    return found


def _settling(stage: Stage) -> dict[str, Figure]:
    group = GROUP_DEFAULTS[stage.group]
    settle = stage.figures.get("settle_h")
    by_kind = Figure(group.tau_h, "h", (), group.certainty, f"settling by kind: {group.reason}")
    usual = by_kind if settle is None else Figure(
        settle.value / 3.0, "h", settle.sources, Certainty.DERIVED, f"settling time: {RULES['settling time']}"
    )  # fmt: skip
    known = [figure.value for side in ("low", "high") if (figure := _optimal_degC(stage, side)) is not None]
    degC = stage.figures.get("settle_degC")
    # A conformer's body fluid settles within hours; what it can stand moves over days.
    is_conformer = stage.group in CONFORMER_GROUPS
    limits = by_kind if is_conformer else usual
    found = {key: stage.figures.get(f"{key}_h", limits) for key in ("tau_up", "tau_down")}
    if degC is not None:
        found["tau_degC"] = degC
    elif known:
        found["tau_degC"] = Figure(
            sum(known) / len(known), "degC", (), Certainty.ASSUMED, "middle of the optimal temperature"
        )
    follows = is_conformer or stage.value("regulation_slope") >= 0.9
    by_kind_internal = dataclasses.replace(by_kind, value=group.tau_internal_h)
    own_internal = by_kind_internal if settle is None else usual
    found["tau_internal"] = own_internal if follows else Figure(
        min(usual.value, group.tau_internal_h), "h", (), Certainty.ASSUMED, "plasma peaks 6-12 h after a step in fish; shrimps alike"
    )  # fmt: skip
    return found


def _body_fluid(stage: Stage) -> dict[str, Figure]:
    iso = stage.figures.get("isosmotic_mOsm_kg")
    if iso is None and (iso_ppt := stage.figures.get("isosmotic_ppt")) is not None:
        iso = dataclasses.replace(
            _in_osmolality(iso_ppt),
            certainty=Certainty.DERIVED if iso_ppt.certainty is Certainty.LOOKED_UP else iso_ppt.certainty,
        )
    slope = stage.figures.get("regulation_slope")
    if slope is not None and slope.value >= 0.9:
        return {
            "isosmotic": iso
            or dataclasses.replace(slope, value=0.0, unit="mOsm/kg", note="conformer: body fluid follows the water"),
            "slope": slope,
        }
    if iso is None and slope is not None and (internal := stage.figures.get("internal_mOsm_kg")) is not None:
        iso = _assumed(internal.value, "mOsm/kg", "internal at isosmotic", internal.sources)
    if iso is None:
        return {}
    if slope is None or not 0.0 <= slope.value <= 1.0:
        slope = _assumed(GROUP_DEFAULTS[stage.group].slope, "1", "slope by kind")
    return {"isosmotic": iso, "slope": slope}


def _optimal_degC(stage: Stage, side: str) -> Figure | None:
    own = stage.figures.get(f"optimal_{side}_degC")
    if own is not None:
        return own
    for young in stage.younger:
        figure = young.figures.get(f"optimal_{side}_degC")
        if figure is not None:
            return _assumed(figure.value, "degC", "younger temperature", figure.sources)
    return None


def _temperature(stage: Stage) -> dict[str, Figure]:
    found: dict[str, Figure] = {}
    for side, out in (("low", -1.0), ("high", 1.0)):
        tolerable, lethal = (stage.figures.get(f"{limit}_{side}_degC") for limit in ("tolerable", "lethal"))
        optimal = _optimal_degC(stage, side)
        if optimal is None:
            continue
        found[f"optimal_{side}_degC"] = optimal
        if tolerable is None and lethal is not None:
            tolerable = _assumed((optimal.value + lethal.value) / 2.0, "degC", "tolerable temperature", lethal.sources)
        if tolerable is None:
            continue
        if (tolerable.value - optimal.value) * out < 0.5:
            tolerable = _assumed(optimal.value + out * 0.5, "degC", "kept apart", tolerable.sources)
        if lethal is None or (lethal.value - tolerable.value) * out < 0.5:
            beyond = min(5.0, max(2.0, abs(tolerable.value - optimal.value)))
            lethal = _assumed(tolerable.value + out * beyond, "degC", "lethal temperature", tolerable.sources)
        found |= {f"tolerable_{side}_degC": tolerable, f"lethal_{side}_degC": lethal}
    return found


def _supports(figures: Mapping[str, Figure]) -> Supports:
    supports = Supports.NONE
    if any(f"tolerable_{side}" in figures and f"optimal_{side}" in figures for side in ("low", "high")):
        supports |= Supports.RANGE
    if any(f"jump_{side}" in figures for side in ("low", "high")):
        supports |= Supports.CHANGE
    if supports & Supports.RANGE and any(
        math.isfinite(figures[key].value) for key in ("level_low", "level_high") if key in figures
    ):
        supports |= Supports.EXPOSURE
    if any(key in figures for key in ("tolerable_low_degC", "tolerable_high_degC")):
        supports |= Supports.THERMAL
    if "isosmotic" in figures:
        supports |= Supports.INTERNAL
    return supports


@lru_cache(maxsize=512)
def resolved(stage: Stage) -> Resolved:
    """Return *stage* ready for the model, gaps filled by the rules of `RULES`, each marked assumed."""
    sides = _resolved_sides(stage)
    figures: dict[str, Figure] = {}
    for name, side in sides.items():
        for limit, figure in side.found.items():
            if not math.isnan(figure.value):
                figures[f"{limit}_{name}"] = _in_osmolality(figure)
        if "level" in side.found:
            length = f"gradual_{name}_h" if side.own("gradual") is not None else f"lethal_{name}_h"
            figures[f"level_{name}_h"] = _hours(stage, length, f"direct_{name}_h")
            if side.own("gradual") is None and (alive := stage.figures.get(f"lethal_{name}_alive")) is not None:
                figures[f"level_{name}_alive"] = alive
        incipient = side.own("incipient")
        if incipient is not None:
            figures[f"incipient_{name}"] = _in_osmolality(incipient)
        figures |= _jump(stage, side, sides)
    figures |= _settling(stage) | _body_fluid(stage) | _temperature(stage)
    start = _start_ppt(sides)
    if math.isfinite(start):
        figures["home"] = Figure(
            osmolality_from_ppt(start),
            "mOsm/kg",
            (),
            Certainty.ASSUMED,
            f"from {start:.4g} ppt: the middle of the optimum",
        )
    return Resolved(stage, MappingProxyType(figures), _supports(figures), stage.group in TIMER_GROUPS)
