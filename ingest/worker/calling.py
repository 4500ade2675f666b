"""Calls to people, as the worker's main loop drives them: a short step at each look, threads only for what has to wait."""

from __future__ import annotations

import sqlite3
from secrets import token_bytes
from typing import TYPE_CHECKING, Any

import structlog

from analysis.errors import EuryhaleError
from ingest.mqtt import Access, Intake
from ingest.notify import codes
from ingest.notify.addresses import AddressCheck
from ingest.notify.desk import CallDesk
from ingest.notify.life_sign import LifeSign
from ingest.notify.publishing import Publisher
from ingest.notify.sending import Sender
from ingest.notify.trail import EVERY_S as TRAIL_EVERY_S
from ingest.notify.trail import Trail
from ingest.notify.writing import Writer
from ingest.secrets import read_secret
from ingest.store import calls as rows
from ingest.store.errors import StoreBusyError
from ingest.store.inbox import Inbox
from ingest.words import times
from ingest.words.calls import problem_words
from ingest.worker.schedule import Schedule

if TYPE_CHECKING:
    from pathlib import Path

    from ingest.chain.chain import ChainState
    from ingest.clock import Clock
    from ingest.mqtt import Received
    from ingest.notify.sending import Post, Report
    from ingest.site.calls import Answers
    from ingest.store.store import Store
    from ingest.worker.plant import Plant

log = structlog.get_logger(__name__)

CALLING_EVERY_S = 0.2
PUBLISH_EVERY_S = 1.0
LOOK_EVERY_S = 5.0
ADDRESSES_EVERY_S = 300.0
UNHEARD_AFTER_S = 60.0
"""A broker that is away for less is no problem worth a word."""
MOST_ANSWERS = 50


class Calling:
    """Everything about calls that belongs to one worker.

    Parameters
    ----------
    store : Store
        Written only from the caller's thread.
    site_file : Path
        Beside it lie the secrets.
    clock : Clock
    is_replay : bool
        Old readings pass by: nobody is called, nothing is published.
    plant : Plant
        The site at the start.
    post : Post, optional
        How messages leave; through apprise where not given.
    """

    def __init__(
        self,
        store: Store,
        site_file: Path,
        *,
        clock: Clock,
        plant: Plant,
        is_replay: bool = False,
        post: Post | None = None,
    ) -> None:
        self._store = store
        self._site_file = site_file
        self._clock = clock
        self._is_replay = is_replay
        self._post = post
        self._schedule = Schedule(clock)
        self._trail = Trail()
        self._publisher = Publisher()
        self._inbox = Inbox(store.folder)
        self._plant: Plant | None = None
        self._desk = CallDesk(plant.site, store, is_replay=is_replay)
        self._sender: Sender | None = None
        self._answers: Intake | None = None
        self._life_sign: LifeSign | None = None
        self._addresses: AddressCheck | None = None
        self._unwritten: list[Report] = []
        self._unheard: list[Received] = []
        self._told: dict[str, str | int] = {}
        self._on_their_way = 0
        self._heard_at_s = clock.monotonic_s()
        self.problem = ""

    def step(self, plant: Plant, state: ChainState, intake: Intake) -> None:
        """Do what is due: short, and never waiting for anybody outside."""
        if not self._schedule.is_due("calling", CALLING_EVERY_S):
            return
        if plant is not self._plant:
            self._take_plant(plant)
        self._trail.follow(state)
        if self._schedule.is_due("trail", TRAIL_EVERY_S):
            self._trail.keep()
        try:
            self._call(plant, state)
        except (sqlite3.OperationalError, StoreBusyError) as error:
            # The store is busy or full; what was not written is done again at the next look.
            self.problem = problem_words("unwritten", reason=str(error))
            log.error("calls cannot be written down", reason=str(error))
        if not self._is_replay and self._schedule.is_due("publish", PUBLISH_EVERY_S):
            self._publisher.publish(plant, state, intake)
        every_s = 0.0 if plant.site.heartbeat is None else plant.site.heartbeat.every_s
        if self._life_sign is not None and self._schedule.is_due("life sign", every_s):
            self._life_sign.ask(self._sign(plant, intake))

    def stop(self) -> None:
        """Let the threads end; what they have just delivered is written down if it can be."""
        if self._sender is not None:
            self._sender.stop()
            self._take_reports()
            try:
                self._write_reports()
            except sqlite3.OperationalError as error:
                log.warning("last attempts not written down; they are made again", reason=str(error))
        if self._answers is not None:
            self._answers.stop()
        if self._life_sign is not None:
            self._life_sign.stop()

    def condition(self) -> dict[str, Any]:
        """Return how the calls are, for /health."""
        sign = self._life_sign
        return {
            "delivery_problem": self.problem,
            "deliveries_on_their_way": self._on_their_way,
            "signs_given": 0 if sign is None else sign.given,
            "signs_failed": 0 if sign is None else sign.failed,
        }

    def _take_plant(self, plant: Plant) -> None:
        """Follow a new site file."""
        before = None if self._plant is None else self._plant.site
        self._plant, site = plant, plant.site
        self._trail.clear()
        if before is not None:
            self._desk.take_site(site)
        if self._desk.plan is not None and self._sender is None:
            self._desk.key = self._key()
            self._sender = Sender(self._post or self._apprise(), self._clock)
        self._schedule.make_due("addresses")
        if self._is_replay:
            return
        if before is None or before.acknowledgements != site.acknowledgements:
            self._dial(plant)
        if before is None or before.heartbeat != site.heartbeat:
            if self._life_sign is not None:
                self._life_sign.stop()
            sign = site.heartbeat
            self._life_sign = None if sign is None else LifeSign(sign.url_secret, site_file=self._site_file)

    def _key(self) -> bytes:
        try:
            return codes.key_of(self._site_file)
        except OSError as error:
            # Calls matter more than a key that lasts: codes then hold until the next start.
            log.error("the key of the answers cannot be kept", reason=str(error))
            return token_bytes(32)

    def _apprise(self) -> Post:
        # Only a site that declares people pays for loading it.
        from ingest.notify.posting import ApprisePost

        post = ApprisePost(self._site_file)
        self._addresses = AddressCheck(post.fault_of)
        return post

    def _dial(self, plant: Plant) -> None:
        """Connect to the broker outside on which people answer."""
        if self._answers is not None:
            self._answers.stop()
            self._answers = None
        way = plant.site.acknowledgements
        if way is None:
            return
        try:
            password = None if way.secret is None else read_secret(way.secret, site_file=self._site_file)
        except EuryhaleError as error:
            log.error("answers cannot be heard", reason=str(error))
            return
        try:
            self._answers = self._listening(plant, way, password)
        except (OSError, ValueError) as error:
            log.error("answers cannot be heard", reason=str(error))
            return
        self._answers.start()

    def _listening(self, plant: Plant, way: Answers, password: str | None) -> Intake:
        access = Access(
            host=way.host,
            port=way.port,
            client_id=f"euryhale-{plant.site.id}-answers",
            user=way.user,
            password=password,
            is_tls=way.tls,
            ca_file=None if way.ca_file is None else (self._site_file.parent / way.ca_file).resolve(),
        )
        return Intake(access, (way.topic,), clock=self._clock)

    def _call(self, plant: Plant, state: ChainState) -> None:
        desk, now_us = self._desk, self._clock.now_us()
        self._take_reports()
        self._write_reports()
        self._hear_answers(desk, now_us)
        if desk.follow(now_us=now_us):
            self._schedule.make_due("calling")
        desk.test_if_due(now_us=now_us)
        if self._sender is not None:
            for parcel in desk.write(
                lambda: self._writer(plant, state, now_us), without=self._sender.in_flight, now_us=now_us
            ):
                self._sender.hand_over(parcel)
            self._on_their_way = len(self._sender.in_flight)
        if self._addresses is not None and self._schedule.is_due("addresses", ADDRESSES_EVERY_S):
            self._addresses.look([channel.url_secret for person in plant.site.people for channel in person.channels])
        if self._schedule.is_due("look", LOOK_EVERY_S):
            self._tell_problem(plant, desk, now_us)

    def _writer(self, plant: Plant, state: ChainState, now_us: int) -> Writer:
        batches = rows.batches(self._store.connection)
        return Writer(plant, state, self._trail, batches, self._desk.key, now_us)

    def _take_reports(self) -> None:
        if self._sender is not None:
            self._unwritten += self._sender.reports()

    def _write_reports(self) -> None:
        self._desk.report(self._unwritten, now_us=self._clock.now_us())
        self._unwritten.clear()

    def _hear_answers(self, desk: CallDesk, now_us: int) -> None:
        if self._answers is None:
            return
        self._unheard += self._answers.take(MOST_ANSWERS)
        while self._unheard:
            message = self._unheard[0]
            desk.answer(message.payload[:2000].decode("utf-8", "replace"), self._inbox, now_us=now_us)
            self._answers.acknowledge([message])
            self._unheard.pop(0)

    def _sign(self, plant: Plant, intake: Intake) -> dict[str, Any]:
        return {
            "site": plant.site.id,
            "at_us": self._clock.now_us(),
            "broker_connected": intake.is_connected,
            "delivery_problem": self.problem,
        }

    def _tell_problem(self, plant: Plant, desk: CallDesk, now_us: int) -> None:
        """Say on every screen what keeps calls from going out: the board reads it from the store's named values."""
        since_us = desk.failing_since_us(now_us=now_us)
        found = []
        if since_us is not None:
            since = times.moment(since_us, plant.site.zone, now_us=now_us)
            found.append(problem_words("unsent", since=since))
        if desk.nobody_since_us is not None:
            found.append(problem_words("nobody"))
        is_heard = self._answers is not None and self._answers.is_connected
        if is_heard or plant.site.acknowledgements is None:
            self._heard_at_s = self._clock.monotonic_s()
        if self._clock.monotonic_s() - self._heard_at_s > UNHEARD_AFTER_S:
            found.append(problem_words("unheard"))
        if self._addresses is not None and self._addresses.faults:
            found.append(problem_words("addresses", reason=", ".join(self._addresses.faults)))
        if self._life_sign is not None and self._life_sign.problem:
            found.append(problem_words("no_sign", reason=self._life_sign.problem))
        self.problem = "; ".join(found)
        told: dict[str, str | int] = {"delivery_problem": self.problem, "delivery_failing_since": since_us or 0}
        if told != self._told:
            desk.tell(told)
            self._told = told
