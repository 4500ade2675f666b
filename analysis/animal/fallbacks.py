"""A stage made ready for the model: every number it needs, gaps filled, each with how sure it is."""

from __future__ import annotations

import dataclasses
import math
from collections.abc import Mapping
from dataclasses import dataclass
from functools import lru_cache
from types import MappingProxyType

from analysis.animal.constants import CONFORMER_GROUPS, GROUP_DEFAULTS, TIMER_GROUPS
from analysis.animal.fallback_rules import DEFAULT_TEST_H, RULES, osmolality_from_ppt
from analysis.animal.salinity_limits import Side, resolved_sides, start_ppt
from analysis.animal.stage import NAN, Certainty, Figure, Stage, Supports


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


def _jump(stage: Stage, side: Side, sides: Mapping[str, Side]) -> dict[str, Figure]:
    """Find the direct lethal jump of one side, its test length, and the harmless fraction of it."""
    test = "direct" if side.own("direct") is not None else "lethal"
    level = side.own(test) or side.found.get("level")
    if level is None or math.isnan(level.value):
        return {}
    start = stage.figures.get(f"{test}_{side.side}_from_ppt")
    came_from = start.value if start is not None else start_ppt(sides)
    harmless = stage.figures.get(f"harmless_{side.side}_ppt")
    found: dict[str, Figure] = {}
    jump = abs(osmolality_from_ppt(came_from) - osmolality_from_ppt(level.value))
    certainty = level.certainty if start is not None and level.certainty is not Certainty.ASSUMED else Certainty.ASSUMED
    note = f"from {came_from:.4g} to {level.value:.4g} ppt" + (
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
    sides = resolved_sides(stage)
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
    start = start_ppt(sides)
    if math.isfinite(start):
        figures["home"] = Figure(
            osmolality_from_ppt(start),
            "mOsm/kg",
            (),
            Certainty.ASSUMED,
            f"from {start:.4g} ppt: the middle of the optimum",
        )
    return Resolved(stage, MappingProxyType(figures), _supports(figures), stage.group in TIMER_GROUPS)
