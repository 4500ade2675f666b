"""Whether each sensor can be believed: every so often, in short steps between live blocks, from its recent past.

An assessment gathers one reading a minute of the last hours of all sensors in bounded slices, then judges a few sensors at a
time by `analysis.sensor.health`, with quarter hours of the last fortnight for slow change and the declared compensation, the
neighbour in the same tank, and samples from the bench. One that is cut off begins anew: nothing of it is lost but time.
"""

from __future__ import annotations

import sqlite3
from typing import TYPE_CHECKING, Any

import numpy as np
import structlog

from analysis.flags import Quality
from analysis.sensor.compensation_check import CompensationVerdict, check_compensation
from analysis.sensor.health import (
    NOISE_WINDOW_US,
    SAMPLE_AGE_US,
    Belief,
    BenchSample,
    Period,
    SampleKind,
    aligned,
    assess,
)
from analysis.sensor.quality.words import TESTS, VARIABLES, QualityTest, Variable
from analysis.water.compensation import Compensation, CompensationMethod
from analysis.water.uncertainty import uncertainty_of_readings
from ingest.chain.trust import BITS_A_TEST
from ingest.chain.uncertainty import accuracy_of
from ingest.store import calibrations, recent, restoring
from ingest.store.ledger import Event, append
from ingest.store.recent import RecentRows
from ingest.store.rollups import LEVELS

if TYPE_CHECKING:
    from analysis.arrays import FloatArray, IntArray, QualityArray
    from analysis.sensor.compensation_check import CompensationEvidence
    from analysis.sensor.health import Health
    from ingest.site.sensors import Sensor
    from ingest.store.store import Store
    from ingest.worker.plant import Plant

log = structlog.get_logger(__name__)

MOST_ROWS = 10_000
SENSORS_A_STEP = 5
"""So much is done between two blocks: some tens of milliseconds."""
LOOK_BACK_US = 14 * 86_400_000_000
QUARTER_US = LEVELS["q15"]
LEAST_UNCERTAINTY = 0.05
"""No sensor is taken to be better than this when a sample is held against it. [salinity]"""


class Assessor:
    """Assesses the sensors of a site, a step at a time.

    Parameters
    ----------
    store : Store
    """

    def __init__(self, store: Store) -> None:
        self._store = store
        self._assessment: _Assessment | None = None

    def begin(self, *, now_us: int) -> None:
        """Begin an assessment as of *now_us*; one that runs already is begun anew."""
        self._assessment = _Assessment(now_us)

    @property
    def is_running(self) -> bool:
        """Whether there is more to do."""
        return self._assessment is not None

    def step(self, plant: Plant) -> bool:
        """Take one step; return whether there is more to do."""
        if self._assessment is None:
            return False
        try:
            if not self._assessment.step(self._store, plant):
                self._assessment = None
        except sqlite3.OperationalError as error:
            log.warning("the assessment of the sensors waits", reason=str(error))
        except Exception:
            # What cannot be judged this hour may be in the next; alarms must go on meanwhile.
            log.exception("the assessment of the sensors is given up for now")
            self._assessment = None
        return self.is_running


class _Assessment:
    """One round over all sensors."""

    def __init__(self, now_us: int) -> None:
        self.now_us = now_us
        self.next_us = now_us - NOISE_WINDOW_US
        self.parts: list[RecentRows] = []
        self.rows: RecentRows | None = None
        self.next_sensor = 0

    def step(self, store: Store, plant: Plant) -> bool:
        """Gather a slice or judge a few sensors; return whether there is more to do."""
        connection = store.connection
        if self.rows is None:
            end_us = self.now_us + 1
            until_us = recent.span_end(connection, from_us=self.next_us, to_us=end_us, most=MOST_ROWS)
            self.parts.append(recent.thinned(connection, from_us=self.next_us, to_us=until_us))
            self.next_us = until_us
            if until_us >= end_us:
                self.rows = _by_sensor(self.parts)
                self.parts = []
            return True
        count = len(plant.site.sensors)
        chosen = range(self.next_sensor, min(self.next_sensor + SENSORS_A_STEP, count))
        heard = restoring.newest_times(connection)
        verdicts = [
            (sensor, self._judged(connection, plant, sensor, self.rows))
            for sensor in chosen
            if plant.site.sensors[sensor].id in heard  # one that has never spoken is not yet installed
        ]
        with store.transaction():
            for sensor, (health, evidence) in verdicts:
                _keep(connection, plant, sensor, health, evidence, self.now_us)
        self.next_sensor += SENSORS_A_STEP
        return self.next_sensor < count

    def _judged(
        self, connection: sqlite3.Connection, plant: Plant, sensor: int, rows: RecentRows
    ) -> tuple[Health, CompensationEvidence]:
        own = plant.site.sensors[sensor]
        series = self._series(connection, plant, sensor, rows)
        neighbour = int(plant.limits.neighbour[sensor])
        beside = None
        if neighbour >= 0:
            other = self._series(connection, plant, neighbour, rows)
            believable = np.where((other.tests == Quality.FAIL).any(axis=0), np.nan, other.salinity)
            beside = aligned(
                believable, measured_at_us=other.measured_at, to_us=series.measured_at, within_us=QUARTER_US
            )
        evidence = self._compensation(connection, plant, sensor, series)
        if evidence.verdict is CompensationVerdict.UNDECIDED and beside is not None:
            # Salinity moves with temperature here: a second sensor in the same water settles it, if it can be believed.
            known = calibrations.belief(connection, sensor=int(plant.numbers.sensor[neighbour]))
            if known is not None and known[0] == Belief.BELIEVE:
                evidence = self._compensation(connection, plant, sensor, series, beside=beside)
        services = plant.services.get(own.id, ())
        dues = [record.next_due_us for record in (one.record() for one in services) if record is not None]
        by_test = np.full((TESTS, VARIABLES, len(series.measured_at)), Quality.NOT_EVALUATED, dtype=np.uint8)
        by_test[:, Variable.SALINITY] = series.tests
        health = assess(
            Period(
                measured_at_us=series.measured_at,
                temperature_degC=series.temperature_degC,
                salinity=series.salinity,
                by_test=by_test,
                neighbour_salinity=beside,
                cleaned_at_us=services[-1].performed_at_us if services else None,
            ),
            now_us=self.now_us,
            interval_s=own.interval_s,
            samples=self._samples(connection, own),
            compensation=evidence,
            calibration_due_us=dues[-1] if dues else None,
            standard_uncertainty=_standard_uncertainty(plant, own, series),
        )
        return health, evidence

    def _series(self, connection: sqlite3.Connection, plant: Plant, sensor: int, rows: RecentRows) -> _Series:
        number = int(plant.numbers.sensor[sensor])
        first, stop = np.searchsorted(rows.sensor, number), np.searchsorted(rows.sensor, number, "right")
        from_us = self.now_us - NOISE_WINDOW_US
        old = recent.quarters(
            connection, sensor=number, from_us=self.now_us - LOOK_BACK_US, to_us=from_us // QUARTER_US * QUARTER_US
        )
        tests = _unpacked(rows.tests[first:stop])
        earlier = np.full((TESTS, len(old.start)), Quality.NOT_EVALUATED, dtype=np.uint8)
        return _Series(
            measured_at=np.concatenate([old.start + QUARTER_US // 2, rows.measured_at[first:stop]]),
            salinity=np.concatenate([old.salinity, rows.salinity[first:stop]]),
            temperature_degC=np.concatenate([old.temperature_degC, rows.temperature_degC[first:stop]]),
            tests=np.concatenate([earlier, tests], axis=1),
        )

    def _compensation(
        self,
        connection: sqlite3.Connection,
        plant: Plant,
        sensor: int,
        series: _Series,
        *,
        beside: FloatArray | None = None,
    ) -> CompensationEvidence:
        """Hold the declared compensation against what the sensor must have sent, as the stored salinity says it."""
        own = plant.site.sensors[sensor]
        rows = slice(0, len(series.measured_at))
        if not recent.declared_once(connection, sensor=int(plant.numbers.sensor[sensor])):
            accepted_us = recent.accepted_at(connection, revision=plant.numbers.revision)
            rows = slice(int(np.searchsorted(series.measured_at, accepted_us)), len(series.measured_at))
        warmth = series.temperature_degC[rows]
        kind = plant.kinds[plant.site.water_of(own)]
        conductivity = kind.conductivity_mS_cm(salinity=series.salinity[rows], temperature_degC=warmth)
        method = _declared(own)
        is_compensated = own.reports == "compensated"
        return check_compensation(
            conductivity / method.factor(warmth) if is_compensated else conductivity,
            temperature_degC=warmth,
            measured_at_us=series.measured_at[rows],
            is_declared_compensated=is_compensated,
            compensation=method,
            neighbour_mS_cm=None
            if beside is None
            else kind.conductivity_mS_cm(salinity=beside[rows], temperature_degC=warmth),
        )

    def _samples(self, connection: sqlite3.Connection, own: Sensor) -> list[BenchSample]:
        """Return the samples of the last week that were taken beside this sensor, or in its tank."""
        found = calibrations.samples(connection, since_us=self.now_us - SAMPLE_AGE_US)
        return [
            BenchSample(
                measured_at_us=sample["taken_at"],
                salinity=sample["salinity"],
                kind=SampleKind(sample["instrument"]),
                uncertainty=np.nan if sample["uncertainty"] is None else sample["uncertainty"],
            )
            for sample in found
            if sample["sensor"] == own.id or (sample["sensor"] is None and sample["tank"] == own.tank)
        ]


class _Series:
    """The recent past of one sensor: quarter hours, then single readings; `tests` is (tests, rows)."""

    def __init__(
        self, *, measured_at: IntArray, salinity: FloatArray, temperature_degC: FloatArray, tests: QualityArray
    ) -> None:
        self.measured_at = measured_at
        self.salinity = salinity
        self.temperature_degC = temperature_degC
        self.tests = tests


def _by_sensor(parts: list[RecentRows]) -> RecentRows:
    sensor = np.concatenate([part.sensor for part in parts])
    measured_at = np.concatenate([part.measured_at for part in parts])
    order = np.lexsort((measured_at, sensor))
    return RecentRows(
        sensor=sensor[order],
        measured_at=measured_at[order],
        salinity=np.concatenate([part.salinity for part in parts])[order],
        temperature_degC=np.concatenate([part.temperature_degC for part in parts])[order],
        tests=np.concatenate([part.tests for part in parts])[order],
    )


def _unpacked(packed: IntArray) -> QualityArray:
    """Return the flags of the tests, (tests, rows). A gap says that earlier readings are wanting, not that this one is wrong."""
    shifts = BITS_A_TEST * np.arange(TESTS, dtype=np.int64)
    by_test = (packed >> shifts[:, None] & 0xF).astype(np.uint8)
    by_test[by_test == 0] = Quality.NOT_EVALUATED
    by_test[QualityTest.GAP] = Quality.NOT_EVALUATED
    return by_test


def _declared(own: Sensor) -> Compensation:
    if own.reports != "compensated" or own.compensation is None:
        return Compensation()
    coefficient = own.compensation.coefficient_percent_per_K
    reference = own.compensation.reference_temperature_degC
    if coefficient is None:
        return Compensation(CompensationMethod(own.compensation.method), reference_temperature_degC=reference)
    return Compensation(CompensationMethod(own.compensation.method), coefficient, reference)


def _standard_uncertainty(plant: Plant, own: Sensor, series: _Series) -> float:
    """Return the standard uncertainty of the sensor's salinity: its data sheet's limits taken as a rectangle (JCGM 100, 4.3.7)."""
    if not np.isfinite(series.salinity).any() or not np.isfinite(series.temperature_degC).any():
        return LEAST_UNCERTAINTY
    salinity, warmth = np.nanmedian(series.salinity), np.nanmedian(series.temperature_degC)
    kind = plant.kinds[plant.site.water_of(own)]
    accuracy, _ = accuracy_of(own)
    conductivity = kind.conductivity_mS_cm(salinity=salinity, temperature_degC=warmth)
    found = float(uncertainty_of_readings(conductivity, temperature_degC=warmth, accuracy=accuracy, kind=kind).salinity)
    return max(LEAST_UNCERTAINTY, found / 3.0**0.5) if np.isfinite(found) else LEAST_UNCERTAINTY


def _keep(
    connection: sqlite3.Connection,
    plant: Plant,
    sensor: int,
    health: Health,
    evidence: CompensationEvidence,
    now_us: int,
) -> None:
    """Write an assessment down; a changed belief goes into the ledger."""
    own = plant.site.sensors[sensor]
    number = int(plant.numbers.sensor[sensor])
    before = calibrations.belief(connection, sensor=number)
    belief = int(health.belief)
    is_same = before is not None and before[0] == belief
    since = before[1] if before is not None and is_same else now_us
    body = {
        "reasons": [
            {"finding": reason.finding.value, "belief": int(reason.belief), "figures": reason.figures}
            for reason in health.reasons
        ],
        "compensation": {
            "verdict": evidence.verdict.value,
            "share_followed": _plain(evidence.share_followed),
            "expected_share": evidence.expected_share,
            "pairs": evidence.pairs,
            "hours": evidence.hours,
            "sentence": evidence.sentence,
        },
    }
    calibrations.upsert_health(
        connection,
        sensor=number,
        assessed_at=now_us,
        belief=belief,
        since=since,
        body=body,
    )
    if not is_same and (before is not None or belief != Belief.BELIEVE):
        append(connection, _event(own, belief, None if before is None else before[0], body, now_us))


def _event(own: Sensor, belief: int, before: int | None, body: dict[str, Any], now_us: int) -> Event:
    return Event(
        kind="sensor.assessed",
        subject=f"sensor/{own.id}",
        measured_at=now_us,
        recorded_at=now_us,
        body={"belief": belief, "before": before, "reasons": body["reasons"]},
    )


def _plain(value: float) -> float | None:
    return value if np.isfinite(value) else None
