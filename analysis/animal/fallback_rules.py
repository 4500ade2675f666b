"""What is taken where a stage has no figure: one table of rules, each with its reasoning.

Only two of the 134 stages have all six salinity limits. A rule fills a gap from the stage's own figures or from a
younger stage of the same species; where no rule applies the limit stays NaN and the screen says "not known".
Tolerances published in ppt become osmolality through the seawater relation.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from types import MappingProxyType

import numpy as np

from analysis.water.properties import Seawater

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
