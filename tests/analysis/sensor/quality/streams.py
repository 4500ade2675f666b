"""Streams of readings for the quality tests: small, seeded, with everything in them that can go wrong."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

START_US = 1_767_225_600_000_000  # 2026-01-01T00:00:00Z
SECOND_US = 1_000_000


@dataclass
class Stream:
    sensor: np.ndarray
    measured_at_us: np.ndarray
    conductivity: np.ndarray
    temperature: np.ndarray
    salinity: np.ndarray

    def __len__(self) -> int:
        return len(self.sensor)

    def part(self, start: int, stop: int) -> dict[str, np.ndarray]:
        return {name: column[start:stop] for name, column in vars(self).items()}

    def all(self) -> dict[str, np.ndarray]:
        return self.part(0, len(self))


def single(values, *, interval_s: float = 60.0, variable: str = "temperature", start_us: int = START_US) -> Stream:
    """One sensor, one variable of interest; the others lie still in the middle of every range."""
    values = np.asarray(values, dtype=float)
    count = len(values)
    columns = {
        "conductivity": np.full(count, 30.0),
        "temperature": np.full(count, 20.0),
        "salinity": np.full(count, 20.0),
    }
    columns[variable] = values
    times = start_us + np.rint(np.arange(count) * interval_s * SECOND_US).astype(np.int64)
    return Stream(sensor=np.zeros(count, dtype=np.int64), measured_at_us=times, **columns)


def eventful(seed: int, *, sensors: int = 3, rounds: int = 150, interval_s: float = 600.0) -> Stream:
    """Several sensors with drops, holes, spikes, steps, noise, stuck stretches, dry probes and missing values."""
    rng = np.random.default_rng(seed)
    rows = []
    for sensor in range(sensors):
        time_us = START_US + rng.integers(0, 60) * SECOND_US
        level, warmth, stuck, noisy = 30.0, 22.0, 0, 0
        for _ in range(rounds):
            time_us += int(
                interval_s
                * SECOND_US
                * rng.choice([1.0, 1.0, 1.0, 1.0, 0.9, 8.0, 200.0], p=[0.6, 0.1, 0.1, 0.1, 0.05, 0.04, 0.01])
            )
            stuck, noisy = max(0, stuck - 1), max(0, noisy - 1)
            happening = rng.random()
            if happening < 0.01:
                stuck = 60
            elif happening < 0.02:
                noisy = 40
            elif happening < 0.03:
                level += rng.normal(0, 8.0)
            if not stuck:
                level += rng.normal(0, 0.05)
                warmth += rng.normal(0, 0.02)
            jitter = rng.normal(0, 3.0, 2) if noisy else np.zeros(2)
            c, t, s = level + jitter[0], warmth + jitter[1], level * 0.65 + jitter[0]
            if rng.random() < 0.02:
                c, s = c + 20.0, s + 13.0
            if rng.random() < 0.02:
                c, s = 0.01, 0.0
            if rng.random() < 0.02:
                t = 99.0
            if rng.random() < 0.04:
                c, s = np.nan, np.nan
            if rng.random() < 0.02:
                t, s = np.nan, np.nan
            rows.append((time_us, sensor, c, t, s))
    rows.sort(key=lambda row: row[:2])
    columns = [np.array(column) for column in zip(*rows, strict=True)]
    return Stream(
        sensor=columns[1].astype(np.int64),
        measured_at_us=columns[0].astype(np.int64),
        conductivity=columns[2].astype(float),
        temperature=columns[3].astype(float),
        salinity=columns[4].astype(float),
    )
