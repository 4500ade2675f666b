"""Publish messages at QoS 1 as a sensor does: bounded in flight, each acknowledged by the broker or counted."""

from __future__ import annotations

import threading
from typing import TYPE_CHECKING, Any, Final

import paho.mqtt.client as paho

from analysis.errors import EuryhaleError
from ingest.mqtt import make_client

if TYPE_CHECKING:
    from types import TracebackType
    from typing import Self

    from ingest.mqtt import Access

IN_FLIGHT: Final = 1000
"""Messages that may be on their way unacknowledged; few enough for any broker's own window to cope."""
CONNECT_LIMIT_S: Final = 15.0
CONFIRM_LIMIT_S: Final = 60.0
KEEPALIVE_S: Final = 30


class PublishingError(EuryhaleError):
    """The broker is not there, refuses the client, or has stopped acknowledging."""


class Publisher:
    """One client that publishes at QoS 1.

    Parameters
    ----------
    access : Access
        How the broker is reached.
    in_flight : int
        How many messages may wait for the broker's acknowledgement; `publish` then waits.
    """

    def __init__(self, access: Access, *, in_flight: int = IN_FLIGHT) -> None:
        self._access = access
        self._in_flight = in_flight
        self._handed_over = 0
        self._wanted = -1  # the waiting thread's mark: wake it when no more than this are waiting
        self._change = threading.Condition()
        self._problem = ""
        self.acknowledged = 0
        self.refused = 0
        self._client = make_client(access, has_manual_ack=False)
        # The window is kept here: paho's own walks through all waiting messages at each acknowledgement.
        self._client.max_inflight_messages_set(0)
        self._client.max_queued_messages_set(0)
        self._client.on_publish = self._on_publish
        self._client.on_connect = self._on_connect

    @property
    def is_connected(self) -> bool:
        """Whether the broker can be reached now."""
        return self._client.is_connected()

    @property
    def waiting(self) -> int:
        """Messages handed over and not yet answered."""
        # Each count has one writer, so no lock is needed to read both: locking each message halves the rate.
        return self._handed_over - self.acknowledged - self.refused

    def start(self) -> None:
        """Begin to connect, and go on trying for as long as it takes."""
        self._client.connect_async(self._access.host, self._access.port, KEEPALIVE_S)
        self._client.loop_start()

    def wait_connected(self, limit_s: float = CONNECT_LIMIT_S) -> None:
        """Return when the broker has accepted the client.

        Raises
        ------
        PublishingError
            It refused, or did not answer within *limit_s*.
        """
        with self._change:
            self._change.wait_for(lambda: self._client.is_connected() or self._problem, limit_s)
        if not self._client.is_connected():
            place = f"{self._access.host}:{self._access.port}"
            raise PublishingError(f"the broker at {place} {self._problem or f'did not answer within {limit_s:g} s'}")

    def publish(self, topic: str, payload: bytes, *, limit_s: float = CONFIRM_LIMIT_S) -> bool:
        """Hand over one message; False if no place in flight became free within *limit_s* and it was not taken."""
        if self.waiting >= self._in_flight and not self._wait_until(self._in_flight // 2, limit_s):
            return False
        self._handed_over += 1
        # paho keeps a message of QoS 1 over a lost connection and sends it again.
        self._client.publish(topic, payload, qos=1)
        return True

    def confirm(self, limit_s: float = CONFIRM_LIMIT_S) -> None:
        """Wait until everything handed over is acknowledged.

        Raises
        ------
        PublishingError
            Nothing was acknowledged for *limit_s* while something was still waiting.
        """
        while before := self.waiting:
            self._wait_until(0, limit_s)
            if self.waiting == before:
                raise PublishingError(f"{before} messages are not acknowledged by the broker after {limit_s:g} s")

    def stop(self) -> None:
        """Say goodbye."""
        self._client.disconnect()
        self._client.loop_stop()

    def __enter__(self) -> Self:
        self.start()
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.stop()

    def _on_connect(self, _client: paho.Client, _data: Any, _flags: Any, reason: Any, properties: Any) -> None:
        # MQTT 5: a client that has more in flight than the broker takes is thrown out.
        self._in_flight = min(self._in_flight, getattr(properties, "ReceiveMaximum", self._in_flight))
        with self._change:
            self._problem = f"refuses the client: {reason}" if reason.is_failure else ""
            self._change.notify_all()

    def _on_publish(self, _client: paho.Client, _data: Any, _id: int, reason: Any, _properties: Any) -> None:
        if reason.is_failure:
            self.refused += 1
        else:
            self.acknowledged += 1
        if self.waiting <= self._wanted:
            with self._change:
                self._change.notify_all()

    def _wait_until(self, mark: int, limit_s: float) -> bool:
        """Wait until no more than *mark* messages are waiting; return whether it came to that in *limit_s*."""
        with self._change:
            self._wanted = mark
            is_reached = self._change.wait_for(lambda: self.waiting <= mark, limit_s)
            self._wanted = -1
        return is_reached
