"""Questions that screens and reports ask of a store: read-only, each on a short connection of its own."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, Literal, TypeAlias

import msgspec
import numpy as np

from analysis.animal.stress import BAND_WORDS, DRIVER_WORDS, Band, Driver
from ingest.store import (
    alarms,
    amendments,
    animals,
    calibrations,
    corrected,
    ledger,
    plans,
    registry,
    rollups,
    samples,
)
from ingest.store.connection import reader
from ingest.store.lock import is_held
from ingest.store.store import store_path

if TYPE_CHECKING:
    from collections.abc import Mapping
    from pathlib import Path

    from analysis.animal.foresight import Foresight
    from analysis.animal.stage import Stage
    from analysis.arrays import FloatArray, IntArray
    from ingest.store.alarms import AlarmRow
    from ingest.store.animals import AnimalSight
    from ingest.store.calibrations import HealthRow, KeptService, PeriodOfRecord
    from ingest.store.corrected import JobState
    from ingest.store.ledger import Event
    from ingest.store.plans import TankPlan
    from ingest.store.samples import AnimalSample

HOUR_US = 3_600_000_000
DAY_US = 24 * HOUR_US
RowSet: TypeAlias = Literal["best", "seen"]
RAW_SPAN_US = 26 * HOUR_US
Q15_SPAN_US = 62 * DAY_US
H1_SPAN_US = 370 * DAY_US
"""Up to these spans a chart is drawn from single readings, quarter hours, hours; beyond, from days."""
MOST_POINTS = 9_000
"""No chart gets more points than this: single readings that are more are drawn as means with their extremes."""


@dataclass(frozen=True, slots=True)
class Latest:
    """The newest reading of one sensor; None where a value is unknown."""

    sensor: str
    measured_at: int
    received_at: int
    conductivity_mS_cm: float | None
    temperature_degC: float | None
    practical_salinity: float | None
    absolute_salinity_g_kg: float | None
    density_kg_m3: float | None
    osmolality_mOsm_kg: float | None
    flags: int
    quality: int


@dataclass(frozen=True, slots=True)
class LatestChannel:
    """The newest value of a further channel, in its declared unit; None where it was unusable."""

    measured_at: int
    value: float | None


@dataclass(frozen=True, slots=True)
class History:
    """One sensor over time: means with extremes where a point stands for more than one reading.

    All arrays have one length; NaN where nothing is known. `resolution_us` is 0 for single readings, else the
    length of a bucket, whose time is its start. `salinity` is practical salinity, or g/kg in water that has none.
    `is_best` says whether corrected rows stand in the place of those that were seen.
    """

    resolution_us: int
    time_us: IntArray
    salinity: FloatArray
    salinity_min: FloatArray
    salinity_max: FloatArray
    temperature_degC: FloatArray
    temperature_min: FloatArray
    temperature_max: FloatArray
    osmolality_mOsm_kg: FloatArray
    quality: IntArray
    is_best: bool = False


@dataclass(frozen=True, slots=True)
class StressHistory:
    """What the animals of one tank felt over time; NaN where not known."""

    time_us: IntArray
    stress: FloatArray
    range_strain: FloatArray
    change_strain: FloatArray
    exposure_strain: FloatArray
    thermal_strain: FloatArray
    acclimated_mOsm_kg: FloatArray
    internal_mOsm_kg: FloatArray
    gap_mOsm_kg: FloatArray


@dataclass(frozen=True, slots=True)
class LatestStress:
    """The newest stress of one cohort in a tank."""

    tank: str
    measured_at: int
    cohort: str
    stress: float | None
    range_strain: float | None
    change_strain: float | None
    exposure_strain: float | None
    thermal_strain: float | None
    driver: str | None
    band: str | None
    acclimated_mOsm_kg: float | None
    internal_mOsm_kg: float | None
    gap_mOsm_kg: float | None


@dataclass(frozen=True, slots=True)
class Cohort:
    """Animals of one species and stage in one tank."""

    id: str
    tank: str | None
    animal: str
    number: int | None
    since: int
    ended_at: int | None
    body: dict[str, Any]


@dataclass(frozen=True, slots=True)
class Refused:
    """A refused payload as it lies in the store."""

    id: int
    topic: str
    received_at: int
    payload: bytes
    code: str
    place: str
    found: str
    allowed: str
    is_partly_kept: bool


@dataclass(frozen=True, slots=True)
class Outcome:
    """What became of a command."""

    outcome: str
    reason: str
    decided_at: int


def _floats(rows: list[Any], column: int) -> FloatArray:
    return np.array([row[column] for row in rows], dtype=np.float64)


class Queries:
    """All questions to the store in *folder*.

    Raises
    ------
    MissingStoreError
        By every method, if there is no store yet.
    """

    def __init__(self, folder: Path) -> None:
        self.folder = folder
        self._path = store_path(folder)

    def is_worker_running(self) -> bool:
        """Return whether a worker holds the store at this moment."""
        return is_held(self.folder)

    def site_text(self) -> tuple[int, str]:
        """Return number and text of the newest accepted site file."""
        with reader(self._path) as connection:
            return registry.newest_revision(connection)

    def meta(self) -> dict[str, str | int]:
        """Return the store's named single values, such as `alive_at`."""
        with reader(self._path) as connection:
            return {row["name"]: row["value"] for row in connection.execute("SELECT name, value FROM meta").fetchall()}

    def counters(self) -> dict[str, int]:
        """Return the counters."""
        with reader(self._path) as connection:
            return {
                row["name"]: row["value"] for row in connection.execute("SELECT name, value FROM counter").fetchall()
            }

    def latest(self) -> dict[str, Latest]:
        """Return the newest reading of every sensor that has one, by the sensor's id."""
        with reader(self._path) as connection:
            rows = connection.execute(
                "SELECT slug, measured_at, received_at, conductivity_mS_cm, temperature_degC, practical_salinity,"
                " absolute_salinity_g_kg, density_kg_m3, osmolality_mOsm_kg, flags, quality"
                " FROM latest JOIN sensor ON sensor.id = latest.sensor"
            ).fetchall()
        return {row["slug"]: Latest(*row) for row in rows}

    def history(self, sensor: str, *, from_us: int, to_us: int, set: RowSet = "best") -> History:  # noqa: A002
        """Return one sensor over [from_us, to_us), from the table that fits the span: at most about 9,000 points.

        Parameters
        ----------
        sensor : str
        from_us, to_us : int
            [us UTC]
        set : {"best", "seen"}
            Best: of each reading the newest corrected row, where there is one. Seen: what the operator saw, for audits.
            In spans that are drawn from rollups the mean of each bucket is the best, its extremes are moved by as much.
        """
        span = to_us - from_us
        with reader(self._path) as connection:
            row = connection.execute("SELECT id FROM sensor WHERE slug = ?", (sensor,)).fetchone()
            number = -1 if row is None else int(row["id"])
            if span <= RAW_SPAN_US:
                return _raw_history(connection, number, from_us, to_us, is_best=set == "best")
            table = "q15" if span <= Q15_SPAN_US else "h1" if span <= H1_SPAN_US else "d1"
            return _rolled_history(connection, table, number, from_us, to_us, is_best=set == "best")

    def day_lines(self, *, from_us: int, to_us: int) -> dict[str, tuple[IntArray, FloatArray]]:
        """Return (time, salinity) of every sensor in quarter hours: for small lines beside many tanks."""
        bucket = rollups.LEVELS["q15"]
        with reader(self._path) as connection:
            mark = rollups.rolled_until(connection) or from_us
            rows = connection.execute(
                "SELECT slug, bucket, salinity_sum / nullif(salinity_n, 0) FROM sensor CROSS JOIN q15 ON q15.sensor = sensor.id"
                " WHERE bucket >= ? AND bucket < ? ORDER BY slug, bucket",
                (from_us, to_us),
            ).fetchall()
            tail = connection.execute(
                f"SELECT slug, measured_at / {bucket} * {bucket} AS bucket,"
                " avg(CASE WHEN quality < 4 THEN coalesce(practical_salinity, absolute_salinity_g_kg) END)"
                " FROM reading JOIN sensor ON sensor.id = reading.sensor"
                " WHERE measured_at >= ? AND measured_at < ? GROUP BY 1, 2 ORDER BY 1, 2",
                (max(mark // bucket * bucket, from_us), to_us),
            ).fetchall()
        # The open bucket stands half in the rollup, half behind the mark: the tail, read from its start, replaces it.
        points: dict[str, dict[int, float]] = {}
        for slug, start, value in (*rows, *tail):
            points.setdefault(slug, {})[int(start)] = np.nan if value is None else float(value)
        lines = {}
        for slug, by_time in points.items():
            times = sorted(by_time)
            lines[slug] = (
                np.array(times, dtype=np.int64),
                np.array([by_time[time] for time in times], dtype=np.float64),
            )
        return lines

    def stress_history(
        self, tank: str, *, from_us: int, to_us: int, most: int = 3000, cohort: str | None = None
    ) -> StressHistory:
        """Return what the animals of *tank* felt over [from_us, to_us): the worst row of each of at most *most* steps.

        With *cohort* only those of one cohort count; without one the worst of all that were in the tank.
        """
        step = max(60_000_000, (to_us - from_us) // most)
        with reader(self._path) as connection:
            rows = connection.execute(
                "SELECT measured_at, max(stress), range_strain, change_strain, exposure_strain, thermal_strain,"
                " acclimated_mOsm_kg, internal_mOsm_kg, gap_mOsm_kg FROM stress"
                " WHERE measured_at >= ? AND measured_at < ? AND tank = (SELECT id FROM tank WHERE slug = ?)"
                " AND (? IS NULL OR cohort = ?) GROUP BY measured_at / ? ORDER BY measured_at",
                (from_us, to_us, tank, cohort, cohort, step),
            ).fetchall()
        times = np.array([row[0] for row in rows], dtype=np.int64)
        return StressHistory(times, *(_floats(rows, column) for column in range(1, 9)))

    def latest_stress(self, *, since_us: int) -> dict[str, LatestStress]:
        """Return what the animals of each tank felt last, by the tank's id, where that was measured since *since_us*.

        Of several cohorts in a tank: the one that is worst off.
        """
        worst: dict[str, LatestStress] = {}
        for felt in self.latest_stress_of_cohorts(since_us=since_us).values():
            known = worst.get(felt.tank)
            if known is None or _badness(felt) > _badness(known):
                worst[felt.tank] = felt
        return worst

    def latest_stress_of_cohorts(self, *, since_us: int) -> dict[str, LatestStress]:
        """Return what each cohort felt last, by the cohort's id, where that was measured since *since_us*."""
        with reader(self._path) as connection:
            rows = connection.execute(
                "SELECT cohort, slug, body FROM animal_state JOIN tank ON tank.id = animal_state.tank ORDER BY cohort"
            ).fetchall()
        found = {row["cohort"]: _latest_stress(row["slug"], msgspec.json.decode(row["body"])) for row in rows}
        return {cohort: felt for cohort, felt in found.items() if felt.measured_at >= since_us}

    def latest_channels(self, *, since_us: int) -> dict[str, dict[str, LatestChannel]]:
        """Return the newest value of each further channel measured since *since_us*, by the sensor's id and the channel."""
        with reader(self._path) as connection:
            rows = connection.execute(
                "SELECT slug, channel, max(measured_at) AS measured_at, value FROM channel_reading"
                " JOIN sensor ON sensor.id = channel_reading.sensor WHERE measured_at >= ? GROUP BY sensor, channel",
                (since_us,),
            ).fetchall()
        found: dict[str, dict[str, LatestChannel]] = {}
        for row in rows:
            found.setdefault(row["slug"], {})[row["channel"]] = LatestChannel(row["measured_at"], row["value"])
        return found

    def alarms(self) -> list[AlarmRow]:
        """Return where every alarm that ever was stands now."""
        with reader(self._path) as connection:
            return alarms.read_all(connection)

    def events(
        self,
        *,
        kind_prefix: str = "",
        subject: str | None = None,
        from_us: int = 0,
        to_us: int = 2**62,
        most: int = 500,
    ) -> list[tuple[int, Event]]:
        """Return the newest ledger events that fit, oldest first."""
        with reader(self._path) as connection:
            rows = connection.execute(
                "SELECT * FROM event WHERE substr(kind, 1, ?) = ? AND (? IS NULL OR subject = ?)"
                " AND coalesce(measured_at, recorded_at) >= ? AND coalesce(measured_at, recorded_at) < ? ORDER BY id DESC LIMIT ?",
                (len(kind_prefix), kind_prefix, subject, subject, from_us, to_us, most),
            ).fetchall()
        return [(int(row["id"]), ledger.from_row(row)) for row in reversed(rows)]

    def cohorts(self) -> list[Cohort]:
        """Return all cohorts, those that have ended too."""
        with reader(self._path) as connection:
            rows = connection.execute(
                "SELECT cohort.id, slug, animal, number, since, ended_at, body FROM cohort LEFT JOIN tank ON tank.id = cohort.tank"
            ).fetchall()
        return [
            Cohort(
                id=row["id"],
                tank=row["slug"],
                animal=row["animal"],
                number=row["number"],
                since=row["since"],
                ended_at=row["ended_at"],
                body=msgspec.json.decode(row["body"]),
            )
            for row in rows
        ]

    def animals(self, stages: Mapping[str, Stage]) -> list[AnimalSight]:
        """Return how each cohort on the site is and why; *stages* as `ingest.chain.animal_roster.known_stages` makes them."""
        with reader(self._path) as connection:
            return animals.sights(connection, stages)

    def animal_samples(self, cohort: str | None = None, *, since_us: int = 0) -> list[AnimalSample]:
        """Return values of body fluid and stress tests of postlarvae, of one cohort or of all, oldest first."""
        with reader(self._path) as connection:
            return samples.read(connection, cohort=cohort, since_us=since_us)

    def plans(self) -> list[TankPlan]:
        """Return the acclimation plans of all tanks in the order in which they were started, those that have ended too."""
        with reader(self._path) as connection:
            return plans.read_all(connection)

    def foresight(self, cohort: str) -> Foresight:
        """Return how the losses of a cohort and its stress before them went together."""
        with reader(self._path) as connection:
            return animals.foreseen(connection, cohort)

    def sensor_health(self) -> dict[str, HealthRow]:
        """Return for each sensor that has been assessed whether it can be believed, and why."""
        with reader(self._path) as connection:
            return calibrations.health(connection)

    def services(self, sensor: str | None = None) -> list[KeptService]:
        """Return calibrations and cleanings in the order of time, of one sensor or of all."""
        with reader(self._path) as connection:
            rows = calibrations.services(connection)
        return [row for row in rows if sensor is None or row.sensor == sensor]

    def record_periods(self, sensor: str) -> list[PeriodOfRecord]:
        """Return what each service says of the record of *sensor* before it, with the rating, oldest first."""
        with reader(self._path) as connection:
            return calibrations.periods(connection, sensor)

    def calibrations_due(self) -> dict[str, int | None]:
        """Return when each sensor's next calibration is due: a task, not an alarm. None: it has never been calibrated. [us UTC]"""
        with reader(self._path) as connection:
            return calibrations.due(connection)

    def bench_samples(self, *, since_us: int) -> list[dict[str, Any]]:
        """Return readings taken by hand since *since_us*, oldest first: the entry, and what the sensor said at that moment."""
        with reader(self._path) as connection:
            return calibrations.samples(connection, since_us=since_us)

    def rederivations(self, *, most: int = 100) -> list[JobState]:
        """Return the newest jobs of deriving again, newest first, with how far each has come."""
        with reader(self._path) as connection:
            return corrected.job_states(connection, most=most)

    def refused(self, *, most: int = 200) -> list[Refused]:
        """Return the newest refused payloads, newest first."""
        with reader(self._path) as connection:
            rows = connection.execute("SELECT * FROM refused ORDER BY id DESC LIMIT ?", (most,)).fetchall()
        return [Refused(**{**dict(row), "is_partly_kept": bool(row["is_partly_kept"])}) for row in rows]

    def outcome(self, command_id: str) -> Outcome | None:
        """Return what became of a command, or None while it waits."""
        with reader(self._path) as connection:
            row = connection.execute(
                "SELECT outcome, reason, decided_at FROM command_outcome WHERE id = ?", (command_id,)
            ).fetchone()
        return None if row is None else Outcome(*row)

    def reading_count(self) -> int:
        """Return how many readings are stored."""
        with reader(self._path) as connection:
            return int(connection.execute("SELECT count(*) FROM reading").fetchone()[0])


def _latest_stress(tank: str, body: dict[str, Any]) -> LatestStress:
    """Return what the chain remembers of a cohort as the newest row of its stress."""
    latest = body["latest"]
    return LatestStress(
        tank=tank,
        measured_at=body["state"]["updated_at_us"],
        cohort=body["cohort"],
        stress=latest["stress"],
        range_strain=latest["range_strain"],
        change_strain=latest["change_strain"],
        exposure_strain=latest["exposure_strain"],
        thermal_strain=latest["thermal_strain"],
        driver=DRIVER_WORDS[Driver(latest["driver"])],
        band=BAND_WORDS[Band(latest["band"])],
        acclimated_mOsm_kg=body["state"]["acclimated"],
        internal_mOsm_kg=latest["internal_mOsm_kg"],
        gap_mOsm_kg=latest["gap_mOsm_kg"],
    )


def _badness(felt: LatestStress) -> float:
    """Return by what cohorts of one tank are compared: known stress before unknown."""
    return -1.0 if felt.stress is None else felt.stress


def _source(is_best: bool) -> str:
    return f"({corrected.BEST})" if is_best else "reading"


def _raw_history(connection: Any, sensor: int, from_us: int, to_us: int, *, is_best: bool) -> History:
    rows = connection.execute(
        "SELECT measured_at, coalesce(practical_salinity, absolute_salinity_g_kg), temperature_degC, osmolality_mOsm_kg, quality"
        f" FROM {_source(is_best)} WHERE measured_at >= ? AND measured_at < ? AND sensor = ? ORDER BY measured_at LIMIT ?",
        (from_us, to_us, sensor, MOST_POINTS + 1),
    ).fetchall()
    if len(rows) > MOST_POINTS:
        return _thinned_history(connection, sensor, from_us, to_us, is_best=is_best)
    salinity, temperature = _floats(rows, 1), _floats(rows, 2)
    times = np.array([row[0] for row in rows], dtype=np.int64)
    quality = np.array([row[4] for row in rows], dtype=np.int64)
    return History(
        resolution_us=0,
        time_us=times,
        salinity=salinity,
        salinity_min=salinity,
        salinity_max=salinity,
        temperature_degC=temperature,
        temperature_min=temperature,
        temperature_max=temperature,
        osmolality_mOsm_kg=_floats(rows, 3),
        quality=amendments.worsened(connection, sensor=sensor, time_us=times, quality=quality) if is_best else quality,
        is_best=is_best,
    )


def _thinned_history(connection: Any, sensor: int, from_us: int, to_us: int, *, is_best: bool) -> History:
    """Return single readings that are too many for a chart as the rollups would hold them, in finer steps."""
    step = -(-(to_us - from_us) // (MOST_POINTS - 1))
    salinity = "CASE WHEN quality < 4 THEN coalesce(practical_salinity, absolute_salinity_g_kg) END"
    temperature = "CASE WHEN quality < 4 THEN temperature_degC END"
    rows = connection.execute(
        f"SELECT measured_at / ? * ? AS bucket, avg({salinity}), min({salinity}), max({salinity}), avg({temperature}),"
        f" min({temperature}), max({temperature}), avg(CASE WHEN quality < 4 THEN osmolality_mOsm_kg END),"
        " CASE WHEN sum(quality IN (3, 4)) * 2 > count(*) THEN 3 ELSE 1 END"
        f" FROM {_source(is_best)} WHERE measured_at >= ? AND measured_at < ? AND sensor = ? GROUP BY bucket ORDER BY bucket",
        (step, step, from_us, to_us, sensor),
    ).fetchall()
    return _bucket_history(rows, resolution_us=step, is_best=is_best)


def _rolled_history(connection: Any, table: str, sensor: int, from_us: int, to_us: int, *, is_best: bool) -> History:
    level_us = rollups.LEVELS[table]

    def changed(quantity: str) -> str:
        return f"coalesce(change.{quantity}_sum, 0)" if is_best else "0"

    # A correction hardly differs within a bucket: its extremes move by as much as its mean.
    columns = ", ".join(
        f"(seen.{q}_sum + {changed(q)}) / nullif({q}_n, 0), {q}_min + {changed(q)} / nullif({q}_n, 0),"
        f" {q}_max + {changed(q)} / nullif({q}_n, 0)"
        for q in ("salinity", "temperature")
    )
    rows = connection.execute(
        f"SELECT seen.bucket, {columns}, (seen.osmolality_sum + {changed('osmolality')}) / nullif(salinity_n, 0),"
        f" CASE WHEN suspect_n * 2 > n THEN 3 ELSE 1 END FROM {table} AS seen"
        " LEFT JOIN rollup_change AS change ON change.sensor = seen.sensor AND change.level_us = ? AND change.bucket = seen.bucket"
        " WHERE seen.sensor = ? AND seen.bucket >= ? AND seen.bucket < ? ORDER BY seen.bucket",
        (level_us, sensor, from_us, to_us),
    ).fetchall()
    return _bucket_history(rows, resolution_us=level_us, is_best=is_best)


def _bucket_history(rows: list[Any], *, resolution_us: int, is_best: bool) -> History:
    return History(
        resolution_us=resolution_us,
        time_us=np.array([row[0] for row in rows], dtype=np.int64),
        salinity=_floats(rows, 1),
        salinity_min=_floats(rows, 2),
        salinity_max=_floats(rows, 3),
        temperature_degC=_floats(rows, 4),
        temperature_min=_floats(rows, 5),
        temperature_max=_floats(rows, 6),
        osmolality_mOsm_kg=_floats(rows, 7),
        quality=np.array([row[8] for row in rows], dtype=np.int64),
        is_best=is_best,
    )
