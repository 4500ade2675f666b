"""An invented hatchery with a day of readings in a real store, for the tests and screenshots of the board.

The values are drawn by simple curves; only what the board shows of them is tested here.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

from analysis.alarm.kinds import ConditionKind
from analysis.animal.stress import Band, Driver
from analysis.water.properties import Seawater
from ingest.store import registry
from ingest.store.alarms import AlarmRow
from ingest.store.block import AnimalRow, BlockCommit, Occurrence, StressRow
from ingest.store.ledger import Event
from ingest.store.readings import ReadingRows
from ingest.store.refused import Refusal
from ingest.store.store import Store

MINUTE_US = 60_000_000
HOUR_US = 60 * MINUTE_US


@dataclass(frozen=True)
class Water:
    """How a tank's water has gone over the last day."""

    id: str
    name: str
    hall: str
    salinity: float
    temperature: float
    animal: str = ""
    band: float | None = None
    tide: float = 0.0
    fall: float = 0.0
    """How far salinity has fallen within the last 40 minutes."""
    is_silent: bool = False
    has_set_point: bool = True
    gap_h: tuple[float, float] | None = None
    """Hours before now between which nothing came."""


WATERS = (
    Water("l3", "L3", "larval", 31.0, 28.6, "penaeus-vannamei/pl10", 2.0, fall=3.6),
    Water("l4", "L4", "larval", 31.0, 28.5, "penaeus-vannamei/pl10", 2.0, gap_h=(15, 13)),
    Water("l5", "L5", "larval", 30.0, 28.2, "penaeus-vannamei/zoea", 1.0),
    Water("n1", "N1", "nursery", 20.0, 29.2, "lates-calcarifer/juvenile", 2.0, fall=-2.4),
    Water("n2", "N2", "nursery", 20.0, 29.1, "lates-calcarifer/juvenile", 2.0),
    Water("n3", "N3", "nursery", 5.0, 28.0, "oreochromis-niloticus/fry-7-120-d", 1.0),
    Water("n4", 'N4 <salt & "bath">', "nursery", 12.0, 27.4, "oreochromis-niloticus/juvenile", 1.5),
    Water("o1", "O1", "shellfish", 28.0, 25.4, "crassostrea-virginica/larva", 2.0, is_silent=True),
    Water("q1", "Q1", "quarantine", 34.0, 19.8, "dicentrarchus-labrax/larva", 2.0),
    Water("r1", "Intake reservoir", "yard", 18.0, 24.6, tide=3.2, has_set_point=False),
)
HALLS = {
    "larval": "Larval hall",
    "nursery": "Nursery",
    "shellfish": "Shellfish room",
    "quarantine": "Quarantine",
    "yard": "Yard",
}


def site_text(waters: tuple[Water, ...] = WATERS) -> str:
    """Return the site file."""
    lines = [
        "site: {id: larkfen, name: Larkfen Shore Hatchery, time_zone: Europe/Lisbon, default_actor: {name: Duty 1, role: operator}}",
        "store: {path: run/store}",
        "halls:",
        *(f"  - {{id: {key}, name: {name}}}" for key, name in HALLS.items()),
    ]
    if not waters:
        return "\n".join(lines) + "\n"
    lines.append("tanks:")
    for water in waters:
        point = (
            f"{{salinity: {water.salinity:g}, band: {water.band:g}, temperature_degC: {water.temperature:g}, temperature_band_K: 2}}"
            if water.has_set_point
            else f"{{tidal_band: [{water.salinity - 6:g}, {water.salinity + 6:g}]}}"
        )
        name = water.name.replace('"', '\\"')
        lines.append(f'  - {{id: {water.id}, name: "{name}", hall: {water.hall}, volume_L: 1000, set_point: {point}')
        if water.animal:
            lines[-1] += (
                f", first_stock: {{id: {water.id}-a, animal: {water.animal}, number: 80000,"
                f" used_to_salinity: {water.salinity:g}, since: 2026-01-01}}"
            )
        lines[-1] += "}"
    lines.append("sensors:")
    for water in waters:
        lines.append(
            f"  - {{id: {water.id}-ct, name: {water.id.upper()} probe, tank: {water.id}, topic: larkfen/{water.id}/ct, interval_s: 60,"
            " fields: {conductivity: ec, temperature: temp, time: t}}"
        )
    return "\n".join(lines) + "\n"


@dataclass
class Scene:
    """A site file and its store; the store is held, as by a running worker, until `stop_worker`."""

    site_file: Path
    store: Store
    waters: tuple[Water, ...]
    now_us: int

    @property
    def folder(self) -> Path:
        """Return the store's folder."""
        return self.store.folder

    def commit(self, block: BlockCommit) -> None:
        """Write a block, as the worker would."""
        self.store.commit(replace(block, meta={**block.meta, "alive_at": self.now_us}))

    def read_on(self, tank: str, *, salinity: float, temperature: float, at_us: int) -> None:
        """Let one reading come in."""
        index = [water.id for water in self.waters].index(tank)
        rows = _rows(np.array([at_us]), index + 1, np.array([salinity]), np.array([temperature]))
        self.commit(BlockCommit(readings=rows, latest=np.array([0]), sensor_states=[None]))

    def raise_alarm(
        self,
        tank: str,
        kind: ConditionKind,
        *,
        value: float,
        limit: float,
        at_us: int,
        priority: str,
        occurrence: int = 1,
    ) -> None:
        """Let an alarm be raised."""
        self.alarm(
            tank,
            kind,
            "unacknowledged",
            value=value,
            limit=limit,
            at_us=at_us,
            priority=priority,
            occurrence=occurrence,
            act="raised",
        )

    def alarm(
        self,
        tank: str,
        kind: ConditionKind,
        state: str,
        *,
        value: float,
        limit: float,
        at_us: int,
        priority: str,
        occurrence: int = 1,
        act: str = "raised",
        by: str = "",
        now_us: int = 0,
    ) -> None:
        """Let an alarm come to stand where it is said to."""
        body = {"acknowledged_by": by, "acknowledged_at_us": now_us or at_us} if by else {}
        row = AlarmRow(
            f"tank/{tank}", kind.value, state, priority, True, occurrence, at_us, value, limit, now_us or at_us, body
        )
        event = Event(
            kind=f"alarm.{act}",
            subject=f"tank/{tank}",
            measured_at=now_us or at_us,
            recorded_at=now_us or at_us,
            actor=by or "worker",
            body={"condition": kind.value, "priority": priority},
        )
        self.commit(BlockCommit(occurrences=[Occurrence(event, row)]))

    def stop_worker(self) -> None:
        """Give the store back, as a worker that ends."""
        self.store.close()


def _rows(times: np.ndarray, sensor: int, salinity: np.ndarray, temperature: np.ndarray) -> ReadingRows:
    water = Seawater()
    conductivity = water.conductivity_mS_cm(salinity=salinity, temperature_degC=temperature)
    properties = water.properties(conductivity, temperature_degC=temperature)
    n = len(times)
    ones = np.ones(n, dtype=np.int64)
    return ReadingRows(
        measured_at=times,
        sensor=ones * sensor,
        received_at=times + 400_000,
        declaration=ones,
        derivation=ones,
        conductivity=conductivity,
        temperature=temperature,
        pressure=np.full(n, np.nan),
        conductivity_mS_cm=conductivity,
        temperature_degC=temperature,
        practical_salinity=properties.practical_salinity,
        absolute_salinity_g_kg=properties.absolute_salinity_g_kg,
        density_kg_m3=properties.density_kg_m3,
        osmolality_mOsm_kg=properties.osmolality_mOsm_kg,
        osmolality_in_situ_mOsm_kg=properties.osmolality_in_situ_mOsm_kg,
        flags=np.zeros(n, dtype=np.uint32),
        quality=np.ones(n, dtype=np.uint8),
        tests=np.zeros(n, dtype=np.int64),
    )


def _course(
    water: Water, now_us: int, days: float, random: np.random.Generator
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    n = round(days * 24 * 60)
    times = now_us - np.arange(n)[::-1] * MINUTE_US - 5_000_000
    hours = (times - now_us) / HOUR_US
    fresh = np.clip(1 + hours / 0.66, 0, 1) * water.fall
    salinity = water.salinity - fresh + water.tide * np.sin(2 * math.pi * hours / 12.42) + random.normal(0, 0.035, n)
    temperature = water.temperature + 0.35 * np.sin(2 * math.pi * (hours - 3) / 24) + random.normal(0, 0.02, n)
    keep = np.ones(n, dtype=bool)
    if water.is_silent:
        keep &= hours < -0.4
    if water.gap_h is not None:
        keep &= (hours < -water.gap_h[0]) | (hours > -water.gap_h[1])
    return times[keep], np.maximum(salinity, 0.05)[keep], temperature[keep]


def make_scene(
    folder: Path, *, now_us: int, waters: tuple[Water, ...] = WATERS, days: float = 1.5, has_alarms: bool = True
) -> Scene:
    """Return a site whose store holds *days* of readings up to now, and two alarms."""
    site_file = folder / "site.yaml"
    text = site_text(waters)
    site_file.write_text(text, encoding="utf-8")
    store = Store(folder / "run" / "store")
    random = np.random.default_rng(20261201)
    with store.transaction() as connection:
        for water in waters:
            registry.tank_number(connection, water.id)
            registry.sensor_number(connection, f"{water.id}-ct")
        for i, _ in enumerate(waters):
            registry.declaration_number(connection, sensor=i + 1, body="{}")
        registry.derivation_number(connection, code_version="test", revision=1, calibration_set="")
        registry.accept_revision(connection, text=text, differences="", accepted_at=now_us, actor="Duty 1")
    scene = Scene(site_file, store, waters, now_us)
    for i, water in enumerate(waters):
        times, salinity, temperature = _course(water, now_us, days, random)
        rows = _rows(times, i + 1, salinity, temperature)
        scene.commit(BlockCommit(readings=rows, latest=np.array([len(rows) - 1]), sensor_states=[None]))
    while store.sweep_rollups(until_us=now_us - 10 * MINUTE_US) != now_us - 10 * MINUTE_US:
        pass
    if has_alarms:
        _trouble(scene)
    return scene


def _trouble(scene: Scene) -> None:
    now_us = scene.now_us
    kind = ConditionKind
    scene.alarm(
        "n2", kind.TEMPERATURE_LOW, "acknowledged", value=26.9, limit=27.1, at_us=now_us - 9 * HOUR_US, priority="soon"
    )
    scene.alarm(
        "n2",
        kind.TEMPERATURE_LOW,
        "normal",
        value=28.0,
        limit=27.1,
        at_us=now_us - 9 * HOUR_US,
        priority="soon",
        act="returned",
        now_us=now_us - 8 * HOUR_US,
    )
    scene.raise_alarm(
        "l3", kind.SALINITY_LOW, value=27.42, limit=29.0, at_us=now_us - 12 * MINUTE_US, priority="urgent"
    )
    scene.raise_alarm("n1", kind.SALINITY_HIGH, value=22.4, limit=22.0, at_us=now_us - 7 * MINUTE_US, priority="soon")
    scene.raise_alarm("o1", kind.UNWATCHED, value=24, limit=math.nan, at_us=now_us - 21 * MINUTE_US, priority="urgent")
    _felt(scene)
    scene.commit(
        BlockCommit(
            refusals=[
                Refusal(
                    "larkfen/o1/ct",
                    now_us - 25 * MINUTE_US,
                    b'{"t": "2026-13-01T10:00", "ec": 41.2}',
                    "time_unreadable",
                    "t",
                    "2026-13-01T10:00",
                    "an ISO 8601 time with its zone",
                    False,
                ),
                Refusal(
                    "larkfen/x9/ct",
                    now_us - 95 * MINUTE_US,
                    b"\x01\x02<script>alert(1)</script>",
                    "unknown_topic",
                    "larkfen/x9/ct",
                    "larkfen/x9/ct",
                    "a topic of the site file",
                    False,
                ),
            ],
            counts={"refused.time_unreadable": 1, "refused.unknown_topic": 1},
        )
    )


def _animal_state(row: StressRow) -> AnimalRow:
    """Return the newest row of the record as the chain's own state of the tank."""
    latest = {name: getattr(row, name) for name in ("stress", "range_strain", "change_strain", "exposure_strain")}
    latest |= {name: getattr(row, name) for name in ("thermal_strain", "internal_mOsm_kg", "gap_mOsm_kg")}
    latest |= {"driver": int(Driver.CHANGE), "band": int(Band.STRAINED)}
    state = {"updated_at_us": row.measured_at, "acclimated": row.acclimated_mOsm_kg}
    return AnimalRow(row.cohort, row.tank, row.measured_at, {"cohort": row.cohort, "state": state, "latest": latest})


def _felt(scene: Scene) -> None:
    now_us = scene.now_us
    rows = []
    for minutes in range(24 * 60, -1, -5):
        fallen = max(0.0, 1 - minutes / 40)
        rows.append(
            StressRow(
                now_us - minutes * MINUTE_US,
                1,
                "l3-a",
                3 + 52 * fallen,
                0.02 + 0.08 * fallen,
                0.03 + 0.5 * fallen,
                0.02 * fallen,
                0.01,
                "change" if fallen > 0.1 else "range",
                "strained",
                905.0,
                770 - 12 * fallen,
                140 - 90 * fallen,
            )
        )
    scene.commit(BlockCommit(stress=rows, animal_states=[_animal_state(rows[-1])]))


def many_waters(count: int) -> tuple[Water, ...]:
    """Return *count* tanks over five halls."""
    halls = tuple(HALLS)
    animals = ("penaeus-vannamei/pl10", "lates-calcarifer/juvenile", "oreochromis-niloticus/juvenile", "")
    return tuple(
        Water(
            f"t{i:03d}",
            f"T{i:03d}",
            halls[i * len(halls) // count],
            8.0 + 26 * ((i * 37) % 100) / 100,
            24 + (i % 9) * 0.6,
            animals[i % 4],
            2.0,
            tide=0.5 if i % 11 == 0 else 0.0,
            fall=4.0 if i in (17, 90) else 0.0,
        )
        for i in range(count)
    )
