"""Tanks with two sensors, one of which goes wrong in a known way at a known time.

Shares no code with what it tests: water from waves, steps and slopes, conductivity from the library `gsw`, faults
put on by hand. Everything follows from one seed.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import gsw
import numpy as np

START = 1_767_225_600_000_000  # 2026-01-01T00:00:00Z in microseconds
KINDS = ("spike", "stuck", "noise", "in air", "drift", "wrong compensation")
PLACES = ("thermostated-tank", "open-tank", "tidal-intake", "pond")
COEFFICIENT = 0.0191


@dataclass
class Case:
    """One tank. Rows of an array are the faulty sensor and its good neighbour; columns are times."""

    seed: int
    kind: str
    place: str
    interval_s: float
    expected_salinity: float
    has_neighbour: bool
    time_us: np.ndarray
    conductivity: np.ndarray  # as the declared compensation leaves it
    reported: np.ndarray  # as sent
    temperature: np.ndarray
    is_declared_compensated: bool
    faulty: np.ndarray  # (times,) of the first sensor
    eventful: np.ndarray  # (times,) the water itself moves fast
    note: str = ""
    faulty_rows: list[int] = field(default_factory=list)


def _water(rng, place: str, hours: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Salinity, temperature, and where the water itself moves fast."""
    day = 2 * np.pi * hours / 24.0
    phase = rng.uniform(0, 2 * np.pi)
    eventful = np.zeros(hours.shape, dtype=bool)
    if place == "tidal-intake":
        middle, swing = rng.uniform(14, 24), rng.uniform(3, 9)
        salinity = middle + swing * np.tanh(rng.uniform(1.0, 4.0) * np.sin(2 * np.pi * hours / 12.42 + phase))
        temperature = rng.uniform(12, 26) + rng.uniform(0.3, 1.2) * np.sin(day) - 0.08 * (salinity - middle)
    else:
        wave, level = {
            "thermostated-tank": (0.08, 28.0),
            "open-tank": (rng.uniform(0.8, 2.0), 24.0),
            "pond": (rng.uniform(1.5, 3.5), 26.0),
        }[place]
        salinity = rng.uniform(8, 34) * (1.0 + 0.002 * hours / 24.0)  # 2 mm a day from a metre of water
        temperature = level + wave * np.sin(day + phase) + 0.03 * np.sin(2 * np.pi * hours / 0.7)
    for _ in range(rng.integers(1, 4)):
        at = rng.uniform(hours[0] + 2, hours[-1] - 2)
        size = rng.uniform(1.5, 6.0) * rng.choice([-1, 1]) if place != "thermostated-tank" else rng.uniform(-4, 4)
        lasts = rng.choice([0.0, 0.02, 0.25, 1.0])  # a step, a gush, a quarter of an hour, an hour
        done = np.clip((hours - at) / max(lasts, 1e-9), 0.0, 1.0)
        salinity = np.maximum(salinity + size * done, 3.0)
        temperature = temperature + rng.uniform(-1.0, 1.0) * done
        eventful |= (hours >= at - 0.25) & (hours <= at + lasts + 0.5)
    return salinity, temperature, eventful


def _sensor(rng, salinity, temperature, delay: int) -> tuple[np.ndarray, np.ndarray]:
    """What an honest sensor says: a little late, a little noisy, a little off, rounded."""
    salinity, temperature = (
        np.concatenate((np.full(delay, x[0]), x[: len(x) - delay])) for x in (salinity, temperature)
    )
    true = gsw.C_from_SP(salinity, temperature, 0.0)
    conductivity = true * (1 + rng.normal(0, 0.002)) * (1 + rng.normal(0, 0.0006, true.shape))
    warmth = temperature + rng.normal(0, 0.03) + rng.normal(0, 0.015, true.shape)
    return np.round(conductivity, 2), np.round(warmth, 2)


def make(seed: int, kind: str) -> Case:
    """Return the case of one seed and kind."""
    rng = np.random.default_rng([KINDS.index(kind), seed])
    place = PLACES[seed % len(PLACES)]
    has_neighbour = seed % 3 != 0
    if kind == "wrong compensation" and place in ("thermostated-tank", "tidal-intake"):
        has_neighbour = True  # no day wave, or salinity that moves with it: only a second sensor can tell
    days, interval_s = (10.0, 600.0) if kind == "drift" else (3.0, float(rng.choice([60.0, 120.0, 300.0])))
    if kind == "drift" and place == "tidal-intake":
        has_neighbour = True
    if kind == "stuck" and place == "thermostated-tank":
        has_neighbour = True
    hours = np.arange(0.0, days * 24.0, interval_s / 3600.0)
    salinity, temperature, eventful = _water(rng, place, hours)
    pairs = [_sensor(rng, salinity, temperature, delay) for delay in (0, int(rng.integers(0, 3)))]
    conductivity, warmth = (np.stack(column) for column in zip(*pairs, strict=True))
    case = Case(
        seed=seed,
        kind=kind,
        place=place,
        interval_s=interval_s,
        expected_salinity=float("nan") if place == "tidal-intake" else float(np.median(salinity)),
        has_neighbour=has_neighbour,
        time_us=START + np.rint(hours * 3600e6).astype(np.int64),
        conductivity=conductivity,
        reported=conductivity.copy(),
        temperature=warmth,
        is_declared_compensated=False,
        faulty=np.zeros(hours.shape, dtype=bool),
        eventful=eventful,
    )
    {
        "spike": _spike,
        "stuck": _stuck,
        "noise": _noise,
        "in air": _in_air,
        "drift": _drift,
        "wrong compensation": _wrong_compensation,
    }[kind](case, rng, hours)
    return case


def _spike(case: Case, rng, hours) -> None:
    """One reading far off, in conductivity or temperature."""
    quiet = np.flatnonzero(~case.eventful & (hours > 3) & (hours < hours[-1] - 1))
    if case.place == "tidal-intake":  # fronts are steep: keep off the steepest tenth
        slope = np.abs(np.gradient(case.conductivity[0]))
        quiet = quiet[slope[quiet] < np.quantile(slope, 0.9)]
    at = int(rng.choice(quiet))
    tidal = case.place == "tidal-intake"
    if rng.random() < 0.6:
        size = rng.uniform(9.0, 25.0) if tidal else rng.uniform(3.0, 20.0)
        case.conductivity[0, at] += size * rng.choice([-1, 1])
        case.conductivity[0, at] = max(case.conductivity[0, at], 3.0)
        if case.conductivity[0, at] == 3.0:  # the floor left too little of it
            case.conductivity[0, at] = case.conductivity[0, at - 1] + size
    else:
        size = rng.uniform(2.2, 8.0) if tidal else rng.uniform(1.5, 8.0)
        case.temperature[0, at] += size * rng.choice([-1, 1])
    case.faulty[at] = True


def _stuck(case: Case, rng, hours) -> None:
    """Conductivity, temperature or the whole sensor repeats its last value; nothing jumps."""
    which = rng.choice(
        ["conductivity", "both"] if case.place == "thermostated-tank" else ["conductivity", "both", "temperature"]
    )
    length = 30.0 if which == "temperature" else rng.uniform(14.0, 30.0)
    start = int(np.searchsorted(hours, rng.uniform(12.0, hours[-1] - length - 0.5)))
    stop = int(np.searchsorted(hours, hours[start] + length))
    if case.place == "thermostated-tank":  # something must show that the water moved
        moved = int(np.searchsorted(hours, hours[start] + 3.0))
        shift = rng.uniform(2.0, 5.0)
        case.conductivity[:, moved:] += shift
        case.eventful |= (hours >= hours[moved] - 0.25) & (hours <= hours[moved] + 0.5)
    if which in ("conductivity", "both"):
        case.conductivity[0, start:stop] = case.conductivity[0, start - 1]
    if which in ("temperature", "both"):
        case.temperature[0, start:stop] = case.temperature[0, start - 1]
    case.note = str(which)
    case.faulty[start:stop] = True


def _noise(case: Case, rng, hours) -> None:
    """A loose plug or a failing thermistor."""
    start = int(np.searchsorted(hours, rng.uniform(12.0, hours[-1] - 14.0)))
    stop = int(np.searchsorted(hours, hours[start] + rng.uniform(6.0, 13.0)))
    tidal = case.place == "tidal-intake"
    if rng.random() < 0.5:
        case.temperature[0, start:stop] += rng.normal(0, rng.uniform(1.5, 4.0), stop - start)
        case.note = "temperature"
    else:
        case.conductivity[0, start:stop] += rng.normal(
            0, rng.uniform(8.0, 12.0) if tidal else rng.uniform(1.5, 5.0), stop - start
        )
        case.conductivity[0, start:stop] = np.abs(case.conductivity[0, start:stop])
        case.note = "conductivity"
    case.faulty[start:stop] = True


def _in_air(case: Case, rng, hours) -> None:
    """The tank is drained or the probe taken out: dry, or with a wet film (in salt water only)."""
    start = int(np.searchsorted(hours, rng.uniform(6.0, hours[-1] - 6.0)))
    stop = max(start + 2, int(np.searchsorted(hours, hours[start] + rng.uniform(0.15, 4.0))))
    film = 0.0 if np.isnan(case.expected_salinity) else 0.006 * case.expected_salinity
    case.conductivity[0, start:stop] = rng.uniform(0.0, 0.015, stop - start) + film * rng.random()
    case.temperature[0, start:stop] += rng.uniform(-4.0, 4.0)
    case.faulty[start:stop] = True


def _drift(case: Case, rng, hours) -> None:
    """Fouling: the cell reads less and less."""
    start = int(np.searchsorted(hours, 24.0))
    loss = rng.uniform(0.05, 0.25)
    share = np.clip((hours - hours[start]) / (hours[-1] - hours[start]), 0.0, 1.0) ** rng.uniform(0.7, 1.5)
    case.conductivity[0] *= 1.0 - loss * share
    case.faulty[start:] = share[start:] * loss > 0.03


def _wrong_compensation(case: Case, rng, hours) -> None:
    """The sensor compensates and is declared raw, or the reverse."""
    factor = 1.0 + COEFFICIENT * (case.temperature[0] - 25.0)
    case.is_declared_compensated = bool(rng.random() < 0.5)
    if case.is_declared_compensated:
        case.reported[0] = case.conductivity[0]  # raw, and multiplied once more
        case.conductivity[0] = case.reported[0] * factor
    else:
        case.reported[0] = case.conductivity[0] / factor
        case.conductivity[0] = case.reported[0]
    case.faulty[:] = True
