"""From a call to its message: what the store and the running chain know about its alarms."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, NamedTuple

from analysis.alarm import grouping
from analysis.alarm.kinds import ConditionKind
from analysis.alarm.rationale import RATIONALE
from analysis.animal.tables import load
from ingest.notify import codes
from ingest.notify.trail import Way
from ingest.site.waters import SEAWATER
from ingest.words.alarms import QUANTITY_OF_CODE, AlarmFacts
from ingest.words.calls import Answering, CalledAlarm, Message, call_message, daily_message

if TYPE_CHECKING:
    from collections.abc import Mapping

    from analysis.alarm.state import AlarmState
    from ingest.chain.chain import ChainState
    from ingest.notify.call_outs import Entry
    from ingest.notify.trail import Trail
    from ingest.site.calls import Person
    from ingest.worker.plant import Plant

Covered = tuple[tuple[str, str, int], ...]
Batches = dict[str, tuple[str, str, int | None]]


class Written(NamedTuple):
    """A message, and the alarms that an answer to it covers."""

    message: Message
    covered: Covered


@dataclass(frozen=True, slots=True)
class Writer:
    """Writes messages of a site as it stands at one moment.

    Attributes
    ----------
    plant, state : Plant, ChainState
        The running chain.
    trail : Trail
        Where the water goes.
    batches : mapping
        Animals of each tank (`ingest.store.calls.batches`).
    key : bytes
        Of the codes.
    now_us : int
        [us UTC]
    """

    plant: Plant
    state: ChainState
    trail: Trail
    batches: Mapping[str, tuple[str, str, int | None]]
    key: bytes
    now_us: int

    def call(self, entry: Entry, person: Person, *, number: int, reason: str) -> Written:
        """Return the message of one call."""
        ways = {(member.tank, member.kind): self._way(member.tank, member.kind) for member in entry.group.members}
        left = {tank: way.soonest_min * 60 for (tank, _), way in ways.items() if math.isfinite(way.soonest_min)}
        (group,) = grouping.with_time_left((entry.group,), left)
        members = grouping.covered_by(group) or group.members
        alarms = [self._alarm(member, entry, ways[member.tank, member.kind]) for member in members]
        site = self.plant.site
        message = call_message(
            alarms,
            site=site.name,
            person=person.name,
            reason=reason,
            answering=self._answering(entry, person, number),
            now_us=self.now_us,
            zone=site.zone,
        )
        return Written(message, tuple((member.tank, member.kind.value, member.occurrence) for member in members))

    def test(self, person: Person) -> Message:
        """Return the daily test message."""
        site = self.plant.site
        return daily_message(site=site.name, person=person.name, now_us=self.now_us, zone=site.zone)

    def _answering(self, entry: Entry, person: Person, number: int) -> Answering:
        way = self.plant.site.acknowledgements
        if way is None:
            return Answering()
        expires_us = self.now_us + round(codes.VALID_S * 1e6)
        code = codes.Code(person.id, entry.group.number, number, expires_us)
        return Answering(codes.written(code, self.key), way.topic, way.host)

    def _alarm(self, member: grouping.Member, entry: Entry, way: Way) -> CalledAlarm:
        place = self.plant.site.tank_index.get(member.tank)
        animals, count = "", None
        if member.tank in self.batches:
            _, animal, count = self.batches[member.tank]
            stage = load().get(animal)
            animals = animal if stage is None else f"{stage.common_name}, {stage.name}"
        rules = self.plant.tanks.rules.get(member.kind)
        priority = RATIONALE[member.kind].priority if rules is None or place is None else rules[place].priority
        return CalledAlarm(
            facts=self._facts(member, place, way),
            priority=priority.value,
            animals=animals,
            number=count,
            is_normal=(member.tank, member.kind) in entry.normal,
            is_steady=way.is_steady,
        )

    def _facts(self, member: grouping.Member, place: int | None, way: Way) -> AlarmFacts:
        code = member.kind.value
        if place is None:
            return AlarmFacts(code, tank=member.tank)
        tank = self.plant.site.tanks[place]
        alarm = self._state_of(member.kind, place)
        kind = QUANTITY_OF_CODE.get(code, "")
        target, half = (math.nan, math.nan)
        if kind and tank.set_point is not None:
            point = tank.set_point
            value, width = (
                (point.temperature_degC, point.temperature_band_K)
                if kind == "temperature"
                else (point.salinity, point.band)
            )
            target, half = (math.nan if item is None else item for item in (value, width))
        sensors = self.plant.tanks.sensors_of[place]
        return AlarmFacts(
            code,
            quantity="g_kg" if kind == "salinity" and tank.water != SEAWATER else kind,
            tank=tank.name,
            sensor=sensors[0] if len(sensors) == 1 else "",
            value=way.value,
            limit=math.nan if alarm is None or alarm.raised_limit is None else alarm.raised_limit,
            set_point=target,
            band=half,
            rate_per_h=way.per_h,
            time_left_min=way.likely_min,
            time_left_low_min=way.soonest_min,
            time_left_high_min=way.latest_min,
            next_limit=way.next_limit,
            since_us=alarm.raised_at_us if alarm is not None and alarm.raised_at_us else None,
        )

    def _state_of(self, kind: ConditionKind, place: int) -> AlarmState | None:
        return self.state.bank.state(kind, place) if kind in self.state.bank.kinds else None

    def _way(self, tank_id: str, kind: ConditionKind) -> Way:
        place = self.plant.site.tank_index.get(tank_id)
        quantity = QUANTITY_OF_CODE.get(kind.value)
        if place is None or quantity is None:
            return Way()
        band = self.plant.tanks.temperature if quantity == "temperature" else self.plant.tanks.salinity
        limits = [float(band.low[place]), float(band.high[place])]
        if quantity == "salinity":
            limits += [float(limit) for limit in self.plant.animals.tolerable_salinity[place]]
        return self.trail.way(place, quantity, limits=limits, is_high=kind.value.endswith("_high"), now_us=self.now_us)
