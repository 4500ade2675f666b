"""A million readings through conversion, uncertainty and all quality tests, against the bare library calls.

`measure` runs both in one go, so that the ratio does not depend on the machine; `python -m
tests.analysis.sensor.quality.speed` prints it with the share of each part.
"""

from __future__ import annotations

import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass

import gsw
import numpy as np

from analysis.sensor.quality import buckets, evaluation, history, moment
from analysis.sensor.quality.limits import Surroundings, default_limits
from analysis.sensor.quality.state import QualityState
from analysis.sensor.quality.thresholds import Thresholds
from analysis.water.properties import Seawater
from analysis.water.uncertainty import uncertainty_of_readings

BLOCK = 16_384

PARTS: dict[str, tuple[tuple[object, str], ...]] = {
    "gap": ((evaluation, "_judge_gap"),),
    "gross range": ((moment, "gross_range"),),
    "climatology": ((moment, "climatology"),),
    "in air": ((moment, "in_air"),),
    "spike": ((history, "_judge_spikes"),),
    "rate of change, multi-variate": ((history, "_judge_rates"),),
    "flat line": ((history, "_judge_flat_lines"),),
    "noise": ((history, "_judge_noise"), (history, "_noise_onsets")),
    "attenuated signal, neighbour and all limits that hold for an hour": ((history, "_verdicts"),),
    "steps between readings": ((history, "steps"),),
    "history in buckets": ((buckets, "in_steps"), (buckets, "grouped"), (buckets, "tally"), (history, "_remember")),
    "rolling up": ((evaluation, "_assembled"),),
}
"""What is timed inside the quality tests: names of the functions that do each part."""


@dataclass
class Speed:
    """Seconds of one run; only ratios of one run mean anything."""

    bare: float
    conversion: float
    uncertainty: float
    quality: float
    parts: dict[str, float]

    @property
    def ratio(self) -> float:
        """All of ours over the bare library calls."""
        return (self.conversion + self.uncertainty + self.quality) / self.bare

    def lines(self) -> Iterator[str]:
        """The figures in words."""
        total = self.conversion + self.uncertainty + self.quality
        yield f"conversion, uncertainty and quality: {self.ratio:.2f} times the bare calls"
        for name, seconds in (
            ("conversion", self.conversion),
            ("uncertainty", self.uncertainty),
            ("quality tests", self.quality),
        ):
            yield f"  {name}: {100 * seconds / total:.0f} %"
        for name, seconds in sorted(self.parts.items(), key=lambda part: -part[1]):
            yield f"    {name}: {100 * seconds / total:.1f} %"


def bare_calls(conductivity: np.ndarray, temperature: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Density and osmolality (at the water's own temperature) by nothing but the library."""
    salinity = gsw.SP_from_C(conductivity, temperature, 0.0)
    absolute = gsw.SR_from_SP(salinity)
    density = gsw.rho_t_exact(absolute, temperature, 0.0)
    pure = gsw.gibbs(0, 0, 0, 0.0, temperature, 0.0)
    potential = gsw.chem_potential_water_t_exact(absolute, temperature, 0.0)
    return density, (0.001 * pure - potential) / (8.314472e-3 * (273.15 + temperature)) * 1000.0


@contextmanager
def timed_parts() -> Iterator[dict[str, float]]:
    """Time the named functions while the block runs."""
    spent = dict.fromkeys(PARTS, 0.0)
    kept: list[tuple[object, str, Callable]] = []
    for part, functions in PARTS.items():
        for module, name in functions:
            original = getattr(module, name)
            kept.append((module, name, original))

            def timed(*args, _original=original, _part=part, **keywords):
                began = time.perf_counter()
                try:
                    return _original(*args, **keywords)
                finally:
                    spent[_part] += time.perf_counter() - began

            setattr(module, name, timed)
    try:
        yield spent
    finally:
        for module, name, original in kept:
            setattr(module, name, original)


def measure(rows: int = 1_000_000, *, repeats: int = 3) -> Speed:
    """Return the best of *repeats* runs over *rows* readings of one logger, one every ten seconds."""
    rng = np.random.default_rng(1)
    time_us = 1_767_225_600_000_000 + np.arange(rows) * 10_000_000
    temperature = 25.0 + np.sin(np.arange(rows) / 1375.0) + rng.normal(0, 0.01, rows)
    conductivity = gsw.C_from_SP(30.0 + rng.normal(0, 0.02, rows), temperature, 0.0)
    best: Speed | None = None
    for _ in range(repeats):
        found = _once(time_us, conductivity, temperature)
        if best is None or found.ratio < best.ratio:
            best = found
    assert best is not None
    return best


def _once(time_us: np.ndarray, conductivity: np.ndarray, temperature: np.ndarray) -> Speed:
    seasons = (((0.0, 80.0), (10.0, 35.0), (10.0, 40.0)),) * 12
    limits = default_limits(Surroundings.OPEN_TANK, interval_s=10.0, expected_salinity=30.0, climatology=seasons)
    thresholds, state, water = Thresholds.from_limits([limits]), QualityState.fresh(1), Seawater()
    sensor = np.zeros(BLOCK, dtype=np.int64)
    began = time.perf_counter()
    bare_calls(conductivity, temperature)
    speed = Speed(time.perf_counter() - began, 0.0, 0.0, 0.0, {})
    with timed_parts() as parts:
        for start in range(0, len(time_us), BLOCK):
            piece = slice(start, start + BLOCK)
            c, t = conductivity[piece], temperature[piece]
            first = time.perf_counter()
            found = water.properties(c, temperature_degC=t)
            second = time.perf_counter()
            uncertainty_of_readings(c, temperature_degC=t, kind=water, salinity=found.practical_salinity)
            third = time.perf_counter()
            state, _ = evaluation.evaluate(
                state,
                thresholds,
                sensor=sensor[: len(c)],
                measured_at_us=time_us[piece],
                conductivity=c,
                temperature=t,
                salinity=found.practical_salinity,
                flags=found.flags,
            )
            speed.conversion += second - first
            speed.uncertainty += third - second
            speed.quality += time.perf_counter() - third
    speed.parts = dict(parts)
    return speed


if __name__ == "__main__":
    for line in measure().lines():
        print(line)  # noqa: T201
