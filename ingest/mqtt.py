"""The way in: MQTT with paho, at QoS 1, acknowledged by hand after the commit. The one room that knows paho on the receiving side.

What the broker and the client do behind one's back, and what is done about it here:

- An exception in a callback kills paho's network thread: the callback only puts the message into a queue,
  and lets nothing through.
- `connect` raises when the broker is down, `connect_async` keeps trying; subscriptions are made anew at each connect.
- A message is redelivered only after a reconnect; an acknowledgement that belongs to an earlier connection is
  dropped, since its packet id may mean another message by now.
- paho has no bound of its own: a full queue holds the network thread back, so that the broker keeps what it has.
- A retained message is not a fresh reading: the flag travels with it.
"""

from __future__ import annotations

import ssl
import sys
import threading
from collections import deque
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any, NamedTuple

import msgspec
import paho.mqtt.client as paho
import structlog
from paho.mqtt.enums import CallbackAPIVersion
from paho.mqtt.packettypes import PacketTypes
from paho.mqtt.properties import Properties

if TYPE_CHECKING:
    from collections.abc import Sequence
    from pathlib import Path

    from ingest.clock import Clock

log = structlog.get_logger(__name__)

QUEUE_LIMIT = 200_000
"""More waiting messages than this hold the network thread back."""
KEEPALIVE_S = 30
SESSION_EXPIRY_S = 30 * 24 * 3600
"""How long a broker of version 5 keeps the session while the worker is away."""
DROPPED_TOPIC = "$SYS/broker/publish/messages/dropped"
"""Where mosquitto says how many messages it has thrown away: the only trace of a loss."""
SUBSCRIPTIONS_A_PACKET = 200
SUBSCRIPTION_REFUSED = 0x80


class Received(NamedTuple):
    """One message as it came."""

    topic: str
    payload: bytes
    received_at_us: int
    is_retained: bool
    message_id: int
    connection: int


@dataclass(frozen=True, slots=True)
class Access:
    """How the broker is reached. The password comes from the secrets, never from the site file."""

    host: str
    port: int
    client_id: str
    is_version_5: bool = False
    user: str | None = None
    password: str | None = field(default=None, repr=False)
    is_tls: bool = False
    ca_file: Path | None = None
    status_topic: str | None = None


def make_client(access: Access, *, has_manual_ack: bool) -> paho.Client:
    """Return a client for *access* with TLS, user and, for the worker, acknowledgement by hand; not yet connected."""
    client = paho.Client(
        CallbackAPIVersion.VERSION2,
        client_id=access.client_id,
        protocol=paho.MQTTv5 if access.is_version_5 else paho.MQTTv311,
        manual_ack=has_manual_ack,
        **({} if access.is_version_5 else {"clean_session": False}),  # type: ignore[arg-type]
    )
    if access.user is not None:
        client.username_pw_set(access.user, access.password)
    if access.is_tls:
        client.tls_set(ca_certs=None if access.ca_file is None else str(access.ca_file), cert_reqs=ssl.CERT_REQUIRED)
    client.reconnect_delay_set(min_delay=1, max_delay=30)
    return client


class Intake:
    """A durable subscription whose messages wait in a queue until they are taken, and at the broker until acknowledged.

    Parameters
    ----------
    access : Access
        The broker, the fixed client id and the topic of the retained status.
    topics : sequence of str
        What to subscribe to.
    clock : Clock
        Gives the time received.
    """

    def __init__(self, access: Access, topics: Sequence[str], *, clock: Clock, queue_limit: int = QUEUE_LIMIT) -> None:
        self._access = access
        self._topics = tuple(topics)
        self._clock = clock
        self._queue: deque[Received] = deque()
        self._queue_limit = queue_limit
        self._arrival = threading.Condition()
        self._is_stopping = False
        self._connection = 0
        self._client = make_client(access, has_manual_ack=True)
        self._client.on_connect = self._on_connect
        self._client.on_connect_fail = self._on_connect_fail
        self._client.on_disconnect = self._on_disconnect
        self._client.on_message = self._on_message
        self._client.on_subscribe = self._on_subscribe
        self.is_connected = False
        self.connects = 0
        self.dropped_by_broker = 0
        self.refused_subscriptions = 0
        self.last_problem = ""

    @property
    def waiting(self) -> int:
        """Messages in the queue at this moment."""
        return len(self._queue)

    def start(self) -> None:
        """Connect in the background and keep trying."""
        if self._access.status_topic is not None:
            self._client.will_set(self._access.status_topic, self._status("lost"), qos=1, retain=True)
        if self._access.is_version_5:
            properties = Properties(PacketTypes.CONNECT)  # type: ignore[no-untyped-call]
            properties.SessionExpiryInterval = SESSION_EXPIRY_S
            self._client.connect_async(
                self._access.host, self._access.port, KEEPALIVE_S, clean_start=False, properties=properties
            )
        else:
            self._client.connect_async(self._access.host, self._access.port, KEEPALIVE_S)
        self._client.loop_start()

    def stop(self) -> None:
        """Say goodbye and leave the session at the broker, with whatever is not acknowledged."""
        with self._arrival:
            self._is_stopping = True
            self._arrival.notify_all()
        if self.is_connected and self._access.status_topic is not None:
            farewell = self._client.publish(self._access.status_topic, self._status("stopped"), qos=1, retain=True)
            try:
                farewell.wait_for_publish(timeout=2)
            except (RuntimeError, ValueError) as error:
                log.info("farewell not delivered", reason=str(error))
        self._client.disconnect()
        self._client.loop_stop()

    def wait(self, timeout_s: float) -> bool:
        """Wait until a message is there or the time is over; return whether one is there."""
        if self._queue:
            return True
        with self._arrival:
            if not self._queue and not self._is_stopping:
                self._arrival.wait(timeout_s)
        return bool(self._queue)

    def take(self, most: int) -> list[Received]:
        """Return the messages that have come, oldest first, at most *most*."""
        queue = self._queue
        count = min(most, len(queue))
        was_full = len(queue) >= self._queue_limit
        taken = [queue.popleft() for _ in range(count)]
        if was_full:
            with self._arrival:
                self._arrival.notify_all()
        return taken

    def acknowledge(self, messages: Sequence[Received]) -> None:
        """Tell the broker that *messages* are committed; those of an earlier connection come again anyway."""
        connection = self._connection
        ack = self._client.ack
        for message in messages:
            if message.connection == connection and message.message_id:
                ack(message.message_id, 1)

    def resubscribe(self, topics: Sequence[str]) -> None:
        """Follow a changed site file: leave topics that are gone, add the new ones; the session stays."""
        gone = sorted(set(self._topics) - set(topics))
        self._topics = tuple(topics)
        if self.is_connected:
            if gone:
                self._client.unsubscribe(gone)
            self._subscribe()

    def publish_retained(self, topic: str, body: bytes) -> None:
        """Publish a retained message at QoS 1; what cannot leave now leaves after the reconnect."""
        self._client.publish(topic, body, qos=1, retain=True)

    def _status(self, state: str) -> bytes:
        return msgspec.json.encode({"state": state, "at_us": self._clock.now_us(), "client_id": self._access.client_id})

    def _on_connect(self, client: paho.Client, _data: Any, _flags: Any, reason: Any, _properties: Any) -> None:
        if reason.is_failure:
            self.last_problem = f"the broker refused the connection: {reason}"
            log.warning("connection refused by the broker", reason=str(reason))
            return
        self._connection += 1
        self.connects += 1
        self.is_connected = True
        self.last_problem = ""
        self._subscribe()
        if self._access.status_topic is not None:
            client.publish(self._access.status_topic, self._status("running"), qos=1, retain=True)
        log.info("connected to the broker", host=self._access.host, port=self._access.port, connects=self.connects)

    def _subscribe(self) -> None:
        topics = [(topic, 1) for topic in self._topics]
        for start in range(0, len(topics), SUBSCRIPTIONS_A_PACKET):
            self._client.subscribe(topics[start : start + SUBSCRIPTIONS_A_PACKET])
        self._client.subscribe(DROPPED_TOPIC, qos=0)

    def _on_subscribe(self, _client: paho.Client, _data: Any, _mid: int, reasons: Any, _properties: Any) -> None:
        refused = sum(1 for reason in reasons if reason.value >= SUBSCRIPTION_REFUSED)
        if refused:
            self.refused_subscriptions += refused
            self.last_problem = f"the broker refused {refused} subscriptions"
            log.error("subscriptions refused by the broker", count=refused)

    def _on_connect_fail(self, _client: paho.Client, _data: Any) -> None:
        # paho calls this where it has caught what went wrong: no listener, no route, a certificate that is not believed.
        error = sys.exc_info()[1]
        problem = "the broker cannot be reached" + (f": {error}" if error else "")
        if problem != self.last_problem:
            log.warning("broker not reached", host=self._access.host, port=self._access.port, reason=str(error or ""))
        self.last_problem = problem

    def _on_disconnect(self, _client: paho.Client, _data: Any, _flags: Any, reason: Any, _properties: Any) -> None:
        was_connected, self.is_connected = self.is_connected, False
        # From here on, not only from the next connection on, acknowledgements of what came before are stale.
        self._connection += 1
        if reason.is_failure and was_connected:  # After a refusal, which is said already, there was nothing to lose.
            self.last_problem = f"connection lost: {reason}"
            log.warning("connection to the broker lost", reason=str(reason))

    def _on_message(self, _client: paho.Client, _data: Any, message: paho.MQTTMessage) -> None:
        try:
            self._take_in(message)
        except Exception:
            # Raised further, it would end paho's thread for good. Not acknowledged, the message comes again after a reconnect.
            self.last_problem = "a message could not be taken in"
            log.exception("message not taken in")

    def _take_in(self, message: paho.MQTTMessage) -> None:
        received = Received(
            message.topic, bytes(message.payload), self._clock.now_us(), message.retain, message.mid, self._connection
        )
        if received.topic == DROPPED_TOPIC:
            self._note_dropped(received.payload)
            return
        queue = self._queue
        if len(queue) >= self._queue_limit:
            self._hold_back()
        queue.append(received)
        if len(queue) == 1:
            with self._arrival:
                self._arrival.notify()

    def _hold_back(self) -> None:
        # Not reading the socket is the only brake MQTT 3.1.1 has; if it lasts, the broker ends the connection and keeps the session.
        with self._arrival:
            while len(self._queue) >= self._queue_limit and not self._is_stopping:
                self._arrival.wait(1.0)

    def _note_dropped(self, payload: bytes) -> None:
        try:
            self.dropped_by_broker = int(payload)
        except ValueError:
            log.info("unreadable count of dropped messages", payload=payload[:40])
