"""The worker: wiring and the one loop. Receive, run the chain, commit, and only then acknowledge."""

from __future__ import annotations

import sqlite3
import threading
from collections import Counter
from dataclasses import replace
from typing import TYPE_CHECKING

import msgspec
import structlog

from analysis.alarm.kinds import ConditionKind
from analysis.errors import EuryhaleError
from ingest.chain.admission import admit
from ingest.chain.block import RawBlock
from ingest.chain.chain import fresh_state, restored_state, run, tick, told
from ingest.clock import MICROSECONDS_PER_SECOND, ReplayClock, SystemClock
from ingest.commands import desk
from ingest.commands.ruling import Ruling
from ingest.mqtt import Access, Intake
from ingest.secrets import read_secret
from ingest.site.differences import differences
from ingest.store import calibrations, plans, registry, restoring
from ingest.store.block import BlockCommit, Occurrence
from ingest.store.inbox import Inbox, InboxTaker
from ingest.store.readings import as_sent
from ingest.store.store import Store
from ingest.topics import worker_status_topic
from ingest.worker.ageing import proposals
from ingest.worker.assessing import Assessor
from ingest.worker.bench import Bench
from ingest.worker.calling import Calling
from ingest.worker.committing import (
    amendment_rows,
    animal_states,
    channel_rows,
    conflict_rows,
    newest_rows,
    occurrence,
    pending_rows,
    reading_rows,
    ring_rows,
    sensor_states,
    stress_rows,
    tank_states,
)
from ingest.worker.decoding import decode
from ingest.worker.following import look, off_plan
from ingest.worker.outgoing import Outgoing, outgoing
from ingest.worker.plant import Plant, plant
from ingest.worker.rederiving import Rederiver, late_jobs
from ingest.worker.registering import code_version, read_site, register
from ingest.worker.schedule import Schedule
from ingest.worker.stock_book import StockBook
from ingest.worker.stopwatch import Stopwatch

if TYPE_CHECKING:
    from collections.abc import Sequence
    from pathlib import Path

    from ingest.chain.admission import AsSent
    from ingest.chain.chain import ChainOutput, ChainState, Happened
    from ingest.clock import Clock
    from ingest.mqtt import Received
    from ingest.reading import RawReading
    from ingest.site.models import Site
    from ingest.store.block import SensorWork
    from ingest.worker.registering import Numbers

log = structlog.get_logger(__name__)

BLOCK_LIMIT = 5_000
"""No block holds more messages than this."""
IDLE_WAIT_S = 0.25
"""The inbox is looked into at least this often."""
INBOX_EVERY_S = 0.2
TICK_EVERY_S = 1.0
FOLLOW_EVERY_S = 3.0
HEARTBEAT_EVERY_S = 5.0
ROLLUP_EVERY_S = 20.0
ROLLUP_LAG_US = 5 * 60 * MICROSECONDS_PER_SECOND
"""The rollups stay this far behind the newest time, so that a sensor that is a little late is swept, not added singly."""
ROLLUP_MOST_S = 0.05
CHECKPOINT_EVERY_S = 60.0
FORWARDING_EVERY_S = 2.0
REDERIVE_EVERY_S = 0.1
"""A slice of what is derived again, or assessed, is done this often at most: live blocks have the greater part of the time."""
ASSESS_EVERY_S = 3600.0
ASSESS_AFTER_S = 300.0
"""Sensors are not judged before what waited at the broker has come: all of them would be called silent."""
AGES_EVERY_S = 600.0
RETRY_S = (0.1, 0.5, 1.0, 2.0, 5.0)
"""Waits between attempts to commit; the last one repeats. Nothing is acknowledged meanwhile."""
NEVER_SPOKEN = -(2**63)
STEPS = ("decode", "admit", "chain", "prepare", "commit", "acknowledge")
"""The steps whose time is measured, for /metrics and `make bench`."""


class Worker:
    """One site's worker.

    Parameters
    ----------
    site_file : Path
        Read now and at each reload.
    clock : Clock
        Where the time comes from.
    least_interval_s : float
        No sensor is expected to send more often than this: for a record that has been thinned.

    Raises
    ------
    SiteFileError
        If the site file has problems.
    StoreLockedError
        If another worker holds the store.
    """

    def __init__(self, site_file: Path, *, clock: Clock, least_interval_s: float = 0.0) -> None:
        self._least_interval_s = least_interval_s
        self._site_file = site_file
        self._clock = clock
        self._is_replay = isinstance(clock, ReplayClock)
        site, text = read_site(site_file)
        self.store = Store(site.store.folder(site_file))
        self._inbox = InboxTaker(Inbox(self.store.folder))
        self._inbox_seq = restoring.meta_number(self.store.connection, "inbox_seq")
        if self._inbox_seq > self._inbox.newest_seq():
            self._inbox_seq = 0  # Another inbox than before, numbered anew; what was decided is known by its id.
        with self.store.transaction() as connection:
            numbers = register(
                connection, site, text=text, actor=site.identity.default_actor.name, now_us=clock.now_us()
            )
        self._rederiver = Rederiver(self.store)
        self._assessor = Assessor(self.store)
        self._committed_halves = "{}"
        self.plant = self._plant(site, text, numbers)
        self._newest_us: list[int] = []
        self.state: ChainState = fresh_state(self.plant.tanks, self.plant.animals)
        self._restore()
        # A replayed record is received now, whatever time it speaks of.
        received_by = SystemClock() if self._is_replay else clock
        self.intake = Intake(self._access(), self.plant.topics, clock=received_by)
        self._outgoing: Outgoing | None = None
        self.calling = Calling(self.store, site_file, clock=clock, plant=self.plant, is_replay=self._is_replay)
        self._watching_since_us = clock.now_us()
        self._wants_reload = threading.Event()
        self._schedule = Schedule(clock)
        self._began_s = clock.monotonic_s()
        self.counts: Counter[str] = Counter()
        self.stopwatch = Stopwatch(STEPS)
        self.last_problem = ""
        self.site_problem = ""

    def run(self, stop: threading.Event) -> None:
        """Work until *stop* is set; whatever goes wrong beyond repair is raised: a worker dies loudly."""
        self._outgoing = outgoing(self.plant.site, self.plant, site_file=self._site_file, store=self.store)
        self.intake.start()
        interval_s = self.plant.site.store.commit_interval_s
        last_end_s = self._clock.monotonic_s()
        try:
            while not stop.is_set():
                self._side_work(stop)
                if not self.intake.wait(IDLE_WAIT_S):
                    continue
                rest_s = last_end_s + interval_s - self._clock.monotonic_s()
                if rest_s > 0:
                    stop.wait(rest_s)
                messages = self.intake.take(BLOCK_LIMIT)
                if self.process(messages, stop):
                    self.intake.acknowledge(messages)
                    self.stopwatch.lap("acknowledge")
                last_end_s = self._clock.monotonic_s()
        finally:
            self.calling.stop()
            self.intake.stop()
            if self._outgoing is not None:
                self._outgoing.forwarder.stop()
            self.close()

    def close(self) -> None:
        """Let go of the store."""
        self._inbox.close()
        self.store.close()

    def forward_through(self, outgoing: Outgoing) -> None:
        """Send what follows to a central store by *outgoing*, whose forwarder the caller starts and stops."""
        self._outgoing = outgoing

    def reload_soon(self) -> None:
        """Ask for the site file to be read anew between two blocks; safe to call from a signal handler."""
        self._wants_reload.set()

    def process(self, messages: Sequence[Received], stop: threading.Event) -> bool:
        """Take *messages* through decoding, chain and commit; return whether they are on disk."""
        self.stopwatch.start()
        decoded = decode(self.plant.decoder, messages)
        self.stopwatch.lap("decode")
        commit = BlockCommit(refusals=decoded.refusals, counts=decoded.counts)
        commit.channels = channel_rows(self.plant, decoded.channels)
        return self._take_in(decoded.readings, commit, stop)

    def _take_in(self, readings: Sequence[RawReading], commit: BlockCommit, stop: threading.Event) -> bool:
        raw = RawBlock.from_readings(readings)
        if self._is_replay:
            # What is replayed counts as received when it was measured: all that follows is as it was then.
            raw = replace(raw, received_at_us=raw.measured_at_us)
        newest_us = list(self._newest_us)
        admission = admit(newest_us, raw, stored=self._stored)
        self.stopwatch.lap("admit")
        plant = self.plant
        found, output = run(plant.roster, plant.limits, plant.tanks, plant.animals, self.state, admission.block)
        self.stopwatch.lap("chain")
        if len(admission.block):
            commit.readings = reading_rows(plant, admission.block, found)
            commit.latest = newest_rows(admission.block.sensor, found.flags)
            shown = admission.block.sensor[commit.latest]
            commit.sensor_states = sensor_states(shown, output.state)
            commit.newest_at = [newest_us[sensor] for sensor in shown.tolist()]
            commit.rings = ring_rows(plant, found, output.state)
            commit.amendments = amendment_rows(plant, found)
            commit.jobs = late_jobs(plant, admission.block, found.flags)
        commit.conflicts = conflict_rows(self.plant, raw, admission.contradictions)
        commit.counts["readings"] = len(admission.block)
        commit.counts["duplicates"] = admission.duplicates
        commit.counts["conflicts"] = len(admission.contradictions)
        commit.meta.update(self._waiting_halves())
        self._with_output(commit, output)
        self.stopwatch.lap("prepare")
        is_stored = self._commit(commit, stop)
        self.stopwatch.lap("commit")
        if not is_stored:
            return False
        self._newest_us = newest_us
        self.state = output.state
        self._rederiver.has_work |= bool(commit.jobs)
        if isinstance(self._clock, ReplayClock) and len(admission.block):
            self._clock.follow(int(admission.block.measured_at_us.max()))
        return True

    def _waiting_halves(self) -> dict[str, str | int]:
        """Return the halves of readings that wait for their partner, if they are not as last committed."""
        halves = msgspec.json.encode(self.plant.decoder.pairing.to_dict()).decode()
        if halves == self._committed_halves:
            return {}
        self._committed_halves = halves
        return {"waiting_halves": halves}

    def _with_output(self, commit: BlockCommit, output: ChainOutput) -> BlockCommit:
        now_us = commit.now_us = self._clock.now_us()
        commit.tank_states = tank_states(self.plant, output.state, output.tanks)
        commit.animal_states = animal_states(self.plant, output.state, output.moved)
        commit.stress = stress_rows(self.plant, output)
        commit.pending_alarms = pending_rows(self.plant, output, now_us=now_us)
        commit.occurrences = [self._occurrence(item, now_us) for item in output.happened]
        if self._outgoing is not None:
            self._outgoing.add_lines(commit, now_us=now_us)
        return commit

    def _occurrence(self, happened: Happened, now_us: int) -> Occurrence:
        return occurrence(self.plant, happened, now_us=now_us, actor=happened.transition.who)

    def _commit(self, commit: BlockCommit, stop: threading.Event) -> bool:
        """Commit, again and again if need be; False only when the worker is told to stop before it could."""
        attempt = 0
        while True:
            try:
                self.store.commit(commit)
            except sqlite3.OperationalError as error:
                self.last_problem = f"the store does not take the block: {error}"
                wait_s = RETRY_S[min(attempt, len(RETRY_S) - 1)]
                log.error("commit failed", reason=str(error), attempt=attempt + 1, wait_s=wait_s)
                attempt += 1
                if stop.wait(wait_s):
                    return False
                continue
            self.last_problem = ""
            self.counts.update(commit.counts)
            return True

    def _stored(self, measured_at_us: int, sensor: int) -> AsSent | None:
        number = int(self.plant.numbers.sensor[sensor])
        return as_sent(self.store.connection, measured_at=measured_at_us, sensor=number)

    def _side_work(self, stop: threading.Event) -> None:
        """Do what is due besides readings, each a short step."""
        if self._wants_reload.is_set():
            self._wants_reload.clear()
            self.reload()
        if self._schedule.is_due("inbox", INBOX_EVERY_S):
            self.take_commands(stop)
        if self._schedule.is_due("tick", TICK_EVERY_S):
            self.tick(stop)
        self.calling.step(self.plant, self.state, self.intake)
        if self._schedule.is_due("heartbeat", HEARTBEAT_EVERY_S):
            self._commit(BlockCommit(meta={"alive_at": self._clock.now_us(), **self._condition()}), stop)
        if self._outgoing is not None and self._schedule.is_due("forwarding", FORWARDING_EVERY_S):
            self._outgoing.keep_house()
        if self._schedule.is_due("rollup", ROLLUP_EVERY_S) and self._roll_up_for_a_while():
            self._schedule.make_due("rollup")
        if self._rederiver.has_work and self._schedule.is_due("rederive", REDERIVE_EVERY_S):
            self.rederive()
        if self._schedule.is_due("ages of animals", AGES_EVERY_S):
            self.age_animals(stop)
        is_settled = self._clock.monotonic_s() - self._began_s >= ASSESS_AFTER_S
        if is_settled and self._schedule.is_due("assess", ASSESS_EVERY_S):
            self._assessor.begin(now_us=self._clock.now_us())
        if self._assessor.is_running and self._schedule.is_due("assess step", REDERIVE_EVERY_S):
            self._assessor.step(self.plant)
        if self._schedule.is_due("checkpoint", CHECKPOINT_EVERY_S):
            self.store.checkpoint()

    def _condition(self) -> dict[str, str | int]:
        sending = {} if self._outgoing is None else self._outgoing.condition(self._clock.now_us())
        return sending | {
            "broker_connected": int(self.intake.is_connected),
            "broker_problem": self.intake.last_problem,
            "site_problem": self.site_problem,
            "dropped_by_broker": self.intake.dropped_by_broker,
            "waiting_messages": self.intake.waiting,
        }

    def tick(self, stop: threading.Event) -> None:
        """Let everything happen that time alone brings."""
        if self._schedule.is_due("plans", FOLLOW_EVERY_S):
            self.follow_plans(stop)
        overdue = self.plant.decoder.pairing.expired(self._clock.now_us())
        if overdue:
            self._take_in(overdue, BlockCommit(), stop)
        output = tick(
            self.plant.tanks, self.state, now_us=self._clock.now_us(), watching_since_us=self._watching_since_us
        )
        if output.happened or output.pending:
            if not self._commit(self._with_output(BlockCommit(), output), stop):
                return
            self.state = output.state

    def follow_plans(self, stop: threading.Event) -> None:
        """Hold every acclimation plan that runs against the newest readings of its tank."""
        now_us = self._clock.now_us()
        seen = look(self.plant, self.state, now_us=now_us)
        output = told(self.state, off_plan(seen.plant, self.state, now_us=now_us))
        if seen.changed or output.happened or output.pending:
            commit = self._with_output(BlockCommit(plans=seen.changed), output)
            commit.occurrences = [*seen.occurrences, *commit.occurrences]
            if not self._commit(commit, stop):
                return
        self.plant, self.state = seen.plant, output.state

    def _roll_up_for_a_while(self) -> bool:
        """Take steps of the rollups that hold up no block for long; a step of thin records is short. Return whether more is to do."""
        until_s = self._clock.monotonic_s() + ROLLUP_MOST_S
        while self.roll_up():
            if self._clock.monotonic_s() >= until_s:
                return True
        return False

    def roll_up(self) -> bool:
        """Take one step of the rollups; return whether more is to do."""
        newest = max(self._newest_us, default=NEVER_SPOKEN)
        if newest == NEVER_SPOKEN:
            return False
        before, until_us = self.store.rolled_until, min(newest, self._clock.now_us()) - ROLLUP_LAG_US
        try:
            reached = self.store.sweep_rollups(until_us=until_us)
        except sqlite3.OperationalError as error:
            log.warning("rollups wait", reason=str(error))
            return False
        return reached is not None and reached != before and reached < until_us

    def take_commands(self, stop: threading.Event) -> None:
        """Decide on what people have asked for since the last look."""
        for seq, command in self._inbox.after(self._inbox_seq):
            context = Bench(self.plant, self.state, now_us=self._clock.now_us(), connection=self.store.connection)
            if restoring.has_outcome(self.store.connection, command.id):
                self._inbox_seq = seq
                continue
            try:
                ruling = desk.rule(command, context, roles=self.plant.roles)
            except Exception:
                # Whatever somebody has put into a command, the worker must not die of it, again and again at each start.
                log.exception("command failed", kind=command.kind, id=command.id)
                ruling = Ruling.refused("unusable_details")
            commit = BlockCommit(
                occurrences=[*ruling.occurrences],
                meta={"inbox_seq": seq},
                counts={f"commands.{ruling.outcome}": 1},
                work=ruling.work,
                jobs=[*ruling.jobs],
                now_us=context.now_us,
            )
            commit.outcomes.append(restoring.outcome_row(command, ruling.outcome, ruling.reason, context.now_us))
            plant, state = self.plant, self.state
            if ruling.outcome == "applied":
                plant, state, commit.animal_states = context.taken_up()
                commit.plans = context.changed_plans
            if not self._commit(commit, stop):
                return
            self._inbox_seq = seq
            self.plant, self.state = plant, state
            if ruling.work is not None and ruling.outcome == "applied":
                self._take_up(ruling.work)
            self._rederiver.has_work |= bool(ruling.jobs)
            if ruling.has_to_reload:
                self._wants_reload.set()
            log.info(
                "command", kind=command.kind, subject=command.subject, outcome=ruling.outcome, reason=ruling.reason
            )

    def _take_up(self, work: SensorWork) -> None:
        """Let what has been done to sensors hold from the next block on, and look at them again."""
        self._schedule.make_due("assess")
        if not work.services:
            return
        connection = self.store.connection
        derivation = registry.known_derivation(
            connection,
            code_version=code_version(),
            revision=self.plant.numbers.revision,
            calibration_set=calibrations.calibration_set(connection),
        )
        self.plant = self.plant.after_services(restoring.services(connection), derivation=derivation)

    def age_animals(self, stop: threading.Event) -> None:
        """Propose the stages to which the animals' ages point; until a person confirms one, the stricter figures govern."""
        book = StockBook(self.plant, self.state, connection=self.store.connection, now_us=self._clock.now_us())
        events = proposals(book, self.store.connection, now_us=self._clock.now_us())
        for event in events:
            book.enter(event, {})
        if events and self._commit(BlockCommit(occurrences=[Occurrence(event) for event in events]), stop):
            self.plant, self.state = book.plant, book.state_of_chain

    def assess(self) -> None:
        """Find out at once how far each sensor can be believed."""
        self._assessor.begin(now_us=self._clock.now_us())
        while self._assessor.step(self.plant):
            pass

    def rederive(self) -> bool:
        """Do one slice of what has to be derived again; return whether there may be more to do."""
        return self._rederiver.step(self.plant, now_us=self._clock.now_us())

    def reload(self) -> bool:
        """Read the site file anew; all or nothing. Return whether the new one is at work."""
        try:
            site, text = read_site(self._site_file)
        except EuryhaleError as error:
            return self._refuse_site(str(error))
        fixed = [
            change.what
            for change in differences(self.plant.site, site)
            if change.needs_restart or change.what.startswith("broker.")
        ]
        if fixed:
            return self._refuse_site(f"{', '.join(fixed)}: a change of that needs a restart")
        before = (self.plant, self.state, self._newest_us)
        try:
            with self.store.transaction() as connection:
                numbers = register(
                    connection,
                    site,
                    text=text,
                    actor=site.identity.default_actor.name,
                    now_us=self._clock.now_us(),
                )
                self.plant = self._plant(site, text, numbers)
                self._restore()
        except (sqlite3.Error, EuryhaleError) as error:
            self.plant, self.state, self._newest_us = before
            return self._refuse_site(str(error))
        self.intake.resubscribe(self.plant.topics)
        if self._outgoing is not None:
            self._outgoing.take(self.plant)
        self.site_problem = ""
        log.info("site file accepted", revision=self.plant.numbers.revision)
        return True

    def _refuse_site(self, reason: str) -> bool:
        self.site_problem = f"the new site file is refused, the old one stays: {reason}"
        log.error("site file refused", reason=reason)
        return False

    def _plant(self, site: Site, text: str, numbers: Numbers) -> Plant:
        connection = self.store.connection
        self._committed_halves = restoring.meta_text(connection, "waiting_halves") or "{}"
        installed = plant(
            site,
            text=text,
            has_horizon=not self._is_replay,
            least_interval_s=self._least_interval_s,
            numbers=numbers,
            stocked=restoring.stocked_tanks(connection),
            tables=self.store.folder / "ion_tables",
            waiting_halves=msgspec.json.decode(self._committed_halves),
            services=restoring.services(connection),
        )
        return installed.after_plans(plans.with_say(connection), now_us=self._clock.now_us())

    def _restore(self) -> None:
        """Take up chain state and newest times from the store, by the ids of the plant."""
        connection = self.store.connection
        newest = restoring.newest_times(connection)
        self._newest_us = [newest.get(sensor.id, NEVER_SPOKEN) for sensor in self.plant.site.sensors]
        known = set(self.plant.tanks.rules)
        index = self.plant.site.tank_index
        alarms = {
            (ConditionKind(row.condition), index[row.subject.removeprefix("tank/")]): restoring.alarm_state(row)
            for row in restoring.alarm_rows(connection)
            if row.condition in known and row.subject.removeprefix("tank/") in index
        }
        fresh = restored_state(
            self.plant.tanks,
            self.plant.animals,
            bodies=restoring.tank_bodies(connection),
            lives=restoring.animal_bodies(connection),
            alarms=alarms,
        )
        for place, sensor in enumerate(self.plant.site.sensors):
            recent, ring = restoring.quality_memory(connection, sensor.id)
            if recent is not None:
                fresh.quality.restore(place, recent=recent, ring=ring or fresh.quality.ring_bytes(place))
        self.state = fresh

    def _access(self) -> Access:
        broker = self.plant.site.broker
        ca_file = None if broker.ca_file is None else (self._site_file.parent / broker.ca_file).resolve()
        return Access(
            host=broker.host,
            port=broker.port,
            client_id=broker.client_id or f"euryhale-{self.plant.site.id}",
            is_version_5=broker.protocol == "5",
            user=broker.user,
            password=None if broker.secret is None else read_secret(broker.secret, site_file=self._site_file),
            is_tls=broker.tls,
            ca_file=ca_file,
            status_topic=worker_status_topic(self.plant.site.id),
        )
