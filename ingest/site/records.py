"""How strictly the record of the sensors is kept."""

from __future__ import annotations

from ingest.site.section import Section, positive


class Records(Section):
    """The section `records:`. A site may be stricter than USGS TM 1-D3, never laxer."""

    correct_above_percent: float = positive(3, "% of conductivity", 3)
    correct_above_mS_cm: float = positive(0.005, "mS/cm", 0.005)
    correct_above_K: float = positive(0.2, "K", 0.2)
    calibration_valid_days: float = positive(3660, "d", 30)
