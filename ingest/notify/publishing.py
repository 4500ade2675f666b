"""Tank and alarm state, retained on the broker: for a siren, a beacon, another system. The format is in TOPICS.md."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import msgspec
import numpy as np

from analysis.alarm.state import HIDDEN_STATES, NEVER_US, WAITING_STATES, StateName
from ingest.topics import own_topic

if TYPE_CHECKING:
    from analysis.alarm.state import AlarmState
    from ingest.chain.chain import ChainState
    from ingest.mqtt import Intake
    from ingest.worker.plant import Plant

VALUES_EVERY = 10
"""Values of a tank are looked at every so many calls, some tanks at each; alarms at every call."""


def tank_topic(site_id: str, tank_id: str) -> str:
    """Return the topic of a tank's state."""
    return own_topic(site_id, "tank", tank_id)


def alarms_topic(site_id: str) -> str:
    """Return the topic of the site's alarms together."""
    return own_topic(site_id, "alarms")


class Publisher:
    """Publishes what has changed since it was last published, and everything after a reconnect."""

    def __init__(self) -> None:
        self._said: dict[str, bytes] = {}
        self._alarms: dict[int, list[dict[str, Any]]] = {}
        self._connects = 0
        self._bank: object = None
        self._plant: Plant | None = None
        self._round = 0

    def publish(self, plant: Plant, state: ChainState, intake: Intake) -> int:
        """Publish what is new; return how many messages that were. Nothing is queued while the broker is away."""
        if not intake.is_connected:
            return 0
        if intake.connects != self._connects:
            self._connects = intake.connects
            self._said.clear()
        is_everything = plant is not self._plant or not self._said
        gone: set[str] = set()
        if plant is not self._plant:
            gone = {topic for topic in self._said if topic not in _topics(plant)}
        self._plant = plant
        touched = set(range(len(plant.site.tanks))) if is_everything else self._due_tanks(len(plant.site.tanks))
        if is_everything or state.bank is not self._bank:
            alarms = _alarms_by_tank(plant, state)
            touched |= {
                tank for tank in alarms.keys() | self._alarms.keys() if alarms.get(tank) != self._alarms.get(tank)
            }
            self._alarms, self._bank = alarms, state.bank
        bodies = {
            tank_topic(plant.site.id, plant.site.tanks[tank].id): _encoded(
                tank_body(plant, state, tank, self._alarms.get(tank, []))
            )
            for tank in sorted(touched)
        }
        bodies[alarms_topic(plant.site.id)] = _encoded(site_body(plant, self._alarms))
        return self._say(bodies, gone, intake)

    def _due_tanks(self, count: int) -> set[int]:
        self._round = (self._round + 1) % VALUES_EVERY
        return set(range(self._round, count, VALUES_EVERY))

    def _say(self, bodies: dict[str, bytes], gone: set[str], intake: Intake) -> int:
        count = 0
        for topic in gone:
            intake.publish_retained(topic, b"")
            del self._said[topic]
            count += 1
        for topic, body in bodies.items():
            if self._said.get(topic) != body:
                intake.publish_retained(topic, body)
                self._said[topic] = body
                count += 1
        return count


def tank_body(plant: Plant, state: ChainState, tank: int, alarms: list[dict[str, Any]]) -> dict[str, Any]:
    """Return one tank's state as plain JSON data."""
    slots = len(plant.tanks.sensors_of[tank])
    sensors = []
    for slot in range(slots):
        measured_us = int(state.salinity.judged_at_us[tank, slot])
        if measured_us <= -NEVER_US:
            continue
        sensors.append(
            {
                "sensor": plant.tanks.sensors_of[tank][slot],
                "measured_at_us": measured_us,
                "salinity": _rounded(state.salinity.value[tank, slot], 2),
                "temperature_degC": _rounded(state.temperature.value[tank, slot], 2),
                "osmolality_mOsm_kg": _rounded(state.osmolality.value[tank, slot], 1),
                "quality": int(state.salinity.quality[tank, slot]),
            }
        )
    waiting = [alarm for alarm in alarms if alarm["is_waiting"]]
    return {
        "tank": plant.site.tanks[tank].id,
        "name": plant.site.tanks[tank].name,
        "worst": _worst(alarms),
        "is_sounding": any(alarm["is_sounding"] for alarm in alarms),
        "waiting": len(waiting),
        "alarms": alarms,
        "sensors": sensors,
    }


def site_body(plant: Plant, alarms: dict[int, list[dict[str, Any]]]) -> dict[str, Any]:
    """Return the alarms of a site together: what a siren needs to know."""
    every = [alarm for found in alarms.values() for alarm in found]
    return {
        "site": plant.site.id,
        "worst": _worst(every),
        "is_top": any(alarm["is_top"] and alarm["is_waiting"] for alarm in every),
        "is_sounding": any(alarm["is_sounding"] for alarm in every),
        "waiting": sum(alarm["is_waiting"] for alarm in every),
        "present": len(every),
        "tanks": sorted(plant.site.tanks[tank].id for tank, found in alarms.items() if found),
    }


def _topics(plant: Plant) -> set[str]:
    tanks = {tank_topic(plant.site.id, tank.id) for tank in plant.site.tanks}
    return tanks | {alarms_topic(plant.site.id)}


def _alarms_by_tank(plant: Plant, state: ChainState) -> dict[int, list[dict[str, Any]]]:
    """Return the alarms that are not normal and not put aside, the most pressing first."""
    found: dict[int, list[dict[str, Any]]] = {}
    for (kind, tank), alarm in state.bank.states.items():
        if alarm.name is StateName.NORMAL or alarm.name in HIDDEN_STATES:
            continue
        found.setdefault(tank, []).append(_alarm_body(plant, state, kind, tank, alarm))
    for alarms in found.values():
        alarms.sort(key=lambda alarm: (alarm["rank"], alarm["condition"]))
    return found


def _alarm_body(plant: Plant, state: ChainState, kind: int, tank: int, alarm: AlarmState) -> dict[str, Any]:
    condition = state.bank.kinds[kind]
    rules = plant.tanks.rules[condition][tank]
    is_waiting = alarm.name in WAITING_STATES
    return {
        "condition": condition.value,
        "state": alarm.name.value,
        "priority": rules.priority.value,
        "rank": rules.priority.rank,
        "is_top": rules.is_top,
        "is_active": alarm.is_active,
        "is_waiting": is_waiting,
        "is_sounding": is_waiting and alarm.is_active and not alarm.is_silenced,
        "occurrence": alarm.occurrence,
        "raised_at_us": alarm.raised_at_us,
    }


def _worst(alarms: list[dict[str, Any]]) -> str | None:
    waiting = [alarm for alarm in alarms if alarm["is_waiting"] or alarm["is_active"]]
    return min(waiting, key=lambda alarm: alarm["rank"])["priority"] if waiting else None


def _rounded(value: np.float64, digits: int) -> float | None:
    return None if np.isnan(value) else round(float(value), digits)


def _encoded(body: dict[str, Any]) -> bytes:
    return msgspec.json.encode(body)
