"""What the main loop does about calls, step by step; every step leaves one transaction, and what it leaves is enough to go on after a kill.

Between condition and delivery there are four points at which a program can end: after the event with its outbox row,
after the call with its deliveries, after the text of a delivery, and after the sending, before its report. From each
of them the next start goes on; only after the last is a message sent a second time.
"""

from __future__ import annotations

import uuid
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import structlog

from analysis.alarm.call_out import DUTY, Phase, Reason
from analysis.alarm.duty import local_time, on_duty, present
from analysis.alarm.kinds import ConditionKind
from analysis.alarm.state import WAITING_STATES
from ingest.clock import MICROSECONDS_PER_SECOND
from ingest.notify import codes
from ingest.notify.call_outs import CallOuts, entry_from_dict, entry_to_dict
from ingest.notify.duty import plan_of
from ingest.notify.news import compare, news_of
from ingest.notify.sending import Parcel, next_attempt_us
from ingest.site.calls import minutes_of
from ingest.store import calls as rows
from ingest.store import restoring
from ingest.store.block import BlockCommit, Occurrence, write
from ingest.store.inbox import DEFAULT_LIFE_US, Command
from ingest.store.ledger import Event

if TYPE_CHECKING:
    import sqlite3
    from collections.abc import Callable, Sequence

    from analysis.alarm.call_out import Call, CallPlan
    from ingest.notify.sending import Report
    from ingest.notify.writing import Writer
    from ingest.site.calls import Channel, Person
    from ingest.site.models import Site
    from ingest.store.inbox import Inbox
    from ingest.store.store import Store

log = structlog.get_logger(__name__)

MOST_EVENTS = 500
FOLLOWERS_US = 10 * MICROSECONDS_PER_SECOND
"""The first message of a group leaves at once; tanks that join are gathered for so long."""
TOO_OLD_US = 24 * 3600 * MICROSECONDS_PER_SECOND
FAILING_AFTER_US = 120 * MICROSECONDS_PER_SECOND
SET_BACK_US = 5 * MICROSECONDS_PER_SECOND
"""A clock that was set back by more than this is followed: nobody waits an hour longer for a call because of it."""
TEST = "test"
CURSOR = "calls_event"
TEST_DAY = "calls_test_day"
NOBODY_DECLARED, REPLAYED, CALLED = "nobody_declared", "replayed", "called"


@dataclass(slots=True)
class CallDesk:
    """The calls of one site.

    Attributes
    ----------
    site : Site
    store : Store
        Written only from the main loop.
    is_replay : bool
        Old readings pass by: nobody is called.
    """

    site: Site
    store: Store
    is_replay: bool
    key: bytes = b""
    plan: CallPlan | None = None
    cursor: int = 0
    call_outs: CallOuts | None = None
    nobody_since_us: int | None = None
    people: dict[str, Person] = field(default_factory=dict)
    _has_to_compare: bool = True
    _followed_at_us: int = 0

    def __post_init__(self) -> None:
        self.cursor = restoring.meta_number(self.store.connection, CURSOR)
        self.take_site(self.site)

    def take_site(self, site: Site) -> None:
        """Work by another site file from now on; call-outs go on."""
        self.site = site
        self.plan = None if self.is_replay else plan_of(site)
        self.people = {person.id: person for person in site.people}
        self._has_to_compare = True
        if self.plan is None:
            self.call_outs = None
            return
        entries = {row.id: entry_from_dict(row.body) for row in rows.open_call_outs(self.store.connection)}
        self.call_outs = CallOuts(self.plan, entries)

    def follow(self, *, now_us: int) -> bool:
        """Turn what happened to alarms, and the passing of time, into calls; return whether more events wait."""
        events, until = rows.alarm_events(self.store.connection, after_id=self.cursor, most=MOST_EVENTS)
        if self.plan is None or self.call_outs is None:
            if until > self.cursor:
                outcome = REPLAYED if self.is_replay else NOBODY_DECLARED
                self._commit_cursor(until, outcome, now_us)
            return len(events) == MOST_EVENTS
        work = self.call_outs.copy(self.plan)
        set_back_us = self._followed_at_us - now_us
        if set_back_us > SET_BACK_US:
            log.warning("the clock was set back", seconds=set_back_us / MICROSECONDS_PER_SECOND)
            work.move(-set_back_us)
        self._followed_at_us = now_us
        for event_id, event in events:
            news = news_of(self.site, event_id, event)
            if news is not None:
                work.hear(news, now_us=now_us)
        if self._has_to_compare and len(events) < MOST_EVENTS:
            waiting = rows.waiting_alarms(self.store.connection, WAITING_STATES)
            compare(self.site, work, waiting, now_us=now_us)
            self._has_to_compare = False
        work.look(now_us=now_us)
        if until > self.cursor or work.changed or work.calls:
            self._commit_calls(work, until, now_us)
        return len(events) == MOST_EVENTS

    def answer(self, text: str, inbox: Inbox, *, now_us: int) -> str:
        """Take an answer that came from outside; return what it was: a person's id, or why it is not believed.

        Each alarm of the message is acknowledged by a command of its own, as if that person had done it on the board.
        """
        try:
            code = codes.verified(text, self.key, now_us=now_us)
            call = self._call_of(code)
        except codes.CodeError as error:
            log.warning("answer not believed", reason=error.reason)
            return error.reason
        person = self.people[code.person]
        for place, (tank, condition, occurrence) in enumerate(call.covered):
            inbox.submit(
                Command(
                    kind="alarm.acknowledge",
                    subject=f"tank/{tank}",
                    actor=person.name,
                    role=person.role,
                    submitted_at=now_us,
                    expires_at=now_us + DEFAULT_LIFE_US,
                    body={"condition": condition, "why": "answered a call"},
                    expected=str(occurrence),
                    id=str(uuid.uuid5(uuid.NAMESPACE_OID, f"{code.call_out}.{code.call}.{place}")),
                )
            )
        self._commit_answer(code, call, person, now_us)
        log.info("call answered", who=person.id, call_out=code.call_out, call=code.call)
        return person.id

    def write(self, make_writer: Callable[[], Writer], *, without: frozenset[int], now_us: int) -> list[Parcel]:
        """Return the messages to hand over now, those of first attempts written down with what their answer covers."""
        due = rows.due_deliveries(self.store.connection, now_us=now_us, without=without)
        if not due:
            return []
        writer = make_writer()
        settled = [item.id for item in due if self._is_settled(item)]
        old = [item.id for item in due if item.created_at < now_us - TOO_OLD_US]
        parcels = []
        with self.store.transaction() as connection:
            rows.finish_deliveries(connection, settled, outcome="settled", at_us=now_us)
            rows.finish_deliveries(connection, old, outcome="too_old", at_us=now_us)
            done = {*settled, *old}
            for item in due:
                if item.id not in done:
                    ready = item if item.title else self._written(connection, writer, item)
                    parcels.append(
                        Parcel(item.id, item.channel, item.address, ready.title, ready.body, item.reason != TEST)
                    )
        return parcels

    def report(self, reports: Sequence[Report], *, now_us: int) -> None:
        """Write down attempts, and when to try again."""
        if not reports:
            return
        with self.store.transaction() as connection:
            for report in reports:
                attempt = rows.AttemptRow(
                    delivery=report.parcel.delivery,
                    number=0,
                    begun_at=report.begun_at_us,
                    ended_at=report.ended_at_us,
                    is_delivered=report.posted.is_delivered,
                    detail=report.posted.detail,
                )
                made = rows.attempt_count(connection, attempt.delivery) + 1
                rows.write_attempt(connection, attempt, next_attempt_at=next_attempt_us(made, now_us=now_us))

    def test_if_due(self, *, now_us: int) -> bool:
        """Once a day, call whoever is on duty for a test; return whether that was now."""
        wanted = self.site.test_message
        if wanted is None or self.plan is None:
            return False
        local = local_time(now_us, self.site.zone)
        day = local.date().isoformat()
        if local.hour * 60 + local.minute < minutes_of(wanted.at):
            return False
        if restoring.meta_text(self.store.connection, TEST_DAY) == day:
            return False
        names = on_duty(self.plan.calendar, now_us) or (self._first_in_list(now_us),)
        with self.store.transaction() as connection:
            self._write_block(connection, [], {TEST_DAY: day})
            for name in names:
                if name in self.people:
                    for channel in self.people[name].channels:
                        self._add(connection, 0, 0, name, channel, TEST, now_us, now_us)
        return True

    def failing_since_us(self, *, now_us: int) -> int | None:
        """Return since when messages do not go out; None while they do. [us UTC]"""
        oldest_us = rows.oldest_unsent_us(self.store.connection, now_us=now_us)
        return oldest_us if oldest_us is not None and oldest_us < now_us - FAILING_AFTER_US else None

    def tell(self, meta: dict[str, str | int]) -> None:
        """Write named values that every screen can show."""
        with self.store.transaction() as connection:
            self._write_block(connection, [], meta)

    def _call_of(self, code: codes.Code) -> rows.CallRow:
        call = rows.read_call(self.store.connection, call_out=code.call_out, number=code.call)
        if call is None or code.person not in self.people:
            raise codes.CodeError("unknown")
        if call.answered_at is not None:
            raise codes.CodeError("used")
        return call

    def _is_settled(self, delivery: rows.Delivery) -> bool:
        """Return whether nobody has to be woken any more. What makes no sound, and has its text, still leaves."""
        if delivery.reason == TEST or self.call_outs is None:
            return False
        entry = self.call_outs.entries.get(delivery.call_out)
        is_calling = entry is not None and entry.call.phase is Phase.CALLING
        return not is_calling and (not delivery.title or self._is_ringing(delivery))

    def _is_ringing(self, delivery: rows.Delivery) -> bool:
        person = self.people.get(delivery.person)
        channels = () if person is None else person.channels
        return any(channel.is_ringing for channel in channels if channel.url_secret == delivery.address)

    def _written(self, connection: sqlite3.Connection, writer: Writer, delivery: rows.Delivery) -> rows.Delivery:
        person = self.people.get(delivery.person)
        entry = None if self.call_outs is None else self.call_outs.entries.get(delivery.call_out)
        if person is None or (entry is None and delivery.reason != TEST):
            ready = delivery._replace(title=self.site.name, body=self.site.name)
        elif entry is None:
            message = writer.test(person)
            ready = delivery._replace(title=message.title, body=message.body)
        else:
            written = writer.call(entry, person, number=delivery.number, reason=delivery.reason)
            ready = delivery._replace(title=written.message.title, body=written.message.body)
            rows.write_call(
                connection,
                rows.CallRow(
                    delivery.call_out,
                    delivery.number,
                    delivery.person,
                    writer.now_us,
                    delivery.reason,
                    written.covered,
                ),
            )
        rows.write_text(connection, ready)
        return ready

    def _commit_cursor(self, until: int, outcome: str, now_us: int) -> None:
        with self.store.transaction() as connection:
            rows.close_outbox(connection, until_event=until, outcome=outcome, at_us=now_us)
            self._write_block(connection, [], {CURSOR: until})
        self.cursor = until

    def _commit_calls(self, work: CallOuts, until: int, now_us: int) -> None:
        due = work.due_calls()
        with self.store.transaction() as connection:
            for number in sorted(work.changed):
                entry = work.entries[number]
                row = rows.CallOutRow(number, entry.call.phase.value, entry_to_dict(entry))
                rows.write_call_out(connection, row, at_us=now_us)
            made = [self._event(call, number) for number, call in due if self._place(connection, number, call, now_us)]
            if until > self.cursor:
                rows.close_outbox(connection, until_event=until, outcome=CALLED, at_us=now_us)
            self._write_block(connection, made, {CURSOR: until})
        self.cursor = until
        self.call_outs = work
        if due:
            self.nobody_since_us = now_us if any(call.reason is Reason.NOBODY_ON_DUTY for _, call in due) else None

    def _place(self, connection: sqlite3.Connection, number: int, call: Call, now_us: int) -> bool:
        """Write the deliveries of a call; False where a message that is not written yet will say it too, or nobody is led to."""
        person = self.people.get(call.who) or self.people.get(self._stand_in_for_unknown(call.who, now_us))
        if person is None:
            log.error("nobody is on duty, nobody is called", call_out=number)
            return False
        at_us = now_us
        if call.reason is Reason.JOINED:
            if rows.waiting_delivery(connection, call_out=number, person=person.id) is not None:
                return False
            at_us = now_us + FOLLOWERS_US
        rows.write_call(connection, rows.CallRow(number, call.number, person.id, now_us, call.reason.value))
        for channel in _channels(person, call.by):
            self._add(connection, number, call.number, person.id, channel, call.reason.value, now_us, at_us)
        return True

    def _stand_in_for_unknown(self, who: str, now_us: int) -> str:
        """Return whom to call for a name without an address: an account of the board, or somebody who has left."""
        return self._first_in_list(now_us) if who else ""

    def _first_in_list(self, now_us: int) -> str:
        if self.plan is None:
            return ""
        calendar = self.plan.calendar
        for line in self.plan.steps:
            names = on_duty(calendar, now_us) if line.who == DUTY else (present(calendar, line.who, now_us),)
            for name in names:
                if name in self.people:
                    return name
        return ""

    @staticmethod
    def _add(
        connection: sqlite3.Connection,
        call_out: int,
        number: int,
        person: str,
        channel: Channel,
        reason: str,
        now_us: int,
        at_us: int,
    ) -> None:
        rows.add_delivery(
            connection,
            rows.Delivery(
                0, call_out, number, person, channel.kind, channel.url_secret, reason, "", "", now_us, at_us, 0
            ),
        )

    def _event(self, call: Call, number: int) -> Event:
        body = {"who": call.who, "by": list(call.by), "reason": call.reason.value, "number": call.number}
        return Event(kind="call.made", subject=f"call/{number}", recorded_at=call.at_us, body=body)

    def _commit_answer(self, code: codes.Code, call: rows.CallRow, person: Person, now_us: int) -> None:
        if self.plan is None or self.call_outs is None:
            return
        work = self.call_outs.copy(self.plan)
        covered = [(tank, ConditionKind(kind), occurrence) for tank, kind, occurrence in call.covered]
        work.answer(code.call_out, covered, who=person.id, now_us=now_us)
        event = Event(
            kind="call.answered",
            subject=f"call/{code.call_out}",
            recorded_at=now_us,
            actor=person.name,
            body={"number": code.call, "covered": [list(item) for item in call.covered]},
        )
        with self.store.transaction() as connection:
            for number in work.changed:
                entry = work.entries[number]
                row = rows.CallOutRow(number, entry.call.phase.value, entry_to_dict(entry))
                rows.write_call_out(connection, row, at_us=now_us)
            rows.mark_answered(connection, call_out=code.call_out, number=code.call, at_us=now_us)
            self._write_block(connection, [event], {})
        self.call_outs = work

    def _write_block(self, connection: sqlite3.Connection, events: Sequence[Event], meta: dict[str, str | int]) -> None:
        block = BlockCommit(occurrences=[Occurrence(event) for event in events], meta=meta)
        write(connection, block, rolled_until=self.store.rolled_until)


def _channels(person: Person, by: Sequence[str]) -> tuple[Channel, ...]:
    """Return the channels of a person among the kinds asked for; all of them where there is none of those."""
    return tuple(channel for channel in person.channels if channel.kind in by) or person.channels
