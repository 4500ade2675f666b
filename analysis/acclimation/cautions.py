"""What must stand beside every plan and every correction."""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

import numpy as np

from analysis.acclimation.source import SODIUM_CHLORIDE
from analysis.acclimation.task import Method

if TYPE_CHECKING:
    from analysis.acclimation.task import AcclimationTask

ALWAYS: Final = (
    "Test this schedule on a few animals first.",
    "Estimated osmolality is no laboratory measurement; the stress score is a decision aid from published averages, "
    "not a diagnosis.",
    "Salt, brine and electrical work near water have their own rules: follow local codes, the veterinarian and the "
    "site's procedures.",
    "A monitor does not replace a person's rounds or an independent hard-wired alarm where loss of water or air kills "
    "within minutes.",
)
METHOD: Final = {
    Method.STEPS: ("Aerate all the time; stir before each reading, and read after each step before the next.",),
    Method.FLOW: (
        "A flow-through plan holds only while a reading at the top and one at the bottom agree: fresh water floats.",
        "Aerate and stir all the time; check the flow with a bucket and a clock.",
    ),
    Method.ADD: ("Aerate all the time; the volume grows: watch the rim and the density of animals.",),
    Method.DOSE: (
        "Never put dry salt into a stocked tank: dissolve all of it first, pour it in slowly where the water moves.",
        "Wear eye protection and gloves with strong brine.",
    ),
}
NOT_RELEASED: Final = (
    "Before use a named person releases each source water: chlorine zero, temperature, pH, ions, valid until."
)
PH_IS_A_MEAN: Final = "The pH of a mixture is only roughly the mean by volume: measure it at each step."
PH_UNKNOWN: Final = "pH is not known, so its limit is not kept by this plan: measure it in both waters first."
ROOM: Final = "Heat from or to the room is left out: measure the temperature at each step."
PLAIN_SALT: Final = "Plain sodium chloride lacks potassium, magnesium and calcium: it does not replace sea salt."
LATE: Final = (
    "Being up to {late:g} min late with a step breaks no limit. Later than that: do not catch up, plan anew from the "
    "water as it is."
)


def cautions_for(task: AcclimationTask) -> tuple[str, ...]:
    """Return the cautions that belong to a task, the most particular first."""
    cautions = list(METHOD[task.method])
    if any(source.release is None for source in task.sources):
        cautions.append(NOT_RELEASED)
    knows_ph = np.isfinite(task.start.ph) and all(np.isfinite(source.ph) for source in task.sources)
    cautions.append(PH_IS_A_MEAN if knows_ph else PH_UNKNOWN)
    cautions.append(ROOM)
    is_plain = task.salt is not None and task.salt.is_sodium_chloride
    if is_plain or any(source.kind == SODIUM_CHLORIDE for source in task.sources):
        cautions.append(PLAIN_SALT)
    if task.allowances.late_min > 0.0:
        cautions.append(LATE.format(late=task.allowances.late_min))
    return (*cautions, *ALWAYS)
