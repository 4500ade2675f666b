"""The salinity limits of a stage, in ppt, gaps filled by the rules of `analysis.animal.fallback_rules`."""

from __future__ import annotations

import dataclasses
import math
from collections.abc import Mapping
from dataclasses import dataclass

from analysis.animal.fallback_rules import HOURS_TEST_H, MIN_GAP_PPT, RULES, SHORT_TEST_H, SLOW_GAIN
from analysis.animal.stage import NAN, Certainty, Figure, Stage

INF = math.inf


@dataclass(slots=True)
class Side:
    """One side of the salinity axis, low or high, in ppt. ``out`` is +1 where outward means saltier."""

    stage: Stage
    side: str
    found: dict[str, Figure] = dataclasses.field(default_factory=dict)

    @property
    def out(self) -> float:
        """Which way is outward: +1 saltier, -1 fresher."""
        return 1.0 if self.side == "high" else -1.0

    def own(self, limit: str) -> Figure | None:
        """Return the published figure of this side, None where there is none."""
        return self.stage.figures.get(f"{limit}_{self.side}_ppt")

    def value(self, limit: str) -> float:
        """Return the limit found so far, NaN where there is none. [ppt]"""
        figure = self.found.get(limit)
        return figure.value if figure is not None else NAN

    def keep(self, limit: str, figure: Figure | None) -> bool:
        """Take a published figure as it is; say whether there was one."""
        if figure is None:
            return False
        self.found[limit] = figure
        return True

    def assume(self, limit: str, value: float, rule: str, *, because: tuple[Figure | None, ...] = ()) -> bool:
        """Fill a gap by a rule, from the figures named; always True."""
        names = tuple(dict.fromkeys(name for figure in because if figure for name in figure.sources))
        self.found[limit] = Figure(value, "ppt", names, Certainty.ASSUMED, f"{rule}: {RULES[rule]}")
        return True


def _level(side: Side) -> None:
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


def _beyond_direct_test(side: Side, tolerable: Figure | None, direct: Figure | None, lethal: Figure | None) -> bool:
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


def _level_from_tolerable(side: Side, tolerable: Figure) -> None:
    if side.side == "low" and tolerable.value <= 1.0:
        side.assume("level", -INF, "no lower limit", because=(tolerable,))
    elif side.side == "low":
        side.assume("level", tolerable.value * 2.0 / 3.0, "level from tolerable low", because=(tolerable,))
    else:
        side.assume("level", tolerable.value * 1.25, "level from tolerable high", because=(tolerable,))


def _tolerable(side: Side) -> None:
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


def _borrow_from_younger(side: Side) -> None:
    """Where nothing is known on this side: the limits of the nearest younger stage that has some."""
    if "level" in side.found:
        return
    for young in side.stage.younger:
        other = Side(young, side.side)
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


def _optimal(side: Side, other: Side) -> None:
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


def _keep_apart(side: Side) -> None:
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


def _open_side(side: Side, other: Side) -> None:
    """Where one side has no figure at all, say so: not judged, or not judged up to the saltiest open sea."""
    if "optimal" in side.found or "optimal" not in other.found:
        return
    if side.side == "low":
        side.assume("optimal", 0.0, "not judged low")
        side.assume("tolerable", 0.0, "not judged low")
    else:
        side.assume("optimal", max(40.0, other.value("optimal")), "open sea")


def resolved_sides(stage: Stage) -> dict[str, Side]:
    """Return both sides of *stage*, ``low`` and ``high``, every gap filled that a rule can fill."""
    sides = {name: Side(stage, name) for name in ("low", "high")}
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


def start_ppt(sides: Mapping[str, Side]) -> float:
    """Return the middle of the optimum, where animals are taken to have come from."""
    low, high = sides["low"].value("optimal"), sides["high"].value("optimal")
    known = [value for value in (low, high) if math.isfinite(value)]
    return sum(known) / len(known) if known else NAN
