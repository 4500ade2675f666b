"""Readings whose quantities come as plain numbers on topics of their own: the waiting halves."""

from __future__ import annotations

from dataclasses import dataclass, field
from math import isnan
from typing import TYPE_CHECKING, Any

from analysis.flags import Flag
from ingest.clock import MICROSECONDS_PER_SECOND
from ingest.payloads.values import NAN
from ingest.reading import RawReading
from ingest.site.sensors import QUANTITIES

if TYPE_CHECKING:
    from ingest.site.models import Site
    from ingest.site.sensors import Sensor


@dataclass(slots=True)
class _Waiting:
    """The part of a reading that has come so far: value and flag of each quantity, since the first of them."""

    since_us: int
    latest_us: int
    values: dict[str, tuple[float, int]] = field(default_factory=dict)


class Pairing:
    """Joins conductivity, temperature and pressure by the time received.

    A reading is complete when every declared quantity has come within the sensor's `pairing_window_s` of the
    first; it is measured at the time of the last. A part whose partner does not come in time becomes a reading
    with the partner missing; an old value is never used again. The state belongs to the committed blocks:
    commit `to_dict()` with each block and start again from `restored`.

    Parameters
    ----------
    site : Site
        What is installed.
    """

    def __init__(self, site: Site) -> None:
        self._indices = {sensor.id: index for index, sensor in enumerate(site.sensors) if sensor.payload == "number"}
        self._sensors: dict[str, Sensor] = {sensor_id: site.sensor(sensor_id) for sensor_id in self._indices}
        self._waiting: dict[str, _Waiting] = {}

    def take(self, sensor_id: str, quantity: str, value: float, *, flag: int, received_at_us: int) -> list[RawReading]:
        """Take one value in and return the readings that it completes or cuts off.

        Parameters
        ----------
        sensor_id : str
            Id of the sensor.
        quantity : str
            conductivity, temperature or pressure.
        value : float
            As sent; NaN where unusable.
        flag : int
            Flag word of an unusable value.
        received_at_us : int
            Microseconds since 1970, UTC.
        """
        done: list[RawReading] = []
        waiting = self._waiting.get(sensor_id)
        if waiting is not None:
            known = waiting.values.get(quantity)
            is_late = self._is_over(sensor_id, waiting, received_at_us)
            if not is_late and known is not None and (known == (value, flag)):
                return done  # delivered twice
            if is_late or known is not None:
                done.append(self._reading(sensor_id))
                waiting = None
        if waiting is None:
            waiting = self._waiting[sensor_id] = _Waiting(received_at_us, received_at_us)
        waiting.values[quantity] = (value, flag)
        waiting.latest_us = max(waiting.latest_us, received_at_us)
        if all(name in waiting.values for name in self._declared(sensor_id)):
            done.append(self._reading(sensor_id))
        return done

    def expired(self, now_us: int) -> list[RawReading]:
        """Return, and forget, the parts whose partner has not come in time; call it with every block and tick."""
        over = [sensor_id for sensor_id, waiting in self._waiting.items() if self._is_over(sensor_id, waiting, now_us)]
        return [self._reading(sensor_id) for sensor_id in over]

    def to_dict(self) -> dict[str, Any]:
        """Return the waiting parts as plain data that JSON can hold."""
        return {
            sensor_id: {
                "since_us": waiting.since_us,
                "latest_us": waiting.latest_us,
                # NaN is no JSON: an unusable value is kept as null with its flag.
                "values": {
                    name: [None if isnan(value) else value, flag] for name, (value, flag) in waiting.values.items()
                },
            }
            for sensor_id, waiting in self._waiting.items()
        }

    @classmethod
    def restored(cls, site: Site, state: dict[str, Any]) -> Pairing:
        """Return the pairing as committed; parts of sensors that are gone from *site* are dropped."""
        pairing = cls(site)
        for sensor_id, part in state.items():
            if sensor_id not in pairing._sensors:
                continue
            declared = pairing._declared(sensor_id)
            values = {
                name: (NAN if value is None else float(value), int(flag))
                for name, (value, flag) in part["values"].items()
                if name in declared
            }
            if values and len(values) < len(declared):
                pairing._waiting[sensor_id] = _Waiting(int(part["since_us"]), int(part["latest_us"]), values)
        return pairing

    def _declared(self, sensor_id: str) -> list[str]:
        fields = self._sensors[sensor_id].fields
        return [name for name in QUANTITIES if getattr(fields, name) is not None]

    def _is_over(self, sensor_id: str, waiting: _Waiting, now_us: int) -> bool:
        window_us = self._sensors[sensor_id].pairing_window_s * MICROSECONDS_PER_SECOND
        return abs(now_us - waiting.since_us) > window_us

    def _reading(self, sensor_id: str) -> RawReading:
        """Return the reading made of what has come, and forget it."""
        waiting = self._waiting.pop(sensor_id)
        flags = int(Flag.TIME_RECEIVED)
        numbers = dict.fromkeys(QUANTITIES, NAN)
        for name in self._declared(sensor_id):
            numbers[name], flag = waiting.values.get(name, (NAN, int(Flag.MISSING)))
            flags |= flag
        index, at_us = self._indices[sensor_id], waiting.latest_us
        return RawReading(index, at_us, at_us, **numbers, flags=flags)
