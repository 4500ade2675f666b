"""A worker that is killed between condition and delivery, as a process of its own with a real broker and real servers."""

from __future__ import annotations

import sqlite3
import sys
import threading
import time
from contextlib import closing
from pathlib import Path

import paho.mqtt.client as paho
import pytest
from paho.mqtt.enums import CallbackAPIVersion

from ingest.broker import Broker
from ingest.secrets import write_secret
from ingest.store.ledger import first_broken_id
from tests.harness.hatchery import WorkerProcess, payload, site_text
from tests.harness.process import wait_until
from tests.ingest.notify.scene import ONE_PERSON
from tests.ingest.notify.servers import MailServer, WebServer

pytestmark = [pytest.mark.slow, pytest.mark.mosquitto]

INTERVAL_S = 1.0


class Probe:
    """A probe of one tank that sends twice a second, as it is: wet for a while, then pulled out of the water."""

    def __init__(self, broker: Broker) -> None:
        self._client = paho.Client(CallbackAPIVersion.VERSION2, client_id="probe", protocol=paho.MQTTv311)
        self._client.connect(broker.host, broker.port)
        self._client.loop_start()
        self._end = threading.Event()
        self._thread = threading.Thread(target=self._send, name="probe", daemon=True)
        self._thread.start()

    def _send(self) -> None:
        wet = 6
        while not self._end.wait(0.5):
            wet -= 1
            salinity = 31.0 if wet > 0 else 0.05
            self._client.publish("quay/s0", payload(time.time_ns() // 1000, salinity), qos=1)

    def leave(self) -> None:
        self._end.set()
        self._thread.join(10)
        self._client.disconnect()
        self._client.loop_stop()


def rows(store: Path, sql: str) -> list[tuple]:
    with closing(sqlite3.connect(store / "store.db", timeout=5)) as connection:
        return connection.execute(sql).fetchall()


def make_site(folder: Path, broker: Broker, mail: MailServer, web: WebServer) -> WorkerProcess:
    site_file = folder / "site.yaml"
    site_file.write_text(site_text(port=broker.port, interval_s=INTERVAL_S, extra=ONE_PERSON))
    write_secret("ana-mail", mail.url, site_file=site_file)
    write_secret("ana-push", web.url, site_file=site_file)
    return WorkerProcess(site_file)


def test_killed_while_a_message_is_on_its_way_it_is_delivered_after_the_next_start(tmp_path, mosquitto):
    with MailServer() as mail, WebServer() as web:
        mail.refuses, web.mode = True, "hang"
        worker = make_site(tmp_path, mosquitto, mail, web)
        worker.start()
        probe = Probe(mosquitto)
        try:
            wait_until(lambda: mail.tries > 0 and web.tries > 0, what="attempts at both servers")
            worker.kill()
            assert mail.messages == web.bodies == []
            mail.refuses, web.mode = False, "ok"
            worker.start()
            wait_until(lambda: bool(mail.messages and web.bodies), what="both messages")
            assert mail.subjects()[0] == web.titles()[0] == "URGENT: T0 probe dry or tank empty"
            first = "SELECT DISTINCT outcome FROM delivery WHERE number = 1"
            wait_until(lambda: rows(worker.store, first) == [("delivered",)], what="both reports")
            assert rows(worker.store, "SELECT count(*) FROM call_out WHERE phase = 'calling'")[0][0] >= 1
            assert worker.stop() == 0
        finally:
            probe.leave()
            if worker.process is not None and worker.process.poll() is None:
                worker.kill()
        with closing(sqlite3.connect(worker.store / "store.db")) as connection:
            connection.row_factory = sqlite3.Row
            assert connection.execute("PRAGMA integrity_check").fetchone()[0] == "ok"
            assert first_broken_id(connection) is None


def test_from_condition_to_the_mail_server(tmp_path, mosquitto):
    """How long it takes is written out; only that it arrives, once a call, is asserted."""
    with MailServer() as mail, WebServer() as web:
        worker = make_site(tmp_path, mosquitto, mail, web)
        worker.start()
        probe = Probe(mosquitto)
        try:
            wait_until(lambda: bool(mail.messages), what="the mail")
            arrived_us = time.time_ns() // 1000
            ((written_us,),) = rows(worker.store, "SELECT created_at FROM outbox ORDER BY id LIMIT 1")
            sys.stdout.write(f"from the outbox row to the mail server: {(arrived_us - written_us) / 1e6:.2f} s\n")
            done = "SELECT count(*) FROM delivery WHERE number = 1 AND outcome = 'delivered'"
            wait_until(lambda: rows(worker.store, done) == [(2,)], what="the reports")
            assert len(mail.messages) == len(web.bodies) == 1
        finally:
            probe.leave()
            worker.kill()
