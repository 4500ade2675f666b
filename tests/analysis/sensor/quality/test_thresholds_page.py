"""The page that publishes the thresholds says what the code does."""

from __future__ import annotations

import math
from importlib.resources import files

from analysis.sensor.quality.limits import Surroundings, default_limits

ROWS = (
    ("spike, suspect above", "spike_suspect"),
    ("spike, fail above", "spike_fail"),
    ("rate of change: smallest SD", "rate_floor"),
    ("flat line, suspect after h", "flat_suspect_h"),
    ("flat line, fail after h", "flat_fail_h"),
    ("attenuated: suspect SD below", "attenuated_suspect"),
    ("attenuated: fail SD below", "attenuated_fail"),
    ("noise: second difference above", "noise_limit"),
    ("neighbour: means differ by", "neighbour_difference"),
)


def table() -> list[str]:
    """The lines of the table, made from the code."""
    lines = ["| threshold | " + " | ".join(place.value for place in Surroundings) + " |", "|---|---|---|---|---|"]
    for words, name in ROWS:
        cells = []
        for place in Surroundings:
            values = getattr(default_limits(place, interval_s=60.0), name)
            cells.append(", ".join("off" if math.isnan(value) else f"{value:g}" for value in values))
        lines.append(f"| {words} | " + " | ".join(cells) + " |")
    return lines


def test_the_page_holds_the_table():
    page = files("analysis.sensor.quality").joinpath("THRESHOLDS.md").read_text(encoding="utf-8")
    assert "\n".join(table()) in page
