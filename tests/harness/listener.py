"""A subscriber with a durable session that keeps what it hears."""

from __future__ import annotations

import threading
from typing import Self

import paho.mqtt.client as paho
from paho.mqtt.enums import CallbackAPIVersion

from ingest.broker import Broker


class Listener:
    """Hears everything under *topic* from the moment it is made.

    `leave` ends the connection and keeps the session at the broker; a new one with the same name goes on with it.
    """

    def __init__(self, broker: Broker, topic: str, *, protocol: str = "3.1.1", name: str = "listener") -> None:
        self.payloads: list[bytes] = []
        self.topics: list[str] = []
        is_5 = protocol == "5"
        self._client = paho.Client(
            CallbackAPIVersion.VERSION2,
            client_id=name,
            protocol=paho.MQTTv5 if is_5 else paho.MQTTv311,
            **({} if is_5 else {"clean_session": False}),
        )
        subscribed = threading.Event()
        self._client.on_message = self._hear
        self._client.on_connect = lambda client, *_: client.subscribe(topic, qos=1)
        self._client.on_subscribe = lambda *_: subscribed.set()
        self._client.connect(broker.host, broker.port)
        self._client.loop_start()
        assert subscribed.wait(30), f"the broker did not confirm the subscription to {topic}"

    def leave(self) -> None:
        self._client.disconnect()
        self._client.loop_stop()

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *_: object) -> None:
        self.leave()

    def _hear(self, _client: paho.Client, _data: object, message: paho.MQTTMessage) -> None:
        self.topics.append(message.topic)
        self.payloads.append(message.payload)
