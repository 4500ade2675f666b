"""Published outcomes, what the model says of them, and the fit of its shared constants.

`report` writes the text of analysis/animal/VALIDATION.md; a test holds the file to it.
"""

from __future__ import annotations

import csv
import dataclasses
import json
import math
from dataclasses import dataclass
from functools import lru_cache
from pathlib import Path

import numpy as np

from analysis.animal import tables
from analysis.animal.constants import Constants, constants
from analysis.animal.fallback_rules import osmolality_from_ppt
from analysis.animal.fallbacks import resolved
from analysis.animal.osmoregulation import CohortState
from analysis.animal.stage import Stage
from analysis.animal.stage_arrays import StageArrays
from analysis.animal.strains import DRIVER_WORDS, Driver
from analysis.animal.stress import advance_series
from analysis.animal.survival import alive_from_exposure, peak_exposure

REFERENCE = Path(__file__).parents[2] / "reference"
RAMP_PIECES = 40
PIECES = RAMP_PIECES + 1
FITTED = (
    "decade_mOsm_kg",
    "decade_fish_mOsm_kg",
    "shock_fraction",
    "incipient_fraction",
    "cold_mOsm_kg_K",
    "cold_onset_K",
)
# Decades: the published two-point range without valves, 4.9 ppt (red tilapia) to 25 ppt (snow crab zoea).
BOUNDS = {
    "decade_fish_mOsm_kg": (140.0, 740.0),
    "decade_mOsm_kg": (140.0, 740.0),
    "shock_fraction": (0.2, 0.9),
    "incipient_fraction": (0.0, 0.95),
    "cold_mOsm_kg_K": (0.0, 120.0),
    "cold_onset_K": (0.0, 10.0),
}


@dataclass(frozen=True)
class Case:
    row: str
    stage: str
    kind: str
    from_ppt: float
    to_ppt: float
    hours: float
    ramp_ppt_per_h: float
    temperature_degC: float
    relation: str
    alive: float
    control: float
    source: str
    role: str
    note: str

    @property
    def expected(self) -> float:
        """Fraction alive above control."""
        return min(1.0, self.alive / self.control)


def read_cases() -> list[Case]:
    def number(text: str) -> float:
        return float(text) if text else math.nan

    with (REFERENCE / "animal_outcomes.csv").open(encoding="utf-8", newline="") as file:
        rows = csv.DictReader(line for line in file if not line.startswith("#"))
        return [
            Case(
                row["row"], row["stage"], row["kind"], number(row["from_ppt"]), number(row["to_ppt"]), number(row["hours"]),
                number(row["ramp_ppt_per_h"]), number(row["temperature_degC"]), row["relation"], number(row["alive"]),
                number(row["control"]), row["source"], row["role"], row["note"],
            )
            for row in rows
        ]  # fmt: skip


def all_stages() -> dict[str, Stage]:
    stages = dict(tables.load())
    for raw in json.loads((REFERENCE / "animal_inline_stages.json").read_text(encoding="utf-8")):
        stages.update(
            (stage.id, stage)
            for stage in tables.species_from_mapping(raw, file="inline", source_keys=frozenset(tables.sources()))
        )
    return stages


def ppt_over_time(case: Case, home_ppt: float) -> tuple[list[float], list[float]]:
    """Return the pieces of a case: hours and ppt."""
    start = home_ppt if math.isnan(case.from_ppt) else case.from_ppt
    if case.kind.endswith("% per h"):
        left = 1.0 - float(case.kind.split()[0]) / 100.0
        ramp_h = math.log(case.to_ppt / start) / math.log(left)
        step = ramp_h / RAMP_PIECES
        ramp = [start * left ** (step * (piece + 0.5)) for piece in range(RAMP_PIECES)]
        return [*[step] * RAMP_PIECES, case.hours], [*ramp, case.to_ppt]
    if case.kind == "ramp":
        ramp_h = min(case.hours, abs(case.to_ppt - start) / case.ramp_ppt_per_h)
        step = ramp_h / RAMP_PIECES
        ramp = [start + (case.to_ppt - start) * (piece + 0.5) / RAMP_PIECES for piece in range(RAMP_PIECES)]
        return [*[step] * RAMP_PIECES, case.hours - ramp_h], [*ramp, case.to_ppt]
    if case.kind == "two steps":
        return [24.0, case.hours], [20.0, case.to_ppt]
    return [case.hours], [case.to_ppt]


@dataclass(frozen=True, eq=False)
class Bench:
    """The cases as arrays, ready to be tried with any constants."""

    cases: list[Case]
    stages: list[Stage]
    home: np.ndarray
    hours: np.ndarray
    water: np.ndarray
    warmth: np.ndarray

    @classmethod
    def of(cls, cases: list[Case], stages: dict[str, Stage]) -> Bench:
        hours = np.zeros((PIECES, len(cases)))
        water = np.zeros((PIECES, len(cases)))
        warmth = np.full((PIECES, len(cases)), np.nan)
        home = np.zeros(len(cases))
        for column, case in enumerate(cases):
            usual = home_ppt(stages[case.stage])
            lasting, levels = ppt_over_time(case, usual)
            values = [osmolality_from_ppt(level) for level in levels]
            hours[: len(lasting), column] = lasting
            water[: len(values), column] = values
            water[len(values) :, column] = values[-1]
            warmth[:, column] = case.temperature_degC
            start = case.to_ppt if case.kind == "gradual" else usual if math.isnan(case.from_ppt) else case.from_ppt
            home[column] = osmolality_from_ppt(start)
        longest = max(1, int(np.max(np.sum(hours > 0, axis=0))))
        return cls(
            cases, [stages[case.stage] for case in cases], home, hours[:longest], water[:longest], warmth[:longest]
        )

    def where(self, keep: np.ndarray) -> Bench:
        return Bench(
            [case for case, is_kept in zip(self.cases, keep, strict=True) if is_kept],
            [stage for stage, is_kept in zip(self.stages, keep, strict=True) if is_kept],
            self.home[keep], self.hours[:, keep], self.water[:, keep], self.warmth[:, keep],
        )  # fmt: skip

    def shifted(self, outward_mOsm_kg: float) -> Bench:
        """Return the same schedules with the water further out, in proportion along a ramp."""
        is_gradual = np.array([case.kind == "gradual" for case in self.cases])
        usual = np.array([osmolality_from_ppt(home_ppt(stage)) for stage in self.stages])
        last = self.water[-1]
        out = np.where(np.where(is_gradual, last < usual, last < self.home), -1.0, 1.0)
        shift = out * outward_mOsm_kg
        way = np.where(is_gradual, 1.0, np.abs(last - self.home))
        share = np.where(is_gradual, 1.0, np.abs(self.water - self.home) / np.maximum(way, 1.0))
        start = np.where(is_gradual, usual, self.home)
        # Never past the start: the other side of the axis has limits of its own.
        moved = np.where(
            out < 0.0, np.minimum(self.water + shift * share, start), np.maximum(self.water + shift * share, start)
        )
        water = np.maximum(0.0, moved)
        return dataclasses.replace(self, water=water, home=np.where(is_gradual, water[0], self.home))

    def exposure(self, model: Constants) -> np.ndarray:
        """Return the highest exposure of each case; the many short schedules are not taken through the pieces of the ramps."""
        figures = _figures(tuple(self.stages), model)
        pieces = np.sum(self.hours > 0, axis=0)
        found = np.zeros(len(self.cases))
        for count in np.unique(pieces):
            mine = np.nonzero(pieces == count)[0]
            found[mine] = peak_exposure(
                figures.take(mine), acclimated_mOsm_kg=self.home[mine], hours=self.hours[:count, mine],
                osmolality_mOsm_kg=self.water[:count, mine], temperature_degC=self.warmth[:count, mine], model=model,
            )  # fmt: skip
        return found

    def repeated(self, benches: list[Bench]) -> Bench:
        """Return this bench and the others side by side."""
        many = [self, *benches]
        return Bench(
            [case for bench in many for case in bench.cases], [stage for bench in many for stage in bench.stages],
            *(np.concatenate([getattr(bench, name) for bench in many], axis=-1) for name in ("home", "hours", "water", "warmth")),
        )  # fmt: skip

    def alive(self, model: Constants) -> np.ndarray:
        return alive_from_exposure(self.exposure(model), steepness=model.steepness)


@lru_cache(maxsize=8)
def _unique_figures(stages: tuple[Stage, ...], model: Constants) -> StageArrays:
    return StageArrays.from_stages(stages, model=model)


def _figures(stages: tuple[Stage, ...], model: Constants) -> StageArrays:
    unique = tuple(dict.fromkeys(stages))
    place = {stage: index for index, stage in enumerate(unique)}
    return _unique_figures(unique, model).take(np.array([place[stage] for stage in stages]))


def home_ppt(stage: Stage) -> float:
    """Return where the animals are taken to have come from where the paper does not say: the middle of the optimum."""
    note = resolved(stage).figures["home"].note
    return float(note.split()[1])


SCALE_MOSM_KG = 60.0
"""Miss from which the loss grows only linearly, about 2 ppt: studies of one animal differ so much."""
SHIFTS_MOSM_KG = np.array([-400.0, -240.0, -150.0, -90.0, -50.0, -20.0, 0.0, 20.0, 50.0, 90.0, 150.0, 240.0, 400.0])


def expected_exposure(cases: list[Case], steepness: float) -> np.ndarray:
    """Return the exposure at which as many would live as lived; fractions beyond 0.05 and 0.95 are read as these."""
    alive = np.clip(np.array([case.expected for case in cases]), 0.05, 0.95)
    return ((1.0 - alive) / alive) ** (1.0 / steepness)


@lru_cache(maxsize=64)
def _all_shifts(bench: Bench) -> Bench:
    first, *others = (bench.shifted(shift) for shift in SHIFTS_MOSM_KG)
    return first.repeated(others)


def missed_mOsm_kg(bench: Bench, model: Constants) -> np.ndarray:
    """Return how much further out the water would have to be for the model to say what was published.

    Positive: the model is too tolerant. In osmolality, so that no constant can shrink the misses by making the
    model blunt. "All lived", "all died" and bounds are missed on one side only.
    """
    wanted = np.log10(expected_exposure(bench.cases, model.steepness))
    told = np.log10(np.maximum(_all_shifts(bench).exposure(model), 1e-4)).reshape(SHIFTS_MOSM_KG.size, -1)
    told = np.maximum.accumulate(told, axis=0) + 1e-9 * np.arange(SHIFTS_MOSM_KG.size)[:, None]
    miss = np.array([np.interp(want, told[:, column], SHIFTS_MOSM_KG) for column, want in enumerate(wanted)])
    for index, case in enumerate(bench.cases):
        if case.relation in (">", ">=") or case.expected >= 0.95:
            miss[index] = min(0.0, miss[index])
        elif case.relation in ("<", "<=") or case.expected <= 0.05:
            miss[index] = max(0.0, miss[index])
    return miss


def simplex_fit(loss, start: np.ndarray, *, iterations: int) -> np.ndarray:
    from scipy.optimize import minimize

    size = start.size
    simplex = np.vstack([start, start + 0.3 * np.eye(size)])
    found = minimize(
        loss,
        start,
        method="Nelder-Mead",
        options={"maxiter": iterations, "initial_simplex": simplex, "xatol": 2e-3, "fatol": 2e-3},
    )
    return found.x


SCALE_DECADES = 0.5


def missed_decades(bench: Bench, model: Constants) -> np.ndarray:
    """Return by how many decades of time the model misses; positive: too tolerant. One-sided as `missed_mOsm_kg`."""
    miss = np.log10(expected_exposure(bench.cases, model.steepness)) - np.log10(np.maximum(bench.exposure(model), 1e-3))
    for index, case in enumerate(bench.cases):
        if case.relation in (">", ">=") or case.expected >= 0.95:
            miss[index] = min(0.0, miss[index])
        elif case.relation in ("<", "<=") or case.expected <= 0.05:
            miss[index] = max(0.0, miss[index])
    return miss


def total_loss(bench: Bench, model: Constants) -> float:
    """Return the robust sum of the misses in level and in time: a model must be right in both."""
    level = missed_mOsm_kg(bench, model) / SCALE_MOSM_KG
    time = missed_decades(bench, model) / SCALE_DECADES
    return float(np.sum(np.sqrt(1.0 + level**2 + time**2) - 1.0))


def fitted(bench: Bench, start: Constants, *, keep: np.ndarray | None = None, iterations: int = 120) -> Constants:
    """Return the shared constants that miss least."""
    part = bench if keep is None else bench.where(keep)
    scale = np.array([BOUNDS[name][1] / 4.0 for name in FITTED])

    def model_of(x: np.ndarray) -> Constants:
        values = {name: float(np.clip(value, *BOUNDS[name])) for name, value in zip(FITTED, x * scale, strict=True)}
        return dataclasses.replace(start, **values)

    def loss(x: np.ndarray) -> float:
        limits = [BOUNDS[name] for name in FITTED]
        outside = sum(
            max(0.0, low - value, value - high) / high for (low, high), value in zip(limits, x * scale, strict=True)
        )
        return total_loss(part, model_of(x)) + 10.0 * outside

    here = np.array([getattr(start, name) for name in FITTED]) / scale
    return model_of(simplex_fit(loss, here, iterations=iterations))


def deviance(cases: list[Case], alive: np.ndarray) -> np.ndarray:
    """Return twice the log likelihood lost at each case, ten animals a case; a bound costs only when it is broken."""
    told = np.clip(alive, 0.02, 0.98)
    seen = np.clip(np.array([case.expected for case in cases]), 0.02, 0.98)
    cost = 20.0 * (seen * np.log(seen / told) + (1 - seen) * np.log((1 - seen) / (1 - told)))
    for index, case in enumerate(cases):
        if (case.relation in (">", ">=") and told[index] >= seen[index]) or (
            case.relation in ("<", "<=") and told[index] <= seen[index]
        ):
            cost[index] = 0.0
    return cost


def judged_bench() -> Bench:
    cases = [case for case in read_cases() if case.role == "predicted"]
    return Bench.of(cases, all_stages())


def left_out_constants(bench: Bench, start: Constants, *, iterations: int = 60) -> dict[str, dict[str, float]]:
    """Return the fitted constants without each study, by its key. Takes minutes: kept in left_out.json."""
    sources = np.array([case.source for case in bench.cases])
    found: dict[str, dict[str, float]] = {}
    for source in dict.fromkeys(sources.tolist()):
        model = fitted(bench, start, keep=sources != source, iterations=iterations)
        found[source] = {name: round(getattr(model, name), 4) for name in FITTED}
    return found


def kept_constants() -> dict[str, dict[str, float]]:
    return json.loads((Path(__file__).parent / "left_out.json").read_text(encoding="utf-8"))


@dataclass(frozen=True)
class Judged:
    case: Case
    exposure: float
    alive: float
    missed_mOsm_kg: float
    missed_decades: float


def judged(bench: Bench) -> list[Judged]:
    """Return every predicted case, told by constants that were fitted without its study."""
    kept = kept_constants()
    rows: list[Judged] = []
    for source in dict.fromkeys(case.source for case in bench.cases):
        model = dataclasses.replace(constants(), **kept[source])
        part = bench.where(np.array([case.source == source for case in bench.cases]))
        columns = (part.exposure(model), part.alive(model), missed_mOsm_kg(part, model), missed_decades(part, model))
        rows += [Judged(case, *map(float, values)) for case, *values in zip(part.cases, *columns, strict=True)]
    return rows


@dataclass(frozen=True)
class Sweep:
    """Survival of PL12 moved from 35 to 5 ppt by steps, over the conditions that the paper does not print."""

    hold_h: float
    tau_h: float
    alive: tuple[float, float, float]


SWEPT_HOLD_H = (0.5, 1.0, 2.0, 4.0, 8.0, 12.0, 24.0)
SWEPT_TAU_H = (2.0, 4.0, 8.0, 16.0, 32.0)
PUBLISHED_STEPS = (0.90, 0.80, 0.58)  # DOAJ_PL12, steps of 5, 10, 15 ppt


def swept_steps(stage: Stage, *, after_h: float = 24.0) -> list[Sweep]:
    model = constants()
    figures = StageArrays.from_stages([stage], model=model)
    found = []
    for hold in SWEPT_HOLD_H:
        for tau in SWEPT_TAU_H:
            column = np.array([tau])
            there = dataclasses.replace(figures, tau_down=column, tau_up=column)
            alive = []
            for step in (5.0, 10.0, 15.0):
                levels = np.arange(35.0 - step, 4.9, -step)
                hours = np.full(levels.size, hold)
                hours[-1] += after_h
                water = np.array([osmolality_from_ppt(level) for level in levels])
                peak = peak_exposure(
                    there, acclimated_mOsm_kg=np.array([osmolality_from_ppt(35.0)]), hours=hours[:, None],
                    osmolality_mOsm_kg=water[:, None],
                    temperature_degC=np.full((levels.size, 1), np.nan), model=model,
                )  # fmt: skip
                alive.append(float(alive_from_exposure(peak, steepness=model.steepness)[0]))
            found.append(Sweep(hold, tau, (alive[0], alive[1], alive[2])))
    return found


def harmless_stress(case: Case, stage: Stage) -> tuple[float, str]:
    """Return the worst stress on a published harmless schedule, minute by minute, and its driver."""
    hours, levels = ppt_over_time(case, home_ppt(stage))
    ends = np.cumsum(hours)
    minutes = np.arange(0.0, ends[-1] * 60.0)
    piece = np.searchsorted(ends * 60.0, minutes, side="right").clip(0, len(levels) - 1)
    osmolality = np.array([osmolality_from_ppt(level) for level in levels])[piece]
    degC = np.full(osmolality.shape, 28.5)
    start = CohortState.used_to(np.array([osmolality_from_ppt(case.from_ppt)]), temperature_degC=degC[:1])
    _, stress = advance_series(
        StageArrays.from_stages([stage]),
        start,
        times_us=(minutes * 60e6).astype(np.int64) + 1,
        osmolality_mOsm_kg=osmolality,
        temperature_degC=degC,
    )
    worst = int(np.argmax(stress.stress))
    return float(stress.stress[worst]), DRIVER_WORDS[Driver(int(stress.driver[worst]))]
