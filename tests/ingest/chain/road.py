"""The way of a reading without worker and store: admission and chain on blocks, with a plain dict for the store."""

from __future__ import annotations

import tempfile
from collections.abc import Iterable, Sequence
from dataclasses import fields, is_dataclass
from pathlib import Path
from typing import Any

import numpy as np

from analysis.alarm.events import Event
from analysis.alarm.kinds import ConditionKind
from ingest.chain.admission import admit
from ingest.chain.animal_roster import Stocked
from ingest.chain.block import RawBlock
from ingest.chain.chain import Happened, act, fresh_state, run, tick
from ingest.reading import RawReading
from ingest.site.loading import load_text
from ingest.worker.plant import Plant, plant
from ingest.worker.registering import Numbers

NEVER_SPOKEN = -(2**63)
NAN = float("nan")


def plant_of(text: str) -> Plant:
    """Return the plant of a site file, with the animals that it names and made-up numbers of a store."""
    site = load_text(text)
    stocked = {
        tank.id: (Stocked(tank.first_stock.id, tank.first_stock.animal, tank.first_stock.used_to_salinity),)
        for tank in site.tanks
        if tank.first_stock is not None
    }
    count = np.arange(len(site.sensors), dtype=np.int64)
    numbers = Numbers(1, 1, count, count, np.arange(len(site.tanks), dtype=np.int64))
    return plant(
        site, text=text, numbers=numbers, stocked=stocked, waiting_halves={}, tables=Path(tempfile.gettempdir())
    )


class Road:
    """A chain at work, and everything that came out of it."""

    def __init__(self, made: Plant) -> None:
        self.plant = made
        self.state = fresh_state(made.tanks, made.animals)
        self.newest_us = [NEVER_SPOKEN] * len(made.site.sensors)
        self.sent: dict[tuple[int, int], tuple[float, float, float]] = {}
        self.rows: dict[tuple[int, int], tuple[Any, ...]] = {}
        self.happened: list[Happened] = []
        self.felt: list[Any] = []
        self.duplicates = 0
        self.contradictions: list[tuple[int, int]] = []

    def take(self, readings: Iterable[RawReading]) -> None:
        """Let one block of readings happen, in the order of arrival."""
        raw = RawBlock.from_readings(list(readings))
        admission = admit(self.newest_us, raw, stored=lambda at_us, sensor: self.sent.get((at_us, sensor)))
        self.duplicates += admission.duplicates
        self.contradictions += [(int(raw.measured_at_us[i]), int(raw.sensor[i])) for i in admission.contradictions]
        block, made = admission.block, self.plant
        found, output = run(made.roster, made.limits, made.tanks, made.animals, self.state, block)
        for index in range(len(block)):
            key = int(block.measured_at_us[index]), int(block.sensor[index])
            assert key not in self.sent, "a reading was admitted twice"
            self.sent[key] = (
                float(block.conductivity[index]),
                float(block.temperature[index]),
                float(block.pressure[index]),
            )
            self.rows[key] = (
                float(found.water.salinity[index]),
                float(found.water.properties.osmolality_mOsm_kg[index]),
                int(found.flags[index]),
                int(found.quality[index]),
                int(found.tests[index]),
            )
        self._keep(output)

    def tick(self, now_us: int, *, watching_since_us: int = 0) -> None:
        """Let time alone do its work."""
        self._keep(tick(self.plant.tanks, self.state, now_us=now_us, watching_since_us=watching_since_us))

    def act(self, tank: int, kind: ConditionKind, event: Event, now_us: int) -> None:
        """Put a person's act to an alarm."""
        self._keep(act(self.state, tank=tank, kind=kind, event=event, now_us=now_us))

    def _keep(self, output: Any) -> None:
        self.happened += output.happened
        self.felt += output.felt
        self.state = output.state

    def names(self, kind: ConditionKind | None = None, tank: int = 0) -> list[str]:
        """Return what happened to the alarms of one tank, in order."""
        return [
            item.transition.happening.value for item in self.happened if item.tank == tank and kind in (None, item.kind)
        ]

    def alarm(self, kind: ConditionKind, tank: int = 0) -> str:
        """Return the state of one alarm."""
        return str(self.state.bank.state(kind, tank).name.value)


def plain(value: Any) -> Any:
    """Return anything that the chain remembers as plain data that can be compared; NaN equals NaN."""
    if isinstance(value, np.ndarray):
        return plain(value.tolist())
    if is_dataclass(value) and not isinstance(value, type):
        return {item.name: plain(getattr(value, item.name)) for item in fields(value)}
    if isinstance(value, dict):
        return {repr(key): plain(item) for key, item in sorted(value.items(), key=repr)}
    if isinstance(value, list | tuple):
        return [plain(item) for item in value]
    if isinstance(value, float) and value != value:
        return "not a number"
    return value


def cut(readings: Sequence[RawReading], lengths: Sequence[int]) -> list[list[RawReading]]:
    """Return *readings* in blocks of the given lengths, over and over."""
    blocks, start, index = [], 0, 0
    while start < len(readings):
        length = lengths[index % len(lengths)] if lengths else len(readings)
        blocks.append(list(readings[start : start + length]))
        start, index = start + length, index + 1
    return blocks
