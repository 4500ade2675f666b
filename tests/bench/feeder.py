"""A process that publishes one reading a second for each of many sensors, spread evenly over the second."""

from __future__ import annotations

import sys
import time

import paho.mqtt.client as paho
from paho.mqtt.enums import CallbackAPIVersion

from tests.harness.hatchery import payload

SLICES = 50


def main(port: int, sensors: int, seconds: int) -> None:
    client = paho.Client(CallbackAPIVersion.VERSION2, client_id="feeder", protocol=paho.MQTTv311)
    client.max_inflight_messages_set(5000)
    client.connect("127.0.0.1", port)
    client.loop_start()
    body = payload(0, 31.0).decode()
    begin = time.perf_counter()
    last = None
    for step in range(seconds * SLICES):
        for sensor in range(step % SLICES, sensors, SLICES):
            at_us = time.time_ns() // 1000
            last = client.publish(f"quay/s{sensor}", body.replace('"at": 0', f'"at": {at_us}').encode(), qos=1)
        rest = begin + (step + 1) / SLICES - time.perf_counter()
        if rest > 0:
            time.sleep(rest)
    assert last is not None
    last.wait_for_publish(60)
    client.disconnect()
    client.loop_stop()


if __name__ == "__main__":
    main(*(int(argument) for argument in sys.argv[1:4]))
